"""The exact part of a roll-off: what of ``C(s)`` is improper, and ``C(s)`` with a filter on that or on everything.

Polynomials are in descending powers of s.
"""

from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.transfer import TransferFunction


class Split(NamedTuple):
    """``C(s) = P(s) + constant + remainder(s)/denominator(s)``, exactly; all in descending powers of s.

    Attributes
    ----------
    improper : tuple of Fraction
        ``P``, its constant term zero; empty for a proper transfer function.
    constant : Fraction
        ``q0``: gain that remains in ``C - P`` for s to infinity.
    remainder, denominator : tuple of Fraction
        The strictly proper rest.
    """

    improper: poly.Rationals
    constant: Fraction
    remainder: poly.Rationals
    denominator: poly.Rationals


def split(transfer: TransferFunction) -> Split:
    """Divide the polynomial part off, exactly.

    Parameters
    ----------
    transfer : TransferFunction
        Proper or improper.
    """
    denominator = poly.rationals(transfer.denominator)
    quotient, remainder = poly.divide(poly.rationals(transfer.numerator), denominator)
    constant = quotient[-1] if quotient else Fraction(0)
    return Split(poly.subtract(quotient, poly.trimmed((constant,))), constant, remainder, denominator)


def apply_rolloff(
    transfer: TransferFunction, placement: str, order: int, damping: Fraction, pole_rad_s: Fraction
) -> TransferFunction:
    """Multiply the improper part, or everything, by a filter of unit gain at s = 0.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)``.
    placement : str
        "derivative" or "whole".
    order : int
        Number of poles.
    damping : Fraction
        Damping ratio of two poles; 1 for any other number.
    pole_rad_s : Fraction
        Natural frequency ``p`` of the poles.

    Returns
    -------
    TransferFunction
        Exact, in lowest terms.

    Notes
    -----
    Two poles: ``p^2/(s^2 + 2 damping p s + p^2)``; n poles: ``(1/(s/p + 1))^n``.
    """
    p = pole_rad_s
    if order == 2:
        lag: poly.Rationals = (1 / p**2, 2 * damping / p, Fraction(1))
    else:
        lag = poly.power((1 / p, Fraction(1)), order)
    parts = split(transfer)
    if placement == "whole":
        return TransferFunction.from_polynomials(transfer.numerator, poly.multiply(lag, parts.denominator))
    kept = poly.add(poly.scale(parts.denominator, parts.constant), parts.remainder)
    filtered = poly.multiply(parts.improper, parts.denominator)
    return TransferFunction.from_polynomials(
        poly.add(poly.multiply(kept, lag), filtered), poly.multiply(lag, parts.denominator)
    )
