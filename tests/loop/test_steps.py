"""Steps of the closed loop: overshoot to 1e-4 points, between the samples too."""

from __future__ import annotations

from fractions import Fraction
from math import exp, pi, sqrt

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.polynomial import polynomial as npoly

from realize.algebra import polynomial as poly
from realize.algebra.roots import isolate
from realize.loop import (
    ContinuousLoop,
    LoopReference,
    Plant,
    SampledLoop,
    StepFigures,
    continuous_step,
    held_plant,
    step_figures,
)
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.loop.independent import Ratio, delayed_step, overshoot_percent, simulate
from tests.loop.loops import LOOPS, Case, ratio, transfer

#: What overshoot is promised to, in points.
POINTS = 1e-4

ONE = transfer("1", "1")

_IDS = [case.name for case in LOOPS]

#: Loops in which the dead time can be followed in small steps.
_DELAYED = [case for case in LOOPS if case.plant.dead_time_s]


def _sampled(case: Case, method: str = "bilinear") -> SampledLoop:
    pulse = discretize(case.controller, case.period_s, method).pulse
    return SampledLoop(pulse, held_plant(case.plant, case.period_s, case.compute_delay_s))


def _figures(loop: SampledLoop) -> StepFigures:
    found = step_figures(loop)
    assert found is not None
    return found


def _continuous(controller: TransferFunction, plant: TransferFunction, dead_time: str = "0") -> StepFigures:
    found = continuous_step(ContinuousLoop(controller, Plant(plant, Fraction(dead_time))))
    assert found is not None
    return found


@pytest.mark.parametrize("method", ["bilinear", "ramp-invariant"])
@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_overshoot_between_samples_agrees_with_a_fine_simulation(case: Case, method: str) -> None:
    loop = _sampled(case, method)
    found = _figures(loop)
    parts = 5 * (loop.held.delay_s / case.period_s).denominator
    parts *= -(-400 // parts)
    samples = int((found.peak_s or 10.0) / float(case.period_s)) + 3
    plant, sensor = ratio(case.plant.transfer), ratio(case.plant.sensor)
    _, output = simulate(
        plant, sensor, ratio(loop.controller), float(case.period_s), float(loop.held.delay_s), samples, parts
    )
    # A plant of first order has kinks where its input changes, which are points of the simulation.
    smooth = case.plant.transfer.relative_degree > 1
    assert found.overshoot_percent == pytest.approx(overshoot_percent(output, found.final, smooth=smooth), abs=POINTS)


@pytest.mark.parametrize("case", _DELAYED, ids=[case.name for case in _DELAYED])
def test_overshoot_with_dead_time_agrees_with_small_steps(case: Case) -> None:
    found = continuous_step(ContinuousLoop(case.controller, case.plant))
    assert found is not None
    forward = ratio(case.controller).times(ratio(case.plant.transfer))
    length = (found.peak_s or 10.0) + 1.0
    dead_time = float(case.plant.dead_time_s)
    _, output = delayed_step(forward, ratio(case.plant.sensor), dead_time, int(500 * dead_time) + 20, length)
    assert found.overshoot_percent == pytest.approx(overshoot_percent(output, found.final), abs=POINTS)


def _integrator_pieces(gain: float, count: int) -> list[np.ndarray]:
    """Pieces of ``y' = gain (1 - y(t - 1))`` on unit intervals, exactly, by the method of steps."""
    pieces = [np.array([0.0])]
    for _ in range(count):
        drive = -gain * pieces[-1]
        drive[0] += gain
        piece = npoly.polyint(drive)
        piece[0] += npoly.polyval(1.0, pieces[-1])
        pieces.append(piece)
    return pieces


@pytest.mark.parametrize("gain", ["0.4", "0.6", "1", "1.4"])
def test_integrator_with_dead_time_overshoots_as_the_method_of_steps_says(gain: str) -> None:
    """Polynomials from one dead time to the next; 50 % for a gain of 1: ``y(3) = 2 - 1/2``."""
    pieces = _integrator_pieces(float(gain), 14)
    tops = [
        float(npoly.polyval(root.real, piece))
        for piece in pieces
        for root in np.atleast_1d(npoly.polyroots(npoly.polyder(piece)) if len(piece) > 2 else [])
        if abs(root.imag) < 1e-9 and 0 <= root.real <= 1
    ]
    expected = 100 * max(max(tops) - 1, 0.0)
    found = _continuous(ONE, transfer(gain, "1 0"), "1")
    assert found.overshoot_percent == pytest.approx(expected, abs=1e-6)
    if gain == "1":
        assert expected == pytest.approx(50, rel=1e-12)


@given(st.integers(5, 95), st.integers(-3, 3))
def test_second_order_loops_overshoot_as_their_damping_says(damping: int, decade: int) -> None:
    """``w^2/(s (s + 2 d w))``: ``exp(-pi d/sqrt(1 - d^2))``, whatever the unit of time."""
    d, w = Fraction(damping, 100), Fraction(10) ** decade
    found = _continuous(ONE, TransferFunction.from_polynomials([w * w], [Fraction(1), 2 * d * w, Fraction(0)]))
    ratio_d = float(d) / sqrt(1 - float(d) ** 2)
    assert found.overshoot_percent == pytest.approx(100 * exp(-pi * ratio_d), abs=POINTS)
    if found.overshoot_percent > POINTS:
        assert found.peak_s == pytest.approx(pi / (float(w) * sqrt(1 - float(d) ** 2)), rel=1e-3)


def test_first_order_loop_has_its_rise_and_settling_times() -> None:
    """``1/s``: from 10 to 90 % in ``ln 9``, within 2 % after ``ln 50``, no overshoot."""
    found = _continuous(ONE, transfer("1", "1 0"))
    assert found.overshoot_percent == 0
    assert found.rise_time_s == pytest.approx(np.log(9), rel=1e-4)
    assert found.settling_time_s == pytest.approx(np.log(50), rel=1e-4)


def test_a_slow_tail_is_followed_to_its_end() -> None:
    """PI with an integral a thousand times slower than the loop: settled when the tail is, and no overshoot."""
    found = _continuous(transfer("10 0.01", "1 0"), transfer("1", "1 1"))
    # Closed loop (10 s + 0.01)/(s^2 + 11 s + 0.01): the slow mode starts at 1/11 and decays at 0.01/11 per second.
    assert found.settling_time_s == pytest.approx(1100 * np.log((1 / 11) / 0.02), rel=1e-2)
    assert found.overshoot_percent == 0


def test_final_value_without_integral_is_that_of_the_loop() -> None:
    assert _continuous(transfer("4", "1"), transfer("1", "1 1")).final == pytest.approx(0.8)


def test_no_final_value_but_zero_has_no_figures() -> None:
    assert continuous_step(ContinuousLoop(transfer("1 0", "1 2"), Plant(transfer("1", "1 1")))) is None


def test_unstable_loops_have_no_step() -> None:
    assert continuous_step(ContinuousLoop(transfer("10", "1"), Plant(transfer("1", "1 2 1 0")))) is None


@pytest.mark.parametrize(("period", "sampled_percent"), [("1", 46.9), ("1/5", 20.7)])
def test_antenna_servo_overshoots_as_published(period: str, sampled_percent: float) -> None:
    """Franklin, Powell & Workman: sampled overshoot 46.9 and 20.7 %, continuous 16.3 % (recomputed)."""
    controller, plant, period_s = transfer("10 1", "1 1"), Plant(transfer("1", "10 1 0")), Fraction(period)
    pulse = discretize(controller, period_s, "pole-zero-mapped").pulse
    found = _figures(SampledLoop(pulse, held_plant(plant, period_s, Fraction(0))))
    assert found.sampled_overshoot_percent == pytest.approx(sampled_percent, abs=0.05)
    assert found.overshoot_percent > sampled_percent - 0.05
    assert _continuous(controller, plant.transfer).overshoot_percent == pytest.approx(16.3, abs=0.05)


@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_sampled_steps_approach_the_continuous_one_with_hold_and_delay(case: Case) -> None:
    period = case.period_s / 50
    reference = LoopReference(case.controller, case.plant, period, period)
    pulse = discretize(case.controller, period, "bilinear").pulse
    found, wanted = reference.sampled(pulse).step, reference.delayed.step
    assert found is not None
    assert wanted is not None
    assert found.overshoot_percent == pytest.approx(wanted.overshoot_percent, abs=0.02)
    assert found.settling_time_s == pytest.approx(wanted.settling_time_s, rel=0.02)
    assert found.rise_time_s == pytest.approx(wanted.rise_time_s, rel=0.02)


def test_a_peak_far_beyond_the_first_samples_is_found() -> None:
    """Sampled 40000 times faster than its damping 0.5 asks for: the continuous overshoot, to what the delay costs."""
    period = Fraction(1, 40000)
    pulse = discretize(transfer("1", "1"), period, "bilinear").pulse
    found = _figures(SampledLoop(pulse, held_plant(Plant(transfer("1", "1 1 0")), period, Fraction(0))))
    lag = continuous_step(ContinuousLoop(ONE, Plant(transfer("1", "1 1 0")), hold_s=period))
    assert lag is not None
    assert found.overshoot_percent == pytest.approx(lag.overshoot_percent, abs=POINTS)
    assert found.peak_s == pytest.approx(lag.peak_s, rel=1e-3)


def _deadbeat(period_s: Fraction, plant: Plant) -> SampledLoop:
    """The controller that brings every sample to 1 at once: ``A_p/(B_p (z - 1))`` for a plant that integrates."""
    held = held_plant(plant, period_s, Fraction(0))
    above, _ = poly.divide(held.pulse.denominator, (Fraction(1), Fraction(-1)))
    below = poly.trimmed(held.pulse.numerator)
    zeros, poles = (isolate(poly.primitive(poly.shift(p, Fraction(1)))) for p in (above, below))
    numerator, denominator = (tuple(c / below[0] for c in p) for p in (above, below))
    return SampledLoop(PulseTransferFunction(numerator, denominator, period_s, poles, zeros), held)


def test_oscillation_that_the_samples_hide_is_found_and_flagged() -> None:
    loop = _deadbeat(Fraction(1), Plant(transfer("1", "1 1 0")))
    found = _figures(loop)
    assert found.sampled_overshoot_percent == pytest.approx(0, abs=1e-9)
    assert found.overshoot_percent > 10
    assert found.ripple_percent == pytest.approx(found.overshoot_percent, rel=0.5)
    reference = LoopReference(ONE, loop.held.plant, Fraction(1), Fraction(0))
    assert any("hidden oscillation" in note for note in reference.sampled(loop.controller).notes)


def test_a_smooth_loop_has_no_hidden_oscillation() -> None:
    case = LOOPS[6]
    reference = LoopReference(case.controller, case.plant, case.period_s, case.compute_delay_s)
    sampled = reference.sampled(discretize(case.controller, case.period_s, "bilinear").pulse)
    assert sampled.notes == ()
    assert sampled.step is not None
    assert sampled.step.ripple_percent is not None
    assert sampled.step.ripple_percent < 0.1


def test_long_delays_in_blocks_agree_with_sample_by_sample() -> None:
    """The same dead time at a rate that makes it 7 samples, one map each, and 9, blocks: a smooth change."""
    plant = Plant(transfer("0.8", "1 1"), Fraction(1))
    found = []
    for samples in (7, 8, 9, 10):
        period = Fraction(1, samples)
        pulse = discretize(transfer("0.4 0.4", "1 0"), period, "bilinear").pulse
        figures = _figures(SampledLoop(pulse, held_plant(plant, period, Fraction(0))))
        assert figures.settling_time_s is not None
        found.append(figures.settling_time_s)
    assert np.diff(np.diff(found)) == pytest.approx(0, abs=0.03)


def test_a_loop_that_rests_only_after_millions_of_samples_of_a_long_delay_has_no_figures() -> None:
    """Dead time of 2000 samples and a tail a thousand dead times long: no figure rather than a wrong one."""
    period = Fraction(1, 5000)
    pulse = discretize(transfer("0.4 0.002", "1 0"), period, "bilinear").pulse
    loop = SampledLoop(pulse, held_plant(Plant(transfer("1", "1 1"), Fraction("0.4")), period, Fraction(0)))
    assert loop.verdict.is_stable
    assert step_figures(loop) is None


def test_the_second_road_itself_is_right_on_a_closed_form() -> None:
    """Runge-Kutta steps on the integrator with dead time: 50 %."""
    _, output = delayed_step(Ratio([1.0], [1.0, 0.0]), Ratio([1.0], [1.0]), 1.0, 50, 5.0)
    assert overshoot_percent(output, 1.0) == pytest.approx(50, abs=1e-6)
