"""The model of one sample: against a plain evaluation in rationals, and in what it is built to keep."""

from __future__ import annotations

import math
from fractions import Fraction
from math import comb
from random import Random

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.arithmetic.formats import FLOAT32, FLOAT64, FORMATS, FloatFormat
from realize.arithmetic.realization import Realization
from realize.arithmetic.recursion import Recursion
from realize.firmware import Emission
from tests.firmware.designs import PERIOD_S, UNIT_RANGE, grid, random_emission, rounded, section

NAN, INF = float("nan"), float("inf")
SEEDS = st.integers(0, 1 << 32)


class Plain:
    """The recursion written out in rationals, each operation followed by one rounding; nothing left out."""

    def __init__(self, emission: Emission) -> None:
        self.emission = emission
        self.realization = emission.realization
        self.states = [[Fraction(0)] * 2 for _ in self.realization.sections]
        self.integrals = [Fraction(0) for _ in self.realization.integral]
        self.rests = [Fraction(0) for _ in self.realization.integral]

    def r(self, value: Fraction) -> Fraction:
        return Fraction(self.realization.format.round(value))

    def update(self, x: float) -> float:
        u, unclamped = Fraction(x), Fraction(0)
        first = u
        for states, (b, a) in zip(self.states, self.realization.sections, strict=True):
            b0, b1, b2 = (*map(Fraction, b), Fraction(0), Fraction(0))[:3]
            a1, a2 = (*map(Fraction, a), Fraction(0), Fraction(0))[:2]
            y = self.r(self.r(b0 * u) + states[0])
            states[0] = self.r(self.r(states[1] + self.r(b1 * u)) - self.r(a1 * y))
            states[1] = self.r(self.r(b2 * u) - self.r(a2 * y))
            u = unclamped = y
        if self.integrals:
            unclamped = self.r(unclamped + self.integrals[0])
        command = self.limited(unclamped)
        self.integrate(first, unclamped, command)
        return float(command)

    def limited(self, value: Fraction) -> Fraction:
        limits = self.emission.output_range
        if limits is None:
            return value
        low, high = (self.inside(limit, limits) for limit in limits)
        return min(max(value, low), high)

    def inside(self, limit: Fraction, limits: tuple[Fraction, Fraction]) -> Fraction:
        """The value of the format nearest to a limit from inside, found by stepping through the floats."""
        real = np.float32 if self.realization.format is FLOAT32 else np.float64
        near = real(self.realization.format.round(limit))
        while not limits[0] <= Fraction(float(near)) <= limits[1]:
            near = np.nextafter(near, real(float(sum(limits) / 2)))
        return Fraction(float(near))

    def integrate(self, x: Fraction, unclamped: Fraction, command: Fraction) -> None:
        excess = unclamped - command
        for i, gain in enumerate(self.realization.integral):
            step = self.r(Fraction(gain) * x)
            if i + 1 < len(self.integrals):
                step = self.r(step + self.integrals[i + 1])
            if i == 0 and self.emission.anti_windup == "back-calculation" and excess:
                assert self.emission.tracking_time_s is not None
                rate = self.r(self.realization.period_s / self.emission.tracking_time_s)
                step = self.r(step + self.r(rate * self.r(command - unclamped)))
            if self.emission.anti_windup == "hold-integral" and excess * step > 0:
                continue
            self.add(i, step)

    def add(self, i: int, step: Fraction) -> None:
        if self.realization.format is FLOAT64:
            self.integrals[i] = self.r(self.integrals[i] + step)
            return
        addend = self.r(step + self.rests[i])
        total = self.r(self.integrals[i] + addend)
        self.rests[i] = self.r(addend - self.r(total - self.integrals[i]))
        self.integrals[i] = total


def inputs_for(target: FloatFormat, seed: int, count: int) -> list[float]:
    """Ordinary values, zeros and ties of the format."""
    draw = Random(seed)
    return [target.round(Fraction(draw.choice((0.0, 1.0, -1.0, draw.gauss(0, 3))))) for _ in range(count)]


@given(SEEDS)
def test_every_operation_rounds_once_and_in_the_stated_order(seed: int) -> None:
    emission = random_emission("any", seed)
    inputs = inputs_for(emission.realization.format, seed, 40)
    plain = Plain(emission)
    assert emission.recursion().run(inputs) == [plain.update(x) for x in inputs]


def exact_impulse_response(realization: Realization, count: int) -> list[Fraction]:
    """Of the stored coefficients: sections as direct recursions, integrals by ``R C(k-1, i-1)``."""
    signal = [Fraction(int(k == 0)) for k in range(count)]
    for b, a in realization.sections:
        answer: list[Fraction] = []
        for k in range(count):
            forward = sum(Fraction(c) * signal[k - i] for i, c in enumerate(b) if i <= k)
            back = sum(Fraction(c) * answer[k - i] for i, c in enumerate(a, 1) if i <= k)
            answer.append(Fraction(forward - back))
        signal = answer
    rest = signal if realization.sections else [Fraction(0)] * count
    for i, gain in enumerate(realization.integral, 1):
        rest = [value + (Fraction(gain) * comb(k - 1, i - 1) if k else 0) for k, value in enumerate(rest)]
    return rest


@given(SEEDS)
def test_the_model_realizes_the_sum_of_rest_and_integrals(seed: int) -> None:
    realization = random_emission("any", seed).realization
    wide = Realization(FLOAT64, "cascade", realization.integral, realization.sections, realization.period_s)
    exact = exact_impulse_response(wide, 24)
    said = Recursion(wide, anti_windup="none").run([1.0] + [0.0] * 23)
    # 24 samples of at most 20 roundings each, on intermediate values at most 1e5 times the largest answer
    scale = max(Fraction(1), *(abs(g) for g in exact))
    assert all(
        abs(Fraction(y) - g) <= scale * 480 * Fraction(1, 2**53) * 10**5 for y, g in zip(said, exact, strict=True)
    )


@given(SEEDS)
def test_update_is_output_and_advance_with_the_command_applied(seed: int) -> None:
    emission = random_emission("any", seed)
    inputs = inputs_for(emission.realization.format, seed, 30)
    joint, apart = emission.recursion(), emission.recursion()
    for x in inputs:
        command = apart.output(x)
        apart.advance(x, command)
        assert joint.update(x) == command


@given(SEEDS, st.lists(st.floats(allow_nan=True), min_size=1, max_size=20))
def test_the_command_never_leaves_the_declared_range(seed: int, inputs: list[float]) -> None:
    emission = random_emission("any", seed)._replace(output_range=(Fraction(-1, 3), Fraction(7, 10)))
    values = [float(np.float32(x)) if abs(x) < 3e38 or x != x else x for x in inputs]
    answers = emission.recursion().run(values)
    assert all(Fraction(-1, 3) <= Fraction(y) <= Fraction(7, 10) for y in answers)


def test_the_history_does_not_see_the_clamp() -> None:
    rest = Realization(FLOAT64, "direct", (), (section(FLOAT64, ("1", "-0.5"), ("-0.9",)),), PERIOD_S)
    free, limited = Recursion(rest), Recursion(rest, UNIT_RANGE)
    inputs = [9.0, 9.0, -4.0, 0.0, 0.0, 0.1] * 5
    assert limited.run(inputs) == [min(max(y, -1.0), 1.0) for y in free.run(inputs)]


# ---------------------------------------------------------------- the integral


def integrator(target: FloatFormat, gain: str, proportional: str = "1") -> Realization:
    rest = (section(target, (proportional,)),)
    return Realization(target, "direct", rounded(target, Fraction(gain)), rest, Fraction(1, 10000))


def test_a_pi_with_40_s_integral_time_integrates_one_percent_at_10_khz() -> None:
    realization = integrator(FLOAT32, "1/400000")
    error = FLOAT32.round(Fraction(1, 100))
    increment = np.float32(realization.integral[0]) * np.float32(error)
    assert np.float32(1) + increment == np.float32(1)  # a plain sum would stand still
    model = Recursion(realization)
    assert model.preset(0.0, 1.0)
    model.run([error] * 40000)
    gained = Fraction(model.update(0.0)) - 1
    exact = 40000 * Fraction(realization.integral[0]) * Fraction(error)
    # the product rounds once (2^-24), what is shown is half a unit in the last place of 1 away at most
    assert abs(gained - exact) <= exact * Fraction(1, 2**23) + Fraction(1, 2**24)


@given(
    st.lists(st.floats(width=32, allow_nan=False, min_value=-(2.0**100), max_value=2.0**100), min_size=1, max_size=40)
)
@example([2.0**99, 2.0**-99, -(2.0**99), 2.0**-99])
@example([3 * 2.0**-99, 1.0, 2.0**-26, -1.0])
@example([1.0 + 2.0**-23, -1.5, 2.0**-24 + 2.0**-47])
@example([1.0] + [2.0**-25] * 30)
def test_the_compensated_sum_stays_within_the_roundings_of_its_increments(increments: list[float]) -> None:
    model = Recursion(Realization(FLOAT32, "direct", (1.0,), (), PERIOD_S))
    u, exact, allowed, largest = Fraction(1, 2**24), Fraction(0), Fraction(0), Fraction(0)
    for x in increments:
        model.update(x)
        exact += Fraction(x)
        largest = max(largest, abs(exact))
        # addend = x + rest rounds once, and once more where it exceeds the sum; the rest is at most u times the sum
        allowed += 2 * u * (abs(Fraction(x)) + 2 * u * largest)
    shown = Fraction(model.output(0.0))
    assert abs(shown - exact) <= allowed * (1 + 4 * u) + u * abs(exact) * (1 + u)


def test_float64_needs_no_second_word() -> None:
    assert "integral1_rest" not in Recursion(integrator(FLOAT64, "1/400000")).sample.fields
    assert "integral1_rest" in Recursion(integrator(FLOAT32, "1/400000")).sample.fields


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_a_chain_adds_the_state_above_as_it_was_before_the_sample(target: FloatFormat) -> None:
    model = Recursion(Realization(target, "direct", (0.5, 0.25, 2.0), (), PERIOD_S))
    assert model.run([1.0] + [0.0] * 5) == [0.0, 0.5, 0.75, 3.0, 7.25, 13.5]


# ---------------------------------------------------------------- windup


def pi_samples_at_the_limit(anti_windup: str, seconds: int) -> int:
    """Samples for which a PI stays at its upper limit after the error reverses."""
    realization = integrator(FLOAT32, "1/1000")
    model = Recursion(realization, UNIT_RANGE, anti_windup, Fraction(1, 100))
    model.run([0.5] * 1000 * seconds)
    answers = model.run([-0.5] * 20000)
    return next(k for k, y in enumerate(answers) if y < 1.0)


def test_hold_integral_leaves_the_limit_at_once_however_long_it_was_there() -> None:
    assert [pi_samples_at_the_limit("hold-integral", n) for n in (1, 10, 20)] == [0, 0, 0]


def test_back_calculation_leaves_the_limit_at_once_however_long_it_was_there() -> None:
    assert [pi_samples_at_the_limit("back-calculation", n) for n in (2, 10, 20)] == [0, 0, 0]


def test_without_anti_windup_the_limit_is_kept_for_as_long_as_it_took() -> None:
    # the integral gains 0.5e-3 a sample, then loses as much; the limit is left when I - 0.5 < 1
    after = pi_samples_at_the_limit("none", 10)
    assert abs(after - (10000 - 1.5 / 0.5e-3)) <= 2


def test_an_increment_that_leads_back_is_never_held() -> None:
    model = Recursion(integrator(FLOAT64, "-1/8"), UNIT_RANGE)
    assert model.run([4.0, 0.0, -2.0, 0.0]) == [1.0, -0.5, -1.0, -0.25]


def test_an_actuator_that_gives_less_than_asked_holds_the_integral() -> None:
    model = Recursion(integrator(FLOAT64, "1/4"), UNIT_RANGE)
    asked = model.output(0.5)
    model.advance(0.5, 0.25)
    blocked = model.output(0.0)
    model.advance(0.5, 0.0)
    assert (asked, blocked, model.output(0.0)) == (0.5, 0.0, 0.125)


def test_back_calculation_pulls_the_integral_towards_what_was_applied() -> None:
    model = Recursion(integrator(FLOAT64, "0", "1"), None, "back-calculation", Fraction(1, 2500))
    model.output(1.0)
    model.advance(1.0, 0.5)
    assert model.output(0.0) == -0.5 / 4


# ---------------------------------------------------------------- what is not finite


def guarded() -> Recursion:
    return Recursion(integrator(FLOAT32, "1/4"), UNIT_RANGE)


@pytest.mark.parametrize("bad", [NAN, INF, -INF])
def test_an_input_that_is_not_finite_counts_as_the_one_before(bad: float) -> None:
    one, other = guarded(), guarded()
    assert one.run([bad, 0.25, bad, bad, 0.5, bad]) == other.run([0.0, 0.25, 0.25, 0.25, 0.5, 0.5])


@pytest.mark.parametrize("bad", [NAN, INF, -INF])
def test_an_applied_value_that_is_not_finite_counts_as_the_command(bad: float) -> None:
    one, other = guarded(), guarded()
    for x in (0.25, 4.0, 4.0, -1.0):
        command = one.output(x)
        assert other.output(x) == command
        one.advance(x, bad)
        other.advance(x, command)


def test_asking_for_the_output_twice_changes_nothing() -> None:
    one, other = guarded(), guarded()
    one.output(0.75)
    one.output(NAN)
    assert one.run([0.25, 0.5]) == other.run([0.25, 0.5])


def test_a_command_that_is_not_a_number_is_the_low_limit() -> None:
    rest = (section(FLOAT32, ("1e38", "1e38"), ("-0.5",)),)
    model = Recursion(Realization(FLOAT32, "direct", (), rest, PERIOD_S), UNIT_RANGE)
    answers = model.run([1e30, -1e30, 1e30])
    assert math.isnan(model._state.section1_1)
    assert answers[-1] == -1.0


def test_clear_brings_back_the_first_answer() -> None:
    for emission in grid():
        model = emission.recursion()
        first = model.run([1.0, 0.5, -1.0])
        model.run([NAN, INF] if emission.guard_nonfinite else [1.0])
        model.clear()
        assert model.run([1.0, 0.5, -1.0]) == first
