"""Rounding once, from the exact value straight to the target format, half to even."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from fractions import Fraction
from math import ldexp

from realize.algebra.enclosure import Enclosure, Unresolved
from realize.errors import Refused

#: Bits of the first enclosure: enough for float64 with 75 bits of cancellation to spare.
FIRST_BITS = 128

#: An enclosure narrower than this fraction of its value that still holds one rounding boundary is taken to be that
#: boundary: the numbers the methods produce from designs of a few hundred digits do not come so near one otherwise.
_TIE_BITS = 4000

#: Working bits after which a result is given up: no design of the permitted degree and range needs more than some
#: thousands.
MOST_BITS = 1 << 16


@dataclass(frozen=True)
class FloatFormat:
    """A binary interchange format of IEEE 754.

    Attributes
    ----------
    name : str
        ``float32`` or ``float64``.
    precision : int
        Bits of the significand, the hidden one included.
    least_exponent : int
        Exponent of the least subnormal: every value is a multiple of ``2**least_exponent``.
    most_exponent : int
        All values are below ``2**most_exponent``.
    """

    name: str
    precision: int
    least_exponent: int
    most_exponent: int

    def round(self, value: Fraction) -> float:
        """Nearest value of the format, half to even, held in a Python float.

        Raises
        ------
        Refused
            When the value is beyond the largest finite one.
        """
        return self.round_ratio(value.numerator, value.denominator)

    def round_ratio(self, numerator: int, denominator: int) -> float:
        """Nearest value of the format to ``numerator / denominator`` (denominator positive)."""
        size = abs(numerator)
        exponent = max(_floor_log2(size, denominator) - self.precision + 1, self.least_exponent)
        significand = _round_half_even(size << max(-exponent, 0), denominator << max(exponent, 0))
        if exponent + significand.bit_length() > self.most_exponent:
            raise Refused(
                "coefficient",
                f"about 2^{exponent + significand.bit_length()} is beyond the largest {self.name}",
                f"values below 2^{self.most_exponent}",
                "scale the gain of the transfer function, or use float64",
            )
        return ldexp(significand if numerator > 0 else -significand, exponent) if significand else 0.0


FLOAT32 = FloatFormat("float32", 24, -149, 128)
FLOAT64 = FloatFormat("float64", 53, -1074, 1024)


def correctly_rounded(enclose: Callable[[int], Enclosure], target: FloatFormat) -> tuple[float, ...]:
    """Round every entry of an enclosed vector, doubling the bits until both ends round alike.

    Parameters
    ----------
    enclose : callable
        ``enclose(bits)`` encloses the vector to about that many bits; may raise ``Unresolved``.
    target : FloatFormat
        The format of the result.

    Raises
    ------
    Unresolved
        When no permitted number of bits tells two values of the format apart.
    Refused
        When an entry is beyond the format.
    """
    bits = FIRST_BITS
    while True:
        try:
            intervals = list(enclose(bits).intervals())
            return tuple(_rounded(interval, target) for interval in intervals)
        except Unresolved:
            if bits >= MOST_BITS:
                raise
        bits *= 2


def _rounded(interval: tuple[int, int, int], target: FloatFormat) -> float:
    """The value that both ends of ``[low, high] / unit`` round to, or the even one at a tie."""
    low, high, unit = interval
    # What is beyond the format at its end nearest 0 is so for certain; an end farther out may be width alone.
    target.round_ratio(max(low, 0) or min(high, 0), unit)
    try:
        ends = target.round_ratio(low, unit), target.round_ratio(high, unit)
    except Refused:
        raise Unresolved from None
    if ends[0] == ends[1]:
        return ends[0]
    if (high - low) << _TIE_BITS > max(abs(low), abs(high)):
        raise Unresolved
    return _even_neighbour(*ends)


def _even_neighbour(low: float, high: float) -> float:
    """The even one of two neighbouring values; in units of the finer one, the odd one is odd."""
    (low_top, low_unit), (high_top, high_unit) = low.as_integer_ratio(), high.as_integer_ratio()
    unit = max(low_unit, high_unit)
    low_count, high_count = low_top * (unit // low_unit), high_top * (unit // high_unit)
    return low if _trailing_zeros(low_count) > _trailing_zeros(high_count) else high


def _trailing_zeros(n: int) -> int:
    return (n & -n).bit_length() if n else 1 << 20


def _floor_log2(numerator: int, denominator: int) -> int:
    """Exponent e with ``2**e <= numerator/denominator < 2**(e + 1)``; very small for 0."""
    if numerator == 0:
        return -(1 << 30)
    e = numerator.bit_length() - denominator.bit_length()
    reached = numerator >= denominator << e if e >= 0 else numerator << -e >= denominator
    return e if reached else e - 1


def _round_half_even(numerator: int, denominator: int) -> int:
    quotient, rest = divmod(numerator, denominator)
    twice = 2 * rest
    return quotient + (twice > denominator or (twice == denominator and quotient % 2 == 1))
