"""The check must tell firmware that loses action at a limit from firmware that does what its law asks."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from itertools import accumulate

import numpy as np
import pytest

from realize.checks import Check, Signals
from realize.checks.counterpart import Counterpart
from realize.checks.recovery import check_recovery, integral_gains
from realize.checks.step import SampledResponse
from realize.transfer import PulseTransferFunction
from tests.checks.designs import converted, monic, pulse, reference

Simulate = Callable[[Sequence[float]], list[float]]

#: Expression, period, input range, output range.
DESIGNS = {
    "PI": ("2.4 + 30/s", "0.001", (-8, 8), (-1, 1)),
    "PID": ("4.2 + 18/s + 0.09*s/(0.002*s + 1)", "0.0005", (-8, 8), (-1, 1)),
    "PID, one-sided": ("4.2 + 18/s + 0.09*s/(0.002*s + 1)", "0.0005", (-8, 8), (0, 1)),
    "lead": ("5*(0.2*s + 1)/(0.02*s + 1)", "0.005", (-2, 2), (-3, 3)),
    "notch": ("(s^2 + 31.4*s + 98596)/(s^2 + 439.6*s + 98596)", "0.000125", (-10, 10), (-2, 2)),
    "double integrator": ("1/s^2", "0.02", (-1000, 1000), (-1, 1)),
    "double integrator with lead": ("(4*s + 1)/s^2", "0.02", (-10, 10), (-1, 1)),
    "non-minimum phase": ("(1 - 0.4*s)/(s^2 + 1.2*s + 1)", "0.1", (-10, 10), (-1, 1)),
    "resonant": ("1.5 + 640*s/(s^2 + 8*s + 98696.5)", "0.0001", (-20, 20), (-12, 12)),
}


def signals(name: str, *, ranged: bool = True, tracking_time_s: Fraction | None = None) -> Signals:
    _, _, inputs, outputs = DESIGNS[name]
    low, high = outputs
    given = (Fraction(inputs[0]), Fraction(inputs[1])) if ranged else None
    return Signals(given, None, (Fraction(low), Fraction(high)), tracking_time_s)


def counterpart(name: str) -> PulseTransferFunction:
    text, period_s, *_ = DESIGNS[name]
    return converted(text, period_s, "bilinear")


def judged(name: str, known: Signals, simulate: Simulate | None) -> Check:
    text, period_s, *_ = DESIGNS[name]
    step = reference(text, period_s).step
    c = Counterpart(counterpart(name))
    return check_recovery(c.discrete, SampledResponse(c, step.samples), step.last, "stored", known, simulate)


def clamped_history(discrete: PulseTransferFunction, known: Signals) -> Simulate:
    """A direct form that stores the clamped output: wrong on purpose."""
    b, a = ([float(c) for c in p] for p in (discrete.numerator, discrete.denominator))
    low, high = map(float, known.output_range or ())

    def simulate(inputs: Sequence[float]) -> list[float]:
        x, y = [0.0] * len(b), [0.0] * (len(a) - 1)
        out = []
        for value in inputs:
            x = [value, *x[:-1]]
            asked = sum(c * u for c, u in zip(b, x, strict=True)) - sum(c * v for c, v in zip(a[1:], y, strict=True))
            out.append(min(max(asked, low), high))
            y = [out[-1], *y][: len(y)]
        return out

    return simulate


def integrals_apart(discrete: PulseTransferFunction, known: Signals, rule: str = "hold") -> Simulate:
    """The rest in a direct form of its own, integrals as states that are held, led back, or left to wind up."""
    gains = integral_gains(discrete)
    order, n = len(gains), len(discrete.denominator) - 1
    bottom = list(discrete.denominator)
    for _ in range(order):
        bottom = list(accumulate(bottom))[:-1]
    top = list(discrete.numerator)
    for i, gain in enumerate(gains, 1):
        share = np.convolve(np.array(bottom, object), np.array(monic(*[1] * (order - i)), object)) * gain
        top = [t - s for t, s in zip(top, [0] * (n + 1 - len(share)) + list(share), strict=True)]
    for _ in range(order):
        top = list(accumulate(top))[:-1]
    b, a, r = ([float(c) for c in p] for p in (top, bottom, gains))
    low, high = map(float, known.output_range or ())
    tracking = float(discrete.period_s / known.tracking_time_s) if known.tracking_time_s else 0.0

    def simulate(inputs: Sequence[float]) -> list[float]:
        x, y, states = [0.0] * len(b), [0.0] * (len(a) - 1), [0.0] * (order + 1)
        out = []
        for value in inputs:
            x = [value, *x[:-1]]
            rest = sum(c * u for c, u in zip(b, x, strict=True)) - sum(c * v for c, v in zip(a[1:], y, strict=True))
            y = [rest, *y][: len(y)]
            asked = rest + states[0]
            out.append(min(max(asked, low), high))
            steps = [gain * value + above for gain, above in zip(r, states[1:], strict=True)]
            for i, step in enumerate(steps):
                held = (asked > out[-1] and step > 0) or (asked < out[-1] and step < 0)
                if rule == "wind up" or tracking or not held:
                    states[i] += step + (tracking * (out[-1] - asked) if i == 0 else 0.0)
        return out

    return simulate


@pytest.mark.parametrize("ranged", [True, False], ids=["input range known", "input range unknown"])
@pytest.mark.parametrize("name", DESIGNS)
def test_integrals_held_apart_from_the_rest_are_right(name: str, ranged: bool) -> None:
    known = signals(name, ranged=ranged)
    check = judged(name, known, integrals_apart(counterpart(name), known))
    assert check.verdict == "within"
    assert check.difference == pytest.approx(0, abs=1e-6)


@pytest.mark.parametrize("ranged", [True, False], ids=["input range known", "input range unknown"])
@pytest.mark.parametrize("name", DESIGNS)
def test_a_clamped_history_is_found_out(name: str, ranged: bool) -> None:
    known = signals(name, ranged=ranged)
    check = judged(name, known, clamped_history(counterpart(name), known))
    assert check.verdict == "out"
    assert check.difference is not None
    assert check.difference > 20


@pytest.mark.parametrize("name", DESIGNS)
def test_an_integral_that_winds_up_is_still_what_the_law_asks(name: str) -> None:
    known = signals(name)
    assert judged(name, known, integrals_apart(counterpart(name), known, "wind up")).verdict == "within"


@pytest.mark.parametrize(("tracking_time_s", "verdict"), [("1/5", "within"), ("1/2000", "out")])
def test_a_tracking_time_of_one_sample_drives_a_pid_to_the_wrong_limit(tracking_time_s: str, verdict: str) -> None:
    known = signals("PID", tracking_time_s=Fraction(tracking_time_s))
    check = judged("PID", known, integrals_apart(counterpart("PID"), known))
    assert check.verdict == verdict
    if verdict == "out":
        # Both laws are at 1 then, so anything in the upper half would do.
        assert (check.obtained, check.reference, check.difference) == (-1.0, 0.0, 50.0)


def test_an_output_that_stays_at_the_limit_when_the_error_has_reversed_is_found_out() -> None:
    known = signals("PI")
    good = integrals_apart(counterpart("PI"), known)

    def stuck(inputs: Sequence[float]) -> list[float]:
        out = good(inputs)
        first = next(v for v in out if abs(v) == 1)
        return [first if i > out.index(first) else v for i, v in enumerate(out)]

    assert judged("PI", known, stuck).verdict == "out"


def test_a_single_sample_at_the_wrong_limit_is_found_out_and_named() -> None:
    known = signals("PID")
    good = integrals_apart(counterpart("PID"), known)

    def glitch(inputs: Sequence[float]) -> list[float]:
        out = good(inputs)
        if max(inputs) == 8 and inputs[0] == 8:
            out[7] = -1.0
        return out

    check = judged("PID", known, glitch)
    assert (check.verdict, check.difference, check.reference, check.obtained) == ("out", 100.0, 1.0, -1.0)
    assert check.reason == (
        "held at 8, then -8, then 0, for 29 samples each; farthest 7 samples after the error became 8"
    )


def test_a_sample_of_shift_is_not_held_against_the_output() -> None:
    known = signals("lead")
    good = integrals_apart(counterpart("lead"), known)

    def late(inputs: Sequence[float]) -> list[float]:
        return [0.0, *good(inputs)][: len(inputs)]

    # Late by one sample everywhere but at the start, where the law asks for its limit at once.
    check = judged("lead", known, lambda inputs: [good(inputs)[0], *late(inputs)[1:]])
    assert check.verdict == "within"


@pytest.mark.parametrize(
    ("known", "simulate", "reason"),
    [
        pytest.param(Signals(), lambda inputs: inputs, "it needs the output range", id="no output range"),
        pytest.param(signals("PI"), None, "it is judged on the stored numbers", id="nothing to simulate"),
        pytest.param(
            Signals((Fraction(-1, 9), Fraction(1, 9)), None, (Fraction(-1), Fraction(1))),
            lambda inputs: inputs,
            "no allowed error takes the output to its limits within 21 samples",
            id="errors too small",
        ),
    ],
)
def test_it_is_undefined_where_nothing_can_be_compared(known: Signals, simulate: Simulate | None, reason: str) -> None:
    check = judged("PI", known, simulate)
    assert (check.verdict, check.reason) == ("undefined", reason)


def test_growth_within_a_sample_leaves_nothing_to_follow() -> None:
    c = Counterpart(pulse([1], [1, Fraction(-(10**70))], "1"))
    known = Signals(None, None, (Fraction(-1), Fraction(1)))
    check = check_recovery(c.discrete, SampledResponse(c, np.arange(1)), 20, "stored", known, lambda inputs: [0.0])
    assert (check.verdict, check.reason) == (
        "undefined",
        "the response grows too much within one sample to be followed",
    )


@pytest.mark.parametrize("name", DESIGNS)
def test_at_most_two_thousand_samples_are_simulated(name: str) -> None:
    known = signals(name)
    good, counts = integrals_apart(counterpart(name), known), []

    def counted(inputs: Sequence[float]) -> list[float]:
        counts.append(len(inputs))
        return good(inputs)

    assert judged(name, known, counted).verdict == "within"
    assert 0 < sum(counts) <= 2000


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        # R/(z - 1) of b + c/s under bilinear: cT; of 1/s^2: T^2/4 (z + 1)^2 = T^2 (1 + (z - 1) + (z - 1)^2/4).
        ("3 + 7/s", (Fraction(7, 10),)),
        ("1/s^2", (Fraction(1, 100), Fraction(1, 100))),
        ("1/(s + 1)", ()),
    ],
)
def test_integral_gains_are_the_expansion_at_z_1(text: str, expected: tuple[Fraction, ...]) -> None:
    assert integral_gains(converted(text, "1/10", "bilinear")) == expected
