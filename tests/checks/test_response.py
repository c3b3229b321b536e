from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import atan2, ceil, exp, log, pi, sqrt

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.checks.chain import Chain, Motion
from realize.checks.counterpart import Counterpart
from realize.checks.response import StepResponse
from realize.checks.step import SampledResponse
from realize.errors import Refused
from realize.methods import METHODS, discretize
from tests.checks.designs import monic, pulse, reference, step_samples, transfer
from tests.strategies import Factored, sampled_designs

_MP = mpmath.mp.clone()
_MP.dps = 80

#: Samples compared with the exact recursion.
COUNT = 30


def second_order(damping: float, natural_rad_s: float, period_s: str) -> StepResponse:
    values = {"z": repr(damping), "w": repr(natural_rad_s)}
    return reference("w^2/(s^2 + 2*z*w*s + w^2)", period_s, **values).step


def truth(zeros: Sequence[complex], poles: Sequence[complex], gain: float, times: list[float]) -> list[float]:
    """Step response by partial fractions at 80 digits, of distinct poles that are exactly the given doubles."""
    roots = [_MP.mpc(p) for p in (*poles, 0)]
    scale = gain * _MP.fprod(-_MP.mpc(p) for p in poles) / _MP.fprod(-_MP.mpc(z) for z in zeros)
    residues = [
        scale * _MP.fprod(p - _MP.mpc(z) for z in zeros) / _MP.fprod(p - q for j, q in enumerate(roots) if j != i)
        for i, p in enumerate(roots)
    ]
    return [float(_MP.re(_MP.fsum(r * _MP.exp(p * t) for r, p in zip(residues, roots, strict=True)))) for t in times]


def butterworth(order: int) -> list[complex]:
    angles = [pi * (2 * k + order + 1) / (2 * order) for k in range(order // 2)]
    upper = [complex(np.cos(a), abs(np.sin(a))) for a in angles]
    return [p for u in upper for p in (u, u.conjugate())]


HARD: dict[str, tuple[Sequence[complex], Sequence[complex]]] = {
    "nearly double": ([], [-1, -1 - 1e-9]),
    "nearly quadruple": ([], [-1, -1 - 1e-9, -1 + 1e-9, -1 - 2e-9]),
    "nearly double pairs": ([], [-0.1 + 1j, -0.1 - 1j, -0.1 + (1 + 1e-9) * 1j, -0.1 - (1 + 1e-9) * 1j]),
    "stiff": ([], [-0.1, -10.0, -1e3, -1e5]),
    "stiff with slow zeros": ([-0.3, -2.0], [-0.1, -10.0, -1e3, -1e5]),
    "zero pair between far poles": ([-1 + 300j, -1 - 300j], [-0.05, -0.051, -1e6, -2e6]),
    "eight in a row": ([], [-float(i) for i in range(1, 9)]),
    "butterworth 16": ([], butterworth(16)),
    "butterworth 32": ([], butterworth(32)),
    "notch": ([-1e-3 + 5j, -1e-3 - 5j], [-3 + 4j, -3 - 4j]),
    "lightly damped": ([], [-1e-4 + 2j, -1e-4 - 2j]),
    "washout": ([0.0], [-0.2, -5.0]),
    "growing": ([-2.0], [0.5, -6.0]),
}


@pytest.mark.parametrize("name", [n for n in HARD if n != "washout"])
def test_values_agree_with_partial_fractions_at_80_digits(name: str) -> None:
    zeros, poles = HARD[name]
    response = StepResponse(1.5, [complex(z) for z in zeros], [complex(p) for p in poles], 2.0**-6)
    times = [0.0, 2.0**-10, 0.0078125, 0.5, 3.25, 17.0, 300.0, 4097.5]
    expected = np.array(truth(zeros, poles, 1.5, [t * 2.0**-6 for t in times]))
    # 1e-12 of the size: twenty doublings, each rounding a few times.
    assert np.max(np.abs(response.at(np.array(times))[0] - expected)) <= 1e-12 * np.max(np.abs(expected))


def test_a_zero_at_the_origin_cancels_the_step_exactly() -> None:
    # s/((s + 0.2)(s + 5)) answers (exp(-0.2 t) - exp(-5 t))/4.8; the gain is the limit of G/s.
    response = StepResponse(1.0, [0j], [-0.2 + 0j, -5 + 0j], 0.125)
    times = np.arange(0.0, 4000.0, 0.5)
    expected = (np.exp(-0.2 * times / 8) - np.exp(-5 * times / 8)) / 4.8
    assert response.at(times)[0] == pytest.approx(expected, rel=0, abs=1e-15)


@pytest.mark.parametrize("name", HARD)
def test_slopes_are_the_derivatives_of_the_values(name: str) -> None:
    zeros, poles = HARD[name]
    response = StepResponse(1.0, [complex(z) for z in zeros], [complex(p) for p in poles], 2.0**-18)
    t = np.array([0.5, 7.0, 100.0])
    h = 2.0**-8
    secant = (response.at(t + h)[0] - response.at(t - h)[0]) / (2 * h)
    assert response.at(t)[1] == pytest.approx(secant, rel=1e-3, abs=1e-9)


@settings(max_examples=40)
@given(sampled_designs(most_order=6))
def test_the_design_and_its_step_invariant_counterpart_agree_with_the_exact_recursion(
    case: tuple[Factored, Fraction],
) -> None:
    factored, period_s = case
    g = factored.transfer()
    try:
        discrete = discretize(g, period_s, "step-invariant").pulse
    except Refused:
        return
    exact = step_samples(discrete, COUNT)
    samples = np.arange(COUNT)
    size = max(map(abs, exact))
    ours = StepResponse(
        float(g.low_frequency_gain), _every(factored.zeros), _every(factored.poles), float(period_s)
    ).at(samples.astype(float))[0]
    # Poles known to a double move a phase of up to 30 * 100 rad (kind "stiff") by 1e-13 of it.
    assert ours == pytest.approx(exact, rel=0, abs=1e-10 * size)
    assert SampledResponse(Counterpart(discrete), samples).values == pytest.approx(exact, rel=0, abs=1e-10 * size)


def _every(roots: tuple) -> list[complex]:  # type: ignore[type-arg]
    members = ((r, (1, -1) if r.im else (1,)) for r in roots)
    return [complex(float(r.re), s * float(r.im)) for r, signs in members for s in signs for _ in range(r.multiplicity)]


@pytest.mark.parametrize("method", METHODS)
@pytest.mark.parametrize(
    "text",
    [
        "1/(s + 4)^4",
        "(s + 2)/((s - 1)*(s + 6))",
        "(s^2 + 31.4*s + 98596)/(s^2 + 439.6*s + 98596)",
        "4.2 + 18/s + 0.09*s/(0.002*s + 1)",
        "(s + 4)/s^2",
        "100/((s + 3000)*(s + 5000))",
    ],
)
def test_every_counterpart_agrees_with_its_exact_recursion(text: str, method: str) -> None:
    g = transfer(text)
    discrete = discretize(g, Fraction(1, 500), method, Fraction(30)).pulse
    exact = step_samples(discrete, COUNT)
    ours = SampledResponse(Counterpart(discrete), np.arange(COUNT)).values
    assert ours == pytest.approx(exact, rel=0, abs=1e-12 * max(map(abs, exact)))


@pytest.mark.parametrize(
    ("numerator", "denominator"),
    [
        pytest.param([1, 2, 3], [1, 0, 0], id="dead beat: all poles at z = 0"),
        pytest.param([1], monic("-1/7", "-1/7", "-1/7"), id="triple alternating pole"),
        pytest.param(["1/10"], monic(0, 0, 1, "1/2"), id="delay, integrator and lag"),
        pytest.param([1, "-1/2"], monic("-9/10", "999/1000"), id="fast and slow"),
    ],
)
def test_poles_that_have_no_counterpart_in_s_are_followed_too(
    numerator: list[str], denominator: list[Fraction]
) -> None:
    discrete = pulse(numerator, denominator, "1")
    exact = step_samples(discrete, COUNT)
    ours = SampledResponse(Counterpart(discrete), np.arange(COUNT)).values
    assert ours == pytest.approx(exact, rel=0, abs=1e-13 * max(map(abs, exact)))


@given(st.integers(0, 2**40), st.integers(0, 2**40))
def test_moving_twice_is_moving_by_the_sum(first: int, second: int) -> None:
    chain = Chain(1.0, [], [-1e-12 + 1e-13j, -1e-12 - 1e-13j, 0j])
    motion = Motion(chain.a, 0)
    start = chain.b[:, None]
    once = motion.moved(start, np.array([first + second]))
    twice = motion.moved(motion.moved(start, np.array([first])), np.array([second]))
    assert twice == pytest.approx(once, rel=1e-10)


@pytest.mark.parametrize("damping", [0.1, 0.2, 0.3, 0.4, 0.5, 0.6, 0.7, 0.8, 0.9])
@pytest.mark.parametrize(("natural_rad_s", "period_s"), [(2.0, "0.1"), (0.5, "0.00001"), (900.0, "0.002")])
def test_the_peak_is_the_closed_form_to_1e_9_percent(damping: float, natural_rad_s: float, period_s: str) -> None:
    # 100 exp(-pi z/sqrt(1 - z^2)) at pi/(w sqrt(1 - z^2)): from the zero of the impulse response.
    response = second_order(damping, natural_rad_s, period_s)
    damped = sqrt(1 - damping**2)
    assert 100 * (response.peak.value - 1) == pytest.approx(100 * exp(-pi * damping / damped), rel=0, abs=1e-9)
    assert response.peak.at_samples * float(period_s) == pytest.approx(pi / (natural_rad_s * damped), rel=1e-6)


def test_a_peak_of_nearly_double_poles_is_right_to_1e_9_percent() -> None:
    # (1 + s/z)/((1 + s)(1 + s/(1 + 1e-9))): y = 1 - e^-t - t e^-t (1 - 1/z) for a double pole, with z = 1/4 here its
    # peak is at y' = 0: t = (1/z)/(1/z - 1) = 4/3. Parting the poles by 1e-9 moves it by as much times 1e-1.
    response = StepResponse(1.0, [-0.25 + 0j], [-1 + 0j, -1 - 1e-9 + 0j], 0.01)
    t = 4 / 3
    assert response.peak.value == pytest.approx(1 - exp(-t) + 3 * t * exp(-t), rel=0, abs=1e-9)
    assert response.peak.at_samples == pytest.approx(100 * t, rel=1e-5)


def test_the_peak_of_a_lead_is_its_first_value() -> None:
    peak = reference("5*(0.2*s + 1)/(0.02*s + 1)", "0.005").step.peak
    assert peak.value == pytest.approx(10, abs=1e-12)
    assert peak.at_samples == 0


def test_a_response_that_approaches_from_below_peaks_at_its_final_value() -> None:
    peak = reference("-3/((s + 1)*(s + 2))", "0.01").step.peak
    assert (peak.value, peak.at_samples) == (1.0, float("inf"))


def test_an_overshoot_of_slow_real_poles_is_found_among_many_samples() -> None:
    # (1 + s/z)/((1 + s/a)(1 + s/b)): y' = 0 where exp((b - a) t) = (b/z - 1)/(a/z - 1).
    z, a, b = 0.25, 1.0, 3.0
    peak = reference(f"(s/{z} + 1)/((s/{a} + 1)*(s/{b} + 1))", "0.00001").step.peak
    t = log((b / z - 1) / (a / z - 1)) / (b - a)
    y = 1 - (b / (b - a)) * (1 - a / z) * exp(-a * t) + (a / (b - a)) * (1 - b / z) * exp(-b * t)
    assert peak.value == pytest.approx(y, rel=0, abs=1e-11)
    assert peak.at_samples == pytest.approx(t * 1e5, rel=1e-6)


def test_a_negative_gain_peaks_downwards() -> None:
    up, down = (reference(f"{sign}9/(s^2 + s + 9)", "0.01").step for sign in ("", "-"))
    assert down.peak == up.peak
    assert down.least_sampled_peak == up.least_sampled_peak


def test_a_ripple_on_a_slow_rise_peaks_where_both_are_high() -> None:
    # y = 1 - exp(-a t) + A exp(-b t) cos(w t): the highest crest comes a hundred cycles after the step.
    a, b, w, share = 1.0, 0.1, 500.0, 0.3
    peak = reference(f"{a}/(s + {a}) + {share}*s*(s + {b})/((s + {b})^2 + {w}^2)", "0.0001").step.peak
    crests = np.arange(1, 70 * w / (2 * pi)) * 2 * pi / w
    # Each crest lies within (a + b)/w of a cycle's start; the spacing errs by (1e-3/2)^2/2.
    grid = crests[:, None] + np.linspace(-2 * (a + b) / w, 2 * (a + b) / w, 41) / w
    y = 1 - np.exp(-a * grid) + share * np.exp(-b * grid) * np.cos(w * grid)
    assert peak.at_samples > 100 * 2 * pi / w / 0.0001
    assert peak.value == pytest.approx(float(y.max()), rel=0, abs=1e-9)


def test_a_ripple_that_outlives_the_rise_is_found_among_tens_of_thousands_of_cycles() -> None:
    # A resonance 1e5 cycles long on a lag of 3000 cycles: crests grow with the lag, then decay.
    period_s, w, b, a = "0.0001", 700.0, 0.005, 0.05
    design = reference(f"1/(s/{a} + 1) + 0.2*s*{w}/((s + {b})^2 + {w}^2)", period_s)
    response = design.step
    assert response.last > 10**7
    crests = (np.arange(0, 20000) + 0.25) * 2 * pi / w
    crest = 1 - np.exp(-a * crests) + 0.2 * np.exp(-b * crests)
    shift = atan2(b, w) / w
    near = crests[np.argsort(-crest)[:400], None] + shift * np.linspace(-3, 3, 41)
    y = 1 - np.exp(-a * near) + 0.2 * np.exp(-b * near) * np.sin(w * near)
    assert response.peak.value == pytest.approx(float(y.max()), rel=0, abs=1e-9)


@pytest.mark.parametrize("period_s", ["0.02", "0.3", "0.9", "1.3"])
def test_the_least_sampled_peak_is_that_of_the_worst_phase(period_s: str) -> None:
    response = second_order(0.2, 2.0, period_s)
    top = response.peak.at_samples
    phases = np.linspace(0, 1, 20001)
    before = np.where(top - phases >= 0, response.at(np.maximum(top - phases, 0))[0], -np.inf)
    seen = np.maximum(before, response.at(top + 1 - phases)[0])
    assert response.least_sampled_peak <= seen.min() + 1e-12
    assert response.least_sampled_peak == pytest.approx(max(1.0, seen.min()), abs=2e-4 * float(period_s))
    assert response.least_sampled_peak <= response.peak.value


@given(
    st.floats(0.02, 1.5), st.floats(0.01, 3), st.floats(0.05, 30), st.sampled_from([0.01, 0.1, 0.5]), st.integers(0, 3)
)
def test_bounds_hold_every_value_of_their_period_and_are_reached(
    damping: float, w: float, real: float, period_s: float, start: int
) -> None:
    root = complex(-damping * w, w * sqrt(abs(1 - damping**2)))
    response = StepResponse(1.0, [], [root, root.conjugate(), complex(-real)], period_s)
    samples = np.arange(start, start + 40)
    low, high = response.bounds_after(samples)
    inside = (samples[:, None] + np.linspace(0, 1, 200, endpoint=False)).astype(np.float64)
    values = np.append(
        response.at(inside.ravel())[0].reshape(inside.shape), response.at(samples.astype(float) + 1)[0][:, None], 1
    )
    # The cubic between points at most a quarter radian apart, and 200 points at most 3/200 rad apart.
    slack = 2e-5 * np.abs(values).max() + np.ptp(values, axis=1) * 3e-4
    assert np.all(low <= values.min(axis=1) + slack)
    assert np.all(low >= values.min(axis=1) - slack)
    assert np.all(high >= values.max(axis=1) - slack)
    assert np.all(high <= values.max(axis=1) + slack)


@pytest.mark.parametrize(
    ("text", "period_s", "expected"),
    [
        pytest.param("1/((s + 2)*(s + 50))", "0.01", ceil(7 / 2 * 100), id="7 time constants of the slowest pole"),
        pytest.param("s/(s^2 + 100)", "1/64", ceil(2 * pi * 64), id="10 periods of an undamped pair"),
        pytest.param("s/((s + 1)*(s^2 + 10000))", "0.01", 700, id="the longer of the two"),
        pytest.param("1/((s - 1/2)*(s + 3))", "0.01", 233, id="growth does not prolong a decay"),
        pytest.param("1/((s - 2)*(s + 1/10))", "0.01", 350, id="7/Re p at the most where a pole grows"),
        pytest.param("1/(s - 2)", "0.01", 350, id="7/Re p where nothing decays"),
        pytest.param("1/s", "0.01", 20, id="20 samples for an integrator"),
        pytest.param("3", "0.01", 20, id="20 samples for a static gain"),
        pytest.param("1/(s + 1000)", "0.01", 20, id="20 samples at the least"),
        pytest.param("1/(s - 100)", "0.01", 20, id="20 samples of growth"),
        pytest.param("1/(s - 5000)", "0.01", 5, id="as far as doubles go"),
        pytest.param("1/(s - 31000)", "0.01", -1, id="not one sample"),
    ],
)
def test_the_horizon_is_as_stated(text: str, period_s: str, expected: int) -> None:
    assert reference(text, period_s).step.last == expected


@pytest.mark.parametrize(
    ("text", "period_s"),
    [
        pytest.param("1/((s + 0.1)*(s + 100000))", "0.0001", id="0.1 rad/s at 10 kHz beside 1e5 rad/s"),
        pytest.param("1/((s + 0.0001)*(s^2 + 2*s + 1000000))", "0.000001", id="7e10 samples"),
        pytest.param("1/((s + 0.1)*(s^2 + 4000*s + 4e8))", "0.0001", id="ringing that is over in 200 samples"),
        pytest.param("1e8/(s^2 + 0.001*s + 1e8)", "0.01", id="16 turns a sample, for a million samples"),
        pytest.param("1/((s + 0.1)*(s^2 + 0.1*s + 1e8)*(s^2 + 0.2*s + 9e6)*(s^2 + s + 400))", "0.0001", id="ringing"),
    ],
)
def test_no_more_than_a_few_thousand_samples_are_looked_at(text: str, period_s: str) -> None:
    response = reference(text, period_s).step
    assert response.last > 5 * 10**5
    assert response.samples[0] == 0
    assert response.samples[-1] <= response.last
    assert len(response.samples) < 4000
    assert len(response._grid.times) < 20000
    assert response.peak.value >= 1


def test_short_horizons_are_looked_at_sample_by_sample() -> None:
    response = reference("1/(s + 1)", "0.005").step
    assert list(response.samples) == list(range(1401))
