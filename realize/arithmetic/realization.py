"""From ``Gd(z)`` to stored numbers: integral states apart, the rest in sections.

``Gd = rest(z) + sum_i R_i/(z - 1)^i``. The rest becomes first- and second-order sections whose every coefficient
is one real number, rounded once. Section coefficients are in ascending powers of 1/z, ``a`` without its leading
1: ``y[k] = sum b x - sum a y``. Those of the structure ``delta`` are in ascending powers of 1/delta, ``delta = z - 1``
(Middleton & Goodwin 1990, from memory): beside poles that crowd z = 1 the coefficients of z are 1 and 2 but for a
little that rounding takes away, those of delta are that little.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from fractions import Fraction
from math import prod
from typing import NamedTuple

import numpy as np

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure
from realize.algebra.roots import Root, isolate, origin
from realize.algebra.rounding import FloatFormat, correctly_rounded
from realize.arithmetic.grouping import (
    AT_ZERO,
    ON_POINTS,
    Factor,
    Group,
    Rest,
    degree,
    group,
    grouped,
    monic,
    monic_in_delta,
    one_by_one,
    split_integral,
)
from realize.errors import Refused
from realize.transfer import PulseTransferFunction

#: A coefficient this far below the sum of the sizes of its terms is their cancellation: numerators whose zeros are not
#: mapped are carried to some thousand bits, and are known to no more.
_CANCELLED = 2.0**-800


class Section(NamedTuple):
    """One section as stored: every number is a value of the format, held in a Python float.

    ``b`` and ``a`` are in ascending powers of 1/z, ``a`` without its leading 1; ``len(b) == len(a) + 1``.
    """

    b: tuple[float, ...]
    a: tuple[float, ...]

    def in_z(self) -> tuple[poly.Rationals, poly.Rationals]:
        """``b`` and ``a`` in ascending powers of 1/z, exactly."""
        return _exactly(self.b), _exactly(self.a)


class DeltaSection(NamedTuple):
    """One section in the operator ``delta = z - 1``, as stored.

    ``b`` and ``a`` are in ascending powers of 1/delta, ``a`` without its leading 1; ``len(b) == len(a) + 1``.
    """

    b: tuple[float, ...]
    a: tuple[float, ...]

    def in_z(self) -> tuple[poly.Rationals, poly.Rationals]:
        """``b`` and ``a`` in ascending powers of 1/z, exactly."""
        b, a = (poly.shift(_exactly(p), Fraction(-1)) for p in (self.b, (1.0, *self.a)))
        return b, a[1:]


AnySection = Section | DeltaSection


@dataclass(frozen=True)
class Realization:
    """What the firmware stores.

    Attributes
    ----------
    format : FloatFormat
        Of every coefficient and state.
    structure : str
        ``direct`` (one section), ``cascade``, or ``delta`` (a cascade, every section in delta).
    integral : tuple of float
        ``R_1, R_2, ...``: the integral states' gains, in units of the output.
    sections : tuple of Section or DeltaSection
        In the order in which a sample passes them; empty when the rest is zero.
    period_s : Fraction
        Sample period.
    """

    format: FloatFormat
    structure: str
    integral: tuple[float, ...]
    sections: tuple[AnySection, ...]
    period_s: Fraction


def realization(pulse: PulseTransferFunction, target: FloatFormat, structure: str = "auto") -> Realization:
    """Split, group and round.

    Parameters
    ----------
    pulse : PulseTransferFunction
        ``Gd(z)``.
    target : FloatFormat
        Format of the stored numbers.
    structure : str
        ``direct``, ``cascade``, ``delta`` or ``auto``: a cascade, called direct where it has a single section anyway.

    Raises
    ------
    Refused
        When ``direct`` is asked for and the rest has an order above 2, or rounding would move a pole or zero
        off z = 1 or z = -1; when a coefficient is beyond the format.
    """
    integral, rest = split_integral(pulse)
    stored_integral = tuple(target.round(r) for r in integral)
    sections = sections_of(parts_of(rest, target, structure), rest, target, structure)
    return Realization(target, structure_name(structure, len(sections)), stored_integral, sections, pulse.period_s)


def structure_name(asked: str, sections: int) -> str:
    """What a structure is called that was asked for, with so many sections."""
    return ("direct" if sections < 2 else "cascade") if asked == "auto" else asked


def parts_of(rest: Rest, target: FloatFormat, structure: str) -> list[tuple[Group, Fraction]]:
    """Groups in the order in which a sample passes them, each with the gain of its monic numerator.

    Raises
    ------
    Refused
        When ``direct`` is asked for and the rest has an order above 2.
    """
    if rest.gain == 0:
        return []
    if structure == "direct":
        refuse_direct(rest)
        return [(group(rest.poles, rest.zeros), rest.gain)]
    if structure != "delta":
        return cascaded(rest, target)
    return _scaled(rest, lambda group: _rounded_delta_section(group, Fraction(1), target), _takes_any_gain)


def carrier_of(groups: Sequence[Group], structure: str) -> int:
    """Position of the section that takes the gain which the others leave; their gains are powers of two.

    Rounding keeps a zero at z = -1 in delta too: see :func:`_takes_any_gain`.
    """
    return next(i for i, group in enumerate(groups) if structure != "delta" or _takes_any_gain(group))


def sections_of(
    parts: Sequence[tuple[Group, Fraction]], rest: Rest, target: FloatFormat, structure: str
) -> tuple[AnySection, ...]:
    """Round every coefficient of every part once.

    Raises
    ------
    Refused
        When rounding would move a pole or zero of ``direct`` off z = 1 or z = -1.
    """
    if structure == "delta":
        return tuple(_rounded_delta_section(group, gain, target) for group, gain in parts)
    sections = tuple(_rounded_section(group, gain, target) for group, gain in parts)
    if structure == "direct":
        for section in sections:
            _refuse_moved(section, rest)
    return sections


def stored_pulse(stored: Realization) -> PulseTransferFunction:
    """The pulse transfer function that the stored numbers have, exactly."""
    tops, bottoms = (
        zip(*(_section_polynomials(s) for s in stored.sections), strict=True) if stored.sections else ((), ())
    )
    return exact_pulse(_product(tops) if tops else (), bottoms, tuple(map(Fraction, stored.integral)), stored.period_s)


def stored_denominator(stored: Realization) -> poly.Rationals:
    """Denominator that the stored numbers have, exactly, in descending powers of z; nothing is cancelled."""
    bottoms = [_section_polynomials(section)[1] for section in stored.sections]
    return _product([*bottoms, *[(Fraction(1), Fraction(-1))] * len(stored.integral)])


def exact_pulse(
    top: poly.Rationals, bottoms: Sequence[poly.Rationals], integral: Sequence[Fraction], period_s: Fraction
) -> PulseTransferFunction:
    """Assemble ``top/prod(bottoms) + sum_i R_i/(z - 1)^i``; common delays are dropped.

    Parameters
    ----------
    top : tuple of Fraction
        Of the rest, in descending powers of z.
    bottoms : sequence of tuple of Fraction
        Denominators of the sections, monic.
    integral : sequence of Fraction
        ``R_1, R_2, ...``.
    """
    order, bottom = len(integral), _product(bottoms)
    numerator = poly.multiply(top, poly.power((Fraction(1), Fraction(-1)), order))
    for i, gain in enumerate(integral, start=1):
        share = poly.multiply(poly.power((Fraction(1), Fraction(-1)), order - i), bottom)
        numerator = poly.add(numerator, poly.scale(share, gain))
    denominator = poly.multiply(bottom, poly.power((Fraction(1), Fraction(-1)), order))
    delays = min(poly.trailing_zeros(numerator), poly.trailing_zeros(denominator)) if numerator else 0
    numerator, denominator = (p[: len(p) - delays] for p in (numerator, denominator))
    zeros = _shifted_roots(numerator) if numerator else ()
    poles: tuple[Root, ...] = (origin(order),) if order else ()
    for bottom in bottoms:
        own = poly.trailing_zeros(bottom)
        dropped, delays = min(own, delays), max(0, delays - own)
        poles += _shifted_roots(bottom[: len(bottom) - dropped])
    padded = (Fraction(0),) * (len(denominator) - len(numerator)) + numerator
    return PulseTransferFunction(padded, denominator, period_s, poles, zeros)


def _shifted_roots(p: poly.Rationals) -> tuple[Root, ...]:
    """Roots in ``z - 1``."""
    return isolate(poly.primitive(poly.shift(p, Fraction(1)))) if len(p) > 1 else ()


def _exactly(values: Sequence[float]) -> poly.Rationals:
    return tuple(map(Fraction, values))


def _section_polynomials(section: AnySection) -> tuple[poly.Rationals, poly.Rationals]:
    """Numerator and denominator in descending powers of z, exactly."""
    b, a = section.in_z()
    return poly.trimmed(b), (Fraction(1), *a)


def _product(polynomials: Sequence[poly.Rationals]) -> poly.Rationals:
    result: poly.Rationals = (Fraction(1),)
    for p in polynomials:
        result = poly.multiply(result, p)
    return result


def refuse_direct(rest: Rest) -> None:
    """Refuse one section for the whole rest where its order is above 2."""
    order = degree(rest.poles)
    if order > 2:
        raise Refused(
            "[target] structure",
            f"direct, although what is left beside the integral states has order {order}",
            "direct up to order 2",
            'structure = "cascade", or "auto"',
        )


def _refuse_moved(section: Section, rest: Rest) -> None:
    """Refuse a section in which rounding has moved a root off z = 1 or z = -1."""
    for factors, p, what in zip((rest.zeros, rest.poles), _section_polynomials(section), ("zero", "pole"), strict=True):
        for delta in ON_POINTS:
            wanted = sum(1 for f in factors if f.is_fixed and f.root.value.real == delta)
            shifted = poly.shift(p, Fraction(delta + 1))
            if wanted > poly.trailing_zeros(shifted):
                raise Refused(
                    "[target] structure",
                    f"direct would move the {what} at z = {delta + 1} when its coefficients are rounded",
                    "structures that keep it",
                    'structure = "cascade", or "auto"',
                )


def cascaded(rest: Rest, target: FloatFormat) -> list[tuple[Group, Fraction]]:
    """Groups in the order in which a sample passes them, each with the gain of its monic numerator.

    Parameters
    ----------
    rest : Rest
        What is left beside the integral.
    target : FloatFormat
        In which the peak gains are estimated that set order and gains.

    Notes
    -----
    Ascending peak gain (ties: ascending pole); every gain a power of two that brings the peak near 1, but for the
    first, which takes the gain that is left, exactly.
    """
    return _scaled(rest, lambda group: _rounded_section(group, Fraction(1), target), lambda _: True)


def _scaled(
    rest: Rest, rounded: Callable[[Group], AnySection], takes_gain: Callable[[Group], bool]
) -> list[tuple[Group, Fraction]]:
    """As :func:`cascaded`, for sections as they are rounded; the first that takes any gain gets what is left."""
    if rest.gain == 0:
        return []
    groups = grouped(rest.poles, rest.zeros) or [group((), ())]
    exponents = [_peak_exponent(rounded(each)) for each in groups]
    order = sorted(range(len(groups)), key=lambda i: exponents[i])
    scales = [Fraction(2) ** -exponents[i] for i in order]
    carrier = next(position for position, i in enumerate(order) if takes_gain(groups[i]))
    gain = rest.gain / prod(scale for position, scale in enumerate(scales) if position != carrier)
    return [
        (groups[i], gain if position == carrier else scale)
        for position, (i, scale) in enumerate(zip(order, scales, strict=True))
    ]


def _rounded_section(group: Group, gain: Fraction, target: FloatFormat) -> Section:
    """Round each coefficient of ``gain * prod(1 - zero/z)/prod(1 - pole/z)``, delayed, once."""
    order = group.order
    b = _rounded_product(group.zeros, gain, target)
    a = _rounded_product(group.poles, Fraction(1), target)[1:]
    return Section(_padded((0.0,) * group.delays + b, order + 1), _padded(a, order))


def series(pulse: PulseTransferFunction, target: FloatFormat) -> tuple[Section, ...]:
    """The whole of ``Gd`` as sections one after the other, poles at z = 1 among them; no integral is set apart.

    Raises
    ------
    Refused
        When a coefficient is beyond the format.
    """
    whole = Rest(pulse.gain, one_by_one(pulse.poles), one_by_one(pulse.zeros))
    return tuple(_rounded_section(group, gain, target) for group, gain in cascaded(whole, target))


def _rounded_delta_section(group: Group, gain: Fraction, target: FloatFormat) -> DeltaSection:
    """The same with polynomials in delta, to which a delay and a root at z = 0 are no mere shift."""
    poles = group.poles + (AT_ZERO,) * (group.order - degree(group.poles))
    zeros = group.zeros + (AT_ZERO,) * _zeros_at_zero(group)
    b = _rounded_polynomial(zeros, gain, target, monic_in_delta, 0)
    a = _rounded_polynomial(poles, Fraction(1), target, monic_in_delta, 0)[1:]
    return DeltaSection((0.0,) * group.delays + b, a)


def _zeros_at_zero(group: Group) -> int:
    """How many zeros at z = 0 it takes to delay the numerator by no more than it is."""
    return group.order - group.delays - degree(group.zeros)


def _takes_any_gain(group: Group) -> bool:
    """Whether rounding keeps the fixed zeros of a section in delta whatever its gain.

    Their own products have the coefficients 1, 2 and 4, which times a gain round alike; beside a zero at z = 0 there is
    ``(delta + 2)(delta + 1) = delta^2 + 3 delta + 2``, and 3 times a gain rounds alike where that is a power of two.
    The free zero parted from it has a section that takes any gain.
    """
    return not (_zeros_at_zero(group) and any(f.is_fixed for f in group.zeros))


def _rounded_product(factors: tuple[Factor, ...], gain: Fraction, target: FloatFormat) -> tuple[float, ...]:
    """Coefficients of ``gain * prod(1 - root/z)``."""
    return _rounded_polynomial(factors, gain, target, monic, 1)


def _rounded_polynomial(
    factors: tuple[Factor, ...],
    gain: Fraction,
    target: FloatFormat,
    enclosed: Callable[[tuple[Factor, ...], int], Enclosure],
    centre: int,
) -> tuple[float, ...]:
    """``gain`` times a product of factors whose roots are at ``centre + root``; what is their cancellation is 0."""
    rounded = correctly_rounded(lambda bits: enclosed(factors, bits).scaled(gain), target)
    sizes = [abs(float(gain))]
    for factor in factors:
        z = centre + factor.root.value
        own = [1.0, 2 * abs(z.real), abs(z) ** 2] if factor.root.is_pair else [1.0, abs(z.real)]
        sizes = [float(c) for c in np.convolve(sizes, own)]
    return tuple(c if abs(c) >= size * _CANCELLED else 0.0 for c, size in zip(rounded, sizes, strict=True))


def _padded(values: tuple[float, ...], length: int) -> tuple[float, ...]:
    return values + (0.0,) * (length - len(values))


def _peak_exponent(section: AnySection) -> int:
    """Exponent of the power of two nearest the peak gain: the largest gain at z = 1, z = -1 and the resonance."""
    forward, back = section.in_z()
    b = [*forward] + [Fraction(0)] * (3 - len(forward))
    a = [Fraction(1), *back] + [Fraction(0)] * (2 - len(back))
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
