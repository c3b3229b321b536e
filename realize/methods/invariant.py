"""Methods that keep a response at the samples: step, ramp and impulse.

``D`` is the direct feed-through, ``g(t)`` the impulse response of the strictly proper part. Each partial fraction is
held and sampled in closed form over the denominator ``prod(z - exp(p T))``; nothing is obtained as the difference of
two characteristic polynomials.
"""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache

from realize.algebra import polynomial as poly
from realize.algebra.elementary import exponential
from realize.algebra.enclosure import Enclosure
from realize.algebra.exponential import IMPULSES, RAMPS, STEPS, Hold, image_polynomial, pulse_numerator
from realize.algebra.roots import Disc, Root
from realize.methods.conversion import Conversion, mapped, refuse_growth
from realize.transfer import TransferFunction


def step_invariant(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``(1 - 1/z) Z{L^-1[G(s)/s] at k T}`` (Ragazzini & Franklin 1958; Van Loan 1978): exact for held input."""
    return exponential_conversion(
        transfer,
        period_s,
        STEPS,
        zeros_at_one=1,
        structural={0: transfer.feed_through},
        notes=("delays smooth signals by about half a period, like the hold it assumes",),
    )


def ramp_invariant(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``((z - 1)^2/(T z)) Z{L^-1[G(s)/s^2] at k T}``: exact for piecewise-linear input.

    Source: Franklin, Powell & Workman, Digital Control of Dynamic Systems.
    """
    return exponential_conversion(transfer, period_s, RAMPS, zeros_at_one=2, structural={})


def impulse_invariant(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """``D + T (Z{g(k T)} - g(0+)/2)``: keeps the impulse response, aliases.

    Source: Jackson, IEEE Signal Processing Letters 7(10), 2000; Mecklenbraeuker, Signal Processing 80(8), 2000.
    """
    first = _first_impulse_sample(transfer, period_s)
    ends = {0: transfer.feed_through + first / 2}
    ends |= {transfer.order: transfer.feed_through - first / 2} if transfer.feed_through == first / 2 else {}
    return exponential_conversion(
        transfer,
        period_s,
        IMPULSES,
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


def exponential_conversion(
    transfer: TransferFunction,
    period_s: Fraction,
    hold: Hold,
    *,
    zeros_at_one: int,
    structural: dict[int, Fraction],
    notes: tuple[str, ...] = (),
) -> Conversion:
    """What a hold makes of a transfer function; see :class:`Conversion` for the rest.

    Raises
    ------
    Refused
        When a pole grows in one period beyond what a double can hold.
    """
    refuse_growth(transfer.poles, period_s)
    above, below = transfer.numerator, transfer.denominator
    return Conversion(
        lru_cache(maxsize=8)(lambda bits: pulse_numerator(above, below, period_s, hold, bits)),
        lambda bits: exponential_denominator(transfer, period_s, bits),
        lambda: mapped_exponentially(transfer.poles, period_s),
        None,
        zeros_at_one=min(zeros_at_one, poly.trailing_zeros(transfer.numerator)),
        structural=structural,
        notes=notes,
    )


def mapped_exponentially(roots: tuple[Root, ...], period_s: Fraction) -> tuple[Root, ...]:
    """Images under ``exp(s T)``, in ``z - 1``."""
    return mapped(roots, period_s, exponential_image)


def _first_impulse_sample(transfer: TransferFunction, period_s: Fraction) -> Fraction:
    """``T g(0+)``: the lead of the strictly proper part's numerator, where its degree is one less than the order."""
    (n, *rest), (d, *others) = transfer.numerator, transfer.denominator
    if transfer.relative_degree == 1:
        return Fraction(n, d) * period_s
    if transfer.relative_degree == 0 and rest:
        return Fraction(rest[0] * d - n * others[0], d * d) * period_s
    return Fraction(0)
