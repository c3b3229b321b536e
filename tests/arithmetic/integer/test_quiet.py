"""Deadband and limit cycles of programs: published values, and searches of another kind."""

from __future__ import annotations

from fractions import Fraction
from math import floor

import pytest
from hypothesis import given, settings

from realize.arithmetic.integer import IntegerRealization, IntegerRecursion, Interface, Widths, integer_realization
from realize.arithmetic.integer.program import Sum
from realize.arithmetic.integer.quiet import Answered, direct_recursion, normal_recursion, quiet
from realize.arithmetic.limit_cycles import (
    TIES_UP,
    LimitCycles,
    error_feedback,
    limit_cycles,
    outputs,
    rounded_sum,
)
from tests.arithmetic.integer.designs import (
    Drawn,
    corner,
    port,
    proportional_integral,
    pulse_of,
    realizations,
    stored_answers,
    twelve_bits,
)

WIDE = Widths(16, 64)

#: Poles .4375 +- j.6585.
PUBLISHED = pulse_of((1, 0, 0), [(1, Fraction(-7, 8), Fraction(5, 8))])


def section_output(stored: IntegerRealization, number: int = 1) -> Sum:
    return next(each for each in stored.program.sums if each.target == f"section{number}_output")


def test_published_second_order_cycle_comes_from_the_sums_of_a_program() -> None:
    """Poles .4375 +- j.6585, three fraction bits: amplitude 1/8, period 6 (read); the impulse of 3/8 (recomputed)."""
    stored = integer_realization(PUBLISHED, twelve_bits(1 << 15), WIDE, "cascade")
    recursion = direct_recursion(stored.program, section_output(stored))
    assert recursion is not None
    assert outputs(recursion, (3, 0), 12) == outputs(rounded_sum((-7, 5), 8, TIES_UP), (3, 0), 12)
    (found,) = quiet(stored).sections
    assert (found.section, found.variable) == (1, "section1_output")
    assert found.cycles[1:] == (True, 1, 6)


def test_program_itself_goes_on_in_the_published_cycle() -> None:
    """Its words hold fractions of a count; from 3 of their units on, the same sequence, unit for unit."""
    stored = integer_realization(PUBLISHED, twelve_bits(1 << 15), WIDE, "cascade")
    model = IntegerRecursion(stored.program)
    model.state.section1_output_1 = 3
    seen = []
    for _ in range(12):
        model.update(0)
        seen.append(model.state.section1_output_1)
    assert seen == [3, 1, -1, -1, 0, 1, 1, 0, -1, -1, 0, 1]


@pytest.mark.parametrize(
    ("a", "amplitude"), [(Fraction(-1, 2), 1), (Fraction(-3, 4), 2), (Fraction(-7, 8), 4), (Fraction(-15, 16), 8)]
)
def test_first_order_cycles_end_at_the_published_deadband(a: Fraction, amplitude: int) -> None:
    """``0.5/(1 - |a|)`` (Jackson 1969), attained with a period of 1 where a is negative."""
    stored = integer_realization(pulse_of((1, 0), [(1, a)]), twelve_bits(1 << 16), WIDE, "cascade")
    (found,) = quiet(stored).sections
    assert found.cycles.bound == pytest.approx(float(Fraction(1, 2) / (1 + a)), rel=1e-3)
    assert found.cycles[1:] == (True, amplitude, 1)


def test_error_feedback_ends_every_first_order_cycle() -> None:
    stored = integer_realization(pulse_of((1, 0), [(1, Fraction(-3, 4))]), twelve_bits(1 << 14), WIDE, "error-feedback")
    recursion = direct_recursion(stored.program, section_output(stored))
    assert recursion is not None
    shift = section_output(stored).shift
    assert recursion.step((5, 0)) == error_feedback((-3 << shift - 2,), 1 << shift, TIES_UP).step((5, 0))
    (found,) = quiet(stored).sections
    assert found.cycles[1:] == (True, 0, 1)


def cycles_of_the_model(stored: IntegerRealization, names: tuple[str, str], reach: tuple[int, int]) -> tuple[int, int]:
    """Walk the program itself from every state of a box, without input, until it comes back to one it had."""
    model = IntegerRecursion(stored.program)
    largest = (0, 1)
    settled: set[tuple[int, int]] = set()
    for start in ((x, y) for x in range(-reach[0], reach[0] + 1) for y in range(-reach[1], reach[1] + 1)):
        vars(model.state).update(zip(names, start, strict=True))
        state = start
        seen: dict[tuple[int, int], int] = {}
        while state not in seen and state not in settled:
            seen[state] = len(seen)
            model.update(0)
            state = (getattr(model.state, names[0]), getattr(model.state, names[1]))
        if state in seen:
            cycle = [s for s, position in seen.items() if position >= seen[state]]
            largest = max(largest, (max(abs(s[0]) for s in cycle), len(cycle)))
        settled |= set(seen)
    return largest


@pytest.mark.parametrize("structure", ["cascade", "normal"])
@pytest.mark.parametrize(
    "a",
    [(Fraction(-7, 8), Fraction(5, 8)), (Fraction(-3, 2), Fraction(9, 10)), (Fraction(1, 3), Fraction(4, 5))],
    ids=str,
)
def test_search_finds_what_walking_the_program_does(structure: str, a: tuple[Fraction, Fraction]) -> None:
    stored = integer_realization(pulse_of((1, 0, 0), [(1, *a)]), twelve_bits(1 << 16), WIDE, structure)
    (found,) = quiet(stored).sections
    assert found.cycles.searched
    assert found.cycles.bound is not None
    names = ("section1_1", "section1_2") if structure == "normal" else ("section1_output_1", "section1_output_2")
    reach = floor(found.cycles.bound)
    if structure == "normal":
        ((_, other),) = normal_recursion(stored.program, 1).kept
        assert cycles_of_the_model(stored, names, (reach, other)) == (found.cycles.amplitude, found.cycles.period)
    else:
        assert cycles_of_the_model(stored, names, (reach, reach)) == (found.cycles.amplitude, found.cycles.period)


def test_delta_sections_have_a_bound_and_are_not_searched() -> None:
    stored = integer_realization(PUBLISHED, twelve_bits(1 << 15), WIDE, "delta")
    (found,) = quiet(stored).sections
    assert found.cycles[1:] == (False, None, None)
    assert found.cycles.bound is not None
    model = IntegerRecursion(stored.program)
    model.run([2047, -2048, 1500])
    model.run([0] * 200)
    assert abs(model.state.section1_1) <= found.cycles.bound


def test_sections_without_feedback_and_integrals_have_no_cycles() -> None:
    delays = integer_realization(
        pulse_of((Fraction(2, 3), Fraction(1, 3)), [(1, 0, 0)]), twelve_bits(), WIDE, "cascade"
    )
    pure = integer_realization(proportional_integral(1, 1, 100), twelve_bits(), WIDE, "cascade")
    assert quiet(delays).sections == quiet(pure).sections == ()


def test_more_than_a_million_states_are_not_searched() -> None:
    slow = integer_realization(corner(1, 10_000, 1), twelve_bits(), Widths(32, 64), "cascade")
    (found,) = quiet(slow).sections
    assert found.cycles == limit_cycles(direct_recursion(slow.program, section_output(slow)))  # type: ignore[arg-type]
    pair = integer_realization(corner(1, 2000), twelve_bits(), Widths(32, 64), "cascade")
    (found,) = quiet(pair).sections
    assert found.cycles == LimitCycles(found.cycles.bound, False, None, None)


@settings(max_examples=20)
@given(realizations(integral=False, output_reach=(1 << 31) - 1))
def test_without_input_the_output_stays_within_what_is_said(drawn: Drawn) -> None:
    """Once what came before has died out: exactly, by the recursion without rounding."""
    stored = drawn.stored
    port_in, port_out = stored.program.interface
    values = [port_in.high, port_in.low, port_in.high, *[0] * 400]
    found = IntegerRecursion(stored.program).run([value + port_in.offset for value in values])
    last = stored_answers(stored, values)[-1]
    assert abs(found[-1] - port_out.offset) <= stored.proof.output_error + abs(last)
    assert quiet(stored, 0).largest_output == floor(stored.proof.output_error)


# ---------------------------------------------------------------- deadband


def ignored_for_good(stored: IntegerRealization, value: int) -> bool:
    """By the state coming back, in another way than the search."""
    model = IntegerRecursion(stored.program)
    seen: set[tuple[int, ...]] = set()
    while (state := tuple(vars(model.state).values())) not in seen:
        seen.add(state)
        if model.update(value) != 0:
            return False
    return True


@pytest.mark.parametrize("structure", ["cascade", "error-feedback", "delta"])
@pytest.mark.parametrize("gain", [Fraction(1, 100), Fraction(-1, 7)])
def test_smallest_answered_input_is_exact(structure: str, gain: Fraction) -> None:
    stored = integer_realization(
        pulse_of((gain * Fraction(1, 8), 0), [(1, Fraction(-7, 8))]), twelve_bits(), WIDE, structure
    )
    found = quiet(stored, 1 << 18)
    for sign, answered in ((1, found.positive), (-1, found.negative)):
        assert answered.exact
        assert answered.counts is not None
        assert not ignored_for_good(stored, sign * answered.counts)
        assert all(ignored_for_good(stored, sign * value) for value in range(1, answered.counts))


def test_ties_go_up_so_that_both_signs_differ() -> None:
    """Half a count becomes 1, minus half a count 0."""
    stored = integer_realization(pulse_of((Fraction(1, 4),), [(1,)]), twelve_bits(), WIDE, "direct")
    found = quiet(stored)
    assert (found.positive, found.negative) == (Answered(2, True), Answered(3, True))


def test_too_long_a_search_ends_with_a_proven_bound() -> None:
    """Gain 1/100 at rest, output error e: inputs above 100 e are answered for certain."""
    stored = integer_realization(
        pulse_of((Fraction(1, 800), 0), [(1, Fraction(-7, 8))]), twelve_bits(), WIDE, "cascade"
    )
    bounded = quiet(stored, 10)
    exact = quiet(stored)
    at_rest = sum(stored.sections[0].b) / (1 + sum(stored.sections[0].a))
    expected = floor(stored.proof.output_error / at_rest) + 1
    assert bounded.positive == bounded.negative == Answered(expected, False)
    assert exact.positive.counts is not None
    assert exact.positive.counts <= expected


@pytest.mark.parametrize("widths", [Widths(16, 32), WIDE, Widths(32, 64)], ids=str)
def test_with_an_integral_a_single_count_is_answered(widths: Widths) -> None:
    stored = integer_realization(proportional_integral(1, 40, 10_000), twelve_bits(), widths, "cascade")
    found = quiet(stored)
    assert stored.program.integral is not None
    assert stored.program.integral.stored[0] != 0
    assert found.positive == found.negative == Answered(1, True)


def test_a_limit_at_zero_hides_the_answers_of_one_side() -> None:
    one_sided = Interface(port(-2048, 2047), port(0, 1000))
    plain = integer_realization(pulse_of((2,), [(1,)]), one_sided, WIDE, "direct")
    assert quiet(plain)[:2] == (Answered(1, True), Answered(None, True))
    integrating = integer_realization(proportional_integral(1, 1, 100), one_sided, WIDE, "cascade")
    assert quiet(integrating)[:2] == (Answered(1, True), Answered(None, True))


def test_an_input_without_a_side_is_not_answered_there() -> None:
    stored = integer_realization(pulse_of((2,), [(1,)]), Interface(port(0, 2047), port(-9, 9)), WIDE, "direct")
    assert quiet(stored)[:2] == (Answered(1, True), Answered(None, True))


def test_nothing_within_the_range_may_be_enough() -> None:
    stored = integer_realization(pulse_of((Fraction(1, 10_000),), [(1,)]), twelve_bits(), WIDE, "direct")
    assert quiet(stored)[:2] == (Answered(None, True), Answered(None, True))


def test_a_limit_hides_where_the_output_goes_in_the_end_and_not_what_it_does_before() -> None:
    # P = 3 and I = -1/50 with an output from 0 on: an input of +1 answers 3, 2, 2, 1, 1, 0 and stays there.
    ends = Interface(port(-2048, 2047), port(0, 3000))
    stored = integer_realization(pulse_of([3], [(1,)], [Fraction(-1, 50)]), ends, Widths(16, 64), "cascade")
    assert IntegerRecursion(stored.program).update(1) == 3
    assert quiet(stored).positive == Answered(None, False)
    same_sign = integer_realization(pulse_of([3], [(1,)], [Fraction(1, 50)]), ends, Widths(16, 64), "cascade")
    assert quiet(same_sign).negative == Answered(None, True)


def test_what_remains_at_the_output_is_not_what_remains_in_a_state() -> None:
    # Coupled form, its states small and its output 60 times as large: the model cycles at 120 counts.
    ends = Interface(port(-2047, 2047), port(-(10**6), 10**6))
    pulse = pulse_of([10, Fraction(-70, 11)], [(1, Fraction(873, 481), Fraction(172, 187))])
    stored = integer_realization(pulse, ends, Widths(16, 32), "normal")
    found = quiet(stored)
    assert found.searched_output is None
    assert not found.dies_out
    assert found.largest_output >= 120


def test_half_a_count_that_remains_is_a_count_at_the_output() -> None:
    ends = Interface(port(-30000, 30000), port(-(10**6), 10**6))
    pulse = pulse_of([Fraction(1, 10)], [(1, Fraction(19, 42), Fraction(246, 419))])
    stored = integer_realization(pulse, ends, Widths(16, 32), "parallel")
    (section,) = quiet(stored).sections
    assert (section.cycles.amplitude, section.fraction_bits) == (1, 1)
    assert quiet(stored).searched_output == 1
