"""`realize emit` on several designs from outside: screen, document, exit status, options."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from realize.cli import main
from realize.errors import RealizeError, Refused
from realize.firmware.batch import Result, Summary
from realize.report.several import several_text
from tests.schemas.validation import complaint, validated

LAG = """
[design]
name = "NAME"
transfer = "5/(0.1*s + 1)"
[sampling]
rate = "1 kHz"
[method]
name = "bilinear"
"""
IMPROPER = '[design]\nname = "NAME"\ntransfer = "s"\n[sampling]\nrate = "1 kHz"\n'
AGREED = """
[design]
name = "NAME"
transfer = "5/(0.1*s + 1)"
[sampling]
rate = "1 kHz"
[method]
name = "step-invariant"
[tolerance]
phase_in_band = "0.1 deg"
[[accept]]
check = "phase in band"
limit = "90 deg"
because = "a screen needs one"
by = "invented"
"""


def run(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    status = 0
    try:
        main(list(arguments))
    except SystemExit as ended:
        status = int(ended.code or 0)
    out, err = capsys.readouterr()
    return status, out, err


@pytest.fixture
def designs(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A directory of designs of every kind, the current one beside it."""
    monkeypatch.setenv("COLUMNS", "100")
    monkeypatch.chdir(tmp_path)
    folder = Path("designs")
    folder.mkdir()
    kinds = {"good": LAG, "agreed": AGREED, "improper": IMPROPER, "broken": "[design\n"}
    for name, text in kinds.items():
        (folder / f"{name}.toml").write_text(text.replace("NAME", name), encoding="utf-8")
    return folder


def test_one_table_tells_what_became_of_each(designs: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, err = run(capsys, "emit", "--all", "designs", "--out", "out")
    assert status == 2
    assert out.startswith("no: 2 of 4 designs are written to out; 1 refused, 1 error.\n")
    rows = [line.split() for line in out.split("\n\n")[1].splitlines()]
    told = {row[0]: (row[1:4], row[-1]) for row in rows}
    assert told["agreed"] == (["step-invariant", "direct", "float32"], "written")
    assert told["good"] == (["bilinear", "direct", "float32"], "written")
    assert told["improper"] == (["-", "-", "-"], "refused")
    assert told["broken.toml"] == (["-", "-", "-"], "error")
    assert list(told)[2:6] == ["agreed", "broken.toml", "good", "improper"]
    assert "%*" in next(line for line in out.splitlines() if line.startswith("  agreed "))
    assert "Accepted deviations\n  - agreed: phase in band\n" in out
    assert "Refused\n  - designs/improper.toml: transfer: " in out
    assert "Errors\n  - designs/broken.toml, line 1" in out
    assert "Controllers move machines" in out
    assert max(map(len, out.splitlines())) <= 100
    assert err.splitlines() == [f"emit: {done} of 4" for done in range(1, 5)]
    assert {path.name.split(".")[0].split("_")[0] for path in Path("out").iterdir()} == {"agreed", "good"}


def test_all_written_is_yes_and_status_0(designs: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = run(capsys, "emit", "designs/good.toml", "designs/agreed.toml", "--out", "out")
    assert status == 0
    assert out.startswith("yes: all 2 designs are written to out.\n")
    assert "Refused" not in out
    (designs / "good.toml").rename("good.toml")
    for path in designs.iterdir():
        path.unlink()
    Path("good.toml").rename(designs / "good.toml")
    status, out, _ = run(capsys, "emit", "--all", "designs", "--out", "out")
    assert (status, out.splitlines()[0]) == (0, "yes: the design is written to out.")


def test_refused_is_status_1_and_nothing_written_has_no_caution(
    designs: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (designs / "second.toml").write_text(IMPROPER.replace("NAME", "second"), encoding="utf-8")
    status, out, _ = run(capsys, "emit", "designs/improper.toml", "designs/second.toml", "--out", "out")
    assert status == 1
    assert out.startswith("no: none of 2 designs is written to out; 2 refused.\n")
    assert "Controllers move machines" not in out
    assert not Path("out").exists()


def test_the_table_of_a_schedule_that_is_no_more_is_told(designs: Path, capsys: pytest.CaptureFixture[str]) -> None:
    Path("out").mkdir()
    for name in ("good", "improper"):
        Path("out", f"{name}_schedule.h").write_text("", encoding="utf-8")
    _, out, _ = run(capsys, "emit", "designs/good.toml", "designs/improper.toml", "--out", "out")
    left = [line for line in out.splitlines() if line.startswith("left from an earlier emission: ")]
    assert left == [f"left from an earlier emission: {Path('out', 'good_schedule.h')}; nothing includes it"]


def test_of_names_that_collide_it_says_what_to_try_and_nothing_on_emitting_alone(
    designs: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    alone = "`realize emit` on one of these by itself"
    (designs / "twin.toml").write_text(LAG.replace("NAME", "good"), encoding="utf-8")
    status, out, _ = run(capsys, "emit", "designs/good.toml", "designs/twin.toml", "--out", "out")
    assert status == 2
    told = " ".join(out.split())
    assert "which designs/good.toml and designs/twin.toml both have (capitals make no difference); rename one" in told
    assert alone not in out
    _, out, _ = run(capsys, "emit", "designs/good.toml", "designs/twin.toml", "designs/improper.toml", "--out", "out")
    assert alone in out


def strict(text: str) -> dict[str, Any]:
    def refuse(constant: str) -> None:
        raise AssertionError(f"{constant} is no JSON")

    return validated(json.loads(text, parse_constant=refuse))


def test_the_document_holds_what_each_would_be_alone(designs: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = run(capsys, "emit", "--all", "designs", "--out", "out", "--json")
    found = strict(out)
    assert status == 2
    assert (found["schema"], found["command"]) == ("realize/1", "emit")
    for result in found["results"]:
        _, single, _ = run(capsys, "emit", result["file"], "--out", "out", "--json")
        assert {key: value for key, value in result.items() if key != "file"} == json.loads(single)
    assert [Path(result["file"]).stem for result in found["results"]] == ["agreed", "broken", "good", "improper"]
    broken = json.loads(json.dumps(found))
    broken["results"][1]["not_there"] = 1
    assert complaint(broken, "emit") is not None


def test_the_rule_file_has_every_rule(designs: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, _, _ = run(
        capsys, "emit", "designs/good.toml", "designs/agreed.toml", "--out", "out", "--dependencies", "build/all.d"
    )
    assert status == 0
    lines = Path("build/all.d").read_text(encoding="utf-8").replace("\\\n", "").splitlines()
    assert [line.split(": ")[1].strip() for line in lines] == ["designs/good.toml", "designs/agreed.toml"]


@pytest.mark.parametrize(
    ("arguments", "found"),
    [
        (["designs/good.toml", "1/s"], 'DESIGN: "1/s" among several designs'),
        (["1/(s", "+", "1)"], 'DESIGN: "1/(s" among several designs'),
        (["designs/good.toml", "-"], "DESIGN: standard input among several designs"),
        (["designs/good.toml", "designs/agreed.toml", "--name", "x"], "--name: one name for several designs"),
        (["--all", "designs", "--name", "x"], "--name: one name for several designs"),
        (["--all", "designs", "designs/good.toml"], "--all: a directory of designs, and"),
        (["--all", "nowhere"], "--all: nowhere: no such directory"),
        (["--all", "designs", "--dependencies", " "], "--dependencies: an empty name"),
        (["--all"], "--all: nothing"),
        ([], "DESIGN: nothing"),
    ],
    ids=str,
)
def test_what_cannot_be_asked_of_several_is_one_clear_message(
    designs: Path, capsys: pytest.CaptureFixture[str], arguments: list[str], found: str
) -> None:
    status, out, err = run(capsys, "emit", "--out", "out", *arguments)
    assert (status, out) == (2, "")
    assert err.startswith(f"error: {found}")
    assert len(err.splitlines()) == 3
    assert not Path("out").exists()


def test_the_widest_table_fits_the_screen_and_shortens_names_alone() -> None:
    summary = Summary("backward-difference", "error-feedback", "float32", ("saturation recovery", 9.991), (), {}, ())
    names = ["a" * 24, "b" * 17]
    results = [Result(f"{name}.toml", name, summary) for name in names]
    results += [Result("c" * 200 + ".toml", error=Refused("w", "f\nlines to paste", "", ""))]
    text = several_text(results, "out")
    assert max(map(len, text.splitlines())) <= 100
    assert "a" * 14 + "... backward-difference error-feedback float32 saturation recovery 999 %" in text
    assert "b" * 17 + " " in text
    assert "lines to paste" not in text
    roomy = [result._replace(summary=summary._replace(method="bilinear")) for result in results[:2]]
    assert "a" * 24 + " bilinear" in several_text(roomy, "out")


def test_a_design_that_is_not_understood_is_told_by_its_file_once() -> None:
    errors = [RealizeError("a.toml, [sampling] rate", "x", "", ""), RealizeError("checks", "y", "", "")]
    text = several_text([Result("a.toml", None, None, error) for error in errors], "out")
    assert "  - a.toml, [sampling] rate: x\n" in text
    assert "  - a.toml: checks: y\n" in text
