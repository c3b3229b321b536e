"""Where a section goes when a stored number moves: against the section multiplied out anew, exactly."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.firmware.audit.sensitivity import moves_of, units
from realize.firmware.recorded import RecordedSection

#: Bits of the coefficients that are drawn, and of the difference quotient.
_BITS, _STEP = 10, Fraction(1, 1 << 30)

Numbers = Mapping[str, Fraction]
Polynomials = tuple[list[Fraction], list[Fraction]]


def entry(value: Fraction, bits: int = _BITS) -> dict[str, Any]:
    return {"value": str(value), "stored": int(value * 2**bits), "fraction_bits": bits}


def in_delta(numbers: Numbers) -> Polynomials:
    """``d + (c1 (z - 1) + c2)/((z - 1)^2 + a1 (z - 1) + a2)`` over powers of 1/z, by hand."""
    d, c1, c2, a1, a2 = (numbers[name] for name in ("d", "c1", "c2", "a1", "a2"))
    a = [Fraction(1), a1 - 2, 1 - a1 + a2]
    return [d, d * a[1] + c1, d * a[2] + c2 - c1], a


def normal(numbers: Numbers) -> Polynomials:
    """``d + (c1 w + c2 (z - s))/((z - s)^2 + w^2)`` over powers of 1/z, by hand."""
    d, c1, c2, s, w = (numbers[name] for name in ("d", "c1", "c2", "s", "w"))
    a = [Fraction(1), -2 * s, s * s + w * w]
    return [d, d * a[1] + c2, d * a[2] + c1 * w - c2 * s], a


FORMS = {"delta": (("d", "c1", "c2", "a1", "a2"), in_delta), "normal": (("d", "c1", "c2", "s", "w"), normal)}

small = (
    st.integers(-900, 900)
    .filter(lambda n: abs(n) not in (0, *(1 << k for k in range(12))))
    .map(lambda n: Fraction(n, 1 << _BITS))
)


@pytest.mark.parametrize("structure", FORMS)
@given(values=st.lists(small, min_size=5, max_size=5))
def test_a_section_moves_as_it_does_when_it_is_multiplied_out_anew(structure: str, values: list[Fraction]) -> None:
    names, multiplied_out = FORMS[structure]
    numbers = dict(zip(names, values, strict=True))
    if structure == "normal":
        numbers["w"] = abs(numbers["w"])
    b, a = multiplied_out(numbers)
    unstored = {"stored": None, "fraction_bits": None}
    section = RecordedSection(
        tuple(b),
        tuple(a[1:]),
        {
            "b": [{"value": str(c), **unstored} for c in b],
            "a": [{"value": str(c), **unstored} for c in a[1:]],
            "coefficients": {name: entry(value) for name, value in numbers.items()},
        },
    )
    moves = moves_of(section, {"arithmetic": "int16", "structure": structure})
    assert len(moves) == len(names)
    for name, move in zip(names, moves, strict=True):
        assert move.unit == 2.0**-_BITS
        there = multiplied_out({**numbers, name: numbers[name] + _STEP})
        for direction, before, after in ((move.b, b, there[0]), (move.a, a, there[1])):
            quotient = [float((q - p) / _STEP) for p, q in zip(before, after, strict=True)]
            # A difference quotient is off by its step times the second derivative, at most 2; doubles by 2**-50.
            assert np.abs(direction - quotient).max() <= 2 * float(_STEP) + 2.0**-48


def test_floats_in_delta_move_along_powers_of_delta() -> None:
    stored = {key: [{"value": "1/3", "stored": "x", "fraction_bits": None}] * n for key, n in (("b", 3), ("a", 2))}
    section = RecordedSection((Fraction(1),) * 3, (Fraction(1),) * 2, {"coefficients": stored})
    moves = moves_of(section, {"arithmetic": "float32", "structure": "delta"})
    # (z - 1)^2, z - 1 and 1 over z^2.
    powers = [[1, -2, 1], [0, 1, -1], [0, 0, 1]]
    assert [move.b.tolist() for move in moves] == [*powers, [0, 0, 0], [0, 0, 0]]
    assert [move.a.tolist() for move in moves] == [[0, 0, 0]] * 3 + powers[1:]


def test_units_are_half_a_unit_in_the_last_place_of_a_float() -> None:
    """IEEE 754: 24 and 53 bits; float32 has steps of 2**-149 near zero."""
    ones = [{"value": "1", "stored": "0x1p+0", "fraction_bits": None}]
    nothing = [{"value": "0", "stored": "0x0p+0", "fraction_bits": None}]
    assert units(ones, "float32") == [2.0**-24]
    assert units(nothing, "float32") == [2.0**-150]
    assert units(ones, "float64") == [2.0**-53]


def test_units_of_integers_are_whole_and_none_for_a_power_of_two_that_is_not_multiplied() -> None:
    rounded, alone, shared = entry(Fraction(3, 4), 10), entry(Fraction(1, 4), 2), entry(Fraction(1, 1024), 10)
    wide = {"value": "2", "stored": 16384, "fraction_bits": 13}
    assert units([rounded, alone, shared, wide], "int16") == [2.0**-10, 0.0, 2.0**-10, 2.0**-13]


def test_numerators_scaled_to_rounded_denominators_may_be_off_by_what_rounding_did_at_rest() -> None:
    stored = {"b": [entry(Fraction(3, 1024)), entry(Fraction(0), 0)], "a": [entry(Fraction(-1021, 1024))]}
    section = RecordedSection((Fraction(3, 1024), Fraction(0)), (Fraction(-1021, 1024),), stored)
    plain = moves_of(section, {"arithmetic": "int16", "structure": "direct"})
    anew = moves_of(section, {"arithmetic": "int16", "structure": "direct", "numerators_anew": True})
    assert len(anew) == len(plain) + 1
    # A(1) = 3/1024, one unit of 1/1024 is a third of it.
    assert anew[-1].unit == pytest.approx(1 / 3)
    assert anew[-1].b.tolist() == [3 / 1024, 0]
