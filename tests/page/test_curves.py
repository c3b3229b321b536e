"""The numbers behind the figures, against scipy.signal and against the figures that the checks give."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from math import pi

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import signal

from realize.checks import ContinuousReference
from realize.loop import LoopReference, Plant
from realize.methods import discretize
from realize.page.curves.frequency import frequency_curves
from realize.page.curves.loop_gain import loop_gain
from realize.page.curves.plane import plane
from realize.page.curves.step import FIRST_SAMPLES, StepCurves, loop_curves, step_curves
from realize.transfer import PulseTransferFunction, TransferFunction

Pair = tuple[ContinuousReference, PulseTransferFunction]


def pair(numerator: list[int], denominator: list[int], rate_hz: int, method: str = "bilinear") -> Pair:
    transfer = TransferFunction.from_polynomials(numerator, denominator)
    reference = ContinuousReference(transfer, Fraction(1, rate_hz), Fraction(rate_hz, 5))
    return reference, discretize(transfer, reference.period_s, method, None).pulse


def made(known: Pair) -> StepCurves:
    curves = step_curves(*known)
    assert curves is not None
    return curves


@given(st.integers(1, 40), st.integers(50, 400), st.integers(30, 200))
def test_step_curves_are_those_of_scipy(damping_percent: int, w_rad_s: int, rate_hz: int) -> None:
    """A second-order section: poles well apart from z = 1, where scipy's own filter keeps ten digits."""
    known = pair([w_rad_s**2], [1, 2 * damping_percent * w_rad_s // 100 + 1, w_rad_s**2], 10 * rate_hz)
    curves = made(known).first
    pulse = known[1]
    expected = signal.lfilter(
        [float(c) for c in pulse.numerator], [float(c) for c in pulse.denominator], np.ones(len(curves.samples))
    )
    # 16 samples of a recursion in double precision whose gain stays below 1e3: 16 * 1e3 * 2^-53 < 2e-12.
    assert curves.samples == pytest.approx(expected, abs=1e-9)
    decay = (2 * damping_percent * w_rad_s // 100 + 1) / 2
    turn = np.sqrt(w_rad_s**2 - decay**2) * curves.times_s
    ring = np.cos(turn) + decay / np.sqrt(w_rad_s**2 - decay**2) * np.sin(turn)
    # The closed form of a second-order step; times are kept to 2^-24 of a sample: it moves by at most w T 2^-24.
    moved = w_rad_s * float(pulse.period_s) * 2.0**-24
    assert curves.design == pytest.approx(1 - np.exp(-decay * curves.times_s) * ring, abs=moved + 1e-12)


def test_a_long_response_keeps_its_extremes() -> None:
    """An oscillation of 50 Hz that decays over 90,000 samples: every stretch shows how far it swings."""
    w, decay = 314, 3
    curves = made(pair([w * w], [1, decay, w * w], 20_000)).whole
    assert len(curves.samples) <= 2402
    # exp(-decay t/2) around the final value 1, swing of both signs within a stretch of at least one cycle.
    early = curves.sample_times_s < 0.2
    envelope = np.exp(-decay / 2 * curves.sample_times_s[early])
    assert np.max(np.abs(curves.samples[early] - 1) / envelope) == pytest.approx(1, abs=0.02)
    for first in np.arange(0.05, 2.0, 0.05):
        near = (curves.sample_times_s >= first) & (curves.sample_times_s < first + 0.05)
        size = np.exp(-decay / 2 * first)
        assert curves.samples[near].max() - 1 > 0.85 * size
        assert 1 - curves.samples[near].min() > 0.85 * size


def test_the_first_samples_and_the_list_are_whole() -> None:
    curves = made(pair([50, 1], [1, 2], 1000))
    assert len(curves.first.samples) == FIRST_SAMPLES + 1
    assert np.diff(curves.first.sample_times_s) == pytest.approx(1e-3)
    assert curves.listed.sample_times_s[0] == 0
    assert curves.listed.sample_times_s[-1] == curves.whole.sample_times_s[-1]


@pytest.mark.parametrize("method", ["bilinear", "ramp-invariant", "backward-difference"])
def test_frequency_curves_are_those_of_scipy(method: str) -> None:
    known = pair([3, 40, 900], [1, 12, 400, 800], 200, method)
    curves = frequency_curves(*known)
    transfer, pulse = known[0].transfer, known[1]
    w = 2 * pi * curves.frequency_hz
    _, design = signal.freqs([float(c) for c in transfer.numerator], [float(c) for c in transfer.denominator], w)
    _, stored = signal.freqz(
        [float(c) for c in pulse.numerator], [float(c) for c in pulse.denominator], w * float(pulse.period_s)
    )
    # Polynomials in z lose digits close to z = 1: at a hundredth of the corner some four of fifteen.
    for shown_db, shown_deg, expected in (
        (curves.design_db, curves.design_deg, design),
        (curves.stored_db, curves.stored_deg, stored),
    ):
        shown = 10 ** (shown_db / 20) * np.exp(1j * np.radians(shown_deg))
        assert np.abs(shown / expected - 1).max() < 1e-6
    assert np.degrees(np.angle(stored / design)) == pytest.approx(curves.error_deg, abs=1e-4)
    assert curves.error_db == pytest.approx(20 * np.log10(np.abs(stored / design)), abs=1e-5)
    assert curves.nyquist_hz == 100
    assert np.abs(np.diff(curves.design_deg)).max() < 20


def test_a_zero_that_rounding_moved_outside_the_circle_does_not_turn_the_phase_by_a_whole_turn() -> None:
    """A notch whose stored zeros lie 1e-7 outside: its phase jumps down by 180 deg where the design's jumps up."""
    w = 314
    known = pair([1, 0, w * w], [1, w, w * w], 2000)
    pulse = known[1]
    outside = tuple(replace(root, value=root.value * (1 - 1e-7j)) for root in pulse.zeros)
    moved = replace(pulse, zeros=outside)
    assert abs(1 + outside[0].value) > 1
    curves = frequency_curves(known[0], moved)
    away = np.abs(curves.frequency_hz / (w / (2 * pi)) - 1) > 0.05
    assert np.abs(curves.stored_deg - curves.design_deg)[away].max() < 20


def test_the_plane_shows_where_each_root_went() -> None:
    reference, stored = pair([1, 30], [1, 6, 25, 0], 50)
    found = plane(reference, stored)
    period_s = float(reference.period_s)
    assert len(found.poles) == 3
    assert len(found.zeros) == 3
    for root in found.poles:
        assert root.s_rad_s is not None
        assert root.image == pytest.approx(np.exp(root.s_rad_s * period_s) - 1, abs=1e-15)
        # Tustin's map, root by root.
        half = root.s_rad_s * period_s / 2
        assert root.delta == pytest.approx(2 * half / (1 - half), abs=1e-14)
    brought = [root.delta for root in found.zeros if root.s_rad_s is None]
    assert brought == [-2, -2]


def test_pairs_above_half_the_rate_stay_on_their_side() -> None:
    """A pair at 637 Hz sampled at 1 kHz shows at 363 Hz: each member is joined to the nearer one."""
    reference, stored = pair([16_000_000], [1, 200, 16_000_000], 1000)
    for root in plane(reference, stored).poles:
        assert root.image is not None
        assert root.delta is not None
        assert root.image.imag * root.delta.imag > 0


def test_a_band_below_the_lowest_decade_is_still_on_the_axis() -> None:
    transfer = TransferFunction.from_polynomials([1], [1_000_000, 1])
    reference = ContinuousReference(transfer, Fraction(1, 1000), Fraction(3, 1_000_000))
    curves = frequency_curves(reference, discretize(transfer, reference.period_s, "bilinear", None).pulse)
    assert curves.frequency_hz[0] < curves.band_hz / 5


def test_a_peak_between_samples_that_are_spread_is_kept() -> None:
    """A ring that is over after a second beside a mode of 1e6 s: of 7e9 samples some are looked at, the peak too."""
    slow, fast = [1_000_000, 1], [1, 6, 1000]
    ring, creep = np.polymul([1_000_000], slow), fast
    numerator = [int(c) for c in np.polyadd(ring, creep)]
    denominator = [1000 * int(c) for c in np.polymul(fast, slow)]
    transfer = TransferFunction.from_polynomials(numerator, denominator)
    reference = ContinuousReference(transfer, Fraction(1, 1000), Fraction(200))
    curves = step_curves(reference, discretize(transfer, reference.period_s, "ramp-invariant", None).pulse)
    assert curves is not None
    assert curves.whole.sample_times_s[-1] > 1e6
    # The ring's overshoot in closed form; the other mode has reached a ten-millionth of its 0.001 by then.
    peak = 1 + np.exp(-3 * pi / np.sqrt(1000 - 9))
    assert curves.whole.samples.max() == pytest.approx(peak, abs=2e-3)


def test_an_image_beyond_a_double_is_left_out() -> None:
    reference, stored = pair([1, -10_000], [1, 3, 2], 10)
    zeros = plane(reference, stored).zeros
    assert [root.image for root in zeros if root.s_rad_s == 10_000] == [None]


def test_loop_curves_peak_where_the_figures_say() -> None:
    controller = TransferFunction.from_polynomials([4, 20], [1, 0])
    plant = Plant(TransferFunction.from_polynomials([10], [1, 12, 20]), Fraction(1, 200), case="nominal")
    reference = LoopReference(controller, plant, Fraction(1, 100), Fraction(1, 100))
    pulse = discretize(controller, reference.period_s, "bilinear", None).pulse
    curves = loop_curves(reference, pulse)
    assert curves is not None
    for (times_s, values), figures in (
        (curves.continuous, reference.continuous.step),
        (curves.sampled, reference.sampled(pulse).step),
    ):
        assert figures is not None
        # Drawn at 16 points to a radian of a bandwidth, a peak is missed by at most 1 - cos(1/32), 5e-4 of it.
        assert values.max() == pytest.approx(1 + figures.overshoot_percent / 100, abs=6e-4)
        assert times_s[int(np.argmax(values))] == pytest.approx(figures.peak_s, abs=0.01)
        assert values[0] == 0
        assert (np.diff(times_s) >= 0).all()
        assert times_s[-1] == pytest.approx(curves.end_s, rel=0.01)
    assert curves.sampled_figures == reference.sampled(pulse).step


def test_a_loop_that_rings_is_drawn_ring_by_ring() -> None:
    """``1/(s^2 + 0.2 s + 2)``: 4.44 s a turn, within ``0.5 exp(-t/10)`` of its end; hold and samples slow the decay."""
    unity = TransferFunction.from_polynomials([1], [1])
    plant = Plant(TransferFunction.from_polynomials([10], [10, 2, 10]))
    reference = LoopReference(unity, plant, Fraction(1, 100), Fraction(0))
    curves = loop_curves(reference, discretize(unity, reference.period_s, "bilinear", None).pulse)
    assert curves is not None
    assert curves.end_s > 50
    for times_s, values in (curves.continuous, curves.sampled):
        for first in np.arange(5.0, 50.0, 2.5):
            near = (times_s >= first) & (times_s < first + 4.5)
            # Half a period of hold takes k T/4, 0.0025 of the 0.1 per s: 13 % over 50 s.
            most, least = 0.5 * np.exp(-0.1 * first) * 1.13, 0.5 * np.exp(-0.1 * (first + 4.5)) / 1.02
            assert least < values[near].max() - 0.5 < most
            assert least < 0.5 - values[near].min() < most


def test_the_open_loop_is_the_product_of_its_parts_and_crosses_where_the_margins_say() -> None:
    controller = TransferFunction.from_polynomials([4, 20], [1, 0])
    plant = Plant(TransferFunction.from_polynomials([10], [1, 12, 20]), Fraction(1, 200))
    reference = LoopReference(controller, plant, Fraction(1, 100), Fraction(1, 100))
    pulse = discretize(controller, reference.period_s, "bilinear", None).pulse
    curves = loop_gain(reference, pulse)
    assert curves is not None
    s = 2j * pi * curves.frequency_hz
    expected = (4 * s + 20) / s * 10 / (s**2 + 12 * s + 20) * np.exp(-s / 200)
    shown = 10 ** (curves.continuous_db / 20) * np.exp(1j * np.radians(curves.continuous_deg))
    assert np.abs(shown / expected - 1).max() < 1e-12
    assert np.interp(curves.crossover_hz, curves.frequency_hz, curves.sampled_db) == pytest.approx(0, abs=1e-3)
    left = np.interp(curves.crossover_hz, curves.frequency_hz, curves.sampled_deg) + 180
    # Between neighbouring frequencies, 1.5 % apart, the phase bends by less than a hundredth of a degree.
    assert left == pytest.approx(curves.phase_margin_deg, abs=0.01)
    assert curves.frequency_hz[-1] == pytest.approx(50, rel=1e-5)


def test_a_loop_that_does_not_settle_has_no_curve() -> None:
    controller = TransferFunction.from_polynomials([400], [1])
    plant = Plant(TransferFunction.from_polynomials([10], [1, 12, 20, 0]), Fraction(0))
    reference = LoopReference(controller, plant, Fraction(1, 100), Fraction(1, 100))
    pulse = discretize(controller, reference.period_s, "bilinear", None).pulse
    assert loop_curves(reference, pulse) is None
    assert loop_gain(reference, pulse) is None
