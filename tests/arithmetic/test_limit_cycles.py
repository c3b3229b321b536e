"""Limit cycles and deadbands: published sequences, worked searches, and a second search of another kind."""

from __future__ import annotations

from fractions import Fraction
from math import floor

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.arithmetic import limit_cycles as module
from realize.arithmetic.limit_cycles import (
    TIES_UP,
    LimitCycles,
    Rounding,
    Unforced,
    error_feedback,
    limit_cycles,
    outputs,
    rounded_sum,
    smallest_answered,
)
from realize.errors import RealizeError, Refused
from tests.arithmetic.roundings import DOWN, TIES_AWAY, first_order_bound, rounded_products

ROUNDINGS = {"ties away": TIES_AWAY, "ties up": TIES_UP, "down": DOWN}
KINDS = {"sum": rounded_sum, "products": rounded_products, "error feedback": error_feedback}


@pytest.mark.parametrize(
    ("a", "unit", "start", "expected"),
    [
        ((-1,), 2, 7, [7, 4, 2, 1, 1, 1]),
        ((1,), 2, 7, [7, -4, 2, -1, 1, -1]),
        ((-1,), 2, 15, [15, 8, 4, 2, 1, 1]),
        ((-3,), 4, 15, [15, 11, 8, 6, 5, 4, 3, 2, 2]),
    ],
    ids=["O-S 1/2", "O-S -1/2", "P-M 1/2", "P-M 3/4"],
)
def test_first_order_sequences_are_the_published_ones(
    a: tuple[int], unit: int, start: int, expected: list[int]
) -> None:
    """Oppenheim & Schafer (7/8, three fraction bits) and Proakis & Manolakis (15/16, four bits), ties away.

    From memory, recomputed by hand.
    """
    assert outputs(rounded_sum(a, unit, TIES_AWAY), (start,), len(expected)) == expected


def test_negative_coefficient_alternates_with_period_two() -> None:
    """Proakis & Manolakis: set-up and behaviour read in their table's text."""
    positive, negative = (outputs(rounded_sum((a,), 4, TIES_AWAY), (15,), 12) for a in (-3, 3))
    assert negative == [y * (-1) ** k for k, y in enumerate(positive)]
    assert limit_cycles(rounded_sum((3,), 4, TIES_AWAY))[2:] == (2, 2)


def test_second_order_sequence_is_the_published_one() -> None:
    """Poles .4375 +- j.6585, three fraction bits: amplitude 1/8, period 6 (read); 3/8 impulse, ties up (recomputed)."""
    recursion = rounded_sum((-7, 5), 8, TIES_UP)
    assert outputs(recursion, (3, 0), 12) == [3, 3, 1, -1, -1, 0, 1, 1, 0, -1, -1, 0]
    assert limit_cycles(recursion)[2:] == (1, 6)


def test_sum_that_wraps_goes_on_at_full_scale() -> None:
    """Oppenheim & Schafer, from memory: 3/4, -3/4, four bits, products rounded: 6, -6 makes 10, which wraps to -6."""
    recursion = rounded_products((-3, 3), 4, TIES_AWAY)
    state, seen = (6, -6), []
    for _ in range(4):
        y = recursion.step(state)[0]
        state = ((y + 8) % 16 - 8, state[0])
        seen.append((y, state[0]))
    assert seen == [(10, -6), (-10, 6), (10, -6), (-10, 6)]


@pytest.mark.parametrize(
    ("recursion", "bound", "amplitude"),
    [
        (rounded_sum((-15, 9), 10, TIES_AWAY), 10.37, 8),
        (rounded_products((-38, 19), 20, TIES_AWAY), 113.5, 15),
    ],
    ids=["-1.5, 0.9", "-1.9, 0.95"],
)
def test_searches_find_more_than_the_effective_value(recursion: Unforced, bound: float, amplitude: int) -> None:
    """Worked by exhaustive search: 8 and 15, where Jackson's estimate (1969) says 5 and 10 at most."""
    found = limit_cycles(recursion)
    assert found.bound is not None
    assert float(found.bound) == pytest.approx(bound, rel=5e-4)
    assert found.searched
    assert found.amplitude == amplitude


@given(st.integers(-63, 63), st.sampled_from((TIES_AWAY, TIES_UP)))
def test_first_order_bound_is_attained(a: int, rounding: Rounding) -> None:
    """``|a| Y >= Y - 1/2`` keeps Y: ties away, the largest such Y is ``floor(0.5/(1 - |a|))``."""
    bound = first_order_bound(Fraction(a, 64), rounding)
    assert bound is not None
    found = limit_cycles(rounded_sum((a,), 64, rounding))
    assert found.searched
    assert found.amplitude is not None
    assert found.amplitude <= bound
    if rounding is TIES_AWAY:
        assert found.amplitude == floor(bound)


def test_first_order_without_stability_has_no_bound() -> None:
    assert first_order_bound(Fraction(-1), TIES_AWAY) is None


def largest_cycle_by_walking(recursion: Unforced, reach: int, discarded: range) -> tuple[int, int]:
    """Walk from every state of a box, in Python, until each path meets itself or an older one."""
    largest = (0, 1)
    done: set[tuple[int, ...]] = set()
    starts = [(y, w, r) for y in range(-reach, reach + 1) for w in range(-reach, reach + 1) for r in discarded]
    for start in starts:
        state = start[: recursion.order + len(recursion.kept)]
        path: dict[tuple[int, ...], int] = {}
        while state not in done and state not in path:
            path[state] = len(path)
            state = recursion.step(state)
        if state in path:
            cycle = list(path)[path[state] :]
            largest = max(largest, (max(abs(s[0]) for s in cycle), len(cycle)))
        done.update(path)
    return largest


@given(
    st.integers(-7, 7),
    st.fractions(-1, 1, max_denominator=8).filter(lambda x: abs(x) < 1),
    st.sampled_from(sorted(ROUNDINGS)),
    st.sampled_from(sorted(KINDS)),
)
def test_search_agrees_with_walking_a_wider_box(a2: int, place: Fraction, rounding: str, kind: str) -> None:
    """Beyond the bound by 3 steps all round: nothing is there, which the bound claims."""
    a1 = int(place * (8 + a2))
    recursion = KINDS[kind]((a1, a2), 8, ROUNDINGS[rounding])
    found = limit_cycles(recursion)
    assert found.bound is not None
    discarded = range(-8, 9) if kind == "error feedback" else range(1)
    assert (found.amplitude, found.period) == largest_cycle_by_walking(recursion, floor(found.bound) + 3, discarded)


def test_error_feedback_has_no_error_at_rest() -> None:
    """A slow pole: the plain recursion sticks at 32, with its fraction kept it comes down to 1 at most."""
    plain, kept = (limit_cycles(kind((-63,), 64, TIES_AWAY)) for kind in (rounded_sum, error_feedback))
    assert plain == LimitCycles(Fraction(32), True, 32, 1) or plain.amplitude == 32
    assert kept.searched
    assert kept.amplitude is not None
    assert kept.amplitude <= 1


@pytest.mark.parametrize(
    ("recursion", "has_bound"),
    [
        (rounded_sum((-32767, 16384), 16384, TIES_AWAY), False),
        (rounded_sum((-(2 << 14) + 3, (1 << 14) - 2), 1 << 14, TIES_AWAY), True),
        (rounded_sum((-(1 << 61) - 1,), 1 << 62, TIES_AWAY), True),
    ],
    ids=["not stable", "too many states", "sums too wide"],
)
def test_what_is_not_feasible_is_not_searched(recursion: Unforced, has_bound: bool) -> None:
    found = limit_cycles(recursion)
    assert (found.bound is not None) == has_bound
    assert found[1:] == (False, None, None)


def integrator(numerator: int, unit: int, rounding: Rounding) -> object:
    """``I += round(numerator/unit * x)``, the output being I."""

    def step(state: int, value: int) -> tuple[int, int]:
        following = state + rounding.apply(numerator * value, unit)
        return following, following

    return step


@pytest.mark.parametrize(
    ("rounding", "up", "down"), [(TIES_AWAY, 17, -17), (TIES_UP, 17, -17), (DOWN, 34, -1)], ids=list(ROUNDINGS)
)
def test_integrator_ignores_what_rounds_to_nothing(rounding: Rounding, up: int, down: int) -> None:
    """Gain 3/100: half a step needs 16.67, a whole one 33.3; rounded down, every negative error makes it drift."""
    step = integrator(3, 100, rounding)
    assert callable(step)
    assert smallest_answered(step, 0, range(1, 1 << 15)) == up
    assert smallest_answered(step, 0, range(-1, -1 << 15, -1)) == down


@pytest.mark.parametrize(("rounding", "up", "down"), [(TIES_AWAY, 2, -2), (TIES_UP, 2, -3)], ids=["away", "up"])
def test_tie_decides_the_deadband(rounding: Rounding, up: int, down: int) -> None:
    """Gain 1/4: 2 is exactly half a step."""
    step = integrator(1, 4, rounding)
    assert callable(step)
    assert smallest_answered(step, 0, range(1, 100)) == up
    assert smallest_answered(step, 0, range(-1, -100, -1)) == down


def test_kept_fraction_answers_one_count() -> None:
    """3/100 each sample: the 34th makes a step."""
    answered: list[int] = []

    def step(state: tuple[int, int], value: int) -> tuple[tuple[int, int], int]:
        whole, fraction = divmod(state[1] + 3 * value, 100)
        answered.append(whole)
        return (state[0] + whole, fraction), state[0] + whole

    assert smallest_answered(step, (0, 0), range(1, 10)) == 1
    assert answered.index(1) == 34  # the first call, without input, found the rest


def test_single_precision_integral_ignores_a_small_error() -> None:
    """IEEE 754: beside 1, half a unit in the last place upward is 2**-24; 1 % at 40 s and 10 kHz adds 2.5e-8 a sample.

    Two of them are below it, three above.
    """

    def step(state: float, value: int) -> tuple[float, float]:
        following = float(np.float32(state) + np.float32(2.5e-8) * np.float32(value))
        return following, following

    assert smallest_answered(step, 1.0, range(1, 100)) == 3


def test_recursion_that_answers_nothing_has_no_smallest_input() -> None:
    assert smallest_answered(lambda state, value: (value // 4, 0), 0, range(1, 50)) is None


def test_undecided_input_is_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(module, "MOST_SAMPLES", 100)
    with pytest.raises(Refused) as raised:
        smallest_answered(lambda state, value: (state + value, state + value > 1000), 0, [3])
    assert str(raised.value) == (
        "deadband: a constant input of 3 is neither answered nor ignored for good after 100 samples\n"
        "  allowed: recursions that are decided sooner\n  try: compute it from the gain of the integral"
    )


def test_recursion_that_is_not_at_rest_is_refused() -> None:
    with pytest.raises(RealizeError) as raised:
        smallest_answered(lambda state, value: (state + 1, state), 0, [1])
    assert str(raised.value) == (
        "deadband: the state moves without input\n  allowed: a state at rest\n  try: start from the cleared state"
    )


@given(st.integers(-1000, 1000), st.integers(1, 64))
def test_roundings_are_what_their_names_say(value: int, unit: int) -> None:
    """Against the definition, in rationals; for numbers and for arrays alike."""
    exact = Fraction(value, unit)
    away = floor(abs(exact) + Fraction(1, 2)) * (1 if value > 0 else -1)
    expected = {"ties away": away, "ties up": floor(exact + Fraction(1, 2)), "down": floor(exact)}
    for name, rounding in ROUNDINGS.items():
        assert rounding.apply(value, unit) == expected[name]
        assert rounding.apply(np.array([value]), unit).tolist() == [expected[name]]
        assert abs(expected[name] - exact - rounding.centre) <= rounding.half_range
        assert rounding.largest_error == (1 if name == "down" else Fraction(1, 2))
