"""The noise that rounding makes of the output, to be expected.

A rounding is an error source with a path to the output. Taken as noise, uniform and white, it has the variance
``q^2/12``, which the noise gain of the path turns into an estimate. What is proven stands in
:mod:`realize.arithmetic.integer.proof`.
"""

from __future__ import annotations

from collections.abc import Iterable
from fractions import Fraction
from math import sqrt

from realize.algebra import polynomial as poly
from realize.arithmetic.lattice import lattice_of
from realize.arithmetic.state_space import PulseRatio
from realize.checks.schur import STABLE, stability


def noise_gain(ratio: PulseRatio) -> Fraction | None:
    """``sum h[k]^2`` of a path, exactly: what it makes of the variance of white noise.

    Parameters
    ----------
    ratio : PulseRatio
        In lowest terms.

    Returns
    -------
    Fraction or None
        ``None`` when a pole lies on or outside the unit circle: the variance grows without end.

    Notes
    -----
    The squares of the coefficients in an orthogonal basis, in rationals (Astrom, Jury & Agniel 1970).
    """
    if not ratio.numerator:
        return Fraction(0)
    if stability(ratio.denominator) != STABLE:
        return None
    n = poly.degree(ratio.denominator)
    top = (*(Fraction(0),) * (n + 1 - len(ratio.numerator)), *ratio.numerator)
    direct = top[0]
    if n == 0:
        return direct * direct
    lattice = lattice_of(ratio.denominator)
    rest = [b - direct * a for b, a in zip(top[1:], ratio.denominator[1:], strict=True)]
    return direct * direct + lattice.energy(lattice.coordinates(rest))


def expected_rms(sources: Iterable[tuple[PulseRatio, Fraction]]) -> float | None:
    """Root mean square of the output error to expect, an estimate.

    Parameters
    ----------
    sources : iterable of (PulseRatio, Fraction)
        Each path to the output, and the step q that is rounded to there.

    Returns
    -------
    float or None
        ``sqrt(sum noise_gain_j q_j^2/12)``, with independent errors, white and uniform over a step; ``None`` when one
        of them has no noise gain.
    """
    total = Fraction(0)
    for ratio, step in sources:
        gain = noise_gain(ratio) if step else Fraction(0)
        if gain is None:
            return None
        total += gain * step * step
    return sqrt(total / 12)
