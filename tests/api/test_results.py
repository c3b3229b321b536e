"""Results say what the commands say, as text, as document, as HTML; files are written all or none."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Callable
from fractions import Fraction
from functools import cache
from pathlib import Path
from typing import Any

import html5lib
import pytest

from realize import RealizeError, Refused, TransferFunction, assess, compare, discretize, emit
from realize.api.notebook import items, paragraph, table
from realize.cli import main

FIXTURES = Path(__file__).parents[2] / "fixtures"
GAP, IMPROPER = str(FIXTURES / "roller_gap.toml"), str(FIXTURES / "roller_gap_improper.toml")

#: Text that would be tags.
TAGS = "<script>alert('&amp;')</script> \"<b>"

JOBS: dict[str, Callable[..., Any]] = {"assess": assess, "compare": compare}

#: The name of a case of the plant, which the reasons of the loop's checks quote.
CASE = "<script>alert(1)</script>"

#: A design whose texts are hostile to HTML.
HOSTILE: dict[str, Any] = {
    "design": {"transfer": "kp + 1/s", "about": "<script>alert(1)</script>", "author": "a & b", "values": {"kp": 3}},
    "sampling": {"rate": "100 Hz"},
    "signals": {"output": {"range": [-1, 1], "unit": "<b>&"}, "input": {"range": [-1, 1], "unit": '"><i>'}},
    "plant": {"transfer": "1/(s + a)", "values": {"a": 10}, "case": [{"name": CASE, "values": {"a": 0.5}}]},
}


def printed(capsys: pytest.CaptureFixture[str], *arguments: str) -> str:
    """What a command prints, whatever its exit status."""
    try:
        main(list(arguments))
    except SystemExit as end:
        assert end.code == 1
    return capsys.readouterr().out


@pytest.mark.parametrize(
    ("job", "design", "options", "changes"),
    [
        ("assess", IMPROPER, (), {}),
        ("assess", "(s + 2)^3/(s^2 + 1)", ("--rate", "100 Hz"), {"rate_hz": 100}),
        ("compare", str(FIXTURES / "sieve_resonance.toml"), (), {}),
        (
            "compare",
            "kp + ki/s",
            ("--value", "kp=2", "--value", "ki=0.5", "--period", "1 ms"),
            {"period_s": 0.001, "values": {"kp": 2, "ki": 0.5}},
        ),
        ("compare", "1/(s - 1)^2", ("--rate", "1 Hz", "--method", "bilinear"), {"rate": "1 Hz", "method": "bilinear"}),
    ],
)
def test_a_result_prints_as_its_command_and_gives_the_document_of_json(
    job: str, design: str, options: tuple[str, ...], changes: dict[str, Any], capsys: pytest.CaptureFixture[str]
) -> None:
    found = JOBS[job](design, **changes)
    assert str(found) == printed(capsys, job, design, *options)
    assert json.dumps(found.document(), indent=2) + "\n" == printed(capsys, job, design, *options, "--json")


def test_files_screen_and_document_are_those_of_the_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    given = ("emit", "4.2 + 18/s", "--rate", "2 kHz", "--name", "gap", "--method", "bilinear", "--out", str(tmp_path))
    screen = printed(capsys, *given)
    by_command = {path.name: path.read_text(encoding="utf-8") for path in tmp_path.iterdir()}
    written = emit("4.2 + 18/s", tmp_path, rate="2 kHz", name="gap", method="bilinear")
    assert dict(written.files) == by_command
    assert written.paths == tuple(tmp_path / name for name in written.files)
    assert str(written) == screen
    assert json.dumps(written.document(), indent=2) + "\n" == printed(capsys, *given, "--json")
    assert json.loads(written.files["gap.record.json"]) == written.record


def test_in_memory_nothing_is_written_and_the_screen_says_so(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    found = emit("4.2 + 18/s", rate="2 kHz", name="gap")
    assert list(tmp_path.iterdir()) == []
    assert "  gap.c (in memory)\n" in str(found)
    assert (found.paths, found.document()["written"]) == ((), [])
    assert repr(found) == "<Emission of gap: 5 files in memory>"


def test_files_that_cannot_all_be_written_are_not_written(tmp_path: Path) -> None:
    (tmp_path / "gap_vectors.csv").mkdir()
    with pytest.raises(RealizeError, match="name another directory with out=; nothing was written"):
        emit("4.2 + 18/s", tmp_path, rate="2 kHz", name="gap")
    assert [path.name for path in tmp_path.iterdir()] == ["gap_vectors.csv"]
    with pytest.raises(RealizeError, match="out: an empty name"):
        emit("4.2 + 18/s", " ", rate="2 kHz")


def test_what_may_not_be_emitted_is_refused_with_its_reason() -> None:
    with pytest.raises(Refused) as refusal:
        emit(IMPROPER)
    assert refusal.value.where == "transfer"
    assert refusal.value.found.startswith("not realizable: 0.09*s grows without bound")
    assert "placement" in refusal.value.advice


def test_a_proposal_can_be_taken_and_carried_on() -> None:
    found = assess(IMPROPER)
    assert (found.realizable, len(found.improper_terms)) == (False, 1)
    best = found.proposals[0]
    assert best.pole_rad_s == 1070
    # The lines to paste make the very design with the roll-off.
    text = Path(IMPROPER).read_text(encoding="utf-8") + "\n" + best.toml
    assert compare(tomllib.loads(text)).transfer == best.transfer == compare(GAP).transfer
    assert discretize(best.transfer, rate="2 kHz").method == "bilinear"


def test_methods_are_found_by_name_with_their_checks_and_numbers() -> None:
    found = compare(GAP)
    assert (found.recommended, found.acceptable, found.period_s) == ("bilinear", True, Fraction(1, 2000))
    chosen = found.methods["bilinear"]
    assert found.chosen is chosen
    assert chosen.discrete is not None
    assert chosen.discrete.numerator.tolist() == discretize(found.transfer, rate_hz=2000).numerator.tolist()
    document = next(m for m in found.document()["methods"] if m["method"] == "bilinear")
    assert {c["check"]: c["verdict"] for c in document["checks"] if c["of"] == "stored"} == {
        name: check.verdict for name, check in chosen.checks.items()
    }
    assert chosen.checks["zero shift"].difference != chosen.unrounded_checks["zero shift"].difference
    refused = found.methods["plant-input-mapped"]
    assert (refused.acceptable, refused.discrete, dict(refused.checks)) == (False, None, {})
    assert "dead time" in (refused.refused or "")
    out = found.methods["impulse-invariant"]
    assert {check.check for check in out.blocking} >= {"zero shift"}
    assert [repr(m).split(": ")[1] for m in (chosen, refused, out)] == ["acceptable>", "refused>", "not acceptable>"]
    with pytest.raises(TypeError):
        found.methods["bilinear"] = chosen  # type: ignore[index]


# ---------------------------------------------------------------- notebooks


def shown(result: Any) -> Any:
    """The HTML of a result, read strictly."""
    return html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parseFragment(result._repr_html_())


@cache
def results() -> list[Any]:
    """One of each kind; never changed, so made once."""
    found = compare(HOSTILE)
    lost = compare("1/(s - 1)^2", rate="1 Hz", method="bilinear")
    return [assess(HOSTILE), found, found.chosen, emit(HOSTILE), assess(IMPROPER), compare(GAP), lost, found.transfer]


def test_html_is_strict_and_brings_no_script_style_or_foreign_resource() -> None:
    for result in results():
        root = shown(result)
        names = {element.tag for element in root.iter() if isinstance(element.tag, str)}
        assert names.isdisjoint({"script", "style", "link", "img", "iframe", "i", "b", "a"})
        assert not [key for element in root.iter() for key in element.attrib if key in ("src", "href", "style")]


def test_every_table_has_a_caption_and_headers_with_a_scope() -> None:
    tables = [found for result in results() for found in shown(result).iter("table")]
    assert len(tables) >= 8
    for each in tables:
        assert each.find("caption").text
        assert {th.get("scope") for th in each.find("thead").iter("th")} == {"col"}
        width = len(list(each.find("thead").iter("th")))
        for row in each.find("tbody"):
            assert [cell.tag for cell in row] == ["th", *["td"] * (width - 1)]
            assert row[0].get("scope") == "row"


def test_a_check_of_a_schedule_says_where_it_is_worst_with_the_unit_of_the_variable() -> None:
    html = emit(str(FIXTURES / "sheeter_gap.toml"))._repr_html_()
    places = re.findall(r"at gap = [0-9.]+[^:<]*", html)
    assert len(places) > 10
    assert all(place.endswith(" mm") for place in places)


@pytest.mark.parametrize("html", [paragraph(TAGS), items([TAGS]), table(TAGS, [TAGS], [[TAGS, TAGS]])])
def test_text_stays_text_in_html(html: str) -> None:
    root = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False).parseFragment(html)
    assert {element.tag for element in root.iter()}.isdisjoint({"script", "b"})
    assert TAGS in "".join(root.itertext())


def test_what_a_design_says_is_shown_but_as_text() -> None:
    root = shown(compare(HOSTILE))
    assert CASE in "".join(root.itertext())
    assert {element.tag for element in root.iter()}.isdisjoint({"script", "b", "i"})


def test_the_tables_hold_every_method_check_and_file() -> None:
    found, emission = compare(GAP), emit(HOSTILE)
    heads = [row[0].text for each in shown(found).iter("table") for row in each.find("tbody")]
    assert heads == [*found.methods, *found.chosen.checks] if found.chosen else False
    text = "".join(shown(emission).itertext())
    assert all(name in text for name in (*emission.files, *emission.checks, "Controllers move machines"))
    assert str(found).split("\n\n")[0].split() == "".join(shown(found).find("p").itertext()).split()


def test_representations_are_short() -> None:
    assert repr(assess(IMPROPER)) == "<Assessment of roller_gap: not realizable, 6 proposals>"
    assert repr(assess("1/s")) == "<Assessment of controller: realizable>"
    assert repr(compare(GAP)) == "<Comparison of roller_gap at 2 kHz: bilinear recommended>"
    lost = compare(TransferFunction([1], [1, -2, 1]), rate="1 Hz", method="bilinear")
    assert repr(lost) == "<Comparison of controller at 1 Hz: no method is acceptable>"
