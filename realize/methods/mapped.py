"""Pole-zero mapping: every finite pole and zero to its image under ``exp``."""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, reciprocal
from realize.algebra.exponential import image_polynomial
from realize.algebra.roots import rational
from realize.methods.conversion import Conversion, refuse_growth
from realize.methods.invariant import exponential_denominator, mapped_exponentially
from realize.transfer import TransferFunction


def pole_zero_mapped(transfer: TransferFunction, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Conversion:
    """Poles and zeros to ``exp(s T)``, zeros at infinity to z = -1, gain kept at low frequency.

    Source: Ragazzini & Franklin, Sampled-Data Control Systems, 1958.
    """
    refuse_growth(transfer.poles + transfer.zeros, period_s)
    excess = transfer.relative_degree
    at_infinity = (rational(Fraction(-2), excess),) if excess else ()
    return Conversion(
        lru_cache(maxsize=8)(lambda bits: _numerator(transfer, period_s, bits)),
        lambda bits: exponential_denominator(transfer, period_s, bits),
        lambda: mapped_exponentially(transfer.poles, period_s),
        lambda: mapped_exponentially(transfer.zeros, period_s) + at_infinity,
    )


def _numerator(transfer: TransferFunction, period_s: Fraction, bits: int) -> Enclosure:
    """``K (z - 1)^m (z + 1)^excess prod(z - exp(zero T))``.

    The gain follows from ``lim ((z - 1)/T)^-k Gd = lim s^-k G``: the factors at z = 1 cancel on both sides.
    """
    excess, k = transfer.relative_degree, transfer.zeros_minus_poles_at_origin
    top, bottom = (_away_from_origin(p, period_s, bits) for p in (transfer.numerator, transfer.denominator))
    gain = transfer.low_frequency_gain / (Fraction(2) ** excess * period_s**k)
    at_one = poly.trailing_zeros(transfer.numerator)
    integer_part = poly.multiply(poly.power((1, -1), at_one), poly.power((1, 1), excess))
    inverse = reciprocal(*top.total(), bits)
    return top.times(*bottom.total()).times(*inverse).scaled(gain).convolve_integers(integer_part)


def _away_from_origin(p: poly.Integers, period_s: Fraction, bits: int) -> Enclosure:
    """Image polynomial of the roots that are not 0."""
    kept = p[: len(p) - poly.trailing_zeros(p)]
    if len(kept) == 1:
        return Enclosure.rounded([Fraction(1)], bits)
    return image_polynomial(kept, period_s, bits)
