"""Floats: when sections in delta take the place of the cascade, and what is said about it."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import pytest

from realize.arithmetic.realization import Realization, realization
from realize.checks import ContinuousReference
from realize.design import Design, design_from_text
from realize.errors import Refused
from realize.firmware.job import emit
from realize.methods import discretize
from realize.report.documents import compare_document
from realize.workflow import MethodResult, compare
from realize.workflow import floats as workflow
from realize.workflow.stored import Stored
from realize.workflow.target import stored_numbers


def low_pass(corner_hz: int, rate: str, more: str = "", method: str = "bilinear") -> Design:
    return design_from_text(
        f"""
        [design]
        name = "slow"
        transfer = "w^2/(s^2 + 1.4142*w*s + w^2)"
        values.w = "2*pi*{corner_hz}"
        [sampling]
        rate = "{rate}"
        [method]
        name = "{method}"
        {more}
        """,
        "slow.toml",
    )


def result(design: Design, method: str = "bilinear") -> MethodResult:
    return next(r for r in compare(design).methods if r.method == method)


SLOW = [(20, "48 kHz"), (2, "500 kHz")]


@pytest.mark.parametrize(("corner_hz", "rate"), SLOW)
def test_auto_takes_delta_where_rounding_alone_spoils_the_rest_and_says_so(corner_hz: int, rate: str) -> None:
    found = result(low_pass(corner_hz, rate))
    assert found.acceptable
    assert structure(found) == "delta"
    (note,) = (note for note in found.notes if note.startswith("structure delta"))
    assert note.startswith("structure delta: rounded to float32, direct is out of tolerance (")
    assert "low-frequency gain" in note
    assert note.endswith("sections in delta = z - 1 are within every tolerance")


def structure(found: MethodResult) -> str:
    assert isinstance(found.realization, Realization)
    return found.realization.structure


@pytest.mark.parametrize(("corner_hz", "rate"), SLOW)
def test_a_named_structure_is_kept_and_refused_for_what_rounding_does(corner_hz: int, rate: str) -> None:
    design = low_pass(corner_hz, rate, '[target]\nstructure = "direct"')
    assert structure(result(design)) == "direct"
    with pytest.raises(Refused, match="low-frequency gain"):
        emit(design)


@pytest.mark.parametrize(("corner_hz", "rate"), SLOW)
def test_where_the_cascade_is_within_it_stays_without_a_word(corner_hz: int, rate: str) -> None:
    found = result(low_pass(corner_hz, rate, '[target]\narithmetic = "float64"'))
    assert (structure(found), found.acceptable) == ("direct", True)
    assert not any("structure" in note for note in found.notes)


def test_delta_can_be_named_where_nothing_asks_for_it() -> None:
    found = result(low_pass(20, "1 kHz", '[target]\nstructure = "delta"'))
    assert (structure(found), found.acceptable) == ("delta", True)
    assert not any("structure" in note for note in found.notes)


def test_an_agreed_deviation_keeps_the_cascade() -> None:
    agreed = "".join(
        f'[[accept]]\ncheck = "{check}"\nlimit = "{limit}"\nbecause = "invented"\nby = "ab"\n'
        for check, limit in (("low-frequency gain", "2 %"), ("step deviation", "2 %"))
    )
    assert structure(result(low_pass(20, "48 kHz", agreed))) == "direct"


@pytest.fixture
def attempts(monkeypatch: pytest.MonkeyPatch) -> list[str]:
    """Structures that were tried."""
    tried: list[str] = []
    own = workflow.float_numbers

    def counted(*arguments: Any) -> Any:
        tried.append(arguments[-1])
        return own(*arguments)

    monkeypatch.setattr(workflow, "float_numbers", counted)
    return tried


def test_one_attempt_does_where_it_is_within(attempts: list[str]) -> None:
    stored(low_pass(20, "1 kHz"), "bilinear")
    assert attempts == ["auto"]


def test_a_method_that_is_out_by_itself_is_not_tried_twice(attempts: list[str]) -> None:
    found = stored(low_pass(20, "300 Hz"), "forward-difference")
    assert any(check.verdict == "out" for check in found.checks)
    assert attempts == ["auto"]


def stored(design: Design, method: str) -> Stored:
    assert design.period_s is not None
    reference = ContinuousReference(design.transfer, design.period_s, Fraction(400))
    pulse = discretize(design.transfer, design.period_s, method, None).pulse
    return stored_numbers(design, reference, pulse)


def test_a_cascade_that_the_format_refuses_gives_way_to_delta_or_keeps_its_refusal(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    own = realization

    def refusing(pulse: Any, target: Any, structure: str) -> Any:
        if structure in refused:
            raise Refused("coefficient", "about 2^130 is beyond the largest float32", "values below 2^128", "")
        return own(pulse, target, structure)

    monkeypatch.setattr(workflow, "realization", refusing)
    refused = ["auto"]
    found = stored(low_pass(20, "1 kHz"), "bilinear")
    assert found.note == (
        "structure delta: cascade is refused (about 2^130 is beyond the largest float32); "
        "sections in delta = z - 1 are within every tolerance"
    )
    refused = ["auto", "delta"]
    with pytest.raises(Refused, match=r"about 2\^130"):
        stored(low_pass(20, "1 kHz"), "bilinear")


def test_the_comparison_shows_sections_in_delta_in_z_as_the_nearest_doubles() -> None:
    comparison = compare(low_pass(2, "500 kHz"))
    (entry,) = (m for m in compare_document(comparison)["methods"] if m["method"] == "bilinear")
    (section,) = entry["sections"]
    assert (entry["structure"], section["operator"]) == ("delta", "delta")
    chosen = comparison.chosen
    assert chosen is not None
    assert isinstance(chosen.realization, Realization)
    (stored_section,) = chosen.realization.sections
    b, a = (tuple(map(Fraction, p)) for p in stored_section)
    # (delta^2 + a1 delta + a2) = z^2 + (a1 - 2) z + (1 - a1 + a2), and the numerator alike
    assert section["a"] == [float(a[0] - 2), float(1 - a[0] + a[1])]
    assert section["b"] == [float(b[0]), float(b[1] - 2 * b[0]), float(b[0] - b[1] + b[2])]


def test_the_comparison_names_no_operator_for_sections_in_z() -> None:
    (entry,) = (m for m in compare_document(compare(low_pass(20, "1 kHz")))["methods"] if m["method"] == "bilinear")
    assert [list(section) for section in entry["sections"]] == [["b", "a"]]


def test_the_emitted_files_say_what_a_section_in_delta_is() -> None:
    emitted = emit(low_pass(2, "500 kHz"))
    header = " ".join(emitted.files["slow.h"].replace("\n *", " ").split())
    assert "delta: 1 section in transposed direct form II of the operator delta = z - 1" in header
    assert "float section1_1_rest; /* what the last addition to it lost */" in header
    assert "structure delta: rounded to float32, direct is out of tolerance" in header
    assert emitted.record["structure"] == "delta"
