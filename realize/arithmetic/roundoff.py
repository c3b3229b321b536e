"""What rounding does to the output: proven bounds, and the noise to expect.

A rounding is an error source with a path to the output. Its error is bounded by half a step (nearest) or a step
(down), which the peak gain of the path turns into a proven bound; taken as noise, uniform and white, it has the
variance ``q^2/12``, which the noise gain turns into an estimate.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from math import sqrt

from realize.algebra import polynomial as poly
from realize.algebra.roots import isolate
from realize.arithmetic.lattice import lattice_of
from realize.arithmetic.peak_gain import DEFAULT_WIDTH, peak_gain
from realize.arithmetic.state_space import Matrix, PulseRatio, StateSpace, in_parallel, state_paths
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


def largest_magnitude(ratio: PulseRatio) -> float | None:
    """Largest ``|H|`` on the unit circle: what a steady sinusoid of amplitude 1 can become. An estimate.

    Returns
    -------
    float or None
        ``None`` when a pole lies on the circle; that of the path's own poles otherwise, stable or not.

    Notes
    -----
    ``|H|^2`` is a rational function of ``v = 1 - cos w``, exactly; it is evaluated exactly at 0, 2 and the doubles
    next to the roots of its derivative. Flat there, it is off by the square of their distance.
    """
    if not ratio.numerator:
        return 0.0
    top, bottom = (_squared_magnitude(p) for p in ratio)
    slope = poly.subtract(poly.multiply(poly.derivative(top), bottom), poly.multiply(top, poly.derivative(bottom)))
    ends = [Fraction(0), Fraction(2)]
    inside = [Fraction(r.value.real) for r in isolate(poly.primitive(slope)) if not r.value.imag] if slope else []
    places = ends + [v for v in inside if 0 < v < 2]
    below = [poly.evaluate(bottom, v) for v in places]
    if not all(below):
        return None
    return sqrt(max(poly.evaluate(top, v) / b for v, b in zip(places, below, strict=True)))


def output_error_bound(
    sources: Iterable[tuple[PulseRatio, Fraction]], width: Fraction = DEFAULT_WIDTH
) -> Fraction | None:
    """Proven bound of what all roundings together do to the output.

    Parameters
    ----------
    sources : iterable of (PulseRatio, Fraction)
        Each path to the output, and the largest error that enters it: half a step for rounding to nearest, a step
        for rounding down.
    width : Fraction
        Relative width of the peak gains, whose upper ends are used.

    Returns
    -------
    Fraction or None
        ``sum <<H_j>> eps_j``; ``None`` when one of them has no bound.
    """
    total = Fraction(0)
    for ratio, largest in sources:
        bound = peak_gain(ratio, width).high if largest else Fraction(0)
        if bound is None:
            return None
        total += bound * largest
    return total


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


def expected_offset(sources: Iterable[tuple[PulseRatio, Fraction]]) -> Fraction | None:
    """Mean output error of rounding down, an estimate: ``-sum H_j(1) q_j/2``; ``None`` with a pole at z = 1."""
    total = Fraction(0)
    for ratio, step in sources:
        below = poly.evaluate(ratio.denominator, Fraction(1))
        if below == 0:
            return None
        total -= poly.evaluate(ratio.numerator, Fraction(1)) / below * step / 2
    return total


def gramians(system: StateSpace) -> tuple[Matrix, Matrix] | None:
    """``K = A K A' + B B'`` and ``W = A' W A + C' C`` of a system with one input and one output, exactly.

    Returns
    -------
    tuple of matrices, or None
        ``None`` when a state has no bounded response.

    Notes
    -----
    The entries are inner products of impulse responses, from the noise gains of their sums.
    """
    reached, seen = (_inner_products(paths) for paths in state_paths(system))
    return None if reached is None or seen is None else (reached, seen)


def scaled_noise_gain(system: StateSpace) -> Fraction | None:
    """Noise gain of a realization whose states are rounded, each scaled to the noise gain 1 from the input.

    Notes
    -----
    ``sum_i K_ii W_ii``; at best, over all realizations, ``(sum sigma_i)^2/n`` with ``sigma_i^2`` the eigenvalues of
    ``K W`` (Mullis & Roberts 1976; Hwang 1977).
    """
    products = Fraction(0)
    for reached, seen in zip(*state_paths(system), strict=True):
        gains = noise_gain(reached), noise_gain(seen)
        if gains[0] is None or gains[1] is None:
            return None
        products += gains[0] * gains[1]
    return products


def _inner_products(paths: Sequence[PulseRatio]) -> Matrix | None:
    squares = [noise_gain(path) for path in paths]
    rows = []
    for first, square in zip(paths, squares, strict=True):
        row = []
        for second, other in zip(paths, squares, strict=True):
            both = noise_gain(in_parallel(first, second))
            if square is None or other is None or both is None:
                return None
            # |x + y|^2 = |x|^2 + 2 x y + |y|^2
            row.append((both - square - other) / 2)
        rows.append(tuple(row))
    return tuple(rows)


def _squared_magnitude(p: poly.Rationals) -> poly.Rationals:
    """``|p(exp(jw))|^2`` as a polynomial in ``v = 1 - cos w``: its autocorrelation on Chebyshev polynomials."""
    chebyshev: list[poly.Rationals] = [(Fraction(1),), (Fraction(-1), Fraction(1))]
    twice_cosine = (Fraction(-2), Fraction(2))
    total: poly.Rationals = ()
    for lag in range(len(p)):
        if lag > 1:
            chebyshev.append(poly.subtract(poly.multiply(twice_cosine, chebyshev[-1]), chebyshev[-2]))
        correlation = sum((a * b for a, b in zip(p, p[lag:], strict=False)), Fraction(0))
        total = poly.add(total, poly.scale(chebyshev[lag], correlation * (2 if lag else 1)))
    return total
