"""``pi`` and square roots as rationals, right to 400 digits, in integer arithmetic alone.

A design that names ``pi`` or ``sqrt`` holds these rationals from the moment it is read; nothing later
computes them again, or to another number of digits.
"""

from __future__ import annotations

from fractions import Fraction
from functools import cache
from math import isqrt

#: Digits an irrational number is right to: a difference of two of them may lose 300 (one that loses more is
#: refused) and still keeps 100.
DIGITS = 400

#: Digits carried: the series for pi cuts about 600 divisions short by less than one unit each, 16-fold, which
#: costs four digits; eight more are left over. Decimal, so that the digits can be read in an exact quotient.
CARRIED_DIGITS = DIGITS + 12

_UNIT = 10**CARRIED_DIGITS


@cache
def pi() -> Fraction:
    """Return the circle constant with an error below 1e-400.

    Notes
    -----
    Machin 1706: ``pi = 16 arctan(1/5) - 4 arctan(1/239)``.
    """
    return Fraction(16 * _arctangent_of_reciprocal(5) - 4 * _arctangent_of_reciprocal(239), _UNIT)


def square_root(value: Fraction) -> Fraction:
    """Return the square root: exact for the square of a rational, else with a relative error below 1e-400.

    Parameters
    ----------
    value : Fraction
        Not negative.

    Raises
    ------
    ValueError
        When ``value`` is negative.
    """
    p, q = value.numerator, value.denominator
    exact = Fraction(isqrt(p), isqrt(q))
    if exact**2 == value:
        return exact
    # 0.30103/2 digits a bit: the root gets the carried digits, one more or less. Its integer part is short by
    # less than one unit, and cutting the radicand to an integer costs less than that.
    shift = CARRIED_DIGITS - (p.bit_length() - q.bit_length()) * 30103 // 200000
    radicand = p * 10 ** (2 * shift) // q if shift >= 0 else p // (q * 10 ** (-2 * shift))
    return isqrt(radicand) * Fraction(10) ** -shift


def _arctangent_of_reciprocal(x: int) -> int:
    """``arctan(1/x)`` by its alternating series in odd powers, in units of the last digit carried."""
    power, total, order, sign = _UNIT // x, 0, 1, 1
    while power:
        total += sign * (power // order)
        power //= x * x
        order += 2
        sign = -sign
    return total
