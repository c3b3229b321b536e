"""Round-off: exact noise gains, bounds that an integer recursion keeps, estimates that it meets."""

from __future__ import annotations

import random
from fractions import Fraction
from math import sqrt

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.roundoff import expected_rms, noise_gain
from realize.arithmetic.state_space import PulseRatio, StateSpace, in_series, paths, pulse_ratio, section_ratio

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


def test_worked_pair_has_the_worked_noise_gain() -> None:
    """Radius 0.9, angle 0.7; from memory, recomputed, to the digits given."""
    gain = noise_gain(worked_pair())
    assert gain is not None
    assert abs(gain - Fraction("6.8993615896")) < Fraction(1, 2 * 10**10)


@given(ratios())
def test_noise_gain_is_the_mean_square_on_the_circle(ratio: PulseRatio) -> None:
    """Parseval's theorem: the mean over 2**14 points, exact but for what ``|z|**(2**14)`` of the poles leaves."""
    z = np.exp(2j * np.pi * np.arange(1 << 14) / (1 << 14))
    top, bottom = (np.polyval([float(c) for c in p] or [0.0], z) for p in ratio)
    gain = noise_gain(ratio)
    assert gain is not None
    assert float(gain) == pytest.approx(np.mean(abs(top / bottom) ** 2), rel=1e-7, abs=1e-12)


@pytest.mark.parametrize("a", [(-1,), (Fraction(-6, 5), 1), (-2, 1), (-3,)], ids=str)
def test_pole_on_or_outside_the_circle_leaves_no_figure(a: tuple[int, ...]) -> None:
    sources = [(section_ratio((1,), a), Fraction(1))]
    assert noise_gain(sources[0][0]) is None
    assert expected_rms(sources) is None


def test_exact_operations_add_nothing_even_before_an_integrator() -> None:
    sources = [(section_ratio((1,), (-1,)), Fraction(0)), (section_ratio((3,), ()), Fraction(1, 2))]
    assert expected_rms(sources) == pytest.approx(sqrt(9 / 48))


def test_controllable_form_has_the_worked_noise_gain() -> None:
    """Worked for radius 0.9, angle 0.7, output x2: 85.7317, states scaled to a noise gain of 1 (Mullis & Roberts 1976).

    The states are ``1/(z^2 A)`` delayed by one and two samples; the output is the second.
    """
    a1, a2 = worked_pair().denominator[1:]
    A = ((-a1, -a2), (Fraction(1), Fraction(0)))
    one, zero = Fraction(1), Fraction(0)
    identity, none = ((one, zero), (zero, one)), ((zero,), (zero,))
    reached = paths(StateSpace(A, ((one,), (zero,)), identity, none))
    (seen,) = paths(StateSpace(A, identity, ((zero, one),), ((zero, zero),)))
    gains = [(noise_gain(row[0]), noise_gain(path)) for row, path in zip(reached, seen, strict=True)]
    total = sum(float(k * w) for k, w in gains if k is not None and w is not None)
    assert total == pytest.approx(85.7317, abs=5e-5)


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


def chain_errors(inputs: list[int]) -> list[Fraction]:
    """What rounding to whole steps does to the output."""
    rounded, fine = chain(inputs, 0, UNIT // 2), chain(inputs, FINE, 0)
    return [y - Fraction(e, 1 << FINE) for y, e in zip(rounded, fine, strict=True)]


def sources(step: Fraction) -> list[tuple[PulseRatio, Fraction]]:
    """The first rounding passes ``1/a`` and the second section, the second ``1/a`` alone."""
    (_, first), second = ([[Fraction(c, UNIT) for c in part] for part in section] for section in SECTIONS)
    return [
        (in_series(section_ratio((1,), first), section_ratio(*second)), step),
        (section_ratio((1,), second[1]), step),
    ]


@given(st.lists(st.integers(-1000, 1000), min_size=1, max_size=60))
def test_integer_recursion_keeps_the_bound(inputs: list[int]) -> None:
    highs = [peak_gain(path).high for path, _ in sources(Fraction(1))]
    bound = sum((high for high in highs if high is not None), Fraction(0)) / 2
    assert max(map(abs, chain_errors(inputs))) <= bound + Fraction(1, 1 << 80)


def test_measured_noise_is_the_expected_one() -> None:
    """Seeded noise at full scale; within five standard deviations of what the estimates say.

    A mean of N samples of variance s^2, whose errors pass through H, has the variance ``q^2/12 sum H_j(1)^2/N``; the
    mean square of a Gaussian one has ``2 s^4/N sum rho_k^2``, with the correlations of the two paths.
    """
    count = 10_000
    draw = random.Random(7)
    inputs = [draw.randrange(-20000, 20000) for _ in range(count)]
    errors = np.array([float(e) for e in chain_errors(inputs)])[200:]
    rms = expected_rms(sources(Fraction(1)))
    assert rms is not None
    at_rest = [
        float(poly.evaluate(p.numerator, Fraction(1)) / poly.evaluate(p.denominator, Fraction(1)))
        for p, _ in sources(Fraction(1))
    ]
    assert abs(errors.mean()) <= 5 * sqrt(sum(g * g for g in at_rest) / 12 / len(errors))
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
