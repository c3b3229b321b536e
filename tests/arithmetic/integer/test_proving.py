"""What integers cannot hold is refused with what is missing, how many bits it needs, and the way out."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.arithmetic.grouping import split_integral
from realize.arithmetic.integer import STRUCTURES, Interface, Widths, integer_realization
from realize.arithmetic.integer.integration import Integration
from realize.arithmetic.integer.interface import Port
from realize.arithmetic.integer.layout import layouts
from realize.arithmetic.integer.poles import decays, least_margin
from realize.arithmetic.integer.proving import proven
from realize.arithmetic.integer.quantize import Choice, fraction_bits, greatest
from realize.errors import Refused
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.arithmetic.integer.designs import corner, port, proportional_integral, pulse_of, twelve_bits

NARROW, WIDE, INT32 = Widths(16, 32), Widths(16, 64), Widths(32, 64)
SLOW = corner(1, 100_000)
RESONANCE = discretize(TransferFunction.from_polynomials((3, 12), (1, 8, 98612)), Fraction(1, 10_000), "bilinear").pulse


def coefficients_of_poles(radius: Fraction, cosine: Fraction) -> tuple[Fraction, Fraction]:
    return -2 * radius * cosine, radius * radius


@given(st.fractions(-3, 3, max_denominator=64), st.fractions(-2, 2, max_denominator=64))
def test_poles_decay_where_the_triangle_of_coefficients_says(a1: Fraction, a2: Fraction) -> None:
    """``|a2| < 1`` and ``|a1| < 1 + a2``."""
    assert decays((a1, a2)) == (abs(a2) < 1 and abs(a1) < 1 + a2)
    assert decays((a1, a2)) == (least_margin((a1, a2))[1] > 0 and a2 > -1)


@given(st.fractions(Fraction(1, 10**6), 10**9), st.sampled_from((8, 16, 32)), st.integers(1, 100))
def test_fraction_bits_are_the_most_that_fit(reach: Fraction, bits: int, margin: int) -> None:
    found = fraction_bits(reach, bits, margin)
    assert reach * Fraction(2) ** found + margin <= greatest(bits) < 2 * reach * Fraction(2) ** found + margin


CASES: dict[str, tuple[PulseTransferFunction, Interface, Widths, str, tuple[str, ...]]] = {
    "slow corner, direct form, long sums": (
        SLOW,
        twelve_bits(),
        WIDE,
        "cascade",
        (
            "section 1 has a pole that does not decay once it is rounded to 16 bits",
            "1 + a1 + a2 = 3.95e-09 becomes 0 or less with 14 fraction bits, and needs 28 (34 for 1 %)",
            'structure = "delta", arithmetic = "int32", or a lower sample rate',
        ),
    ),
    "slow corner, short sums": (
        SLOW,
        twelve_bits(),
        NARROW,
        "error-feedback",
        ("1 + a1 + a2 = 3.95e-09", "section1_b0 = 9.87e-10 becomes 0 with ", "and needs 30 (36 for 1 %)"),
    ),
    "slower still, delta": (
        corner(Fraction(1, 10**6), 100_000),
        twelve_bits(),
        WIDE,
        "delta",
        (
            "rounding errors in section1_2 add up to as much as +-",
            "units, and its 32 bits hold +-2147483647; with the signal that takes words of 37 bits",
            'try: arithmetic = "int32", or a lower sample rate',
        ),
    ),
    "rounding errors fill the words": (
        pulse_of((1, 0, 0), [(1, *coefficients_of_poles(Fraction(9999, 10000), Fraction(999, 1000)))]),
        twelve_bits(),
        WIDE,
        "cascade",
        (
            "rounding errors in section1_output add up to as much as +-",
            "words of ",
            'try: structure = "delta", arithmetic = "int32"',
        ),
    ),
    "gain vanishes": (
        RESONANCE,
        twelve_bits(),
        NARROW,
        "direct",
        (
            "section 1 has lost its gain once it is rounded to 16 bits: section1_b1 = 6e-08 becomes 0 with ",
            "and needs 24 (30 for 1 %)",
        ),
    ),
    "no room in short sums": (
        pulse_of((10_000_000,), [(1,)]),
        twelve_bits(),
        NARROW,
        "direct",
        ("the sum for unclamped reaches 3", "bits, and its accumulator has 32", "a coarser per_count"),
    ),
    "undamped": (
        pulse_of((1, 0, 0), [(1, Fraction(-6, 5), 1)]),
        twelve_bits(),
        INT32,
        "cascade",
        ("section 1 has a pole that does not decay: no bound", "give a pair that rings some damping"),
    ),
    "growing": (
        pulse_of((1, 0), [(1, Fraction(-11, 10))]),
        twelve_bits(),
        INT32,
        "delta",
        ("section 1 has a pole that does not decay: no bound", 'arithmetic = "float32"'),
    ),
    "integral vanishes": (
        pulse_of((), [], (Fraction(1, 10**18),)),
        twelve_bits(1 << 15),
        WIDE,
        "cascade",
        (
            "R1, the gain of an integral state, 1e-18, becomes 0: its word of 64 bits has 4",
            "it needs 60",
            "a coarser per_count of the input",
        ),
    ),
    "higher order, direct": (
        pulse_of((1,), [(1, Fraction(-1, 2)), (1, Fraction(-1, 3)), (1, Fraction(-1, 5))]),
        twelve_bits(),
        WIDE,
        "direct",
        ("direct, although what is left beside the integral states has order 3", 'structure = "cascade"'),
    ),
    "no pair, normal": (
        corner(10, 1000, 1),
        twelve_bits(),
        WIDE,
        "normal",
        ("normal, without a pair of complex poles",),
    ),
    "repeated pole, parallel": (
        pulse_of((1,), [(1, -1, Fraction(1, 4))]),
        twelve_bits(),
        WIDE,
        "parallel",
        ("parallel, with a repeated pole",),
    ),
}


@pytest.mark.parametrize("name", CASES)
def test_refusal_names_what_is_missing_and_the_way_out(name: str) -> None:
    pulse, interface, widths, structure, parts = CASES[name]
    with pytest.raises(Refused) as caught:
        integer_realization(pulse, interface, widths, structure)
    for part in parts:
        assert part in str(caught.value)


@pytest.mark.parametrize(("structure", "widths"), [("delta", NARROW), ("delta", WIDE), ("error-feedback", INT32)])
def test_the_ways_out_of_a_slow_corner_are_open(structure: str, widths: Widths) -> None:
    stored = integer_realization(SLOW, twelve_bits(), widths, structure)
    assert stored.proof.output_error < 1
    ((b, a),) = stored.sections
    assert sum(b) / (1 + sum(a)) == pytest.approx(1, abs=1e-3)


def test_a_lower_rate_is_a_way_out() -> None:
    assert integer_realization(corner(1, 100), twelve_bits(), WIDE, "cascade").proof.output_error < 100


def test_a_pole_that_error_feedback_would_hide_is_found() -> None:
    """Rounded, a slow pole falls on z = 1, where error feedback's ``1 - 1/z`` and the zero cancel it in every path."""
    pulse = pulse_of((1, -1), [(1, Fraction(-999999, 1000000))])
    with pytest.raises(Refused, match="section 1 has a pole that does not decay once it is rounded to 16 bits"):
        integer_realization(pulse, twelve_bits(), WIDE, "error-feedback")


def test_room_for_rounding_errors_is_found_by_trying_again() -> None:
    """Poles at radius 0.999: errors of some hundred units beside a signal that would fill the word."""
    rest = split_integral(pulse_of((1, 0, 0), [(1, *coefficients_of_poles(Fraction(999, 1000), Fraction(99, 100)))]))[1]
    found = proven(layouts(rest, "cascade"), twelve_bits(), Choice(16, 64), Integration(()))
    word = next(bound for bound in found.proof.bounds if bound.variable == "section1_output")
    assert word.spare_bits >= 0
    assert found.proof.room.margin["section1_output"] > 100


def test_one_of_many_sections_beside_each_other_may_vanish() -> None:
    """Partial fractions of which one is a millionth of the other."""
    near = pulse_of((1, Fraction(-500_001, 10**6), 0), [(1, Fraction(-1, 2)), (1, Fraction(-1, 4))])
    assert integer_realization(near, twelve_bits(), NARROW, "parallel").proof.output_error < 2


@pytest.mark.parametrize("structure", STRUCTURES)
def test_pi_alone_suits_every_structure_but_normal(structure: str) -> None:
    pulse = proportional_integral(2, 1, 1000)
    if structure == "normal":
        with pytest.raises(Refused, match="without a pair"):
            integer_realization(pulse, twelve_bits(), NARROW, structure)
        return
    assert integer_realization(pulse, twelve_bits(), NARROW, structure).proof.output_error == Fraction(1, 2)


def test_port_is_frozen_in_counts() -> None:
    assert port(-5, 7) == Port(-5, 7, 0, "int32", Fraction(1))
