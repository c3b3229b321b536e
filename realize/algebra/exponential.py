"""What sampling does to a rational function of s, by way of its exact roots.

Time is normalised to one period (``x = s T``). The poles come as discs with exact multiplicities, a partial fraction is
sampled in closed form, and the parts are added over their common denominator: nothing is squared, and a stiff pole
costs no more than another. Poles near each other make large parts that cancel; how many bits that takes is seen in the
radius of the result, and the work is done again with as many more.

Notes
-----
An input held in one of these ways and sampled turns ``1/(x - a)`` into ``u(a) + v(a)/(z - exp(a))``, with
``f(a) = (exp(a) - 1)/a``:

    impulse, half of the first sample    u = 1/2                    v = exp(a)
    steps, sampled m periods late        u = (exp(m a) - 1)/a       v = exp(m a) f(a)
    ramps                                u = (f(a) - 1)/a           v = f(a)^2

All of them are entire in a: a pole at the origin is no exception, and the parts of a repeated pole are derivatives
with respect to a.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from functools import lru_cache
from math import factorial
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.discs import (
    Series,
    add,
    conjugate,
    divide_series,
    invert,
    multiply_series,
    scale,
    subtract,
    taylor,
    times_linear,
)
from realize.algebra.elementary import exponential
from realize.algebra.enclosure import Enclosure, Unresolved, integers
from realize.algebra.roots import Disc, Root, isolate

#: Bits beyond those asked for in the first attempt: what a handful of poles within a factor of ten lose, and some.
_FIRST_GUARD = 48

#: Bits added to what an attempt was short of: the error of the next one is bounded anew and may come out larger.
_MARGIN = 8

#: Working bits after which a result is given up.
_MOST_BITS = 1 << 17

#: Coefficients of a real polynomial in descending powers, and the radius of every one of them.
Real = tuple[list[int], int]


class _Mode(NamedTuple):
    """A pole or a pair: its place in x, the image ``exp`` of that, and the real polynomial of its images in z."""

    multiplicity: int
    is_pair: bool
    place: Disc
    image: Disc
    factor: Real


class Hold(NamedTuple):
    """How the input runs between samples, and when the output is sampled.

    Attributes
    ----------
    integrations : int
        0 for impulses (of which the first sample counts half), 1 for steps, 2 for ramps.
    offset : Fraction
        Part of a period, from 0 to 1, by which steps are sampled late.
    """

    integrations: int
    offset: Fraction = Fraction(0)


IMPULSES, STEPS, RAMPS = Hold(0), Hold(1), Hold(2)


@lru_cache(maxsize=64)
def image_polynomial(p: poly.Integers, period_s: Fraction, bits: int) -> Enclosure:
    """Polynomial whose roots are ``exp(root T)`` for the roots of ``p``.

    Parameters
    ----------
    p : tuple of int
        Descending powers of s, not constant.
    bits : int
        Unit of the result is ``2**-bits``.

    Returns
    -------
    Enclosure
        Descending powers of z, monic.
    """

    def product(work: int) -> Real:
        result: Real = ([1 << work], 0)
        for mode in _modes(p, period_s, work):
            result = _product(result, mode.factor, work)
        return result

    mids, rad = _narrow(product, bits)
    return Enclosure(integers(mids), integers([0] + [rad] * (len(mids) - 1)), bits)


def pulse_numerator(
    numerator: poly.Integers, denominator: poly.Integers, period_s: Fraction, hold: Hold, bits: int
) -> Enclosure:
    """Numerator of the pulse transfer function of a proper ratio over ``prod(z - exp(pole T))``.

    Parameters
    ----------
    numerator, denominator : tuple of int
        Descending powers of s; a common root is a mode that adds nothing.
    hold : Hold
    bits : int
        Unit of the result is ``2**-bits`` of ``gain T^(relative degree)``.

    Returns
    -------
    Enclosure
        Descending powers of z, one coefficient more than the degree of the denominator. Where every pole is at the
        origin it is rational and exact.
    """
    excess = len(denominator) - len(numerator)
    gain = Fraction(numerator[0], denominator[0]) * period_s**excess

    def over_common_denominator(work: int) -> Real:
        modes = _modes(denominator, period_s, work)
        above, below = ([1 << work if excess == 0 else 0], 0), ([1 << work], 0)
        for mode, series in zip(modes, _residues(numerator, denominator, period_s, work), strict=True):
            part = _product(_part(mode, series, hold, work), below, work)
            above, below = (_product(p, mode.factor, work) for p in (above, below))
            above = _sum(above, part)
        return above

    if poly.trailing_zeros(denominator) == len(denominator) - 1:
        unit = _common_unit(numerator, len(denominator) - 1, period_s, hold.offset)
        return _nearest(_narrow(over_common_denominator, unit.bit_length() + 4)[0], unit).scaled(gain)
    mids, rad = _narrow(over_common_denominator, bits)
    return Enclosure(integers(mids), integers([rad] * len(mids)), bits, gain)


def _common_unit(numerator: poly.Integers, order: int, period_s: Fraction, offset: Fraction) -> int:
    """What makes integers of all coefficients where every pole is at the origin.

    The series of a hold (or its 1/2) and of the powers of ``exp(e) - 1`` have terms over factorials, whose product
    divides the factorial of their sum; the numerator, monic in x, and the powers of the offset bring in the rest.
    """
    monic: int = abs(numerator[0]) * period_s.denominator ** (len(numerator) - 1)
    late: int = offset.denominator**order
    return monic * late * factorial(order + 1)


def _nearest(mids: list[int], unit: int) -> Enclosure:
    """The multiples of ``1/unit`` next to numbers in units of a sixteenth of that, or less."""
    bits = unit.bit_length() + 4
    values = [(2 * unit * mid + (1 << bits)) >> (bits + 1) for mid in mids]
    exact = integers(values)
    return Enclosure(exact, exact * 0, 0, Fraction(1, unit))


@lru_cache(maxsize=64)
def _modes(p: poly.Integers, period_s: Fraction, bits: int) -> tuple[_Mode, ...]:
    return tuple(_mode(root, period_s, bits) for root in isolate(p))


def _mode(root: Root, period_s: Fraction, bits: int) -> _Mode:
    place = _at_period(root, period_s, bits)
    image = exponential(place, bits) if root.value else (1 << bits, 0, 0)
    return _Mode(root.multiplicity, root.is_pair, place, image, _factor(image, root, bits))


def _at_period(root: Root, period_s: Fraction, bits: int) -> Disc:
    """``root T``, as narrow after a long period as after a short one."""
    extra = max(0, period_s.numerator.bit_length() - period_s.denominator.bit_length() + 1)
    re, im, rad = scale(root.enclosure(bits + extra), *period_s.as_integer_ratio())
    return re >> extra, im >> extra, 2 - (-rad >> extra) if root.value else 0


def _factor(image: Disc, root: Root, bits: int) -> Real:
    """``(z - image)^m``, for a pair ``(z^2 - 2 Re(image) z + |image|^2)^m``."""
    re, im, rad = image
    single: Real = ([1 << bits, -re], rad)
    if root.is_pair:
        square = re * re + im * im >> bits
        spread = (2 * (abs(re) + abs(im) + rad) * rad >> bits) + 2
        single = ([1 << bits, -2 * re, square], max(2 * rad, spread))
    factor = single
    for _ in range(root.multiplicity - 1):
        factor = _product(factor, single, bits)
    return factor


@lru_cache(maxsize=64)
def _residues(
    numerator: poly.Integers, denominator: poly.Integers, period_s: Fraction, bits: int
) -> tuple[Series, ...]:
    """For each mode, the Taylor coefficients at its place of the ratio without it, both polynomials monic in x."""
    modes = _modes(denominator, period_s, bits)
    n, d = period_s.numerator, period_s.denominator
    monic = [((c * n**i << bits) // (numerator[0] * d**i), 0, min(i, 1)) for i, c in enumerate(numerator)]
    found = []
    for mode in modes:
        series = taylor(monic, mode.place, mode.multiplicity, bits)
        for distance, times in _distances(mode, modes):
            inverse = invert(distance, bits)
            for _ in range(times):
                series = divide_series(series, inverse, bits)
        found.append(series)
    return tuple(found)


def _distances(mode: _Mode, modes: tuple[_Mode, ...]) -> list[tuple[Disc, int]]:
    """From all other places, each with its multiplicity."""
    found = []
    for other in modes:
        if other is not mode:
            found.append((subtract(mode.place, other.place), other.multiplicity))
        if other.is_pair:
            found.append((subtract(mode.place, conjugate(other.place)), other.multiplicity))
    return found


def _part(mode: _Mode, series: Series, hold: Hold, bits: int) -> Real:
    """What a hold makes of one partial fraction: its numerator in z over the mode's factor."""
    direct, held = _weights(mode, hold, bits)
    numerator = _over_image(mode, multiply_series(series, held, bits), bits)
    at_once = multiply_series(series, direct, bits)[-1]
    if mode.is_pair:
        # Over both images; the conjugate part adds the same with the sign of the imaginary parts changed.
        for _ in range(mode.multiplicity):
            numerator = times_linear(numerator, conjugate(mode.image), bits)
        at_once, *numerator = (add(c, conjugate(c)) for c in (at_once, *numerator))
    behind = [0, *(re for re, _, _ in numerator)], max(rad for _, _, rad in numerator)
    return _sum(_product(([at_once[0]], at_once[2]), mode.factor, bits), behind)


def _over_image(mode: _Mode, series: Series, bits: int) -> Series:
    """Numerator over ``(z - image)^m`` of the last coefficient of ``series(e)/(z - image exp(e))``.

    With ``w = z - image`` and ``d = image (exp(e) - 1)`` it is ``series (w^-1 + d w^-2 + d^2 w^-3 + ...)``.
    """
    numerator = [series[-1]]
    if mode.multiplicity == 1:
        return numerator
    step = [(0, 0, 0), *_growth(mode.image, Fraction(1), mode.multiplicity)[1:]]
    for _ in range(mode.multiplicity - 1):
        series = multiply_series(series, step, bits)
        numerator = times_linear(numerator, mode.image, bits)
        numerator[-1] = add(numerator[-1], series[-1])
    return numerator


def _weights(mode: _Mode, hold: Hold, bits: int) -> tuple[Series, Series]:
    """Taylor coefficients at a mode's place of the u and v of a hold."""
    count, one = mode.multiplicity, (1 << bits, 0, 0)
    # At the origin every division by the place takes the first term away.
    growth = _growth(mode.image, Fraction(1), count + (0 if any(mode.place) else hold.integrations))
    if hold.integrations == 0:
        return [(1 << bits - 1, 0, 0), *[(0, 0, 0)] * (count - 1)], growth
    inverse = invert(mode.place, bits) if any(mode.place) else None
    slope = _less_one_over_place(growth, inverse, bits)
    if hold.integrations == 2:
        return _less_one_over_place(slope, inverse, bits), multiply_series(slope, slope, bits)
    if hold.offset == 0:
        return [(0, 0, 0)] * count, slope
    late = exponential(scale(mode.place, *hold.offset.as_integer_ratio()), bits) if inverse else one
    later = _growth(late, hold.offset, len(growth))
    return _less_one_over_place(later, inverse, bits), multiply_series(slope, later, bits)


def _growth(image: Disc, time: Fraction, count: int) -> Series:
    """``image exp(time e)``."""
    n, d = time.as_integer_ratio()
    series = [image]
    for k in range(1, count):
        series.append(scale(series[-1], n, k * d))
    return series


def _less_one_over_place(series: Series, inverse: Disc | None, bits: int) -> Series:
    """``(series(e) - 1)/(place + e)``, given ``1/place``; at the origin, None, the numerator starts with an exact 0."""
    first, *rest = series
    return divide_series([subtract(first, (1 << bits, 0, 0)), *rest], inverse, bits) if inverse else rest


def _sum(p: Real, q: Real) -> Real:
    """Sum of two real polynomials of the same length."""
    return [a + b for a, b in zip(p[0], q[0], strict=True)], p[1] + q[1]


def _product(p: Real, q: Real, bits: int) -> Real:
    """Product of two real polynomials: an entry errs by the radius of one times the other's coefficients, summed."""
    (a, r), (b, s) = p, q
    total = [0] * (len(a) + len(b) - 1)
    for i, x in enumerate(a):
        for j, y in enumerate(b):
            total[i + j] += x * y
    spread = sum(map(abs, a)) * s + (sum(map(abs, b)) + len(b) * s) * r
    return [c >> bits for c in total], (spread >> bits) + 2


def _narrow(compute: Callable[[int], Real], bits: int) -> Real:
    """Work with more bits until the radius is a few units of ``2**-bits``.

    Raises
    ------
    Unresolved
        When no permitted number of bits does it.
    """
    guard = _FIRST_GUARD
    while bits + guard <= _MOST_BITS:
        try:
            mids, rad = compute(bits + guard)
        except Unresolved:
            guard *= 2
            continue
        if rad <= 1 << guard:
            return [mid >> guard for mid in mids], (rad >> guard) + 2
        guard = rad.bit_length() + _MARGIN
    raise Unresolved
