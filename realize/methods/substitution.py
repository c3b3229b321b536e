"""Methods that replace s by a ratio of first-degree polynomials in z: exact rational arithmetic throughout.

The difference methods and the bilinear method are one family, ``s = (z - 1)/(T (theta z + 1 - theta))``;
prewarping replaces the factor 2 of the bilinear method by an irrational one, known to any number of bits.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from functools import lru_cache, partial
from math import isqrt

from realize.algebra import polynomial as poly
from realize.algebra.elementary import tangent
from realize.algebra.enclosure import Enclosure, integers, reciprocal
from realize.algebra.irrational import pi
from realize.algebra.roots import Disc, Root, rational
from realize.errors import RealizeError, Refused
from realize.methods.conversion import Conversion, mapped, normalised_ratio
from realize.transfer import TransferFunction

#: ``theta`` of the blended difference: seven eighths backward, one eighth forward (Al-Alaoui 1993).
_BLEND = Fraction(7, 8)

#: A leading coefficient this far below its terms is zero: numbers from pi are right to 1329 bits only.
_VANISHING_BITS = 600

#: Bits to which roots are compared with a rational place: far more than a search needs to part two of them.
_NEAREST_BITS = 4096


def forward_difference(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``s = (z - 1)/T`` (Euler): explicit; stable poles may leave the unit circle."""
    return _theta_method(transfer, period_s, Fraction(0))


def backward_difference(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``s = (z - 1)/(T z)`` (Euler): implicit; adds damping."""
    return _theta_method(transfer, period_s, Fraction(1))


def bilinear(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``s = (2/T)(z - 1)/(z + 1)`` (Tustin 1947): stable stays stable; warps frequency."""
    return _theta_method(transfer, period_s, Fraction(1, 2))


def blended_difference(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``s = (8/(7 T))(z - 1)/(z + 1/7)`` (Al-Alaoui 1993): between backward difference and bilinear."""
    return _theta_method(transfer, period_s, _BLEND)


def bilinear_prewarped(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``s = (w/tan(w T/2))(z - 1)/(z + 1)``: bilinear, exact at w with ``0 < w T < pi``."""
    if exact_at_rad_s is None or exact_at_rad_s <= 0:
        raise RealizeError(
            "exact_at",
            "no frequency" if exact_at_rad_s is None else f"{float(exact_at_rad_s):.5g} rad/s",
            "a frequency above 0",
            "give the frequency at which bilinear-prewarped is to be exact",
        )
    angle = exact_at_rad_s * period_s
    if angle >= pi():
        raise Refused(
            "method",
            f"the frequency to be exact at, {float(exact_at_rad_s / (2 * pi())):.5g} Hz, "
            f"is not below half the sample rate, {float(1 / (2 * period_s)):.5g} Hz",
            "a frequency below half the sample rate",
            "lower exact_at, or raise the sample rate",
        )
    if transfer.order == 0:
        return _theta_method(transfer, period_s, Fraction(1, 2))
    numerator, denominator = normalised_ratio(transfer, period_s)
    parts = partial(_prewarped_parts, numerator, denominator, angle)
    delta = partial(_prewarped_image, angle)
    return Conversion(
        lambda bits: parts(bits)[0],
        lambda bits: parts(bits)[1],
        lambda: mapped(transfer.poles, period_s, delta),
        lambda: mapped(transfer.zeros, period_s, delta) + _extra_zeros(Fraction(-2), transfer.relative_degree),
    )


def _theta_method(transfer: TransferFunction, period_s: Fraction, theta: Fraction) -> Conversion:
    numerator, denominator = normalised_ratio(transfer, period_s)
    over = (theta.numerator, theta.denominator - theta.numerator)
    top = _substituted(numerator, theta.denominator, over, transfer.order)
    bottom = _substituted(denominator, theta.denominator, over, transfer.order)
    if bottom[0] == 0:
        _refuse_pole_at_infinity(1 / (theta * period_s))
    delta = partial(_theta_image, theta)

    def zeros() -> tuple[Root, ...]:
        finite = transfer.zeros if top[0] or not theta else _without_nearest(transfer.zeros, 1 / (theta * period_s))
        extra = _extra_zeros(-1 / theta, transfer.relative_degree) if theta else ()
        return mapped(finite, period_s, delta) + extra

    return Conversion(
        _ratio(top, bottom[0]),
        _ratio(bottom, bottom[0]),
        lambda: mapped(transfer.poles, period_s, delta),
        zeros,
    )


def _ratio(p: tuple[int, ...], lead: int) -> Callable[[int], Enclosure]:
    exact = Enclosure(integers(p), integers([0] * len(p)), 0, Fraction(1, lead))
    return lambda bits: exact


def _substituted(p: poly.Integers, factor: int, over: tuple[int, int], order: int) -> tuple[int, ...]:
    """``sum_i p_i factor^i (z - 1)^i over(z)^(order - i)``, all ``order + 1`` coefficients."""
    total: tuple[int, ...] = ()
    for i, c in enumerate(reversed(p)):
        term = poly.multiply(poly.power((1, -1), i), poly.power(poly.trimmed(over), order - i))
        total = poly.add(total, poly.scale(term, c * factor**i))
    return (0,) * (order + 1 - len(total)) + total


def _without_nearest(zeros: tuple[Root, ...], place: Fraction) -> tuple[Root, ...]:
    """Leave out the zero that lies at a rational place, which the substitution sends to infinity.

    Only the lead of the numerator decides whether one does; here it is known, and the others lie at least as far
    apart as the search for the roots has separated them.
    """

    def distance(zero: Root) -> int:
        re, im, _ = zero.enclosure(_NEAREST_BITS)
        return abs(re - place.numerator * (1 << _NEAREST_BITS) // place.denominator) + abs(im)

    gone = min(zeros, key=distance)
    return tuple(zero for zero in zeros if zero is not gone)


def _extra_zeros(delta: Fraction, count: int) -> tuple[Root, ...]:
    return (rational(delta, count),) if count else ()


def _theta_image(theta: Fraction, x: Disc, bits: int) -> Disc:
    """``z - 1 = x/(1 - theta x)``."""
    if theta == 0:
        return x
    re, im, rad = x
    n, d = theta.numerator, theta.denominator
    # d x / (d - n x)
    below = ((d << bits) - n * re, -n * im, n * rad)
    return _quotient((d * re, d * im, d * rad), below, bits)


def _prewarped_image(angle: Fraction, x: Disc, bits: int) -> Disc:
    """``z - 1 = 2 x/(K - x)``."""
    k, spread = _warp_factor(angle, bits)
    re, im, rad = x
    return _quotient((2 * re, 2 * im, 2 * rad), (k - re, -im, spread + rad), bits)


def _quotient(a: Disc, b: Disc, bits: int) -> Disc:
    """Disc of ``a / b``: ``|a/b - a0/b0| <= (ra + |a0/b0| rb)/(|b0| - rb)``."""
    size = b[0] * b[0] + b[1] * b[1]
    room = isqrt(size) - b[2]
    if room <= b[2]:
        return 0, 0, 1 << 2 * bits
    re = (a[0] * b[0] + a[1] * b[1] << bits) // size
    im = (a[1] * b[0] - a[0] * b[1] << bits) // size
    spread = (a[2] << bits) + (isqrt(re * re + im * im) + 1) * b[2]
    return re, im, spread // room + 3


@lru_cache(maxsize=64)
def _warp_factor(angle: Fraction, bits: int) -> tuple[int, int]:
    """``K = (w T)/tan(w T/2)``, midpoint and radius in units of ``2**-bits``."""
    guard = 32
    work = bits + guard
    slope, spread = tangent((angle.numerator << work) // (2 * angle.denominator), work)
    inverse, radius = reciprocal(slope, spread, work)
    mid = inverse * angle.numerator // angle.denominator
    return mid >> guard, (-(-radius * angle.numerator // angle.denominator) >> guard) + 2


@lru_cache(maxsize=64)
def _prewarped_parts(
    numerator: poly.Integers, denominator: poly.Integers, angle: Fraction, bits: int
) -> tuple[Enclosure, Enclosure]:
    """Numerator and monic denominator with ``x = K (z - 1)/(z + 1)``."""
    order = poly.degree(denominator)
    top, bottom = (_prewarped(p, angle, bits) for p in (numerator, denominator))
    mid, rad = bottom.entry(0)
    if bits > _VANISHING_BITS and abs(mid) >> (max(abs(m) for m in bottom.mid)).bit_length() - _VANISHING_BITS == 0:
        _refuse_pole_at_infinity(None)
    # The integer coefficients may be of any size: bring the lead near 1 before inverting it.
    size = mid.bit_length() - bits
    inverse = reciprocal(*_shifted(mid, rad, size), bits)
    scaled = [v.times(*inverse).scaled(Fraction(2) ** -size) for v in (top, bottom)]
    shared = [_shared_factors(p, order) for p in (numerator, denominator)]
    return scaled[0].convolve_integers(shared[0]), scaled[1].with_first(Fraction(1)).convolve_integers(shared[1])


def _shifted(mid: int, rad: int, places: int) -> tuple[int, int]:
    return (mid >> places, (rad >> places) + 2) if places >= 0 else (mid << -places, rad << -places)


def _shared_factors(p: poly.Integers, order: int) -> poly.Integers:
    """Factors at z = 1 and z = -1 that every term of :func:`_prewarped` shares: kept exact."""
    return poly.multiply(poly.power((1, -1), poly.trailing_zeros(p)), poly.power((1, 1), order - poly.degree(p)))


def _prewarped(p: poly.Integers, angle: Fraction, bits: int) -> Enclosure:
    """``sum_i p_i K^i (z - 1)^i (z + 1)^(degree - i)``, without the powers of ``z - 1`` that all terms share."""
    k, spread = _warp_factor(angle, bits)
    lowest, highest = poly.trailing_zeros(p), poly.degree(p)
    power, radius = 1 << bits, 0
    zero = integers([0] * (highest - lowest + 1))
    total = Enclosure(zero, zero, bits)
    for i, c in enumerate(reversed(p)):
        if i >= lowest:
            basis = integers(poly.multiply(poly.power((1, -1), i - lowest), poly.power((1, 1), highest - i)))
            total = total + Enclosure(basis * (c * power), abs(basis) * (abs(c) * radius), bits)
        radius = (power * spread + radius * (k + spread) >> bits) + 2
        power = power * k >> bits
    return total


def _refuse_pole_at_infinity(pole_rad_s: Fraction | None) -> None:
    at = f" at s = {float(pole_rad_s):.5g} rad/s" if pole_rad_s is not None else ""
    raise Refused(
        "method",
        f"the pole{at} has no image: the substitution sends it to z = infinity",
        "poles away from the image of infinity",
        "choose another sample rate or another method",
    )
