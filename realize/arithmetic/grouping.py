"""What a pulse transfer function is parted into before anything is rounded: integral gains, and groups of roots.

``Gd = rest(z) + sum_i R_i/(z - 1)^i``. The rest is a gain, poles and zeros; each group of them becomes a section.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from functools import lru_cache
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, integers
from realize.algebra.roots import Root, isolate
from realize.transfer import PulseTransferFunction

#: A leading coefficient of the rest this far below the others is zero: polynomials are carried to 1024 bits.
_VANISHING = Fraction(1, 1 << 900)

#: Roots in ``z - 1`` that rounding must not move: z = 1 and z = -1.
ON_POINTS = {0: (1, -1), -2: (1, 1)}


class Factor(NamedTuple):
    """A real root or a conjugate pair, counted once."""

    root: Root

    @property
    def degree(self) -> int:
        """1, or 2 for a pair."""
        return 2 if self.root.is_pair else 1

    @property
    def is_fixed(self) -> bool:
        """Whether the root lies on z = 1 or z = -1, where rounding must leave it."""
        return self.root.value.imag == 0 and self.root.value.real in ON_POINTS

    def polynomial(self, bits: int) -> Enclosure:
        """Monic, descending powers of z."""
        if self.is_fixed:
            lead, last = ON_POINTS[int(self.root.value.real)]
            return Enclosure(integers([lead << bits, last << bits]), integers([0, 0]), bits)
        re, im, rad = self.root.enclosure(bits)
        return self._monic(re + (1 << bits), im, rad, bits)

    def polynomial_in_delta(self, bits: int) -> Enclosure:
        """Monic, descending powers of ``delta = z - 1``, in which the root is known: nothing cancels."""
        if self.is_fixed:
            last = -int(self.root.value.real)
            return Enclosure(integers([1 << bits, last << bits]), integers([0, 0]), bits)
        return self._monic(*self.root.enclosure(bits), bits)

    def _monic(self, re: int, im: int, rad: int, bits: int) -> Enclosure:
        """With a root, or a pair, in a disc."""
        if not self.root.is_pair:
            return Enclosure(integers([1 << bits, -re]), integers([0, rad]), bits)
        reach = 2 * (abs(re) + abs(im)) * rad + 2 * rad * rad
        square = (re * re + im * im) >> bits
        return Enclosure(integers([1 << bits, -2 * re, square]), integers([0, 2 * rad, (reach >> bits) + 2]), bits)


#: z = 0, which as a root in ``z - 1`` is an integer too.
AT_ZERO = Factor(Root(complex(-1), 1, lambda bits: (-1 << bits, 0, 0)))


class Group(NamedTuple):
    """Poles and zeros of one section, and the whole periods its numerator is delayed by."""

    poles: tuple[Factor, ...]
    zeros: tuple[Factor, ...]
    delays: int

    @property
    def order(self) -> int:
        """Of the section that it makes."""
        return max(degree(self.poles), degree(self.zeros) + self.delays)


class Rest(NamedTuple):
    """What is left of ``Gd`` when its poles at z = 1 are taken out."""

    gain: Fraction
    poles: tuple[Factor, ...]
    zeros: tuple[Factor, ...]


@lru_cache(maxsize=8)
def split_integral(pulse: PulseTransferFunction) -> tuple[tuple[Fraction, ...], Rest]:
    """``R_1, R_2, ...`` and the rest, by the Taylor series at z = 1; kept, because every structure asks for it."""
    poles = one_by_one(root for root in pulse.poles if root.value != 0)
    order = sum(root.multiplicity for root in pulse.poles if root.value == 0)
    if order == 0:
        return (), Rest(pulse.gain, poles, one_by_one(pulse.zeros))
    numerator = poly.shift(poly.trimmed(pulse.numerator), Fraction(1))
    decaying = poly.shift(pulse.denominator, Fraction(1))[:-order]
    series = _taylor(numerator, decaying, order)
    polar = tuple(reversed(series))
    left = poly.subtract(numerator, poly.multiply(poly.trimmed(polar), decaying))
    rest = _without_vanishing_lead(left[:-order] if left else ())
    if not rest:
        return tuple(reversed(series)), Rest(Fraction(0), poles, ())
    return tuple(reversed(series)), Rest(rest[0], poles, one_by_one(isolate(poly.primitive(rest))))


def _taylor(numerator: poly.Rationals, denominator: poly.Rationals, count: int) -> list[Fraction]:
    """First coefficients of the power series of a ratio at 0, ascending."""
    n, d = list(reversed(numerator)), list(reversed(denominator))
    series: list[Fraction] = []
    for i in range(count):
        known = sum((series[j] * d[i - j] for j in range(i) if i - j < len(d)), Fraction(0))
        series.append(((n[i] if i < len(n) else Fraction(0)) - known) / d[0])
    return series


def _without_vanishing_lead(p: poly.Rationals) -> poly.Rationals:
    limit = max((abs(c) for c in p), default=Fraction(0)) * _VANISHING
    first = next((i for i, c in enumerate(p) if abs(c) > limit), len(p))
    return p[first:]


def one_by_one(roots: Iterable[Root]) -> tuple[Factor, ...]:
    """Roots one by one, pairs together."""
    return tuple(Factor(root) for root in roots for _ in range(root.multiplicity))


def grouped(poles: tuple[Factor, ...], zeros: tuple[Factor, ...]) -> list[Group]:
    """Pair poles with the nearest zeros of their kind, then part what rounding would spoil."""
    sections = _pole_sections(poles, sum(1 for z in zeros if z.degree == 2))
    left = list(zeros)
    groups = []
    # Pole pairs near the circle choose first: theirs are the peaks that a near zero tames.
    for section in sorted(sections, key=lambda s: (-degree(s), -max(_radius(f) for f in s))):
        chosen = _nearest(section, left)
        for factor in chosen:
            left.remove(factor)
        groups.append(group(section, chosen))
    # Rooms of two are as many as the zero pairs need, and rooms in all at least as many as zeros.
    assert not left
    return [part for group in groups for part in _parted(group)]


def group(poles: tuple[Factor, ...], zeros: tuple[Factor, ...]) -> Group:
    """Poles and zeros in one section, delayed by as many periods as it has fewer zeros."""
    return Group(poles, zeros, degree(poles) - degree(zeros))


def _pole_sections(poles: tuple[Factor, ...], zero_pairs: int) -> list[tuple[Factor, ...]]:
    """Pairs by themselves; real poles by themselves too, but as many joined in twos as zero pairs need room.

    Joined are the fastest, which lose least when the coefficients of their product are rounded.
    """
    pairs = [(f,) for f in poles if f.degree == 2]
    real = sorted((f for f in poles if f.degree == 1), key=lambda f: abs(f.root.value), reverse=True)
    joined = min(max(0, zero_pairs - len(pairs)), len(real) // 2)
    twos = [tuple(real[2 * i : 2 * i + 2]) for i in range(joined)]
    return [*pairs, *twos, *((f,) for f in real[2 * joined :])]


def _nearest(section: tuple[Factor, ...], zeros: list[Factor]) -> tuple[Factor, ...]:
    """Zeros for one section: a pair for a pair; else real ones, both fixed or both free where there is a choice."""
    centre = section[0].root.value
    room = degree(section)
    near = sorted(zeros, key=lambda f: abs(f.root.value - centre))
    pairs = [f for f in near if f.degree == 2]
    real = [f for f in near if f.degree == 1]
    if room == 2 and pairs:
        return (pairs[0],)
    if room == 1:
        return tuple(real[:1])
    same = [[f for f in real if f.is_fixed == fixed] for fixed in (True, False)]
    alike = next((kind for kind in same if len(kind) >= 2), real)
    return tuple(alike[:2])


def _parted(group: Group) -> list[Group]:
    """Move a free zero that would share a numerator with a fixed one into a section of its own."""
    fixed = tuple(f for f in group.zeros if f.is_fixed)
    free = tuple(f for f in group.zeros if not f.is_fixed)
    if not (fixed and free):
        return [group]
    return [Group(group.poles, fixed, group.delays), Group((), free, 0)]


def monic(factors: tuple[Factor, ...], bits: int) -> Enclosure:
    """Product of the factors, descending powers of z."""
    return _product((factor.polynomial(bits) for factor in factors), bits)


def monic_in_delta(factors: tuple[Factor, ...], bits: int) -> Enclosure:
    """Product of the factors, descending powers of ``delta = z - 1``."""
    return _product((factor.polynomial_in_delta(bits) for factor in factors), bits)


def _product(polynomials: Iterable[Enclosure], bits: int) -> Enclosure:
    product = Enclosure(integers([1 << bits]), integers([0]), bits)
    for p in polynomials:
        product = product.convolve(p)
    return product


def _radius(factor: Factor) -> float:
    return abs(1 + factor.root.value)


def degree(factors: Sequence[Factor]) -> int:
    """Of the product."""
    return sum(f.degree for f in factors)
