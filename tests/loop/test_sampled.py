"""The sampled loop, against a state-space model on a dense grid and the eigenvalues of its closed loop."""

from __future__ import annotations

from fractions import Fraction
from math import atan, hypot, log, pi

import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.loop import ContinuousLoop, Plant, SampledLoop, held_plant
from realize.methods import METHODS, discretize
from realize.transfer import PulseTransferFunction
from tests.loop.independent import figures, sampled, sampled_response
from tests.loop.loops import LOOPS, Case, assert_margins, ratio, transfer

_IDS = [case.name for case in LOOPS]


def _loop(case: Case, method: str = "bilinear") -> SampledLoop:
    pulse = discretize(case.controller, case.period_s, method, Fraction(1)).pulse
    return SampledLoop(pulse, held_plant(case.plant, case.period_s, case.compute_delay_s))


def _gain(k: str, period_s: Fraction) -> PulseTransferFunction:
    return discretize(transfer(k, "1"), period_s, "bilinear").pulse


@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_margins_agree_with_a_dense_grid_of_a_state_space_model(case: Case) -> None:
    loop = _loop(case)
    model = sampled(case.seen_ratio, float(case.period_s), float(loop.held.delay_s))
    response = sampled_response(model, ratio(loop.controller))
    nyquist = pi / float(case.period_s)
    below = case.loop_ratio.below
    ends = [] if below[-1] == 0 else [complex(case.loop_ratio.above[-1] / below[-1])]
    last = complex(complex(response(nyquist)).real)
    assert_margins(loop.margins, figures(response, 1e-3, nyquist * (1 - 1e-9), ends=[*ends, last]))


@pytest.mark.parametrize("gain", ["1/8", "1", "8"])
@pytest.mark.parametrize("case", LOOPS, ids=_IDS)
def test_stability_agrees_with_the_eigenvalues_of_the_closed_loop(case: Case, gain: str) -> None:
    loop = _loop(case)
    pulse = loop.controller
    scaled = PulseTransferFunction(
        tuple(Fraction(gain) * c for c in pulse.numerator), pulse.denominator, pulse.period_s, pulse.poles, pulse.zeros
    )
    model = sampled(case.seen_ratio, float(case.period_s), float(loop.held.delay_s))
    largest = float(np.abs(np.linalg.eigvals(model.closed(ratio(scaled)))).max())
    assert SampledLoop(scaled, loop.held).verdict.is_stable == (largest < 1)


@given(
    st.integers(-20, 40),
    st.integers(1, 40),
    st.integers(1, 60),
    st.sampled_from(sorted(set(METHODS) - {"bilinear-prewarped"})),
    st.fractions(min_value=0, max_value=3, max_denominator=8),
)
def test_closed_loop_polynomial_and_encirclements_agree(
    a: int, b: int, gain: int, method: str, delay: Fraction
) -> None:
    """A PI controller around ``1/((s + a/10) (s + b/10))`` at 10 Hz, growing plants included."""
    assume(a != 0)
    plant = transfer("1", f"1 {Fraction(a + b, 10)} {Fraction(a * b, 100)}")
    period = Fraction(1, 10)
    pulse = discretize(transfer(f"{Fraction(gain, 10)} {Fraction(gain, 20)}", "1 0"), period, method).pulse
    loop = SampledLoop(pulse, held_plant(Plant(plant), period, delay * period))
    assert loop._by_encirclements().stability == loop.verdict.stability


def test_integrator_under_proportional_control_has_its_closed_form() -> None:
    """``K T/(z - 1)``: pole at ``1 - K T``; limit at Nyquist with ``K T = 2``; ``|L| = 1`` at ``2 sin(wT/2) = K T``."""
    loop = SampledLoop(
        _gain("5", Fraction(1, 10)), held_plant(Plant(transfer("1", "1 0")), Fraction(1, 10), Fraction(0))
    )
    w = 20 * atan(0.25 / hypot(1, 0) / (1 - 0.25**2) ** 0.5)
    assert loop.margins.gain_margin == pytest.approx(4, rel=1e-12)
    assert loop.margins.phase_crossover_rad_s == pytest.approx(10 * pi, rel=1e-15)
    assert loop.margins.crossover_rad_s == pytest.approx(w, rel=1e-12)
    assert loop.margins.phase_margin_deg == pytest.approx(90 - w / 20 * 180 / pi, rel=1e-12)


@pytest.mark.parametrize(("gain", "stability"), [("19.9999", "stable"), ("20", "marginal"), ("20.0001", "unstable")])
def test_the_stability_limit_is_told_to_the_last_digit(gain: str, stability: str) -> None:
    loop = SampledLoop(
        _gain(gain, Fraction(1, 10)), held_plant(Plant(transfer("1", "1 0")), Fraction(1, 10), Fraction(0))
    )
    assert loop.verdict.stability == stability


def test_antenna_servo_has_the_published_equivalent_damping() -> None:
    """Franklin, Powell & Workman, T = 1 s: damping 0.2145 (recomputed)."""
    period = Fraction(1)
    pulse = discretize(transfer("10 1", "1 1"), period, "pole-zero-mapped").pulse
    held = held_plant(Plant(transfer("1", "10 1 0")), period, Fraction(0))
    closed = np.polyadd(
        np.polymul(ratio(pulse).below, ratio(held.pulse).below), np.polymul(ratio(pulse).above, ratio(held.pulse).above)
    )
    z = max(np.roots(closed), key=lambda root: root.imag)
    assert -log(abs(z)) / abs(np.log(z)) == pytest.approx(0.2145, abs=5e-5)
    assert SampledLoop(pulse, held).verdict.is_stable


def test_faster_sampling_approaches_the_continuous_loop_with_hold_and_delay() -> None:
    case = LOOPS[6]
    for rate in (50, 500):
        period = Fraction(1, rate)
        pulse = discretize(case.controller, period, "bilinear").pulse
        loop = SampledLoop(pulse, held_plant(case.plant, period, period))
        with_hold = ContinuousLoop(case.controller, case.plant, hold_s=period, compute_delay_s=period)
        assert loop.margins.phase_margin_deg == pytest.approx(
            with_hold.margins.phase_margin_deg, abs=0.5 / (rate / 50) ** 2
        )


def test_a_hidden_integrator_is_marginal_and_two_are_unstable() -> None:
    period = Fraction(1, 10)
    washout = discretize(transfer("1 0", "1 2"), period, "bilinear").pulse
    one = SampledLoop(washout, held_plant(Plant(transfer("1", "1 1 0")), period, Fraction(0)))
    double = discretize(transfer("1 0 0", "1 4 4"), period, "bilinear").pulse
    two = SampledLoop(double, held_plant(Plant(transfer("1", "1 0 0")), period, Fraction(0)))
    assert one.verdict.stability == "marginal"
    assert two.verdict.stability == "unstable"


def test_a_cancelled_growing_mode_is_found_in_the_polynomial() -> None:
    """The controller's zero meets the plant's growing pole only to rounding: the mode is there, and grows."""
    period = Fraction(1, 10)
    pulse = discretize(transfer("1 -1", "1 2"), period, "pole-zero-mapped").pulse
    loop = SampledLoop(pulse, held_plant(Plant(transfer("1", "1 2 -3")), period, Fraction(0)))
    assert loop.verdict.stability != "stable"


def test_no_solution_when_both_answer_at_once_with_minus_one() -> None:
    loop = SampledLoop(_gain("-1", Fraction(1)), held_plant(Plant(transfer("1 3", "1 2")), Fraction(1), Fraction(0)))
    assert loop.verdict.stability == "unstable"
    assert "no solution" in loop.verdict.by


def test_stability_is_proven_with_the_bits_it_took() -> None:
    assert _loop(LOOPS[6]).verdict.by == "decided on the closed-loop polynomial, enclosed to 256 bits"
    assert _loop(LOOPS[9]).verdict.by.startswith("encirclements counted")
