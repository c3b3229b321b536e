from __future__ import annotations

from fractions import Fraction
from math import exp, inf, pi, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.checks import Tolerances
from realize.checks.counterpart import Counterpart
from realize.checks.response import StepResponse
from realize.checks.step import SampledResponse, check_deviation, check_overshoot
from realize.methods import discretize
from realize.transfer import PulseTransferFunction
from tests.checks.designs import DEFAULT, answers, converted, monic, pulse, reference, transfer

STABLE = ("stable", "stable")


def deviation_percent(design: StepResponse, discrete: PulseTransferFunction) -> float:
    sampled = SampledResponse(Counterpart(discrete), design.samples)
    check = check_deviation(design, sampled, float(discrete.period_s), "exact", DEFAULT)
    assert check.difference is not None
    return check.difference


@pytest.mark.parametrize(
    ("text", "period_s"),
    [
        ("1/(s + 1)", "0.1"),
        ("(s + 3)/(s^2 + 2*s + 5)", "0.05"),
        ("5*(0.2*s + 1)/(0.02*s + 1)", "0.005"),
        ("1/(s + 4)^4", "0.0125"),
        ("s/(s^2 + 100)", "1/60"),
        ("(s + 2)/((s - 1)*(s + 6))", "0.02"),
        ("(s + 900)/(s^2 + 40*s + 1000000)", "0.0025"),
        ("1/((s + 0.1)*(s + 10)*(s + 1000)*(s + 100000))", "0.0001"),
        ("1/((s + 1)*(s + 2)*(s + 3)*(s + 4)*(s + 5)*(s + 6)*(s + 7)*(s + 8))", "0.001"),
        ("4.2 + 18/s + 0.09*s/(0.002*s + 1)", "0.0005"),
        ("1/s^2", "0.02"),
    ],
)
def test_step_invariant_conversion_keeps_every_sample(text: str, period_s: str) -> None:
    design = reference(text, period_s)
    found = answers(design, converted(text, period_s, "step-invariant"))
    assert found["step deviation"].difference == pytest.approx(0, abs=1e-9)
    if found["step overshoot"].difference is not None:
        assert found["step overshoot"].difference == pytest.approx(0, abs=1e-9)


@given(st.sampled_from([1, 2, 5]), st.sampled_from(["1/50", "1/10", "1/4"]))
def test_a_delay_shows_as_what_the_response_does_meanwhile(delay: int, period_s: str) -> None:
    # yd[k] = y((k - d)T) of a lag; the period after sample d - 1 starts at y((d - 1)T) and the output is still at y(0).
    design = reference("1/(s + 1)", period_s).step
    lag = converted("1/(s + 1)", period_s, "step-invariant")
    late = pulse(lag.numerator[1:], (*lag.denominator, *(0 for _ in range(delay))), period_s)
    period = float(Fraction(period_s))
    expected = max(exp(-max(0, k - delay) * period) - exp(-k * period) for k in range(60))
    size = 1 - exp(-(design.last + 1) * period)
    assert deviation_percent(design, late) == pytest.approx(100 * expected / size, rel=1e-9)


def test_the_step_may_have_fallen_anywhere_in_the_period() -> None:
    # The design moves from 0.5 to 1 - 0.5/e over the first period; all of that is right for the first sample.
    design = reference("1/2 + (1/2)/(s + 1)", "1").step
    for first, percent in (("1/2", 0), ("4/5", 0), ("9/10", 100 * (0.9 - (1 - exp(-1) / 2))), ("2/5", 10)):
        sampled = SampledResponse(Counterpart(pulse([first, str(1 - Fraction(first))], [1, 0], "1")), np.arange(1))
        check = check_deviation(design, sampled, 1.0, "exact", DEFAULT)
        assert check.difference == pytest.approx(percent / design.size, abs=1e-9)


def test_a_growing_counterpart_of_a_stable_design_is_out_with_a_finite_figure() -> None:
    design = reference("1/((s + 0.01)*(s + 1000))", "0.01")
    found = answers(design, converted("1/((s + 0.01)*(s + 1000))", "0.01", "forward-difference"))
    assert found["step deviation"].verdict == "out"
    assert 1e3 < found["step deviation"].difference < inf  # type: ignore[operator]
    assert found["step deviation"].reason.endswith("; the response grows without bound")
    assert found["step overshoot"].verdict == "out"
    assert found["step overshoot"].difference is None
    assert found["step overshoot"].reason == "the counterpart is unstable and does not settle"


def test_growth_beyond_doubles_within_a_sample_leaves_the_deviation_undefined() -> None:
    check = answers(reference("1/(s - 31000)", "0.01"), pulse([1], [1, -1000], "0.01"))["step deviation"]
    assert check.verdict == "undefined"
    assert check.reason == "the design grows too much within one sample for its response to be followed"


@pytest.mark.parametrize(
    ("text", "reason"),
    [
        ("2 + 1/s", "the design integrates, or rings without end, so there is no final value"),
        ("1/(s^2 + 4)", "the design integrates, or rings without end, so there is no final value"),
        ("1/(s - 1)", "the design grows, so there is no final value"),
        ("1/s^2", "the design grows, so there is no final value"),
        ("s/(s + 1)", "the final value is 0"),
    ],
)
def test_overshoot_is_undefined_without_a_final_value(text: str, reason: str) -> None:
    check = answers(reference(text, "0.01"), converted(text, "0.01", "bilinear"))["step overshoot"]
    assert (check.verdict, check.reason) == ("undefined", reason)
    assert check.reference is check.obtained is check.difference is None


@pytest.mark.parametrize("shift", ["0.9", "0.97", "1.001", "1.02", "1.2"])
def test_overshoot_is_compared_with_what_sampling_can_show(shift: str) -> None:
    # The exact counterpart with its gain changed: its peak changes in proportion.
    text, period_s = "4/(s^2 + 0.8*s + 4)", "0.3"
    design = reference(text, period_s)
    lag = converted(text, period_s, "step-invariant")
    peak = float(max(SampledResponse(Counterpart(lag), np.arange(200)).values))
    scaled = pulse([c * Fraction(shift) for c in lag.numerator], lag.denominator, period_s)
    check = answers(design, scaled)["step overshoot"]
    c = 1 + exp(-pi * 0.2 / sqrt(1 - 0.04))
    s = design.step.least_sampled_peak
    obtained = peak * float(Fraction(shift))
    assert check.reference == pytest.approx(100 * (c - 1), abs=1e-9)
    assert check.obtained == pytest.approx(100 * (obtained - 1), abs=1e-9)
    assert check.difference == pytest.approx(100 * max(obtained - c, s - obtained, 0), abs=1e-9)
    assert check.tolerance == pytest.approx(c, abs=1e-9)


def test_the_final_value_counts_as_a_peak() -> None:
    # Both rise from below: 100 against 100 %, at whatever time.
    check = answers(reference("1/(s + 1)", "0.1"), converted("1/(s + 1)", "0.1", "bilinear"))["step overshoot"]
    assert (check.reference, check.difference) == (0.0, 0.0)
    assert check.reason.endswith("the design does not overshoot")


@pytest.mark.parametrize(("given_percent", "expected"), [(None, 10.0), ("1/2", 0.5), ("20", 20.0)])
def test_the_overshoot_tolerance_is_a_share_of_the_peak_unless_the_design_names_one(
    given_percent: str | None, expected: float
) -> None:
    tolerances = Tolerances.of([("step_overshoot", Fraction(given_percent))] if given_percent else ())
    design = reference("10*s/(s + 10) + 10/(s + 10)", "0.001").step
    sampled = SampledResponse(Counterpart(pulse([1], [1, 0], "0.001")), design.samples)
    check = check_overshoot(design, sampled, STABLE, 0, 0.001, "exact", tolerances)
    assert check.tolerance == pytest.approx(expected)


@pytest.mark.parametrize("method", ["bilinear", "backward-difference", "blended-difference", "pole-zero-mapped"])
def test_looking_closely_at_few_samples_finds_what_looking_at_all_does(method: str) -> None:
    # 30 000 samples, of which the checks look at a tenth; the pole at 25 000 rad/s alternates under bilinear.
    text, period_s = "1/((s/2 + 1)*(s/25000 + 1)*(s^2/900 + 0.02*s/30 + 1))", "0.0001"
    design = reference(text, period_s).step
    discrete = discretize(transfer(text), Fraction(period_s), method).pulse
    everything = np.arange(design.last + 1)
    assert len(design.samples) < len(everything) / 5
    sampled = SampledResponse(Counterpart(discrete), everything)
    low, high = design.bounds_after(everything)
    distances = np.maximum(np.maximum(low - sampled.values, sampled.values - high), 0)
    # Between the cycles that are looked at, an envelope moves by a few percent.
    assert deviation_percent(design, discrete) == pytest.approx(100 * distances.max() / design.size, rel=0.02, abs=1e-6)
    check = check_overshoot(
        design, SampledResponse(Counterpart(discrete), design.samples), STABLE, 0, 1e-4, "exact", DEFAULT
    )
    assert check.obtained == pytest.approx(100 * (sampled.values.max() / design.final - 1), abs=1e-6)


def test_an_alternating_peak_is_found_on_whichever_samples_carry_it() -> None:
    # Even samples 1 + 0.9^k, odd ones 1 - 0.9^k, over a horizon of 7e5 samples.
    design = reference("1/((s + 0.1)*(s + 100000))*10000", "0.0001").step
    alternating = pulse([2, "-1/10", "-9/10"], monic("-9/10", 0), "0.0001")
    sampled = SampledResponse(Counterpart(alternating), design.samples)
    check = check_overshoot(design, sampled, STABLE, 0, 1e-4, "exact", DEFAULT)
    top = float(max(sampled.at(np.arange(100))))
    assert check.obtained == pytest.approx(100 * (top / design.final - 1), abs=1e-9)
