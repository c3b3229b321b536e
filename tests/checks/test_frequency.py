from __future__ import annotations

from cmath import exp as cexp
from fractions import Fraction
from math import atan, degrees, isfinite, log10, pi
from typing import Any

import mpmath
import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from realize.checks import Check
from realize.checks.counterpart import Counterpart
from realize.checks.frequency import FrequencyResponse, factored
from realize.checks.modes import every
from realize.errors import Refused
from realize.methods import METHODS, discretize
from tests.checks.designs import answers, converted, pulse, reference, transfer
from tests.strategies import Factored, sampled_designs

_MP = mpmath.mp.clone()
_MP.dps = 60


def response(text: str, edge_rad_s: float) -> FrequencyResponse:
    g = transfer(text)
    return FrequencyResponse(float(g.low_frequency_gain), every(g.zeros), every(g.poles), edge_rad_s)


def both(found: dict[str, Check]) -> tuple[float, float]:
    magnitude, phase = (found[name].difference for name in ("magnitude in band", "phase in band"))
    assert magnitude is not None
    assert phase is not None
    return magnitude, phase


@pytest.mark.parametrize("gain", ["11/10", "9/10", "1"])
def test_a_wrong_gain_shows_in_decibels_and_nothing_in_degrees(gain: str) -> None:
    magnitude, phase = both(answers(reference("2", "0.01"), pulse([2 * Fraction(gain)], [1], "0.01")))
    assert magnitude == pytest.approx(abs(20 * log10(float(Fraction(gain)))), abs=1e-12)
    assert phase == pytest.approx(0, abs=1e-12)


@pytest.mark.parametrize("samples", [1, 3, 40])
def test_a_delay_shows_as_its_phase_at_the_band_edge(samples: int) -> None:
    # 40 samples turn by 40 * 10 * 0.1 = 40 rad at the edge: the nearest branch is within 180 deg.
    delayed = pulse([1], [1, *(0 for _ in range(samples))], "0.1")
    found = answers(reference("1", "0.1", "0.5"), delayed)
    assert found["magnitude in band"].difference == pytest.approx(0, abs=1e-12)
    expected = degrees(samples * 0.05)
    if expected < 180:
        assert found["phase in band"].difference == pytest.approx(expected, rel=1e-9)
        assert found["phase in band"].reason == "greatest at 0.079577 Hz (0.5 rad/s)"
    else:
        assert 170 < found["phase in band"].difference <= 180  # type: ignore[operator]


def test_a_negative_gain_is_180_degrees_off() -> None:
    assert both(answers(reference("1", "0.1"), pulse([-1], [1], "0.1")))[1] == pytest.approx(180, abs=1e-9)
    assert both(answers(reference("-1", "0.1"), pulse([-1], [1], "0.1"))) == pytest.approx((0, 0), abs=1e-9)


def test_the_step_invariant_lag_is_late_by_half_a_sample_less_the_window() -> None:
    # Gd of 1/(s + 1) by its closed form, against atan at 0.98 and 1.02 of the frequency, at the band edge.
    period, edge = 0.1, 3.0
    e = np.exp(-period)
    gd = (1 - e) / (cexp(1j * edge * period) - e)
    late = -degrees(np.angle(gd)) - degrees(atan(1.02 * edge))
    found = answers(reference("1/(s + 1)", "0.1", "3"), converted("1/(s + 1)", "0.1", "step-invariant"))
    assert found["phase in band"].difference == pytest.approx(late, rel=1e-9)


@given(st.sampled_from([0.3, 1.0, 2.0, 7.0]), st.sampled_from(["s + 2", "1/(s + 2)", "(s - 2)/(s^2 + s + 9)", "1/s"]))
def test_ranges_are_those_of_the_response_within_two_percent(w: float, text: str) -> None:
    ranges = response(text, 10.0).ranges_at(np.array([w]))
    v = np.linspace(0.98 * w, 1.02 * w, 4001)
    g = transfer(text)
    value = np.polyval([float(c) for c in g.numerator], 1j * v) / np.polyval([float(c) for c in g.denominator], 1j * v)
    size, phase = 20 * np.log10(abs(value)), np.degrees(np.unwrap(np.angle(value)))
    assert ranges.low_db[0] == pytest.approx(size.min(), abs=1e-4)
    assert ranges.high_db[0] == pytest.approx(size.max(), abs=1e-4)
    turns = 360 * round((ranges.low_deg[0] - phase.min()) / 360)
    assert ranges.low_deg[0] - turns == pytest.approx(phase.min(), abs=1e-3)
    assert ranges.high_deg[0] - turns == pytest.approx(phase.max(), abs=1e-3)


@pytest.mark.parametrize("damping", ["0.2", "0.01", "0.00001", "1e-9"])
def test_a_resonance_narrower_than_the_window_is_in_its_range(damping: str) -> None:
    found = response(f"1/(s^2 + 2*{damping}*s + 1)", 3.0).ranges_at(np.array([0.985, 1.0, 1.015]))
    z = float(Fraction(damping))
    # The peak of 1/(2 z sqrt(1 - z^2)) at sqrt(1 - 2 z^2), inside all three windows while it is sharp.
    peak = -20 * log10(2 * z * (1 - z * z) ** 0.5)
    if z < 0.05:
        assert found.high_db == pytest.approx(peak, abs=2e-3)


@pytest.mark.parametrize(("shift", "good"), [("1", True), ("1.015", True), ("0.985", True), ("1.05", False)])
def test_an_undamped_resonance_may_move_within_the_window(shift: str, good: bool) -> None:
    design = reference("1/(s^2 + 1)", "0.1", "3")
    moved = converted("w^2/(s^2 + w^2)", "0.1", "pole-zero-mapped", w=shift)
    magnitude, phase = both(answers(design, moved))
    assert isfinite(magnitude)
    assert isfinite(phase)
    assert (magnitude < 0.5) == good


@pytest.mark.parametrize("text", ["(s^2 + 1)/(s^2 + s + 1)", "(s^2 + s + 1)/(s^2 + 1)", "(s^2 + 1)/(s^2 + 1.02)", "s"])
def test_roots_on_the_axis_leave_every_figure_finite(text: str) -> None:
    if text == "s":
        text = "s/(s/1000 + 1)"
    found = answers(reference(text, "0.05", "3"), converted(text, "0.05", "bilinear"))
    for name in ("magnitude in band", "phase in band"):
        check = found[name]
        assert all(isfinite(v) for v in (check.reference, check.obtained, check.difference))  # type: ignore[arg-type]
        assert check.verdict == "within"


def test_a_lost_notch_is_found_although_the_design_goes_to_minus_infinity() -> None:
    lost = converted("(s^2 + 0.5*s + 1)/(s^2 + s + 1)", "0.05", "bilinear")
    found = answers(reference("(s^2 + 1)/(s^2 + s + 1)", "0.05", "3"), lost)
    # 3 % off the notch the design is at -25 dB, and the counterpart at -6 dB.
    assert found["magnitude in band"].difference > 15  # type: ignore[operator]


def test_nothing_is_lost_next_to_z_equal_to_1() -> None:
    # A corner at 1e-6 rad/s and a rate of 1 MHz: z - 1 is 1e-12, and Gd differs from G by 1e-13 of itself.
    found = answers(reference("1/(s + 1e-6)", "1e-6", "0.01"), converted("1/(s + 1e-6)", "1e-6", "ramp-invariant"))
    assert both(found) == pytest.approx((0, 0), abs=1e-9)
    assert found["magnitude in band"].obtained == pytest.approx(-20 * log10(0.01), abs=1e-6)


@settings(max_examples=30)
@given(sampled_designs(most_order=6), st.sampled_from(sorted(METHODS)), st.sampled_from([1e-6, 0.02, 0.2, 3.0]))
def test_the_factored_form_has_the_value_of_the_coefficients_at_60_digits(
    case: tuple[Factored, Fraction], method: str, angle: float
) -> None:
    design, period_s = case
    try:
        discrete = discretize(design.transfer(), period_s, method, Fraction(1, 5) / period_s).pulse
    except Refused:
        return
    z = _MP.expj(angle)
    n, d = (horner(p, z) for p in (discrete.numerator, discrete.denominator))
    assume(n != 0 and d != 0)
    counterpart = Counterpart(discrete)
    delta = np.array([complex(z - 1)])
    ours = factored(counterpart.gain, counterpart.zeros, counterpart.poles, delta)[0]
    near = min((abs(delta[0] - r) / abs(r) for r in (*counterpart.zeros, *counterpart.poles) if r), default=1.0)
    # Next to a root its own rounding, 1e-16 of it, is amplified by how near.
    assert abs(ours / complex(n / d) - 1) < 1e-13 / min(1.0, near)


def horner(p: tuple[Fraction, ...], at: Any) -> Any:
    value = _MP.mpf(0)
    for c in p:
        value = value * at + _MP.mpf(c.numerator) / c.denominator
    return value


def test_a_counterpart_that_has_become_zero_has_no_magnitude() -> None:
    found = answers(reference("1/(s + 1)", "0.1"), pulse([0], [1, "-0.9"], "0.1"))
    for name in ("magnitude in band", "phase in band"):
        assert found[name].verdict == "undefined"
        assert found[name].reason == "at no frequency of the band are both responses finite and other than 0"
    assert (found["low-frequency gain"].difference, found["step deviation"].verdict) == (100.0, "out")


def test_the_band_ends_at_the_nyquist_frequency_at_the_latest() -> None:
    design = reference("1/(s + 1)", "1", "100")
    assert design.frequency.edge_rad_s == pi
    assert both(answers(design, converted("1/(s + 1)", "1", "bilinear")))[0] > 20
