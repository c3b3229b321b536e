"""Bounds hold and are hardly larger than what is reached: one that forgot a part would be too small here."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.arithmetic.integer import IntegerRealization, IntegerRecursion, Interface, Widths, integer_realization
from realize.arithmetic.integer.resting import resting_errors
from tests.arithmetic.integer.designs import port, pulse_of, twelve_bits


def bound_of(stored: IntegerRealization, name: str) -> int:
    return next(bound.largest for bound in stored.proof.bounds if bound.variable == name)


def test_sum_of_a_gain_is_bounded_by_its_product_and_the_half_that_rounds_it() -> None:
    stored = integer_realization(pulse_of((Fraction(3, 7),), []), twelve_bits(), Widths(16, 32), "direct")
    command = stored.program.command
    (term,) = command.terms
    largest_product = abs(term.stored) * 2**term.shift * 2048
    assert bound_of(stored, "unclamped (sum)") == largest_product + (1 << command.shift - 1)


@pytest.mark.parametrize("sign", [1, -1])
def test_held_integral_goes_an_increment_beyond_what_its_limit_leaves_and_no_further(sign: int) -> None:
    # A pure integral of 1/3 count a sample: the command is its state, rounded, so it stops being held back only at the
    # limit of 100 counts and half a count, and one increment of 2047/3 counts may still be added there.
    ends = Interface(port(-2047, 2047), port(-100, 100))
    stored = integer_realization(pulse_of((), [], [Fraction(1, 3)]), ends, Widths(16, 64), "direct")
    model = IntegerRecursion(stored.program, checked=True)
    integral = stored.program.integral
    assert integral is not None
    unit = Fraction(2) ** integral.word.fraction_bits
    reached = 0
    for fine in range(1, 40):
        model.clear()
        for value in (*[sign] * (300 + fine), 2047 * sign):
            model.update(value)
            reached = max(reached, abs(model.state.integral1))
    largest = bound_of(stored, "state.integral1")
    assert reached <= largest
    assert (largest - reached) / unit <= 2


def test_back_calculation_counts_in_the_sum_of_the_integral() -> None:
    ends = Interface(port(-2047, 2047), port(-100, 100))
    stored = integer_realization(
        pulse_of((5,), [], [Fraction(1, 3)]), ends, Widths(16, 64), "direct", hold=False, tracking=Fraction(1, 2)
    )
    integral = stored.program.integral
    assert integral is not None
    # Far out, everything pulls one way: the input adds a third of itself, and half of what the actuator, at its other
    # limit, falls short of a command of 5 times the input and the state.
    unit = Fraction(2) ** integral.word.fraction_bits
    limits = integral.limits[0]
    assert limits is not None
    outward = Fraction(limits[1]) / unit + Fraction(2047, 3)
    pulled = (5 * 2047 + Fraction(limits[1]) / unit + 100) / 2
    largest = bound_of(stored, "state.integral1 (sum)") / unit
    assert largest >= max(outward, pulled)
    assert largest <= outward + pulled + 2


def test_section_after_a_section_at_rest_takes_up_what_is_handed_on() -> None:
    # Both y = round(0.9 y + b u), their outputs in one unit. The first is off by half a unit, which (1 - 0.9)/2 in
    # every sample of the past would have left; it hands on what may differ by that and another half, and the second,
    # whose gain at rest is g, is off by half a unit and g times that. Both are summed up by 1/(1 - 0.9).
    stored = integer_realization(
        pulse_of((1, 0, 0), [(1, Fraction(-9, 10)), (1, Fraction(-9, 10))]), twelve_bits(), Widths(16, 64), "cascade"
    )
    program = stored.program
    assert program.words["section1_output"] == program.words["section2_output"]
    (b,) = [t.value for each in program.outputs for t in each.terms if t.name == "section2_b0"]
    left = 1 - program.coefficients["section2_a1"].value
    gain = b / left
    constant = left / 2
    second = Fraction(1, 2) + gain * (Fraction(1, 2) + constant)
    wanted = constant * gain / left + second
    assert wanted <= resting_errors(program)["section2_output"] <= wanted * Fraction(17, 16)
