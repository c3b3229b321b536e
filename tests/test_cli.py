"""The commands from outside: exit status, screens, JSON, and that nothing heavy is loaded."""

import json
import re
import subprocess
import sys
from itertools import pairwise
from pathlib import Path
from typing import Any

import pytest

from realize.cli import commands, main
from realize.methods import METHODS
from tests.schemas.validation import validated

FIXTURES = Path(__file__).parent.parent / "fixtures"
ROLLER_GAP = str(FIXTURES / "roller_gap.toml")
IMPROPER = str(FIXTURES / "roller_gap_improper.toml")
DESIGNS = sorted(str(path) for path in FIXTURES.glob("*.toml"))


class Answer:
    def __init__(self, status: int, out: str, err: str) -> None:
        self.status = status
        self.out = out
        self.err = err

    @property
    def document(self) -> dict[str, Any]:
        def refuse(constant: str) -> None:
            raise AssertionError(f"{constant} is no JSON")

        return validated(dict(json.loads(self.out, parse_constant=refuse)))


@pytest.fixture
def run(capsys: pytest.CaptureFixture[str]) -> Any:
    def runner(*arguments: str) -> Answer:
        status = 0
        try:
            main(list(arguments))
        except SystemExit as stop:
            status = stop.code if isinstance(stop.code, int) else 1
        out, err = capsys.readouterr()
        return Answer(status, out, err)

    return runner


@pytest.mark.parametrize("command", sorted(commands.commands))
def test_help_has_a_worked_example(run: Any, command: str) -> None:
    answer = run(command, "--help")
    assert answer.status == 0
    assert f"Example: realize {command}" in answer.out


@pytest.mark.parametrize("command", sorted(commands.commands))
def test_help_says_what_each_exit_status_means_and_what_to_read_next(run: Any, command: str) -> None:
    """As a manual does; a status that a command never has is not listed."""
    shown = run(command, "--help").out
    assert "Exit status:\n" in shown
    assert re.findall(r"^    ([012])  \w", shown, re.MULTILINE) in (["0", "1", "2"], ["0", "2"])
    others = "|".join(set(commands.commands) - {command})
    assert re.search(rf"See also: (?:{others})\b", shown)


@pytest.mark.parametrize("command", sorted(commands.commands))
def test_help_says_what_an_exit_status_means_in_one_place(run: Any, command: str) -> None:
    prose, _ = run(command, "--help").out.split("Options:")
    assert not re.search(r"[Ee]xit status\s+[012]", prose)


def test_help_of_all_commands_leaves_the_meaning_of_status_1_to_each(run: Any) -> None:
    assert "    1  the answer is no: see the command's own help\n" in run("--help").out


def test_help_of_emit_shows_a_directory_in_place_of_designs(run: Any) -> None:
    shown = " ".join(run("emit", "--help").out.split())
    assert shown.startswith("Usage: realize emit [OPTIONS] [DESIGN]... ")
    assert "or --all DIR in their place." in shown


def test_only_the_commands_that_are_built_exist() -> None:
    assert sorted(commands.commands) == [
        *("assess", "audit", "compare", "differ", "emit", "new", "rates", "report", "schema", "trial", "words"),
    ]


def test_version(run: Any) -> None:
    assert run("--version").out.startswith("realize, version ")


@pytest.mark.parametrize("design", DESIGNS, ids=lambda path: Path(path).stem)
@pytest.mark.parametrize("command", ["assess", "compare"])
def test_screens_fit_100_columns_and_say_yes_or_no_first(run: Any, command: str, design: str) -> None:
    answer = run(command, design)
    assert answer.status in (0, 1)
    assert answer.out.startswith(("yes: ", "no: "))
    assert max(len(line) for line in answer.out.splitlines()) <= 100
    assert "\x1b" not in answer.out


def test_assess_names_the_improper_term_and_the_lines_to_paste(run: Any) -> None:
    answer = run("assess", IMPROPER)
    assert answer.status == 0
    assert "0.09*s grows without bound; a pure derivative needs the future" in " ".join(answer.out.split())
    assert '[rolloff]\nplacement = "derivative"\n' in answer.out


def test_assess_document(run: Any) -> None:
    document = run("assess", IMPROPER, "--json").document
    assert document["schema"] == "realize/1"
    assert document["command"] == "assess"
    assert document["design"] == {"name": "roller_gap", "transfer": "kp + ki/s + kd*s"}
    assert document["numerator"] == ["9", "420", "1800"]
    assert document["denominator"] == ["100", "0"]
    assert document["relative_degree"] == -1
    assert document["realizable"] is False
    assert document["improper_terms"] == [{"power": 1, "coefficient": "9/100"}]
    assert document["cancelled"] == []
    assert [set(p) for p in document["poles"]] == [
        {"re", "im", "multiplicity", "natural_frequency_rad_s", "damping_ratio"}
    ]
    keys = {
        *("placement", "order", "damping", "pole_rad_s", "numerator", "denominator", "relative_degree"),
        *("phase_lost_deg", "high_frequency_gain", "converter_step_percent", "window_rad_s", "within_window"),
    }
    assert all(set(p) == keys for p in document["proposals"])


@pytest.mark.parametrize("design", DESIGNS, ids=lambda path: Path(path).stem)
def test_compare_document(run: Any, design: str) -> None:
    answer = run("compare", design, "--json")
    document = answer.document
    assert len(document["methods"]) == (11 if "loop" in document["methods"][0] else 9)
    for method in document["methods"]:
        if method["refused"]:
            assert method["numerator"] is None
            assert method["sections"] is None
            assert method["checks"] == []
            continue
        assert len(method["numerator"]) == len(method["denominator"])
        assert method["denominator"][0] == 1
        assert method["stability"] in ("stable", "marginal", "unstable")
        assert all(len(s["b"]) == len(s["a"]) + 1 for s in method["sections"])
        for check in method["checks"]:
            assert check["verdict"] in ("within", "out", "undefined")
            assert check["of"] in ("stored", "exact")
            assert check["difference"] is None or check["difference"] >= 0
    named = [m for m in document["methods"] if m["acceptable"]]
    assert (document["recommended"] is not None) == bool(named)
    assert answer.status in (0, 1)


def test_compare_of_an_improper_design_says_which_roll_off_it_assumed(run: Any) -> None:
    answer = run("compare", IMPROPER, "--json")
    assert answer.document["rolloff"]["placement"] == "derivative"
    assert answer.document["rolloff_assumed"] is True
    assert "assumed, since the design has no [rolloff]" in " ".join(run("compare", IMPROPER).out.split())


def test_emit_writes_five_files_and_the_same_bytes_again(run: Any, tmp_path: Path) -> None:
    first, second = tmp_path / "first", tmp_path / "second"
    assert run("emit", ROLLER_GAP, "--out", str(first)).status == 0
    assert run("emit", ROLLER_GAP, "--out", str(second)).status == 0
    names = sorted(path.name for path in first.iterdir())
    assert names == [
        *("roller_gap.c", "roller_gap.h", "roller_gap.record.json", "roller_gap_selftest.c", "roller_gap_vectors.csv")
    ]
    assert all((first / name).read_bytes() == (second / name).read_bytes() for name in names)


def test_emit_tells_of_the_table_of_a_schedule_that_is_no_more(run: Any, tmp_path: Path) -> None:
    designs = ["1/(0.1*s + 1)", "--rate", "1 kHz", "--name", "gap", "--out", str(tmp_path)]
    told = f"left from an earlier emission: {tmp_path / 'gap_schedule.h'}; nothing includes it"
    assert told not in run("emit", *designs).out
    (tmp_path / "gap_schedule.h").write_text("of before\n", encoding="utf-8")
    assert run("emit", *designs).out.splitlines()[-1] == told
    json.loads(run("emit", *designs, "--json").out)
    assert (tmp_path / "gap_schedule.h").read_text(encoding="utf-8") == "of before\n"


def test_emit_document_holds_the_record(run: Any, tmp_path: Path) -> None:
    document = run("emit", ROLLER_GAP, "--out", str(tmp_path), "--json").document
    assert [Path(path).name for path in document["written"]] == [
        *("roller_gap.h", "roller_gap.c", "roller_gap_selftest.c", "roller_gap_vectors.csv", "roller_gap.record.json")
    ]
    assert document["record"] == json.loads((tmp_path / "roller_gap.record.json").read_text())


def test_emit_of_an_improper_design_refuses_and_prints_the_lines_to_paste(run: Any, tmp_path: Path) -> None:
    answer = run("emit", IMPROPER, "--out", str(tmp_path / "never"))
    assert answer.status == 1
    assert answer.out == ""
    assert answer.err.startswith("no: ")
    assert '[rolloff]\nplacement = "derivative"' in answer.err
    assert not (tmp_path / "never").exists()


def test_the_lines_to_paste_make_it_emit(run: Any, tmp_path: Path) -> None:
    refusal = run("emit", IMPROPER, "--out", str(tmp_path / "never")).err
    lines = refusal[refusal.index("[rolloff]") :]
    design = tmp_path / "pasted.toml"
    design.write_text(Path(IMPROPER).read_text(encoding="utf-8") + "\n" + lines, encoding="utf-8")
    assert run("emit", str(design), "--out", str(tmp_path / "out")).status == 0


def test_new_writes_a_design_that_emits_unchanged_and_never_overwrites(
    run: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(tmp_path)
    assert run("new", "mixer_speed").status == 0
    text = Path("mixer_speed.toml").read_text(encoding="utf-8")
    assert run("emit", "mixer_speed.toml", "--out", "firmware").status == 0
    again = run("new", "mixer_speed")
    assert again.status == 2
    assert "mixer_speed.toml" in again.err
    assert Path("mixer_speed.toml").read_text(encoding="utf-8") == text


OVERRIDES = [
    (["--rate", "4 kHz"], "1/4000"),
    (["--period", "1 ms"], "1/1000"),
]


@pytest.mark.parametrize(("options", "period"), OVERRIDES)
def test_the_command_line_overrides_the_file(run: Any, options: list[str], period: str) -> None:
    assert run("compare", ROLLER_GAP, "--json", *options).document["period_s"] == period


def test_values_override_the_file(run: Any) -> None:
    document = run("assess", IMPROPER, "--json", "--value", "kd=0.18").document
    assert document["improper_terms"] == [{"power": 1, "coefficient": "9/50"}]


def test_a_design_may_come_on_standard_input() -> None:
    text = Path(ROLLER_GAP).read_bytes()
    process = subprocess.run(
        [sys.executable, "-m", "realize", "assess", "-", "--json"], input=text, capture_output=True, check=True
    )
    assert json.loads(process.stdout)["design"]["name"] == "roller_gap"


NOT_UNDERSTOOD = [
    (["assess", "2s"], "2*s"),
    (["assess", "1/(s-s)"], "zero"),
    (["assess", "nowhere.toml"], "nowhere.toml"),
    (["assess", "."], "."),
    (["compare", "1/(s+1)"], "no sample rate"),
    (["compare", "1/(s+1)", "--rate", "0 Hz"], "rate"),
    (["compare", "1/(s+1)", "--period", "-1 s"], "period"),
    (["compare", "1/(s+1)", "--rate", "1 parsec"], "parsec"),
    (["compare", "1/(s+1)", "--rate", "1 kHz", "--method", "bilinaer"], "bilinear"),
    (["assess", "k/s", "--value", "k"], "--value"),
    (["assess", "__import__('os')"], "column 12"),
    (["emit", "1/(s+1)"], "--out"),
    (["assess"], "DESIGN"),
    (["speak", "1/s"], "speak"),
]


@pytest.mark.parametrize(("arguments", "fragment"), NOT_UNDERSTOOD, ids=lambda value: str(value)[:40])
def test_what_is_not_understood_is_one_clear_message(run: Any, arguments: list[str], fragment: str) -> None:
    answer = run(*arguments)
    assert answer.status == 2
    assert answer.out == ""
    assert fragment in answer.err
    assert "Traceback" not in answer.err


@pytest.mark.parametrize(("arguments", "fragment"), NOT_UNDERSTOOD, ids=lambda value: str(value)[:40])
def test_errors_are_json_where_json_is_asked_for(run: Any, arguments: list[str], fragment: str) -> None:
    answer = run(*arguments, "--json")
    assert answer.status == 2
    assert set(answer.document) == {"schema", "command", "error"}
    assert set(answer.document["error"]) == {"where", "found", "allowed", "try"}
    assert fragment in " ".join(answer.document["error"].values())


def test_improper_refusal_is_json_too(run: Any, tmp_path: Path) -> None:
    answer = run("emit", IMPROPER, "--out", str(tmp_path / "never"), "--json")
    assert answer.status == 1
    assert "[rolloff]" in answer.document["error"]["try"]


def test_no_command_loads_scipy_or_matplotlib(tmp_path: Path) -> None:
    design = str(FIXTURES / "extruder_heater.toml")
    script = (
        "import sys; from realize.cli import main\n"
        f"try: main(['emit', {design!r}, '--out', {str(tmp_path)!r}])\n"
        "finally: heavy = {'scipy', 'matplotlib', 'mpmath', 'importlib.metadata', 'numpy.ma'} & set(sys.modules)\n"
        "assert not heavy, heavy\n"
    )
    subprocess.run([sys.executable, "-c", script], check=True, capture_output=True)


def test_no_color_is_respected(tmp_path: Path) -> None:
    process = subprocess.run(
        [sys.executable, "-m", "realize", "assess", IMPROPER],
        env={"NO_COLOR": "1", "PATH": ""},
        capture_output=True,
        check=True,
    )
    assert b"\x1b" not in process.stdout


# -- how a mistake is told ----------------------------------------------------------------------------------


@pytest.fixture(autouse=True)
def _a_terminal_of_100_columns(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whatever runs the tests: errors are wrapped at what the terminal says."""
    monkeypatch.setenv("COLUMNS", "100")


MISTAKES = [
    (["assess"], "DESIGN: nothing", "a design file", 'try: realize assess "4.2'),
    (
        ["emit", "1/(s+1)"],
        "--out: nothing",
        "directory for the files",
        "try: realize emit roller_gap.toml --out firmware",
    ),
    (["speak", "1/s"], 'realize: the unknown command "speak"', "assess, audit, compare", "try: realize --help"),
    (["asess", "1/s"], 'realize: the unknown command "asess"', "assess, audit, compare", "try: did you mean assess?"),
    (["--frob"], 'realize: the unknown option "--frob"', "--version", "try: realize --help"),
    (["assess", "1/s", "--metod", "x"], 'the unknown option "--metod"', "--method", "try: did you mean --method?"),
    (["rates", "1/(s+1)", "--rate", "1 kHz"], 'the unknown option "--rate"', "--from, --to", "realize rates --help"),
    (["rates", "1/(s+1)", "--period", "1 s"], 'the unknown option "--period"', "--from, --to", "--help"),
    (["rates", "1/(s+1)", "--points", "x"], '--points: "x"', "a whole number", "try: --points 60"),
    (["rates", "1/(s+1)", "--points", "6.5"], '--points: "6.5"', "a whole number", "try: --points 60"),
    (["assess", "1/s", "--rate"], "--rate: nothing", 'sample rate, such as "2 kHz"', "try: write --rate QUANTITY"),
    (["assess", "--json=5", "1/s"], "--json: a value", "stands alone", "try: write --json"),
    (["assess", "--help=5", "1/s"], "--help: a value", "stands alone", "try: write --help"),
    (["assess", "1/s", "+", "2"], "extra arguments (+ 2)", "realize assess [OPTIONS] DESIGN", "blanks in quotes"),
    (["emit", "1/(s+1)", "--out", ""], "--out: an empty name", "a directory", "try: --out firmware"),
    (["emit", "1/(s+1)", "--out", " "], "--out: an empty name", "a directory", "try: --out firmware"),
]


NAMELESS = (["new"], "NAME: nothing", "the name of the design", "try: realize new roller_gap")


@pytest.mark.parametrize(
    ("arguments", "found", "allowed", "advice"), [*MISTAKES, NAMELESS], ids=lambda value: str(value)[:30]
)
def test_a_mistake_in_the_command_line_is_told_in_three_lines_like_every_other(
    run: Any, arguments: list[str], found: str, allowed: str, advice: str
) -> None:
    answer = run(*arguments)
    assert (answer.status, answer.out) == (2, "")
    first, second, third = answer.err.splitlines()
    assert first.startswith("error: ")
    assert found in first
    assert second.startswith("  allowed: ")
    assert allowed in second
    assert third.startswith("  try: ")
    assert advice in third


@pytest.mark.parametrize(("arguments", "found", "allowed", "advice"), MISTAKES, ids=lambda value: str(value)[:30])
def test_a_mistake_in_the_command_line_is_as_whole_in_json(
    run: Any, arguments: list[str], found: str, allowed: str, advice: str
) -> None:
    # An option that lacks its value must stay the last.
    with_json = (
        [arguments[0], "--json", *arguments[1:]] if arguments[0] in commands.commands else [*arguments, "--json"]
    )
    error = run(*with_json).document["error"]
    assert found in f"{error['where']}: {error['found']}"
    assert allowed in error["allowed"]
    assert advice in f"try: {error['try']}"


def test_an_empty_directory_name_writes_nothing(run: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    assert run("emit", ROLLER_GAP, "--out", "").status == 2
    assert list(tmp_path.iterdir()) == []


def test_rates_has_no_option_for_one_rate_and_the_others_have(run: Any) -> None:
    for command in ("assess", "compare", "emit"):
        assert "--rate QUANTITY" in run(command, "--help").out
    assert "--rate" not in run("rates", "--help").out
    assert "--period" not in run("rates", "--help").out


def test_rates_looks_at_the_named_method_alone_and_its_help_says_so(run: Any) -> None:
    assert "Look at this method alone" in " ".join(run("rates", "--help").out.split())
    design = ("rates", "1/(0.01*s + 1)", "--points", "2", "--json")
    alone, every = (json.loads(run(*design, "--method", name).out)["methods"] for name in ("bilinear", "auto"))
    assert [method["method"] for method in alone] == ["bilinear"]
    assert len(every) == len(METHODS)
    assert alone[0] in every


def test_the_list_of_commands_is_not_cut(run: Any) -> None:
    listed = run("--help").out.partition("\nCommands:\n")[2].partition("\n\n")[0].splitlines()
    assert [line.split()[0] for line in listed] == sorted(commands.commands)
    assert all(line.endswith(".") and not line.endswith("...") for line in listed)


def test_no_command_at_all_is_answered_with_the_help(run: Any) -> None:
    answer = run()
    assert "Start with a file of your own:" in answer.err + answer.out


@pytest.mark.parametrize("columns", [100, 60, 20, 300])
def test_errors_are_wrapped_with_hanging_indents(run: Any, columns: int, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("COLUMNS", str(columns))
    rows = run("compare", "1/(s+1)", "--rate", "1 kHz", "--method", "bilinaer").err.splitlines()
    width = max(40, min(100, columns))
    assert max(map(len, rows)) <= width
    starts = [i for i, row in enumerate(rows) if row.startswith(("error: ", "  allowed: ", "  try: "))]
    assert starts[0] == 0
    assert len(starts) == 3
    indents = {row[: len(row) - len(row.lstrip())] for row in rows[starts[1] + 1 : starts[2]]}
    assert indents == {" " * len("  allowed: ")}
    # No word is lost or moved over the line of its neighbour.
    assert " ".join(" ".join(rows).split()).endswith('plant-input-mapped try: did you mean "bilinear"?')
    assert all(len(row) + 1 + len(after.split()[0]) > width for row, after in pairwise(rows[starts[1] : starts[2]]))


def test_an_excerpt_and_its_caret_stay_as_they_are(run: Any, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("COLUMNS", "40")
    expression = "5/(0.001*s + 1)  /  (0.002*s + 1)  + 2s"
    rows = run("assess", expression).err.splitlines()
    place = rows.index(f"  {expression}")
    assert rows[place + 1] == " " * (2 + expression.index("2s") + 1) + "^"


def test_lines_to_paste_are_not_wrapped(run: Any, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    answers = []
    for columns in ("40", "100"):
        monkeypatch.setenv("COLUMNS", columns)
        answers.append(run("emit", IMPROPER, "--out", str(tmp_path / "never")).err)
    narrow, wide = (answer[answer.index("\n\n[rolloff]") :] for answer in answers)
    assert narrow == wide
    assert max(map(len, wide.splitlines())) > 20


def test_rates_tells_its_progress_in_plain_lines_where_standard_error_is_no_terminal(run: Any) -> None:
    answer = run("rates", "1/(0.01*s + 1)", "--points", "20", "--method", "bilinear", "--json")
    assert answer.err.splitlines() == [f"rates: {done} of 20" for done in range(2, 21, 2)]
    assert json.loads(answer.out)["command"] == "rates"


def test_rates_refuses_once_what_no_rate_mends(run: Any, tmp_path: Path) -> None:
    text = Path(ROLLER_GAP).with_name("roller_gap_int16.toml").read_text().replace("offset = 4200", "offset = 0")
    (tmp_path / "gap.toml").write_text(text)
    answer = run("rates", str(tmp_path / "gap.toml"), "--points", "2")
    assert (answer.status, answer.out) == (2, "")
    assert "[signals.output] type: uint16, although the range reaches from count -4200 to 4200" in answer.err
