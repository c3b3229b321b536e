"""Methods that keep a response at the samples: step, ramp and impulse.

``D`` is the direct feed-through, ``g(t)`` the impulse response of the strictly proper part. Every response is
sampled as an enclosure and multiplied by the denominator, whose roots are ``exp(p T)``; nothing is obtained
as the difference of two characteristic polynomials.
"""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache

from realize.algebra import polynomial as poly
from realize.algebra.elementary import exponential
from realize.algebra.enclosure import Enclosure
from realize.algebra.exponential import image_polynomial, normalised, sampled_response
from realize.algebra.roots import Disc, Root
from realize.methods.conversion import Conversion, Enclose, mapped, refuse_growth
from realize.transfer import TransferFunction


def step_invariant(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``(1 - 1/z) Z{L^-1[G(s)/s] at k T}`` (Ragazzini & Franklin 1958; Van Loan 1978): exact for held input."""

    def numerator(bits: int) -> Enclosure:
        response = _response(transfer, 1, period_s, transfer.order + 1, bits)
        return _times_denominator(response, transfer, 1, period_s, bits)[: transfer.order + 1]

    return _exponential_conversion(
        transfer,
        period_s,
        numerator,
        zeros_at_one=1,
        structural={0: transfer.feed_through},
        notes=("delays smooth signals by about half a period, like the hold it assumes",),
    )


def ramp_invariant(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``((z - 1)^2/(T z)) Z{L^-1[G(s)/s^2] at k T}``: exact for piecewise-linear input.

    Source: Franklin, Powell & Workman, Digital Control of Dynamic Systems.
    """

    def numerator(bits: int) -> Enclosure:
        response = _response(transfer, 2, period_s, transfer.order + 2, bits)
        return _times_denominator(response, transfer, 2, period_s, bits)[1 : transfer.order + 2]

    return _exponential_conversion(transfer, period_s, numerator, zeros_at_one=2, structural={})


def impulse_invariant(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``D + T (Z{g(k T)} - g(0+)/2)``: keeps the impulse response, aliases.

    Source: Jackson, IEEE Signal Processing Letters 7(10), 2000; Mecklenbraeuker, Signal Processing 80(8), 2000.
    """
    first = _first_impulse_sample(transfer, period_s)

    def numerator(bits: int) -> Enclosure:
        response = _impulse_response(transfer, period_s, bits).with_first(transfer.feed_through + first / 2)
        return _times_denominator(response, transfer, 0, period_s, bits)[: transfer.order + 1]

    ends = {0: transfer.feed_through + first / 2}
    ends |= {transfer.order: transfer.feed_through - first / 2} if transfer.feed_through == first / 2 else {}
    return _exponential_conversion(
        transfer,
        period_s,
        numerator,
        zeros_at_one=0,
        structural=ends,
        notes=("does not keep the low-frequency gain: the response repeats around the sample rate and overlaps",),
    )


def exponential_image(x: Disc, bits: int) -> Disc:
    """``z - 1 = exp(x) - 1``."""
    re, im, rad = exponential(x, bits)
    return re - (1 << bits), im, rad


def exponential_denominator(transfer: TransferFunction, period_s: Fraction, bits: int) -> Enclosure:
    """``prod (z - exp(p T))``; poles at the origin become ``(z - 1)`` exactly."""
    at_origin = poly.trailing_zeros(transfer.denominator)
    ones = poly.power((1, -1), at_origin)
    decaying = transfer.denominator[: len(transfer.denominator) - at_origin]
    if len(decaying) == 1:
        return Enclosure.exact(ones)
    return image_polynomial(decaying, period_s, bits).convolve_integers(ones)


def _exponential_conversion(
    transfer: TransferFunction,
    period_s: Fraction,
    numerator: Enclose,
    *,
    zeros_at_one: int,
    structural: dict[int, Fraction],
    notes: tuple[str, ...] = (),
) -> Conversion:
    refuse_growth(transfer.poles, period_s)
    return Conversion(
        lru_cache(maxsize=8)(numerator),
        lambda bits: exponential_denominator(transfer, period_s, bits),
        mapped_exponentially(transfer.poles, period_s),
        None,
        zeros_at_one=min(zeros_at_one, poly.trailing_zeros(transfer.numerator)),
        structural=structural,
        notes=notes,
    )


def mapped_exponentially(roots: tuple[Root, ...], period_s: Fraction) -> tuple[Root, ...]:
    """Images under ``exp(s T)``, in ``z - 1``."""
    return mapped(roots, period_s, exponential_image)


def _monic_numerator(transfer: TransferFunction, period_s: Fraction) -> poly.Rationals:
    """Numerator in ``x = s T`` over a monic denominator in x."""
    lead = transfer.gain * period_s**transfer.relative_degree
    return tuple(lead * c for c in normalised(transfer.numerator, period_s))


def _response(transfer: TransferFunction, integrations: int, period_s: Fraction, count: int, bits: int) -> Enclosure:
    numerator = _monic_numerator(transfer, period_s)
    return sampled_response(numerator, transfer.denominator, integrations, period_s, count, bits)


def _strictly_proper(transfer: TransferFunction, period_s: Fraction) -> poly.Rationals:
    below = poly.scale(normalised(transfer.denominator, period_s), transfer.feed_through)
    return poly.subtract(_monic_numerator(transfer, period_s), below)


def _first_impulse_sample(transfer: TransferFunction, period_s: Fraction) -> Fraction:
    """``T g(0+)``."""
    numerator = _strictly_proper(transfer, period_s)
    return numerator[0] if numerator and len(numerator) == transfer.order else Fraction(0)


def _impulse_response(transfer: TransferFunction, period_s: Fraction, bits: int) -> Enclosure:
    numerator, count = _strictly_proper(transfer, period_s), transfer.order + 1
    if not numerator:
        return Enclosure.rounded([Fraction(0)] * count, bits)
    return sampled_response(numerator, transfer.denominator, 0, period_s, count, bits)


def _times_denominator(
    response: Enclosure, transfer: TransferFunction, differences: int, period_s: Fraction, bits: int
) -> Enclosure:
    """``response(z) (1 - 1/z)^differences prod(1 - exp(p T)/z)``, ascending powers of 1/z."""
    at_origin = poly.trailing_zeros(transfer.denominator)
    product = response.convolve_integers(poly.power((1, -1), at_origin + differences))
    decaying = transfer.denominator[: len(transfer.denominator) - at_origin]
    return product.convolve(image_polynomial(decaying, period_s, bits)) if len(decaying) > 1 else product
