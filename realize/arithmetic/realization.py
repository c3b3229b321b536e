"""From ``Gd(z)`` to stored numbers: integral states apart, the rest in sections.

``Gd = rest(z) + sum_i R_i/(z - 1)^i``. The rest becomes first- and second-order sections whose every coefficient
is one real number, rounded once. Section coefficients are in ascending powers of 1/z, ``a`` without its leading
1: ``y[k] = sum b x - sum a y``.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

import numpy as np

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, integers
from realize.algebra.roots import Root, isolate, origin
from realize.algebra.rounding import FloatFormat, correctly_rounded
from realize.errors import Refused
from realize.transfer import PulseTransferFunction

#: A leading coefficient of the rest this far below the others is zero: polynomials are carried to 1024 bits.
_VANISHING = Fraction(1, 1 << 900)

#: A coefficient this far below the sum of the sizes of its terms is their cancellation: numerators whose zeros are not
#: mapped are carried to some thousand bits, and are known to no more.
_CANCELLED = 2.0**-800

#: Roots in ``z - 1`` that rounding must not move: z = 1 and z = -1.
_ON_POINTS = {0: (1, -1), -2: (1, 1)}


class Section(NamedTuple):
    """One section as stored: every number is a value of the format, held in a Python float.

    ``b`` and ``a`` are in ascending powers of 1/z, ``a`` without its leading 1; ``len(b) == len(a) + 1``.
    """

    b: tuple[float, ...]
    a: tuple[float, ...]


@dataclass(frozen=True)
class Realization:
    """What the firmware stores.

    Attributes
    ----------
    format : FloatFormat
        Of every coefficient and state.
    structure : str
        ``direct`` (one section) or ``cascade``.
    integral : tuple of float
        ``R_1, R_2, ...``: the integral states' gains, in units of the output.
    sections : tuple of Section
        In the order in which a sample passes them; empty when the rest is zero.
    period_s : Fraction
        Sample period.
    """

    format: FloatFormat
    structure: str
    integral: tuple[float, ...]
    sections: tuple[Section, ...]
    period_s: Fraction


class _Factor(NamedTuple):
    """A real root or a conjugate pair, counted once."""

    root: Root

    @property
    def degree(self) -> int:
        return 2 if self.root.is_pair else 1

    @property
    def is_fixed(self) -> bool:
        """Whether the root lies on z = 1 or z = -1, where rounding must leave it."""
        return self.root.value.imag == 0 and self.root.value.real in _ON_POINTS

    def polynomial(self, bits: int) -> Enclosure:
        """Monic, descending powers of z."""
        if self.is_fixed:
            lead, last = _ON_POINTS[int(self.root.value.real)]
            return Enclosure(integers([lead << bits, last << bits]), integers([0, 0]), bits)
        re, im, rad = self.root.enclosure(bits)
        re += 1 << bits
        if not self.root.is_pair:
            return Enclosure(integers([1 << bits, -re]), integers([0, rad]), bits)
        reach = 2 * (abs(re) + abs(im)) * rad + 2 * rad * rad
        square = (re * re + im * im) >> bits
        return Enclosure(integers([1 << bits, -2 * re, square]), integers([0, 2 * rad, (reach >> bits) + 2]), bits)


class _Group(NamedTuple):
    """Poles and zeros of one section, and the whole periods its numerator is delayed by."""

    poles: tuple[_Factor, ...]
    zeros: tuple[_Factor, ...]
    delays: int

    @property
    def order(self) -> int:
        return max(_degree(self.poles), _degree(self.zeros) + self.delays)


def realization(pulse: PulseTransferFunction, target: FloatFormat, structure: str = "auto") -> Realization:
    """Split, group and round.

    Parameters
    ----------
    pulse : PulseTransferFunction
        ``Gd(z)``.
    target : FloatFormat
        Format of the stored numbers.
    structure : str
        ``direct``, ``cascade`` or ``auto``: direct where the cascade has a single section anyway.

    Raises
    ------
    Refused
        When ``direct`` is asked for and the rest has an order above 2, or rounding would move a pole or zero
        off z = 1 or z = -1; when a coefficient is beyond the format.
    """
    integral, rest = _split_integral(pulse)
    stored_integral = tuple(target.round(r) for r in integral)
    sections = _direct(rest, target) if structure == "direct" else _cascade(rest, target)
    name = "direct" if structure == "direct" or (structure == "auto" and len(sections) < 2) else "cascade"
    return Realization(target, name, stored_integral, sections, pulse.period_s)


def stored_pulse(stored: Realization) -> PulseTransferFunction:
    """The pulse transfer function that the stored numbers have, exactly."""
    order = len(stored.integral)
    ones = poly.power((Fraction(1), Fraction(-1)), order)
    tops, bottoms = (
        zip(*(_section_polynomials(s) for s in stored.sections), strict=True) if stored.sections else ((), ())
    )
    top, bottom = _product(tops) if tops else (), _product(bottoms)
    numerator = poly.multiply(top, ones)
    for i, gain in enumerate(stored.integral, start=1):
        share = poly.multiply(poly.power((Fraction(1), Fraction(-1)), order - i), bottom)
        numerator = poly.add(numerator, poly.scale(share, Fraction(gain)))
    return _exact_pulse(numerator, bottoms, order, stored.period_s)


def _exact_pulse(
    numerator: poly.Rationals, bottoms: Sequence[poly.Rationals], integrals: int, period_s: Fraction
) -> PulseTransferFunction:
    """Assemble a pulse transfer function from exact parts; common delays are dropped."""
    denominator = poly.multiply(_product(bottoms), poly.power((Fraction(1), Fraction(-1)), integrals))
    delays = min(poly.trailing_zeros(numerator), poly.trailing_zeros(denominator)) if numerator else 0
    numerator, denominator = (p[: len(p) - delays] for p in (numerator, denominator))
    zeros = _shifted_roots(numerator) if numerator else ()
    poles: tuple[Root, ...] = (origin(integrals),) if integrals else ()
    for bottom in bottoms:
        own = poly.trailing_zeros(bottom)
        dropped, delays = min(own, delays), max(0, delays - own)
        poles += _shifted_roots(bottom[: len(bottom) - dropped])
    padded = (Fraction(0),) * (len(denominator) - len(numerator)) + numerator
    return PulseTransferFunction(padded, denominator, period_s, poles, zeros)


def _shifted_roots(p: poly.Rationals) -> tuple[Root, ...]:
    """Roots in ``z - 1``."""
    return isolate(poly.primitive(poly.shift(p, Fraction(1)))) if len(p) > 1 else ()


def _section_polynomials(section: Section) -> tuple[poly.Rationals, poly.Rationals]:
    """Numerator and denominator in descending powers of z, exactly."""
    b = poly.trimmed(Fraction(c) for c in section.b)
    return b, (Fraction(1), *(Fraction(c) for c in section.a))


def _product(polynomials: Sequence[poly.Rationals]) -> poly.Rationals:
    result: poly.Rationals = (Fraction(1),)
    for p in polynomials:
        result = poly.multiply(result, p)
    return result


class _Rest(NamedTuple):
    """What is left of ``Gd`` when its poles at z = 1 are taken out."""

    gain: Fraction
    poles: tuple[_Factor, ...]
    zeros: tuple[_Factor, ...]


def _split_integral(pulse: PulseTransferFunction) -> tuple[tuple[Fraction, ...], _Rest]:
    """``R_1, R_2, ...`` and the rest, by the Taylor series at z = 1."""
    poles = _factors(root for root in pulse.poles if root.value != 0)
    order = sum(root.multiplicity for root in pulse.poles if root.value == 0)
    if order == 0:
        return (), _Rest(pulse.gain, poles, _factors(pulse.zeros))
    numerator = poly.shift(poly.trimmed(pulse.numerator), Fraction(1))
    decaying = poly.shift(pulse.denominator, Fraction(1))[:-order]
    series = _taylor(numerator, decaying, order)
    polar = tuple(reversed(series))
    left = poly.subtract(numerator, poly.multiply(poly.trimmed(polar), decaying))
    rest = _without_vanishing_lead(left[:-order] if left else ())
    if not rest:
        return tuple(reversed(series)), _Rest(Fraction(0), poles, ())
    return tuple(reversed(series)), _Rest(rest[0], poles, _factors(isolate(poly.primitive(rest))))


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


def _factors(roots: Iterable[Root]) -> tuple[_Factor, ...]:
    return tuple(_Factor(root) for root in roots for _ in range(root.multiplicity))


def _direct(rest: _Rest, target: FloatFormat) -> tuple[Section, ...]:
    """The whole rest as one section."""
    if rest.gain == 0:
        return ()
    order = _degree(rest.poles)
    if order > 2:
        raise Refused(
            "[target] structure",
            f"direct, although what is left beside the integral states has order {order}",
            "direct up to order 2",
            'structure = "cascade", or "auto"',
        )
    section = _rounded_section(_group(rest.poles, rest.zeros), rest.gain, target)
    _refuse_moved(section, rest)
    return (section,)


def _refuse_moved(section: Section, rest: _Rest) -> None:
    """Refuse a section in which rounding has moved a root off z = 1 or z = -1."""
    for factors, p, what in zip((rest.zeros, rest.poles), _section_polynomials(section), ("zero", "pole"), strict=True):
        for delta in _ON_POINTS:
            wanted = sum(1 for f in factors if f.is_fixed and f.root.value.real == delta)
            shifted = poly.shift(p, Fraction(delta + 1))
            if wanted > poly.trailing_zeros(shifted):
                raise Refused(
                    "[target] structure",
                    f"direct would move the {what} at z = {delta + 1} when its coefficients are rounded",
                    "structures that keep it",
                    'structure = "cascade", or "auto"',
                )


def _cascade(rest: _Rest, target: FloatFormat) -> tuple[Section, ...]:
    """Sections in ascending order of peak gain (ties: ascending pole), each a power of two times a monic numerator.

    The first takes the gain that is left, exactly.
    """
    if rest.gain == 0:
        return ()
    groups = _grouped(rest.poles, rest.zeros) or [_group((), ())]
    exponents = [_peak_exponent(_rounded_section(group, Fraction(1), target)) for group in groups]
    order = sorted(range(len(groups)), key=lambda i: exponents[i])
    scales = [Fraction(2) ** -exponents[i] for i in order]
    gain = rest.gain
    for scale in scales[1:]:
        gain /= scale
    return tuple(
        _rounded_section(groups[i], scale if position else gain, target)
        for position, (i, scale) in enumerate(zip(order, scales, strict=True))
    )


def _grouped(poles: tuple[_Factor, ...], zeros: tuple[_Factor, ...]) -> list[_Group]:
    """Pair poles with the nearest zeros of their kind, then part what rounding would spoil."""
    sections = _pole_sections(poles, sum(1 for z in zeros if z.degree == 2))
    left = list(zeros)
    groups = []
    # Pole pairs near the circle choose first: theirs are the peaks that a near zero tames.
    for section in sorted(sections, key=lambda s: (-_degree(s), -max(_radius(f) for f in s))):
        chosen = _nearest(section, left)
        for factor in chosen:
            left.remove(factor)
        groups.append(_group(section, chosen))
    # Rooms of two are as many as the zero pairs need, and rooms in all at least as many as zeros.
    assert not left
    return [part for group in groups for part in _parted(group)]


def _group(poles: tuple[_Factor, ...], zeros: tuple[_Factor, ...]) -> _Group:
    return _Group(poles, zeros, _degree(poles) - _degree(zeros))


def _pole_sections(poles: tuple[_Factor, ...], zero_pairs: int) -> list[tuple[_Factor, ...]]:
    """Pairs by themselves; real poles by themselves too, but as many joined in twos as zero pairs need room.

    Joined are the fastest, which lose least when the coefficients of their product are rounded.
    """
    pairs = [(f,) for f in poles if f.degree == 2]
    real = sorted((f for f in poles if f.degree == 1), key=lambda f: abs(f.root.value), reverse=True)
    joined = min(max(0, zero_pairs - len(pairs)), len(real) // 2)
    twos = [tuple(real[2 * i : 2 * i + 2]) for i in range(joined)]
    return [*pairs, *twos, *((f,) for f in real[2 * joined :])]


def _nearest(section: tuple[_Factor, ...], zeros: list[_Factor]) -> tuple[_Factor, ...]:
    """Zeros for one section: a pair for a pair; else real ones, both fixed or both free where there is a choice."""
    centre = section[0].root.value
    room = _degree(section)
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


def _parted(group: _Group) -> list[_Group]:
    """Move a free zero that would share a numerator with a fixed one into a section of its own."""
    fixed = tuple(f for f in group.zeros if f.is_fixed)
    free = tuple(f for f in group.zeros if not f.is_fixed)
    if not (fixed and free):
        return [group]
    return [_Group(group.poles, fixed, group.delays), _Group((), free, 0)]


def _rounded_section(group: _Group, gain: Fraction, target: FloatFormat) -> Section:
    """Round each coefficient of ``gain * prod(1 - zero/z)/prod(1 - pole/z)``, delayed, once."""
    order = group.order
    b = _rounded_product(group.zeros, gain, target)
    a = _rounded_product(group.poles, Fraction(1), target)[1:]
    return Section(_padded((0.0,) * group.delays + b, order + 1), _padded(a, order))


def _rounded_product(factors: tuple[_Factor, ...], gain: Fraction, target: FloatFormat) -> tuple[float, ...]:
    """Coefficients of ``gain * prod(1 - root/z)``; what cancels down to the carried precision is 0."""
    rounded = correctly_rounded(lambda bits: _monic(factors, bits).scaled(gain), target)
    sizes = [abs(float(gain))]
    for factor in factors:
        z = 1 + factor.root.value
        own = [1.0, 2 * abs(z.real), abs(z) ** 2] if factor.root.is_pair else [1.0, abs(z.real)]
        sizes = [float(c) for c in np.convolve(sizes, own)]
    return tuple(c if abs(c) >= size * _CANCELLED else 0.0 for c, size in zip(rounded, sizes, strict=True))


def _padded(values: tuple[float, ...], length: int) -> tuple[float, ...]:
    return values + (0.0,) * (length - len(values))


def _monic(factors: tuple[_Factor, ...], bits: int) -> Enclosure:
    """Product of the factors, descending powers of z."""
    product = Enclosure(integers([1 << bits]), integers([0]), bits)
    for factor in factors:
        product = product.convolve(factor.polynomial(bits))
    return product


def _peak_exponent(section: Section) -> int:
    """Exponent of the power of two nearest the peak gain: the largest gain at z = 1, z = -1 and the resonance."""
    b = [Fraction(c) for c in section.b] + [Fraction(0)] * (3 - len(section.b))
    a = [Fraction(1), *(Fraction(c) for c in section.a)] + [Fraction(0)] * (2 - len(section.a))
    cosines = [Fraction(1), Fraction(-1)]
    if a[2] > 0:
        cosines.append(max(Fraction(-1), min(Fraction(1), -a[1] * (1 + a[2]) / (4 * a[2]))))
    gains = [_square(b, c) / _square(a, c) for c in cosines if _square(a, c)]
    peak = max(gains, default=Fraction(0))
    return _nearest_half_exponent(peak) if peak else 0


def _square(p: list[Fraction], cosine: Fraction) -> Fraction:
    """``|p_0 + p_1/z + p_2/z^2|^2`` on the unit circle."""
    return (p[0] - p[2]) ** 2 + p[1] ** 2 + 2 * p[1] * (p[0] + p[2]) * cosine + 4 * p[0] * p[2] * cosine**2


def _nearest_half_exponent(square: Fraction) -> int:
    """Exponent of the power of two nearest (in ratio) to the square root."""
    size = square.numerator.bit_length() - square.denominator.bit_length()
    floor_log2 = size if square >= Fraction(2) ** size else size - 1
    return (floor_log2 + 1) // 2


def _radius(factor: _Factor) -> float:
    return abs(1 + factor.root.value)


def _degree(factors: Sequence[_Factor]) -> int:
    return sum(f.degree for f in factors)
