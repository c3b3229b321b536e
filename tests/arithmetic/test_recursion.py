"""The model of one sample: against a plain evaluation in rationals, and in what it is built to keep."""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from math import comb
from random import Random

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.arithmetic.formats import FLOAT32, FLOAT64, FORMATS, FloatFormat
from realize.arithmetic.realization import DeltaSection, Realization, realization, stored_pulse
from realize.arithmetic.recursion import Recursion
from realize.firmware import Emission
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.firmware.designs import (
    PERIOD_S,
    UNIT_RANGE,
    delta_section,
    grid,
    in_delta,
    random_emission,
    rounded,
    section,
)

PI = Fraction("3.14159265358979323846264338327950288")
NAN, INF = float("nan"), float("inf")
SEEDS = st.integers(0, 1 << 32)


def low_pass(order: int, corner_hz: int, period_s: Fraction) -> PulseTransferFunction:
    """Bilinear, of gain 1 at rest; of order 2 with a damping ratio of 0.7071."""
    w = 2 * PI * corner_hz
    denominator = {1: (1, w), 2: (1, 2 * Fraction(7071, 10000) * w, w * w)}[order]
    return discretize(TransferFunction.from_polynomials([w**order], denominator), period_s, "bilinear").pulse


class Plain:
    """The recursion written out in rationals, each operation followed by one rounding; nothing left out."""

    def __init__(self, emission: Emission) -> None:
        self.emission = emission
        self.realization = emission.realization
        self.states = [[Fraction(0)] * 2 for _ in self.realization.sections]
        self.lost = [[Fraction(0)] * 2 for _ in self.realization.sections]
        self.integrals = [Fraction(0) for _ in self.realization.integral]
        self.rests = [Fraction(0) for _ in self.realization.integral]

    def r(self, value: Fraction) -> Fraction:
        return Fraction(self.realization.format.round(value))

    def update(self, x: float) -> float:
        u, unclamped = Fraction(x), Fraction(0)
        first = u
        for states, lost, stored in zip(self.states, self.lost, self.realization.sections, strict=True):
            b, a = stored
            b0, b1, b2 = (*map(Fraction, b), Fraction(0), Fraction(0))[:3]
            a1, a2 = (*map(Fraction, a), Fraction(0), Fraction(0))[:2]
            y = self.r(self.r(b0 * u) + states[0])
            following = [
                self.r(self.r(states[1] + self.r(b1 * u)) - self.r(a1 * y)),
                self.r(self.r(b2 * u) - self.r(a2 * y)),
            ]
            if isinstance(stored, DeltaSection):
                for i, step in enumerate(following):
                    self.add(states, lost, i, step)
            else:
                states[:] = following
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
            self.add(self.integrals, self.rests, i, step)

    def add(self, sums: list[Fraction], rests: list[Fraction], i: int, step: Fraction) -> None:
        if self.realization.format is FLOAT64:
            sums[i] = self.r(sums[i] + step)
            return
        addend = self.r(step + rests[i])
        total = self.r(sums[i] + addend)
        rests[i] = self.r(addend - self.r(total - sums[i]))
        sums[i] = total


def inputs_for(target: FloatFormat, seed: int, count: int) -> list[float]:
    """Ordinary values, zeros and ties of the format."""
    draw = Random(seed)
    return [target.round(Fraction(draw.choice((0.0, 1.0, -1.0, draw.gauss(0, 3))))) for _ in range(count)]


@pytest.mark.parametrize("operator", ["z", "delta"])
@given(seed=SEEDS)
def test_every_operation_rounds_once_and_in_the_stated_order(operator: str, seed: int) -> None:
    emission = random_emission("any", seed)
    emission = in_delta(emission) if operator == "delta" else emission
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


def exact_answer(top: Sequence[Fraction], bottom: Sequence[Fraction], inputs: Sequence[float]) -> list[Fraction]:
    """Of ``top(z)/bottom(z)``, descending and equally long, bottom monic, as a direct recursion."""
    answer: list[Fraction] = []
    for k in range(len(inputs)):
        forward = sum((c * Fraction(inputs[k - i]) for i, c in enumerate(top) if i <= k), Fraction(0))
        answer.append(forward - sum((c * answer[k - i] for i, c in enumerate(bottom) if 0 < i <= k), Fraction(0)))
    return answer


@st.composite
def delta_filters(draw: st.DrawFn) -> Realization:
    """One section in delta with poles from the middle of the unit disc to where they crowd z = 1."""
    target = draw(st.sampled_from(list(FORMATS.values())))
    w, damping = 10.0 ** draw(st.floats(-5, -0.3)), draw(st.floats(0.1, 2))
    order = draw(st.sampled_from((1, 2)))
    gains = draw(st.lists(st.floats(-4, 4), min_size=3, max_size=3))
    a = ((Fraction(w),), (Fraction(2 * damping * w), Fraction(w * w)))[order - 1]
    b = [Fraction(g) * scale for g, scale in zip(gains, (1, *a), strict=False)]
    return Realization(target, "delta", (), (delta_section(target, tuple(b), a),), PERIOD_S)


@given(delta_filters(), SEEDS)
def test_a_section_in_delta_follows_the_exact_stored_pulse_transfer_function(stored: Realization, seed: int) -> None:
    inputs = inputs_for(stored.format, seed, 50)
    pulse = stored_pulse(stored)
    exact = exact_answer(pulse.numerator, pulse.denominator, inputs)
    model, shown = Recursion(stored), []
    states = []
    for x in inputs:
        shown.append(model.update(x))
        states.append([float(getattr(model._state, f"section1_{i}")) for i in range(1, len(stored.sections[0].a) + 1)])
    bounds = rounding_bounds(stored, inputs, shown, states)
    assert all(abs(Fraction(y) - e) <= Fraction(bound) for y, e, bound in zip(shown, exact, bounds, strict=True))


def rounding_bounds(
    stored: Realization, inputs: Sequence[float], answers: Sequence[float], states: Sequence[list[float]]
) -> list[float]:
    """How far the answers may be from the exact ones, from the magnitudes that were rounded.

    With errors e of the shown states: ``e_i' = e_i + e_{i+1} - a_i (e_1 + o) + n_i`` and ``e_1 + o`` at the output.
    The output adds a product and a sum: ``|o| <= u (2 |b_0 x| + |y|)``. An increment rounds two products and two sums
    of three terms, at most three times each: ``3 u`` of their magnitudes. What is shown of a compensated state differs
    from what is meant by ``u`` of it before and after, and its own roundings are those of an increment again; a plain
    sum rounds once. ``|n_i| <= 2 u (3 t_i + |s_i| + |s_i'|)`` covers both. All of it doubled for second-order terms.
    """
    b, a = (np.array(p) for p in stored.sections[0])
    n, u = len(a), 2.0**-stored.format.precision
    tiny = 2.0 ** (stored.format.least_exponent + 4)
    matrix = np.eye(n) + np.eye(n, k=1)
    matrix[:, 0] -= a
    reach = [np.eye(n)[0]]
    for _ in inputs:
        reach.append(reach[-1] @ matrix)
    from_state = np.abs(reach[:-1])
    from_output = np.abs([row @ a for row in reach[:-1]])
    noise, before = [], [0.0] * n
    for x, y, after in zip(inputs, answers, states, strict=True):
        output = u * (2 * abs(b[0] * x) + abs(y)) + tiny
        terms = [abs(b[i + 1] * x) + abs(a[i] * y) + (abs(before[i + 1]) if i + 1 < n else 0) for i in range(n)]
        own = [2 * u * (3 * t + abs(s) + abs(r)) + tiny for t, s, r in zip(terms, before, after, strict=True)]
        noise.append((output, np.array(own)))
        before = after
    return [
        2
        * (
            noise[k][0]
            + sum(from_state[k - 1 - j] @ own + from_output[k - 1 - j] * o for j, (o, own) in enumerate(noise[:k]))
        )
        for k in range(len(inputs))
    ]


# ---------------------------------------------------------------- poles that crowd z = 1


@pytest.mark.parametrize("order", [1, 2])
def test_a_low_pass_of_20_hz_at_48_khz_comes_to_its_rest_in_float32(order: int) -> None:
    model = Recursion(realization(low_pass(order, 20, Fraction(1, 48000)), FLOAT32, "delta"))
    # 40 and more time constants of at most 1.42/(40 pi) s: the rest of the step is below 1e-14
    rest = model.run([1.0] * 22000)[-1]
    # b_n x and a_n y are equal to a rounding each, and so are coefficients; the sum that is shown rounds once more
    assert abs(rest - 1) <= 8 * 2.0**-24


def test_a_step_of_a_half_thousandth_moves_a_low_pass_of_2_hz_at_500_khz_in_float32() -> None:
    stored = realization(low_pass(1, 2, Fraction(1, 500000)), FLOAT32, "delta")
    (a,) = stored.sections[0].a
    up = FLOAT32.round(Fraction(10005, 10000))
    assert np.float32(1) + np.float32(a * (up - 1)) == np.float32(1)  # a plain sum would stand still
    model = Recursion(stored)
    assert model.preset(1.0, 1.0)
    count = 20000
    shown = model.run([up] * count)[-1]
    # w' = w + (b1 - a b0) x - a w, b1 = a within a rounding: the closed form of a first-order step
    share = 1 - (1 - Fraction(a)) ** (count - 1) * (1 - Fraction(stored.sections[0].b[0]))
    exact = 1 + Fraction(up - 1) * share
    # b1 x and a y round, each by at most u, and so relative to a moves the rest by 2 u; the sum shown rounds once
    assert abs(Fraction(shown) - exact) <= 5 * Fraction(1, 2**24)
    assert exact - 1 > Fraction(1, 6000)


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
