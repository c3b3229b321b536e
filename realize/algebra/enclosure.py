"""Vectors of real numbers, each known to lie within a radius of a midpoint.

Midpoints and radii are Python integers in numpy object arrays, in units of ``2**-bits``; a rational factor,
known exactly, multiplies the whole vector. Every operation adds what it rounds off to the radius, so that the
true value stays inside. An exact vector is one whose radii are 0.
"""

from __future__ import annotations

from collections.abc import Container, Iterator, Sequence
from fractions import Fraction
from math import lcm
from typing import Any

import numpy as np

Array = np.ndarray[Any, np.dtype[np.object_]]


class Unresolved(ArithmeticError):
    """More bits are needed: a divisor cannot be told from zero at the present ones."""


class Enclosure:
    """An enclosed vector: entry i lies within ``factor * 2**-bits * (mid[i] -+ rad[i])``."""

    __slots__ = ("bits", "factor", "mid", "rad")

    def __init__(self, mid: Array, rad: Array, bits: int, factor: Fraction = Fraction(1)) -> None:
        self.mid = mid
        self.rad = rad
        self.bits = bits
        self.factor = factor

    @classmethod
    def exact(cls, values: Sequence[Fraction | int]) -> Enclosure:
        """Enclose rationals without loss: integers over their common denominator."""
        unit = lcm(*(Fraction(v).denominator for v in values))
        mid = integers([int(v * unit) for v in values])
        return cls(mid, mid * 0, 0, Fraction(1, unit))

    @classmethod
    def rounded(cls, values: Sequence[Fraction], bits: int) -> Enclosure:
        """Enclose rationals as multiples of ``2**-bits``."""
        mid = integers([(v.numerator << bits) // v.denominator for v in values])
        rad = integers([int((v.numerator << bits) % v.denominator != 0) for v in values])
        return cls(mid, rad, bits)

    def __len__(self) -> int:
        return len(self.mid)

    def without(self, left_out: Container[int]) -> Enclosure:
        """The same vector without the entries at some indices."""
        kept = [i for i in range(len(self)) if i not in left_out]
        return Enclosure(self.mid[kept], self.rad[kept], self.bits, self.factor)

    def intervals(self) -> Iterator[tuple[int, int, int]]:
        """Both ends of each entry and the positive unit they are divided by."""
        top, bottom = self.factor.numerator, self.factor.denominator << self.bits
        for mid, rad in zip(self.mid, self.rad, strict=True):
            low, high = sorted(((mid - rad) * top, (mid + rad) * top))
            yield low, high, bottom

    def midpoints(self) -> tuple[Fraction, ...]:
        """The midpoints, as rationals."""
        return tuple(Fraction(int(m), 1 << self.bits) * self.factor for m in self.mid)

    def scaled(self, factor: Fraction) -> Enclosure:
        """Product with a rational, exactly."""
        return Enclosure(self.mid, self.rad, self.bits, self.factor * factor)

    def with_first(self, value: Fraction) -> Enclosure:
        """The same vector with its first entry replaced by a rational."""
        if self.bits == 0:
            return Enclosure.exact((value, *self.midpoints()[1:]))
        first = Enclosure.rounded([value / self.factor], self.bits)
        mid, rad = (np.concatenate(pair) for pair in ((first.mid, self.mid[1:]), (first.rad, self.rad[1:])))
        return Enclosure(mid, rad, self.bits, self.factor)

    def __add__(self, other: Enclosure) -> Enclosure:
        self._like(other)
        return Enclosure(self.mid + other.mid, self.rad + other.rad, self.bits, self.factor)

    def convolve(self, other: Enclosure) -> Enclosure:
        """Product of two polynomials of the same ``bits``."""
        mid = np.convolve(self.mid, other.mid)
        rad = np.convolve(abs(self.mid), other.rad) + np.convolve(self.rad, abs(other.mid) + other.rad)
        return Enclosure(*_dropped(mid, rad, self.bits), self.bits, self.factor * other.factor)

    def convolve_integers(self, p: Sequence[int]) -> Enclosure:
        """Product with an integer polynomial."""
        q = integers(p)
        return Enclosure(np.convolve(self.mid, q), np.convolve(self.rad, abs(q)), self.bits, self.factor)

    def times(self, mid: int, rad: int) -> Enclosure:
        """Product with an enclosed number in units of ``2**-bits``."""
        product = self.mid * mid
        radius = abs(self.mid) * rad + self.rad * (abs(mid) + rad)
        return Enclosure(*_dropped(product, radius, self.bits), self.bits, self.factor)

    def entry(self, i: int) -> tuple[int, int]:
        """Midpoint and radius of one entry, without the factor."""
        return int(self.mid[i]), int(self.rad[i])

    def total(self) -> tuple[int, int]:
        """Midpoint and radius of the sum of all entries, without the factor."""
        return int(sum(self.mid)), int(sum(self.rad))

    def _like(self, other: Enclosure) -> None:
        assert self.bits == other.bits
        assert self.factor == other.factor


def reciprocal(mid: int, rad: int, bits: int) -> tuple[int, int]:
    """Midpoint and radius of 1/x for an enclosed x, all in units of ``2**-bits``.

    Raises
    ------
    Unresolved
        When x cannot be told from zero by a comfortable factor of 2.
    """
    if abs(mid) <= 2 * rad:
        raise Unresolved
    one = 1 << 2 * bits
    # |1/x - 1/m| <= r / (|m| (|m| - r)), and the floor below adds at most one unit.
    return one // mid, -(-(one * rad) // (abs(mid) * (abs(mid) - rad))) + 1


def integers(values: Sequence[int]) -> Array:
    """An object array of Python integers."""
    array = np.empty(len(values), dtype=object)
    array[:] = values
    return array


def _dropped(mid: Array, rad: Array, bits: int) -> tuple[Array, Array]:
    """Shift down, the remainder going into the radius."""
    return mid >> bits, (rad >> bits) + 2
