"""Sections as real numbers, before any structure is chosen: in cascade, or as partial fractions."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.rounding import FLOAT64
from realize.arithmetic.grouping import Factor, Group, Rest, monic
from realize.arithmetic.realization import cascaded
from realize.errors import Refused

#: Bits to which roots are known here: a stored coefficient has 31, and slow poles crowd within 2**-60 of z = 1.
_BITS = 256

#: A coefficient below this is 0: products of up to 16 such factors add up to fewer than ``2**32`` of their errors.
_NOISE = Fraction(1, 1 << _BITS - 32)


class Coefficients(NamedTuple):
    """A section as real numbers: a gain, the monic numerator (delayed), and ``a``."""

    gain: Fraction
    numerator: tuple[Fraction, ...]
    a: tuple[Fraction, ...]
    fixed: bool
    pair: tuple[Fraction, Fraction] | None

    @property
    def order(self) -> int:
        """Of the section."""
        return len(self.a)

    @property
    def b(self) -> tuple[Fraction, ...]:
        """Numerator with its gain."""
        return tuple(self.gain * c for c in self.numerator)


def cascaded_sections(rest: Rest, scales: Sequence[Fraction] | None) -> list[Coefficients]:
    """Sections in the order of a cascade, each gain times its scale."""
    sections = [coefficients_of(each, gain) for each, gain in cascaded(rest, FLOAT64)]
    return scaled(sections, scales)


def scaled(sections: list[Coefficients], scales: Sequence[Fraction] | None) -> list[Coefficients]:
    """Every gain times its scale, where there are any."""
    factors = scales or [Fraction(1)] * len(sections)
    return [s._replace(gain=s.gain * factor) for s, factor in zip(sections, factors, strict=True)]


def coefficients_of(each: Group, gain: Fraction) -> Coefficients:
    """One group of poles and zeros as a section."""
    order = each.order
    numerator = (*(Fraction(0),) * each.delays, *_rational(each.zeros))
    a = _rational(each.poles)[1:]
    return Coefficients(
        gain,
        numerator + (Fraction(0),) * (order + 1 - len(numerator)),
        a + (Fraction(0),) * (order - len(a)),
        all(zero.is_fixed for zero in each.zeros),
        _pair(each.poles) if order == 2 else None,
    )


def _pair(poles: tuple[Factor, ...]) -> tuple[Fraction, Fraction] | None:
    return _place(poles[0]) if len(poles) == 1 and poles[0].degree == 2 else None


def _place(pole: Factor) -> tuple[Fraction, Fraction]:
    """Real and imaginary part of a pole in z."""
    re, im, _ = pole.root.enclosure(_BITS)
    return 1 + Fraction(re, 1 << _BITS), Fraction(im, 1 << _BITS)


def _rational(factors: tuple[Factor, ...]) -> tuple[Fraction, ...]:
    """Their product in ascending powers of 1/z, to :data:`_BITS` bits; what lies below them is 0."""
    return tuple(c if abs(c) >= _NOISE else Fraction(0) for c in monic(factors, _BITS).midpoints())


def partial_fractions(rest: Rest) -> tuple[Fraction, list[Coefficients]]:
    """``rest = direct + sum of (n1 z + n0)/(z^2 + a1 z + a2)`` and first-order parts.

    Raises
    ------
    Refused
        When a pole is repeated.
    """
    if any(pole.root.multiplicity > 1 for pole in rest.poles):
        raise Refused(
            "[target] structure", "parallel, with a repeated pole", "simple poles", 'structure = "cascade", or "auto"'
        )
    whole = poly.scale(_rational(rest.zeros), rest.gain)
    below = [_rational((pole,)) for pole in rest.poles]
    direct_gain = whole[0] if len(whole) == sum(len(p) - 1 for p in below) + 1 else Fraction(0)
    sections = []
    for i, pole in enumerate(rest.poles):
        others: poly.Rationals = (Fraction(1),)
        for j, p in enumerate(below):
            others = poly.multiply(others, p) if j != i else others
        numerator = _residue(whole, others, below[i], pole)
        a = below[i][1:]
        sections.append(Coefficients(Fraction(1), (Fraction(0), *padded(numerator, len(a))), a, False, None))
    return direct_gain, sections


def _residue(
    whole: Sequence[Fraction], others: Sequence[Fraction], own: Sequence[Fraction], pole: Factor
) -> tuple[Fraction, ...]:
    """Numerator over ``own`` that agrees with ``whole/others`` at its roots: of degree below that of ``own``."""
    re, im = _place(pole)
    value = _divided(_at(whole, re, im), _at(others, re, im))
    if pole.degree == 1:
        return (value[0],)
    slope = value[1] / im
    return slope, value[0] - slope * re


def _at(p: Sequence[Fraction], re: Fraction, im: Fraction) -> tuple[Fraction, Fraction]:
    x = y = Fraction(0)
    for c in p:
        x, y = _cut(x * re - y * im + c), _cut(x * im + y * re)
    return x, y


def _divided(a: tuple[Fraction, Fraction], b: tuple[Fraction, Fraction]) -> tuple[Fraction, Fraction]:
    size = b[0] * b[0] + b[1] * b[1]
    return (a[0] * b[0] + a[1] * b[1]) / size, (a[1] * b[0] - a[0] * b[1]) / size


def _cut(value: Fraction) -> Fraction:
    """To twice the bits the roots are known to."""
    return Fraction(value.numerator << 2 * _BITS, value.denominator).__floor__() * Fraction(1, 1 << 2 * _BITS)


def padded(p: Sequence[Fraction], length: int) -> tuple[Fraction, ...]:
    """Zeros before a polynomial, up to a length."""
    return (*(Fraction(0),) * (length - len(p)), *p)
