"""scipy's opinion: it agrees with what is stored, and with nothing else."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.integer import Interface, Port, Widths, integer_realization
from realize.arithmetic.realization import realization
from realize.firmware.audit.second_opinion import Opinion, second_opinion
from realize.firmware.changes import is_coefficient
from realize.firmware.emission import Emission
from realize.firmware.integer import record as integer_record
from realize.firmware.record import record as record_of
from realize.firmware.recorded import recorded_numbers
from realize.methods import METHODS, discretize
from realize.transfer import TransferFunction

CORPUS = {
    entry["name"]: entry
    for entry in json.loads(
        (Path(__file__).parents[3] / "fixtures" / "reference_coefficients.json").read_text(encoding="utf-8")
    )
}

#: Of the corpus, what is hard for doubles: slow corners at a high rate, roots that repeat or grow.
HARD = ("low_corner_fourth", "repeated_complex", "unstable_pole")

Record = dict[str, Any]


def transfer_of(name: str) -> tuple[TransferFunction, Fraction]:
    entry = CORPUS[name]
    numerator, denominator = ([Fraction(c) for c in entry[key]] for key in ("numerator", "denominator"))
    return TransferFunction.from_polynomials(numerator, denominator), Fraction(entry["period_s"])


def resolved(period_s: Fraction) -> Record:
    ends = {"per_count": "1"}
    return {
        "name": "x",
        "transfer": "x",
        "sampling": {"period_s": str(period_s)},
        "signals": {"input": ends, "output": ends},
    }


def in_floats(transfer: TransferFunction, period_s: Fraction, method: str, arithmetic: str, structure: str) -> Record:
    pulse = discretize(transfer, period_s, method, Fraction(1, 10) / period_s).pulse
    stored = realization(pulse, FORMATS[arithmetic], structure)
    return record_of(Emission("x", stored, method, "x", design=resolved(period_s)), {})


def in_integers(transfer: TransferFunction, period_s: Fraction, method: str, bits: int, structure: str) -> Record:
    pulse = discretize(transfer, period_s, method, Fraction(1, 10) / period_s).pulse
    port = Port(-2047, 2047, 0, "int32", Fraction(1))
    stored = integer_realization(pulse, Interface(port, port), Widths(bits, 2 * bits), structure)
    return {
        "design": resolved(period_s),
        "structure": structure,
        "arithmetic": f"int{bits}",
        "integral": integer_record._integral(stored.program),
        "sections": [integer_record._section(stored, k) for k in range(1, len(stored.sections) + 1)],
        "direct_gain": integer_record._direct_gain(stored),
        "numerators_anew": stored.numerators_anew,
    }


def opinion(transfer: TransferFunction, period_s: Fraction, method: str, record: Record) -> Opinion:
    numbers = recorded_numbers(record, "x.record.json")
    return second_opinion(transfer, method, Fraction(1, 5) / period_s, Fraction(1, 10) / period_s, numbers, record)


@pytest.mark.parametrize("name", HARD)
@pytest.mark.parametrize("method", METHODS)
def test_scipy_agrees_with_every_method_also_where_doubles_suffer(name: str, method: str) -> None:
    transfer, period_s = transfer_of(name)
    for arithmetic, structure in (("float32", "cascade"), ("float64", "delta")):
        found = opinion(transfer, period_s, method, in_floats(transfer, period_s, method, arithmetic, structure))
        assert found.finding == ""
        assert found.parts[0].what == "frequency response"
        assert len(found.parts) == (1 if method == "pole-zero-mapped" else 2)
        assert all(part.judged == part.points for part in found.parts)


@pytest.mark.parametrize("structure", ["cascade", "error-feedback", "delta", "normal", "parallel"])
@pytest.mark.parametrize("bits", [16, 32])
def test_scipy_agrees_with_every_structure_of_integers(structure: str, bits: int) -> None:
    """Two resonances, invented: 900/(s^2 + 18 s + 900) and 8100/(s^2 + 36 s + 8100)."""
    transfer = TransferFunction.from_polynomials((900 * 8100,), (1, 54, 900 + 648 + 8100, 178200, 900 * 8100))
    period_s = Fraction(1, 500)
    found = opinion(transfer, period_s, "bilinear", in_integers(transfer, period_s, "bilinear", bits, structure))
    assert found.finding == ""
    assert [part.what for part in found.parts] == ["frequency response", "step response"]
    # Towards half the rate the response falls to less than rounding leaves of it.
    assert all(part.judged >= 0.75 * part.points for part in found.parts)


@pytest.mark.parametrize("other", [method for method in METHODS if method != "bilinear"])
def test_the_numbers_of_another_method_are_caught(other: str) -> None:
    transfer, period_s = TransferFunction.from_polynomials((1, 3), (1, 2, 5)), Fraction(1, 10)
    record = in_floats(transfer, period_s, "bilinear", "float32", "cascade")
    assert opinion(transfer, period_s, "bilinear", record).finding == ""
    assert "scipy disagrees" in opinion(transfer, period_s, other, record).finding


@pytest.mark.parametrize("arithmetic", ["float32", "float64"])
@pytest.mark.parametrize("place", [("b", 0), ("b", 1), ("b", 2), ("a", 0), ("a", 1)])
def test_a_stored_number_that_is_off_by_some_hundred_of_its_units_is_caught(
    arithmetic: str, place: tuple[str, int]
) -> None:
    transfer, period_s = TransferFunction.from_polynomials((1, 1, 3), (1, 2, 5)), Fraction(1, 10)
    record = in_floats(transfer, period_s, "bilinear", arithmetic, "cascade")
    entry = record["sections"][0][place[0]][place[1]]
    assert is_coefficient(entry)
    entry["value"] = str(Fraction(entry["value"]) * (1 + 500 * Fraction(2) ** -FORMATS[arithmetic].precision))
    assert "scipy disagrees" in opinion(transfer, period_s, "bilinear", record).finding


def test_a_method_without_a_road_is_said_to_be_left_out() -> None:
    transfer, period_s = TransferFunction.from_polynomials((1,), (1, 2)), Fraction(1, 10)
    record = in_floats(transfer, period_s, "bilinear", "float32", "cascade")
    found = opinion(transfer, period_s, "frequency-fit", record)
    assert (found.parts, found.finding) == ((), "")
    assert found.notes == ("no second opinion: scipy has no road to frequency-fit",)


def test_a_gain_alone_needs_no_second_opinion() -> None:
    transfer, period_s = TransferFunction.from_polynomials((3,), (1,)), Fraction(1, 10)
    record = in_floats(transfer, period_s, "bilinear", "float32", "cascade")
    assert opinion(transfer, period_s, "bilinear", record).notes == ("no second opinion: a gain alone needs none",)


def test_numbers_that_the_structure_does_not_have_are_refused() -> None:
    transfer, period_s = TransferFunction.from_polynomials((1,), (1, 2, 5)), Fraction(1, 10)
    record = in_integers(transfer, period_s, "bilinear", 16, "delta")
    coefficients = record["sections"][0]["coefficients"]
    coefficients["q"] = coefficients.pop("c1")
    found = opinion(transfer, period_s, "bilinear", record)
    assert found.parts == ()
    assert found.notes == ("no second opinion: the stored numbers are not those of the record's structure",)
