"""Exact numbers as text for a design file, and as figures that may be out of reach."""

from __future__ import annotations

from fractions import Fraction

from realize.algebra.expression.printing import exact_text, rounded

#: Room for every decimal a design file can hold.
_MOST_DIGITS = 1000


def decimal_or_quotient(x: Fraction) -> str:
    """Write a number exactly: as the decimal it is, or as ``"p/q"`` where none ends within 1000 digits.

    Parameters
    ----------
    x : Fraction
        Any number.
    """
    decimal = rounded(x, _MOST_DIGITS)
    return f"{decimal:f}" if Fraction(decimal) == x else exact_text(x)


def finite_figure(x: Fraction) -> float | None:
    """The nearest double, or ``None`` beyond their range.

    Parameters
    ----------
    x : Fraction
        Any number.
    """
    try:
        return float(x)
    except OverflowError:
        return None
