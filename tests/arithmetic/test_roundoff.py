"""Round-off: exact noise gains, proven bounds that integer recursions keep, estimates that they meet."""

from __future__ import annotations

import random
from fractions import Fraction
from math import sqrt

import mpmath
import numpy as np
import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.roundoff import (
    expected_offset,
    expected_rms,
    gramians,
    largest_magnitude,
    noise_gain,
    output_error_bound,
    scaled_noise_gain,
)
from realize.arithmetic.state_space import (
    PulseRatio,
    StateSpace,
    controllable_form,
    in_series,
    normal_form,
    paths,
    pulse_ratio,
    rounding_paths,
    scaled,
    section_ratio,
)

RADIUS, ANGLE = Fraction(9, 10), "0.7"


def cosine() -> Fraction:
    """``cos 0.7`` to 40 digits."""
    with mpmath.workdps(50):
        return Fraction(mpmath.nstr(mpmath.cos(mpmath.mpf(ANGLE)), 40))


def worked_pair(numerator: tuple[int, ...] = (1, 0, 0)) -> PulseRatio:
    return pulse_ratio(numerator, (1, -2 * RADIUS * cosine(), RADIUS**2))


def fractions(low: int, high: int, denominator: int) -> st.SearchStrategy[Fraction]:
    return st.integers(low * denominator, high * denominator).map(lambda n: Fraction(n, denominator))


@st.composite
def stable_pairs(draw: st.DrawFn) -> tuple[Fraction, Fraction]:
    """``(a1, a2)`` inside the triangle of stability."""
    a2 = draw(fractions(-1, 1, 16).filter(lambda a: abs(a) < 1))
    return (1 + a2) * draw(fractions(-1, 1, 16).filter(lambda a: abs(a) < 1)), a2


@st.composite
def ratios(draw: st.DrawFn) -> PulseRatio:
    top = draw(st.lists(fractions(-2, 2, 8), min_size=1, max_size=3))
    first = section_ratio(top, draw(stable_pairs()))
    return in_series(first, section_ratio((1,), draw(stable_pairs()))) if draw(st.booleans()) else first


@given(fractions(-1, 1, 1000).filter(lambda a: abs(a) < 1))
def test_one_pole_has_one_over_one_less_its_square(a: Fraction) -> None:
    """Geometric series."""
    assert noise_gain(section_ratio((1,), (a,))) == 1 / (1 - a * a)


@given(stable_pairs())
def test_pair_has_its_closed_form_exactly(a: tuple[Fraction, Fraction]) -> None:
    """``(1 + a2)/((1 - a2)((1 + a2)^2 - a1^2))``; from memory, recomputed."""
    a1, a2 = a
    assert noise_gain(section_ratio((1,), a)) == (1 + a2) / ((1 - a2) * ((1 + a2) ** 2 - a1 * a1))


def test_worked_pair_has_the_worked_norms() -> None:
    """Radius 0.9, angle 0.7; from memory, recomputed, to the digits given."""
    gain, largest = noise_gain(worked_pair()), largest_magnitude(worked_pair())
    assert gain is not None
    assert abs(gain - Fraction("6.8993615896")) < Fraction(1, 2 * 10**10)
    assert largest == pytest.approx(8.1698438, abs=5e-8)
    assert largest == pytest.approx(1 / ((1 - 0.81) * np.sin(0.7)), rel=1e-14)


@given(ratios())
def test_noise_gain_is_the_mean_square_on_the_circle(ratio: PulseRatio) -> None:
    """Parseval's theorem: the mean over 2**14 points, exact but for what ``|z|**(2**14)`` of the poles leaves."""
    z = np.exp(2j * np.pi * np.arange(1 << 14) / (1 << 14))
    top, bottom = (np.polyval([float(c) for c in p] or [0.0], z) for p in ratio)
    gain = noise_gain(ratio)
    assert gain is not None
    assert float(gain) == pytest.approx(np.mean(abs(top / bottom) ** 2), rel=1e-7, abs=1e-12)


@given(ratios())
def test_norms_are_in_order(ratio: PulseRatio) -> None:
    """Root mean square gain, largest magnitude, peak gain: each at most the next (Jackson 1970)."""
    gain, largest, peak = noise_gain(ratio), largest_magnitude(ratio), peak_gain(ratio).high
    assert gain is not None
    assert largest is not None
    assert peak is not None
    assert sqrt(gain) <= largest * (1 + 1e-12)
    assert largest <= float(peak) * (1 + 1e-12)


@given(ratios())
def test_no_frequency_exceeds_the_largest_magnitude(ratio: PulseRatio) -> None:
    z = np.exp(1j * np.linspace(0, np.pi, 4001))
    top, bottom = (np.polyval([float(c) for c in p] or [0.0], z) for p in ratio)
    largest = largest_magnitude(ratio)
    assert largest is not None
    # A double's rounding where the poles come near: (1/8)^4 of a distance at the worst.
    assert np.max(abs(top / bottom)) <= largest * (1 + 1e-9) + 1e-12


def test_largest_magnitude_of_a_narrow_resonance() -> None:
    """Radius 1 - 1e-9, angle 1e-3: ``1/((1 - r^2) sin th)``, far narrower than any grid."""
    radius = 1 - Fraction(1, 10**9)
    with mpmath.workdps(60):
        bottom = (1, -2 * radius * Fraction(mpmath.nstr(mpmath.cos(mpmath.mpf("1e-3")), 50)), radius**2)
    assert largest_magnitude(pulse_ratio((1, 0, 0), bottom)) == pytest.approx(
        1 / (float(1 - radius**2) * np.sin(1e-3)), rel=1e-9
    )


@pytest.mark.parametrize("a", [(-1,), (Fraction(-6, 5), 1), (-2, 1), (-3,)], ids=str)
def test_pole_on_or_outside_the_circle_leaves_no_figure(a: tuple[int, ...]) -> None:
    sources = [(section_ratio((1,), a), Fraction(1))]
    assert noise_gain(sources[0][0]) is None
    assert expected_rms(sources) is None
    assert output_error_bound(sources) is None


def test_figures_of_an_integrator() -> None:
    integrator = section_ratio((1,), (-1,))
    assert largest_magnitude(integrator) is None
    assert expected_offset([(integrator, Fraction(1))]) is None
    assert scaled_noise_gain(controllable_form(pulse_ratio((1,), (1, -1)))) is None
    assert gramians(controllable_form(pulse_ratio((1,), (1, -1)))) is None


def test_exact_operations_add_nothing_even_before_an_integrator() -> None:
    sources = [(section_ratio((1,), (-1,)), Fraction(0)), (section_ratio((3,), ()), Fraction(1, 2))]
    assert output_error_bound(sources) == Fraction(3, 2)
    assert expected_rms(sources) == pytest.approx(sqrt(9 / 48))


def test_controllable_form_and_its_optimum_have_the_worked_noise_gains() -> None:
    """Worked for radius 0.9, angle 0.7, output x2: 85.7317 against 40.6213 at best (Mullis & Roberts 1976)."""
    system = controllable_form(worked_pair((1,)))
    gain, both = scaled_noise_gain(system), gramians(system)
    assert gain is not None
    assert both is not None
    assert float(gain) == pytest.approx(85.7317, abs=5e-5)
    K, W = (np.array(m, dtype=float) for m in both)
    assert np.sum(np.sqrt(np.linalg.eigvals(K @ W))) ** 2 / 2 == pytest.approx(40.6213, abs=5e-5)


@given(stable_pairs(), st.tuples(*[fractions(-2, 2, 4)] * 3))
def test_gramians_solve_their_equations(a: tuple[Fraction, Fraction], b: tuple[Fraction, ...]) -> None:
    """``K = A K A' + B B'``, ``W = A' W A + C' C``, in rationals."""
    system = controllable_form(pulse_ratio((1, *b), (1, *a, 0)))
    assume(system.A)
    both = gramians(system)
    assert both is not None
    A, B, C, K, W = (np.array(m, dtype=object) for m in (*system[:3], *both))
    assert (A @ K @ A.T + B @ B.T == K).all()
    assert (A.T @ W @ A + C.T @ C == W).all()


@given(
    st.tuples(fractions(-1, 1, 8), fractions(-1, 1, 8)).filter(lambda p: p[1] != 0 and p[0] ** 2 + p[1] ** 2 < 1),
    st.tuples(*[fractions(-2, 2, 4)] * 3),
)
def test_both_forms_keep_the_path(pole: tuple[Fraction, Fraction], b: tuple[Fraction, ...]) -> None:
    s, w = pole
    ratio = pulse_ratio(b, (1, -2 * s, s * s + w * w))
    assert paths(controllable_form(ratio)) == ((ratio,),)
    if len(ratio.denominator) == 3:
        assert paths(normal_form(ratio, pole)) == ((ratio,),)


def test_normal_form_of_a_slow_pair_is_quieter_by_orders() -> None:
    """Both are invariant to scaling; the optimum is the same for both, being one of the path."""
    s, w = Fraction(999, 1000), Fraction(1, 500)
    ratio = pulse_ratio((1,), (1, -2 * s, s * s + w * w))
    direct, normal = controllable_form(ratio), normal_form(ratio, (s, w))
    gains = [scaled_noise_gain(system) for system in (direct, normal)]
    assert gains[0] is not None
    assert gains[1] is not None
    assert gains[0] > 10_000 * gains[1]
    assert optimum(direct) == pytest.approx(optimum(normal), rel=1e-6)
    assert float(gains[1]) >= optimum(normal) * (1 - 1e-6)


def optimum(system: StateSpace) -> float:
    """``(sum sigma_i)^2/n``, ``sigma_i^2`` the roots of the characteristic polynomial of ``K W``, taken exactly."""
    both = gramians(system)
    assert both is not None
    K, W = (np.array(m, dtype=object) for m in both)
    product = K @ W
    trace, determinant = product[0, 0] + product[1, 1], product[0, 0] * product[1, 1] - product[0, 1] * product[1, 0]
    return (float(trace) + 2 * sqrt(determinant)) / 2


#: Fourteen fraction bits: a tie, which the estimates know nothing of, is one case in 16384.
UNIT = 1 << 14
SECTIONS = (((3001, 1237, 2111), (-23561, 14339)), ((5333, -2017, 1009), (-10247, 9221)))


#: Bits that the reference carries below a step: it is within 2**-80 of the truth for some thousand samples.
FINE = 100


def chain(inputs: list[int], bits: int, half: int) -> list[int]:
    """Two direct form I sections in integers of ``2**-bits`` steps, every sum rounded once."""
    signal = [x << bits for x in inputs]
    for b, a in SECTIONS:
        found: list[int] = []
        for k in range(len(signal)):
            total = sum(c * signal[k - i] for i, c in enumerate(b) if i <= k)
            total -= sum(c * found[k - i] for i, c in enumerate(a, 1) if i <= k)
            found.append((total + half) // UNIT)
        signal = found
    return signal


def chain_errors(inputs: list[int], down: bool) -> list[Fraction]:
    """What rounding to whole steps does to the output."""
    rounded, fine = chain(inputs, 0, 0 if down else UNIT // 2), chain(inputs, FINE, 0)
    return [y - Fraction(e, 1 << FINE) for y, e in zip(rounded, fine, strict=True)]


def sources(step: Fraction) -> list[tuple[PulseRatio, Fraction]]:
    sections = [([Fraction(c, UNIT) for c in b], [Fraction(c, UNIT) for c in a]) for b, a in SECTIONS]
    return [(path, step) for path in rounding_paths(sections, [(1,)] * len(sections))[-1]]


@given(st.lists(st.integers(-1000, 1000), min_size=1, max_size=60), st.booleans())
def test_integer_recursion_keeps_the_bound(inputs: list[int], down: bool) -> None:
    bound = output_error_bound(sources(Fraction(1) if down else Fraction(1, 2)))
    assert bound is not None
    assert max(map(abs, chain_errors(inputs, down))) <= bound + Fraction(1, 1 << 80)


def test_bound_is_the_sum_of_the_peak_gains() -> None:
    (first, _), (second, _) = sources(Fraction(1, 2))
    highs = peak_gain(first).high, peak_gain(second).high
    assert highs[0] is not None
    assert highs[1] is not None
    assert output_error_bound([(first, Fraction(1, 2)), (second, Fraction(1))]) == highs[0] / 2 + highs[1]


@pytest.mark.parametrize("down", [False, True])
def test_measured_noise_is_the_expected_one(down: bool) -> None:
    """Seeded noise at full scale; within five standard deviations of what the estimates say.

    A mean of N samples of variance s^2, whose errors pass through H, has the variance ``q^2/12 sum H_j(1)^2/N``; the
    mean square of a Gaussian one has ``2 s^4/N sum rho_k^2``, with the correlations of the two paths.
    """
    count = 10_000
    draw = random.Random(7)
    inputs = [draw.randrange(-20000, 20000) for _ in range(count)]
    errors = np.array([float(e) for e in chain_errors(inputs, down)])[200:]
    rms, offset = expected_rms(sources(Fraction(1))), expected_offset(sources(Fraction(1)))
    assert rms is not None
    assert offset is not None
    mean = float(offset) if down else 0.0
    at_rest = [
        float(poly.evaluate(p.numerator, Fraction(1)) / poly.evaluate(p.denominator, Fraction(1)))
        for p, _ in sources(Fraction(1))
    ]
    assert abs(errors.mean() - mean) <= 5 * sqrt(sum(g * g for g in at_rest) / 12 / len(errors))
    assert abs(errors.var() - rms**2) <= 5 * rms**2 * sqrt(2 * correlation() / len(errors))


def correlation() -> float:
    """``sum rho_k^2`` over both signs of k, of white noise through both paths."""
    total = np.zeros(799)
    for path, _ in sources(Fraction(1)):
        top, bottom = ([float(c) for c in p] for p in path)
        h = np.zeros(400)
        forward = [0.0] * (len(bottom) - len(top)) + top
        for k in range(len(h)):
            h[k] = (forward[k] if k < len(forward) else 0) - sum(
                a * h[k - i] for i, a in enumerate(bottom) if 0 < i <= k
            )
        total += np.correlate(h, h, "full")
    return float(np.sum((total / total.max()) ** 2))


def test_offset_of_rounding_down_is_half_a_step_through_the_gain_at_rest() -> None:
    """``1/(1 - 3/4) = 4``, and twice that behind a gain of 2."""
    path = section_ratio((1,), (Fraction(-3, 4),))
    assert expected_offset([(path, Fraction(1, 8)), (scaled(path, Fraction(2)), Fraction(1, 8))]) == Fraction(-3, 4)
