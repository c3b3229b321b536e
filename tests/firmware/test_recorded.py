"""A record's stored numbers are those that were stored."""

from __future__ import annotations

import json
from fractions import Fraction
from typing import Any

import pytest

from realize.arithmetic.integer import IntegerRealization, stored_integer_pulse
from realize.arithmetic.realization import Realization, stored_pulse
from realize.design import design_from_text
from realize.errors import RealizeError
from realize.firmware.job import emit
from realize.firmware.recorded import read_record, recorded_numbers, recorded_pulse
from tests.firmware.audit.written import COUNTED, LEAD

#: With an integral, and a rest of order 2 behind it.
SERVO = LEAD.replace("k*(0.2*s + 1)/(0.02*s + 1)", "k*(0.2*s + 1)*900/(s^2 + 20*s + 900) + k/s")


@pytest.mark.parametrize(
    "text",
    [
        LEAD,
        SERVO,
        LEAD + '[target]\nstructure = "delta"\n',
        LEAD + COUNTED,
        SERVO + COUNTED + 'structure = "delta"\n',
        LEAD + COUNTED + 'structure = "parallel"\n',
    ],
    ids=["direct", "with an integral", "delta", "integers", "integers in delta", "parallel integers"],
)
def test_the_numbers_of_a_record_are_the_pulse_transfer_function_that_was_stored(text: str) -> None:
    emitted = emit(design_from_text(text, "lead.toml"))
    stored = emitted.chosen.realization
    assert stored is not None
    wanted = stored_pulse(stored) if isinstance(stored, Realization) else stored_integer_pulse(stored)
    found = recorded_pulse(recorded_numbers(emitted.record, "lead.record.json"))
    assert isinstance(stored, IntegerRealization) == ("arithmetic = " in text)
    assert (found.numerator, found.denominator, found.period_s) == (
        wanted.numerator,
        wanted.denominator,
        Fraction(1, 2000),
    )


def entry(value: Any) -> dict[str, Any]:
    return {"value": value, "stored": "", "fraction_bits": None}


def numbers_of(**changed: Any) -> None:
    record = {
        "design": {"sampling": {"period_s": "1/100"}},
        "structure": "direct",
        "arithmetic": "float32",
        "sections": [{"b": [entry("1")], "a": []}],
        "integral": [],
    }
    recorded_numbers({**record, **changed}, "x.record.json")


def test_the_least_record_is_read() -> None:
    numbers_of()


@pytest.mark.parametrize(
    ("changed", "found"),
    [
        ({"sections": [{"b": [entry("one")], "a": []}]}, 'section 1 b0: "one"'),
        ({"sections": [{"b": [entry(1)], "a": []}]}, 'section 1 b0: "1"'),
        ({"sections": [{"b": [entry("1/0")], "a": []}]}, 'section 1 b0: "1/0"'),
        ({"sections": [{"b": [1], "a": []}]}, 'section 1 b0: "1"'),
        ({"sections": [{"b": [{"value": "1"}], "a": []}]}, "section 1 b0: a table"),
        ({"sections": [{"b": [{**entry("1"), "fraction_bits": 1.5}], "a": []}]}, "section 1 b0: a table"),
        ({"sections": [{"b": [entry("1")], "a": [], "coefficients": []}]}, "section 1 coefficients: a list"),
        ({"sections": [{"b": [entry("1")], "a": [], "coefficients": {"d": 1}}]}, 'section 1 d: "1"'),
        ({"sections": [{"b": [], "a": []}]}, "section 1: no lists b and a"),
        ({"sections": [None]}, "section 1: no lists b and a"),
        ({"integral": [entry(None)]}, "integral gain 1: nothing"),
        ({"direct_gain": entry([])}, "direct_gain: a list"),
        ({"design": {}}, "design.sampling.period_s: nothing"),
        ({"design": {"sampling": {"period_s": "-1"}}}, 'design.sampling.period_s: "-1"'),
        ({"arithmetic": "int16"}, "design.signals.input.per_count: nothing"),
    ],
)
def test_what_is_no_exact_number_is_refused_by_its_name(changed: dict[str, Any], found: str) -> None:
    with pytest.raises(RealizeError) as error:
        numbers_of(**changed)
    assert f"x.record.json, {found}" in f"{error.value.where}: {error.value.found}"


def test_what_was_emitted_is_read_back_as_it_is(tmp_path: Any) -> None:
    emitted = emit(design_from_text(LEAD, "lead.toml"))
    path = tmp_path / "lead.record.json"
    path.write_text(emitted.files["lead.record.json"], encoding="utf-8")
    assert read_record(str(path)) == json.loads(emitted.files["lead.record.json"])
