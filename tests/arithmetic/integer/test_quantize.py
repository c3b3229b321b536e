"""Binary points of products: what the recursion needs it keeps, the rest makes no shifts where it has bits to spare."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.arithmetic.integer import IntegerRealization, Interface, Port, Widths, integer_realization
from realize.arithmetic.integer.program import Sum, Term
from realize.arithmetic.realization import exact_pulse

#: Significant bits that a coefficient of a long word may not fall below for the sake of a binary point.
KEPT = 28

WORD = Port(-(1 << 31), (1 << 31) - 1, 0, "int32", Fraction(1))


def section(gain: str, a: tuple[str, str], structure: str) -> IntegerRealization:
    """``gain (0.41 - 0.23/z + 0.17/z^2)/(1 + a1/z + a2/z^2)`` between words of 32 bits."""
    numerator = tuple(Fraction(gain) * Fraction(b) for b in ("0.41", "-0.23", "0.17"))
    pulse = exact_pulse(numerator, [(Fraction(1), *map(Fraction, a))], (), Fraction(1, 1000))
    return integer_realization(pulse, Interface(WORD, WORD), Widths(32, 64), structure)


def products(each: Sum) -> tuple[list[Term], list[Term]]:
    """Those of the input and its past, and those of the output's past."""
    named = [term for term in each.terms if term.name]
    return [t for t in named if "input" in t.variable], [t for t in named if "output" in t.variable]


@pytest.mark.parametrize("structure", ["direct", "error-feedback"])
@pytest.mark.parametrize("gain", ["1/16", "1", "3", "40"])
@pytest.mark.parametrize("a", [("-1.21", "0.53"), ("-1.9", "0.905"), ("0.3", "-0.2")], ids=str)
def test_products_share_a_binary_point_where_the_input_has_bits_to_spare(
    a: tuple[str, str], gain: str, structure: str
) -> None:
    each = section(gain, a, structure).program.outputs[0]
    forward, back = products(each)
    coarser = max(term.shift for term in (*forward, *back))
    spare = max(abs(term.stored) for term in forward) >> coarser - forward[0].shift
    assert forward[0].shift == coarser or spare.bit_length() < KEPT
    # The recursion's largest coefficient fills its word of 31 bits and a sign.
    assert max(abs(term.stored) for term in back).bit_length() >= 30


def test_what_is_given_up_is_rounded_once() -> None:
    program = section("1", ("-1.21", "0.53"), "direct").program
    forward, _ = products(program.outputs[0])
    assert {term.fraction_bits for term in forward} == {29}
    assert {term.shift for term in program.outputs[0].terms} == {0}
    ratios = {
        Fraction(term.stored, round(Fraction(b) * 2**29))
        for term, b in zip(sorted(forward, key=lambda term: str(term.name)), ("0.41", "-0.23", "0.17"), strict=True)
    }
    assert max(abs(ratio - 1) for ratio in ratios) < Fraction(1, 1 << 27)


def test_the_newest_input_is_added_last() -> None:
    each = section("1", ("-1.21", "0.53"), "direct").program.outputs[0]
    assert [term.variable for term in each.terms].index("input") == len(each.terms) - 1
