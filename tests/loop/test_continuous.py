"""The loop without sampling, against a dense grid with a root finder, and against closed forms."""

from __future__ import annotations

from fractions import Fraction
from math import atan, degrees, pi, sqrt

import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy.optimize import brentq

from realize.errors import RealizeError
from realize.loop import ContinuousLoop, Plant
from realize.loop.margins import encirclements
from realize.transfer import TransferFunction
from tests.loop.independent import continuous_response, figures, growing_modes
from tests.loop.loops import LOOPS, Case, assert_margins, transfer

ONE = transfer("1", "1")

_IDS = [case.name for case in LOOPS]


def _loop(plant: TransferFunction, dead_time: str = "0", controller: TransferFunction = ONE) -> ContinuousLoop:
    return ContinuousLoop(controller, Plant(plant, Fraction(dead_time)))


def _compare(loop: ContinuousLoop, case: Case) -> None:
    """Every figure against the second road."""
    ratio = case.loop_ratio
    response = continuous_response(ratio, float(loop.delay_s), float(loop.hold_s or 0))
    ends = [] if ratio.below[-1] == 0 else [complex(ratio.above[-1] / ratio.below[-1])]
    assert_margins(loop.margins, figures(response, 1e-4, 1e3, ends=ends))


@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_margins_agree_with_a_dense_grid(case: Case) -> None:
    _compare(ContinuousLoop(case.controller, case.plant), case)


@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_margins_with_hold_and_delay_agree_with_a_dense_grid(case: Case) -> None:
    loop = ContinuousLoop(case.controller, case.plant, hold_s=case.period_s, compute_delay_s=case.compute_delay_s)
    _compare(loop, case)


@pytest.mark.parametrize("gain", ["1/8", "1", "8"])
@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_stability_agrees_with_the_roots_of_a_rational_approximation(case: Case, gain: str) -> None:
    """At the design's gain, an eighth and eight times of it: stable and unstable loops of every kind."""
    controller = TransferFunction.from_polynomials(
        [Fraction(gain) * c for c in case.controller.numerator], case.controller.denominator
    )
    loop = ContinuousLoop(controller, case.plant)
    scaled = case.loop_ratio._replace(above=[float(Fraction(gain)) * c for c in case.loop_ratio.above])
    assert loop.verdict.is_stable == (growing_modes(scaled, float(case.plant.dead_time_s)) == 0)


@given(st.integers(1, 60), st.integers(1, 60), st.sampled_from([-1, 1]), st.integers(1, 100))
def test_counting_encirclements_and_exact_roots_agree_without_dead_time(p: int, q: int, sign: int, gain: int) -> None:
    """The two criteria, on ``gain (s + 1)/((s + p/10) (s^2 + q/50 s +- 1))``."""
    plant = transfer(
        "1 1", f"1 {Fraction(p, 10) + Fraction(q, 50)} {sign + Fraction(p * q, 500)} {sign * Fraction(p, 10)}"
    )
    loop = _loop(plant, controller=transfer(f"{Fraction(gain, 10)}", "1"))
    turns = encirclements(loop.crossovers, loop._ends)
    exact = loop.verdict.stability
    if turns is None or exact == "marginal":
        assert turns is None
        assert exact != "stable"
    else:
        assert (loop._rational.growing - turns == 0) == (exact == "stable")


def test_triple_lag_has_the_margins_of_the_textbook() -> None:
    """``1/(s (s + 1)^2)``: a textbook exercise from memory; gain margin 2 at 1 rad/s in closed form.

    The gain crossover is the real root of ``w^3 + w = 1`` (Cardano); the phase there is ``-90 - 2 atan w``.
    """
    found = _loop(transfer("1", "1 2 1 0")).margins
    root = ((1 + sqrt(31 / 27)) / 2) ** (1 / 3) - ((sqrt(31 / 27) - 1) / 2) ** (1 / 3)
    assert found.gain_margin == pytest.approx(2, rel=1e-14)
    assert found.phase_crossover_rad_s == pytest.approx(1, rel=1e-14)
    assert found.crossover_rad_s == pytest.approx(root, rel=1e-14)
    assert found.phase_margin_deg == pytest.approx(90 - 2 * degrees(atan(root)), rel=1e-12)
    assert found.delay_margin_s == pytest.approx((pi / 2 - 2 * atan(root)) / root, rel=1e-12)
    assert found.gain_reduction_margin is None


def test_integrator_with_dead_time_has_its_closed_form() -> None:
    """``K exp(-s h)/s``: crossover K, phase margin ``90 - K h``, gain margin ``pi/(2 K h)``."""
    found = _loop(transfer("0.8", "1 0"), "0.5").margins
    assert found.crossover_rad_s == pytest.approx(0.8, rel=1e-14)
    assert found.phase_margin_deg == pytest.approx(90 - degrees(0.4), rel=1e-12)
    assert found.gain_margin == pytest.approx(pi / 0.8, rel=1e-12)
    assert found.delay_margin_s == pytest.approx((pi / 2 - 0.4) / 0.8, rel=1e-12)


def test_unstable_plant_has_a_gain_it_must_keep() -> None:
    """``2/(s - 1)``: closed-loop pole at -1; at half the gain it reaches 0. Crossover sqrt 3, margin 60 deg."""
    loop = _loop(transfer("2", "1 -1"))
    assert loop.verdict.is_stable
    assert loop.margins.gain_margin is None
    assert loop.margins.gain_reduction_margin == pytest.approx(0.5, rel=1e-14)
    assert loop.margins.phase_crossover_below_rad_s == 0
    assert loop.margins.crossover_rad_s == pytest.approx(sqrt(3), rel=1e-14)
    assert loop.margins.phase_margin_deg == pytest.approx(60, rel=1e-12)


@pytest.mark.parametrize(("gain", "stable"), [("1.57", True), ("1.58", False)])
def test_stability_with_dead_time_changes_where_the_closed_form_says(gain: str, stable: bool) -> None:
    """``K exp(-s)/s`` is stable for ``K < pi/2 = 1.5708`` (Hayes, Journal of the London Mathematical Society, 1950)."""
    assert _loop(transfer(gain, "1 0"), "1").verdict.is_stable == stable


@pytest.mark.parametrize(("gain", "stable"), [("0.9", False), ("1.1", True), ("4.6", True), ("4.7", False)])
def test_unstable_plant_with_dead_time_is_stable_between_two_gains(gain: str, stable: bool) -> None:
    """``K exp(-0.3 s)/(s - 1)``: K above 1, and below ``sqrt(1 + w^2)`` where ``atan w = 0.3 w``."""
    w = brentq(lambda x: atan(x) - 0.3 * x, 1.0, 10.0)
    limit = sqrt(1 + w * w)
    assert (1 < float(gain) < limit) == stable
    assert _loop(transfer(gain, "1 -1"), "0.3").verdict.is_stable == stable


def test_gain_that_stays_above_one_is_lost_with_any_dead_time() -> None:
    loop = _loop(transfer("1.5 3", "1 1"), "0.001")
    assert loop.verdict.stability == "unstable"
    assert "gain at high frequency is 1 or more" in loop.verdict.by


def test_gain_that_stays_above_one_has_no_delay_to_spare() -> None:
    loop = _loop(transfer("1.5 3", "1 1"))
    assert loop.verdict.is_stable
    assert loop.margins.delay_margin_s == 0


def test_gain_that_stays_below_one_is_limited_at_infinity() -> None:
    """``(s + 1)/(2 s + 2 + tiny)``: the gain is 1/2 at all high frequencies, which every phase is reached at."""
    margins = _loop(transfer("1 1", "2 2.5"), "1").margins
    assert margins.gain_margin == pytest.approx(2, rel=1e-12)
    assert margins.maximum_sensitivity == pytest.approx(2, rel=1e-12)


def test_cancelled_growth_is_named() -> None:
    loop = _loop(transfer("1", "1 -1"), controller=transfer("1 -1", "1 2"))
    assert loop.verdict.stability == "unstable"
    assert "hides the mode" in loop.verdict.by


def test_cancelled_integrator_is_marginal() -> None:
    assert _loop(transfer("1", "1 0"), controller=transfer("1 0", "1 2")).verdict.stability == "marginal"


def test_undamped_loop_is_marginal_and_has_no_bounded_sensitivity() -> None:
    loop = _loop(transfer("4", "1 0 0"))
    assert loop.verdict.stability == "marginal"
    assert loop.margins.maximum_sensitivity is None


def test_touching_gain_one_counts_as_a_crossover() -> None:
    """``s/(s^2 + s + 1)`` has its greatest gain, 1, at 1 rad/s: no crossing, but a margin of half a turn."""
    margins = _loop(transfer("1 0", "1 1 1")).margins
    assert margins.crossovers_rad_s == pytest.approx((1.0,), rel=1e-14)
    assert margins.phase_margin_deg == pytest.approx(180, rel=1e-12)


def test_unstable_loop_has_a_negative_phase_margin() -> None:
    """``10/(s (s + 1)^2)``: beyond its gain margin of 2, so the crossover lies beyond half a turn."""
    margins = _loop(transfer("10", "1 2 1 0")).margins
    assert margins.phase_margin_deg is not None
    assert margins.phase_margin_deg < 0
    assert margins.delay_margin_s is None
    assert margins.gain_reduction_margin == pytest.approx(0.2, rel=1e-12)


@pytest.mark.parametrize(
    ("plant", "controller", "message"),
    [
        pytest.param(Plant(ONE, Fraction(-1)), ONE, "it would answer before it is asked", id="prediction"),
        pytest.param(Plant(transfer("1 0", "1")), ONE, "[plant] transfer: it is improper", id="improper plant"),
        pytest.param(
            Plant(ONE, sensor=transfer("1 0", "1")), ONE, "[plant] sensor: it is improper", id="improper sensor"
        ),
        pytest.param(Plant(ONE), transfer("1 0", "1"), "the controller is improper", id="improper controller"),
    ],
)
def test_what_has_no_loop_is_refused(plant: Plant, controller: TransferFunction, message: str) -> None:
    with pytest.raises(RealizeError) as refusal:
        ContinuousLoop(controller, plant)
    assert message in str(refusal.value)
