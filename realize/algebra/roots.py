"""Roots of integer polynomials, isolated rigorously and refined to any number of bits.

Multiplicities are exact (square-free factors), and so are the questions a figure cannot answer: whether a root
is real, and whether it lies on the imaginary axis. Roots are found by the Ehrlich-Aberth iteration (Aberth,
Mathematics of Computation 27, 1973) from the Newton polygon's radii (Bini, Numerical Algorithms 13, 1996) in
fixed-point integers, and enclosed by Smith's discs (Smith, Journal of the ACM 17, 1970): the root nearest to
``z_i`` lies within ``n |p(z_i)| / prod_j |z_i - z_j|`` wherever the disc meets no other.
"""

from __future__ import annotations

import cmath
from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import lru_cache, partial
from itertools import pairwise
from math import floor, isqrt, ldexp, log2, pi, prod

from realize.algebra import polynomial as poly

#: Bits of the first attempt: twice a double's 53, so that two iterations more than a float would need decide
#: the ordinary case.
_FIRST_BITS = 128

#: Beyond this a polynomial of the permitted degree (32) with 400-digit coefficients is separated with room to
#: spare; it is there so that an error in the code above it ends.
_MOST_BITS = 1 << 17

#: Bits beyond those asked for when a root is refined, so that a request for a few more is met at once.
_SPARE_BITS = 64

#: A double carries 53 bits; three more keep its last bit right to within one unit.
_VALUE_BITS = 56

#: Ehrlich-Aberth converges cubically once separated; clusters and wide spreads take a few dozen steps first.
_MOST_ITERATIONS = 100

#: Asymmetric start angle: symmetric starting points would stay on the real axis for ever (Aberth 1973).
_START_ANGLE = 0.7

#: Approximations nearer than this, or a correction larger than its inverse, are left to integers: the square of
#: neither leaves a double's range.
_FLOAT_APART = 1e-100

#: Bits of a factor that comes from floating point.
_FLOAT_BITS = 60
_FLOAT_UNIT = float(1 << _FLOAT_BITS)

Disc = tuple[int, int, int]


@dataclass(frozen=True)
class Root:
    """A real root, or a conjugate pair represented by its member with positive imaginary part.

    Attributes
    ----------
    value : complex
        Exactly 0 in a coordinate that is exactly 0. Of a root found here each part is right to about one unit in
        the last place of a double; of the image of a root, to that share of its magnitude.
    multiplicity : int
        Exact.
    enclosure : callable
        ``enclosure(bits)`` is a disc ``(re, im, rad)`` of integers in units of ``2**-bits`` that holds the
        root; the radius is at most 3, and coordinates that are exactly 0 are 0.
    """

    value: complex
    multiplicity: int
    enclosure: Callable[[int], Disc] = field(repr=False, compare=False)

    @property
    def is_pair(self) -> bool:
        """Whether this stands for a conjugate pair."""
        return self.value.imag > 0

    @property
    def count(self) -> int:
        """Number of roots this stands for: conjugates and multiplicity counted."""
        return self.multiplicity * (2 if self.is_pair else 1)


def origin(multiplicity: int) -> Root:
    """A root at 0, exactly."""
    return Root(0j, multiplicity, lambda bits: (0, 0, 0))


def rational(value: Fraction, multiplicity: int) -> Root:
    """A root at a rational number."""
    return Root(complex(value), multiplicity, lambda bits: (floor(value * (1 << bits)), 0, 1))


@lru_cache(maxsize=256)
def isolate(p: poly.Integers) -> tuple[Root, ...]:
    """Find all roots of an integer polynomial.

    Parameters
    ----------
    p : tuple of int
        Descending powers, not zero.

    Returns
    -------
    tuple of Root
        In ascending magnitude; real roots before pairs of the same magnitude.
    """
    at_origin = poly.trailing_zeros(p)
    found = [origin(at_origin)] if at_origin else []
    for factor, multiplicity in poly.square_free(p[: len(p) - at_origin]):
        for part in _split_symmetric(factor):
            found += [part.root(i, multiplicity) for i in part.upper_indices()]
    return tuple(sorted(found, key=lambda r: (abs(r.value), r.value.imag, r.value.real)))


def _split_symmetric(p: poly.Integers) -> list[_Factor]:
    """Set the factor apart whose roots are symmetric about the imaginary axis: all roots on it are in there."""
    symmetric = poly.greatest_common_divisor(p, poly.reflect(p))
    rest = poly.quotient(p, symmetric) if len(symmetric) > 1 else p
    parts = [_Factor(rest, symmetric=False)] if len(rest) > 1 else []
    return parts + ([_Factor(symmetric, symmetric=True)] if len(symmetric) > 1 else [])


class _Factor:
    """A square-free integer polynomial without a root at 0, and the state of the search for its roots.

    Internally ``x = z 2**self.exponent`` so that every ``|z| <= 1/2``; approximations are pairs of integers in
    units of ``2**-self.bits``.
    """

    def __init__(self, p: poly.Integers, *, symmetric: bool) -> None:
        self.p = p
        self.symmetric = symmetric
        logs = [log2(abs(c)) if c else None for c in p]
        self.exponent = bound_exponent(logs)
        self.bits = _FIRST_BITS
        self.z = _starting_points(logs, self.exponent, self.bits)
        self.radii = [0] * len(self.z)
        self.settled = False
        self._solve()
        while not self._settled():
            self._extend(2 * self.bits)
        self.settled = True

    @property
    def _noise(self) -> int:
        """Bound on the rounding of a value: Horner with |z| <= 1 adds 1 unit a coefficient, 2 a product."""
        return 3 * len(self.p)

    def upper_indices(self) -> list[int]:
        """Indices of the real roots and of one root of each pair."""
        return [i for i in range(len(self.z)) if self._is_real(i) or self.z[i][1] > 0]

    def root(self, i: int, multiplicity: int) -> Root:
        """The i-th root; it keeps this search alive to be refined later. On which axis it lies is settled for good."""
        on_axis = self._on_axis(i)
        return Root(self._value(i, on_axis), multiplicity, partial(self.disc, i, on_axis))

    def _value(self, i: int, on_axis: tuple[bool, bool]) -> complex:
        re, im = (0 if exact else c for c, exact in zip(self.z[i], on_axis, strict=True))
        return complex(_scaled_float(re, self.exponent - self.bits), _scaled_float(im, self.exponent - self.bits))

    def disc(self, i: int, on_axis: tuple[bool, bool], bits: int) -> Disc:
        """Centre and radius in units of ``2**-bits``."""
        least = bits + self.exponent + 4
        while self.bits < least or self.radii[i] > 1 << (self.bits - self.exponent - bits):
            self._extend(min(2 * self.bits, least + _SPARE_BITS) if self.bits < least else 2 * self.bits)
        drop = self.bits - self.exponent - bits
        half = 1 << (drop - 1)
        on_imaginary, on_real = on_axis
        re, im = self.z[i]
        radius = -(-self.radii[i] >> drop) + 1
        return (0 if on_imaginary else (re + half) >> drop, 0 if on_real else (im + half) >> drop, radius)

    def _on_axis(self, i: int) -> tuple[bool, bool]:
        """Whether the real part, and whether the imaginary part, is exactly 0."""
        return self._is_imaginary(i), self._is_real(i)

    def _is_real(self, i: int) -> bool:
        re, im = self.z[i]
        return abs(im) <= self.radii[i] and self._alone((re, -im), self.radii[i], i)

    def _is_imaginary(self, i: int) -> bool:
        re, im = self.z[i]
        return self.symmetric and abs(re) <= self.radii[i] and self._alone((-re, im), self.radii[i], i)

    def _alone(self, centre: tuple[int, int], radius: int, i: int) -> bool:
        """Whether a disc meets none of the discs other than the i-th.

        A mirror image of disc i that meets no other disc holds the mirror image of root i, which is a root: so
        it is root i itself, and lies on the axis.
        """
        return all(
            _distance(centre, z) > radius + r for j, (z, r) in enumerate(zip(self.z, self.radii, strict=True)) if j != i
        )

    def _settled(self) -> bool:
        return all(self._isolated(i) for i in range(len(self.z)))

    def _isolated(self, i: int) -> bool:
        """Whether disc i is alone, on its side of the axes or on them, and small enough for a double."""
        if not self._alone(self.z[i], self.radii[i], i):
            return False
        return all(
            on_axis or abs(c) >= self.radii[i] << _VALUE_BITS
            for c, on_axis in zip(self.z[i], self._on_axis(i), strict=True)
        )

    def _extend(self, bits: int) -> None:
        """Go on with more bits, at most twice as many: one or two steps make up for them."""
        if self.bits >= _MOST_BITS:
            raise ArithmeticError("the roots of a polynomial could not be separated")
        # Once every disc is alone only refinement is left: an index stays with its root.
        clusters = [] if self.settled else self._clusters()
        more = bits - self.bits
        self.z = [(re << more, im << more) for re, im in self.z]
        self.bits = bits
        for cluster in clusters:
            self._spread(cluster)
        self._solve()

    def _clusters(self) -> list[list[int]]:
        """Groups of approximations that may share their nearest root."""
        reach = [self._reach(i) for i in range(len(self.z))]
        left, groups = list(range(len(self.z))), []
        while left:
            group = [left.pop(0)]
            for i in group:
                near = [j for j in left if _distance(self.z[i], self.z[j]) <= reach[i] + reach[j]]
                left = [j for j in left if j not in near]
                group += near
            groups.append(sorted(group))
        return [group for group in groups if len(group) > 1]

    def _reach(self, i: int) -> int:
        """How far the nearest root may be: the degree times Newton's step, rounding included."""
        value, slope = _horner_with_slope(_fixed_point(self.p, self.exponent, self.bits), self.z[i], self.bits)
        step = (_distance(value, (0, 0)) + 1 + self._noise << self.bits) // max(_distance(slope, (0, 0)), 1)
        return len(self.z) * step + 1

    def _spread(self, cluster: list[int]) -> None:
        """Start a cluster anew around its centre, on the circles of the Newton polygon there.

        Left where they are, m approximations crawl: each step would take them (m - 1)/m of the way only.
        """
        coefficients = _fixed_point(self.p, self.exponent, self.bits)
        m = len(cluster)
        centre = _mean([self.z[i] for i in cluster])
        for _ in range(2):
            taylor = _taylor(coefficients, centre, m, self.bits)
            shift = _divide(taylor[m - 1], _nonzero(taylor[m]), self.bits)
            centre = centre[0] - shift[0] // m, centre[1] - shift[1] // m
        logs = [_log2_size(a, self.bits) for a in reversed(_taylor(coefficients, centre, m, self.bits))]
        for i, (re, im) in zip(cluster, _starting_points(logs, 0, self.bits), strict=True):
            self.z[i] = centre[0] + re, centre[1] + im

    def _solve(self) -> None:
        """Iterate until the corrections are down to rounding, then enclose."""
        coefficients = _fixed_point(self.p, self.exponent, self.bits)
        small = 4 * len(self.p)
        for _ in range(_MOST_ITERATIONS):
            if self._sweep(coefficients) <= small:
                break
        self.radii = [self._radius(coefficients, i) for i in range(len(self.z))]

    def _sweep(self, coefficients: list[int]) -> int:
        """One Ehrlich-Aberth sweep; returns the largest correction."""
        bits, largest = self.bits, 0
        for i, z in enumerate(self.z):
            value, slope = _horner_with_slope(coefficients, z, bits)
            if _distance(value, (0, 0)) <= self._noise:
                # Nothing but rounding is left to follow; repelled by its neighbours it would only stray.
                continue
            newton = _divide(value, _nonzero(slope), bits)
            step = self._corrected(i, newton)
            self.z[i] = (z[0] - step[0], z[1] - step[1])
            largest = max(largest, abs(step[0]), abs(step[1]))
        return largest

    def _corrected(self, i: int, newton: tuple[int, int]) -> tuple[int, int]:
        """Newton's step less the pull of the other roots: ``newton/(1 - newton sum_j 1/(z_i - z_j))``.

        The sum needs few digits: in floating point where no two approximations are too near for it.
        """
        bits, one = self.bits, 1 << self.bits
        x, y = self.z[i]
        apart = [complex((x - u) / one, (y - v) / one) for j, (u, v) in enumerate(self.z) if j != i]
        if all(abs(d) > _FLOAT_APART for d in apart):
            factor = complex(newton[0] / one, newton[1] / one) * sum(1 / d for d in apart)
            if abs(1 - factor) > _FLOAT_APART:
                scale = 1 / (1 - factor)
                return _multiply(newton, (int(scale.real * _FLOAT_UNIT), int(scale.imag * _FLOAT_UNIT)), _FLOAT_BITS)
        pull = _multiply(newton, self._repulsion(i), bits)
        return _divide(newton, _nonzero((one - pull[0], -pull[1])), bits)

    def _repulsion(self, i: int) -> tuple[int, int]:
        """``sum_j 1/(z_i - z_j)``."""
        re = im = 0
        x, y = self.z[i]
        one = (1 << self.bits, 0)
        for j, (u, v) in enumerate(self.z):
            if j != i:
                a, b = _divide(one, _nonzero((x - u, y - v)), self.bits)
                re, im = re + a, im + b
        return re, im

    def _radius(self, coefficients: list[int], i: int) -> int:
        """Smith's disc, rounded outward; as large as the search region where the iterate strayed out of it."""
        z, n = self.z[i], len(self.z)
        if _distance(z, (0, 0)) >= 1 << self.bits:
            return 1 << (self.bits + 2)
        value, _ = _horner_with_slope(coefficients, z, self.bits)
        size = _distance(value, (0, 0)) + 1 + self._noise
        apart = prod(_distance(z, other) for j, other in enumerate(self.z) if j != i)
        return -(-(n * size << self.bits * (n - 1)) // apart) if apart else 1 << (self.bits + 2)


def bound_exponent(logs: Sequence[float | None]) -> int:
    """Exponent k with all roots within ``2**(k - 1)``: Fujiwara's bound (1916) and a bit for its rounding."""
    lead = logs[0] or 0.0
    slopes = [(value - lead) / i for i, value in enumerate(logs) if i and value is not None]
    return floor(max(slopes)) + 4


def _starting_points(logs: Sequence[float | None], exponent: int, bits: int) -> list[tuple[int, int]]:
    """Points on circles whose radii are the slopes of the Newton polygon."""
    points = [(i, value) for i, value in enumerate(reversed(logs)) if value is not None]
    found = []
    for (i, low), (j, high) in _upper_hull(points):
        log_radius = (low - high) / (j - i) - exponent + bits
        for k in range(j - i):
            unit = cmath.rect(2.0 ** (log_radius % 1), 2 * pi * k / (j - i) + _START_ANGLE + i)
            found.append((_shifted(unit.real, floor(log_radius)), _shifted(unit.imag, floor(log_radius))))
    return found


def _upper_hull(points: list[tuple[int, float]]) -> list[tuple[tuple[int, float], tuple[int, float]]]:
    """Segments of the upper convex hull of points in ascending abscissa."""
    hull: list[tuple[int, float]] = []
    for x, y in points:
        while len(hull) > 1 and _above(hull[-2], hull[-1], (x, y)):
            hull.pop()
        hull.append((x, y))
    return list(pairwise(hull))


def _above(a: tuple[int, float], b: tuple[int, float], c: tuple[int, float]) -> bool:
    """Whether the chord from ``a`` to ``c`` passes on or above ``b``."""
    return (c[1] - a[1]) * (b[0] - a[0]) >= (b[1] - a[1]) * (c[0] - a[0])


def _shifted(x: float, exponent: int) -> int:
    return int(ldexp(x, 60)) << (exponent - 60) if exponent >= 60 else int(ldexp(x, max(exponent, -1000)))


def _fixed_point(p: poly.Integers, exponent: int, bits: int) -> list[int]:
    """Monic coefficients of ``p(z 2**exponent)``, each within half a unit of ``2**-bits``."""
    fixed = []
    for i, c in enumerate(p):
        up = bits - exponent * i
        top, bottom = (c << up, p[0]) if up >= 0 else (c, p[0] << -up)
        fixed.append((2 * top + bottom) // (2 * bottom))
    return fixed


def _horner_with_slope(
    coefficients: list[int], z: tuple[int, int], bits: int
) -> tuple[tuple[int, int], tuple[int, int]]:
    """Value and derivative of a monic fixed-point polynomial."""
    x, y = z
    re, im, dre, dim = coefficients[0], 0, 0, 0
    for c in coefficients[1:]:
        dre, dim = (dre * x - dim * y >> bits) + re, (dre * y + dim * x >> bits) + im
        re, im = (re * x - im * y >> bits) + c, re * y + im * x >> bits
    return (re, im), (dre, dim)


def _taylor(coefficients: list[int], centre: tuple[int, int], count: int, bits: int) -> list[tuple[int, int]]:
    """Taylor coefficients 0 to ``count`` of a fixed-point polynomial about a point, by repeated Horner division."""
    rest = [(c, 0) for c in coefficients]
    found = []
    for _ in range(count + 1):
        for i in range(1, len(rest)):
            re, im = _multiply(rest[i - 1], centre, bits)
            rest[i] = rest[i][0] + re, rest[i][1] + im
        found.append(rest.pop() if rest else (0, 0))
    return found


def _mean(points: list[tuple[int, int]]) -> tuple[int, int]:
    return sum(z[0] for z in points) // len(points), sum(z[1] for z in points) // len(points)


def _log2_size(z: tuple[int, int], bits: int) -> float:
    size = isqrt(z[0] * z[0] + z[1] * z[1])
    return log2(max(size, 1)) - bits


def _multiply(a: tuple[int, int], b: tuple[int, int], bits: int) -> tuple[int, int]:
    return a[0] * b[0] - a[1] * b[1] >> bits, a[0] * b[1] + a[1] * b[0] >> bits


def _divide(a: tuple[int, int], b: tuple[int, int], bits: int) -> tuple[int, int]:
    size = b[0] * b[0] + b[1] * b[1]
    return (a[0] * b[0] + a[1] * b[1] << bits) // size, (a[1] * b[0] - a[0] * b[1] << bits) // size


def _nonzero(z: tuple[int, int]) -> tuple[int, int]:
    return z if z != (0, 0) else (1, 0)


def _distance(a: tuple[int, int], b: tuple[int, int]) -> int:
    """Distance of two points, rounded down."""
    return isqrt((a[0] - b[0]) ** 2 + (a[1] - b[1]) ** 2)


def _scaled_float(n: int, exponent: int) -> float:
    return n / (1 << -exponent) if exponent < 0 else float(n << exponent)
