"""What every method hands over, and how it becomes a pulse transfer function.

A method describes ``Gd(z)`` by enclosures of its coefficients and by the images of the roots it maps; all
that the methods share (normalised time, images of roots, rounding, the carried precision) is here.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from math import comb, log2
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, Unresolved
from realize.algebra.roots import Disc, Root, isolate, origin
from realize.algebra.rounding import MOST_BITS, FloatFormat, correctly_rounded
from realize.errors import Refused
from realize.transfer import PulseTransferFunction, TransferFunction

#: Bits to which ``Gd`` is carried where a method needs ``exp`` or ``tan``: no quantity of a design of the
#: permitted degree is looked at to better than float64, and cancellation has the rest.
CARRIED_BITS = 1024

#: A carried coefficient is good when its radius is below this fraction of it: 53 bits of a double, as much
#: again for the division by a nearly double root, and some.
_CARRIED_RELATIVE_BITS = 160

#: Values below the least subnormal of float64 count as 0: nothing downstream can hold them.
_NEGLIGIBLE_BITS = 1100

#: Last coefficients of a numerator below this fraction of what it is at z = 1 (its zeros there divided out) are
#: left out: its zeros move to z = 0, and its value anywhere in the band by a hundred orders of magnitude less than
#: any format holds.
_AT_ORIGIN_BITS = 400

#: ``exp(709)`` is the largest power of e that float64 can hold, to within a factor of 2.
MOST_GROWTH = 709

#: An image that cannot be told from z = 1 at this many bits below the root itself is taken to be there:
#: numbers from pi and sqrt are right to 400 digits, which is 1329 bits.
_ALIAS_BITS = 1024

Enclose = Callable[[int], Enclosure]
Roots = Callable[[], tuple[Root, ...]]


class Conversion(NamedTuple):
    """``Gd(z)`` as a method describes it: cheap to make, nothing of it computed before it is asked for.

    Attributes
    ----------
    numerator, denominator : callable
        ``bits -> Enclosure``: coefficients in descending powers of z, equally many, the denominator monic.
    poles : callable
        ``() -> tuple of Root``: images of the poles, in ``z - 1``; refuses those that no float can hold or tell from 0.
    zeros : callable or None
        The same of the zeros; None where the method does not map zeros, so that they are the roots of the numerator.
    zeros_at_one : int
        Zeros at z = 1 that the numerator has by structure (used when ``zeros`` is None).
    structural : mapping
        Numerator entries known exactly, by index.
    notes : tuple of str
        What the user should know about this conversion.
    """

    numerator: Enclose
    denominator: Enclose
    poles: Roots
    zeros: Roots | None
    zeros_at_one: int = 0
    structural: Mapping[int, Fraction] = {}
    notes: tuple[str, ...] = ()

    def rounded(self, target: FloatFormat) -> tuple[tuple[float, ...], tuple[float, ...]]:
        """Correctly rounded numerator and denominator, descending powers of z.

        Raises
        ------
        Refused
            When a coefficient is beyond the largest value of the format.
        Unresolved
            When no permitted number of bits tells two values of the format apart.
        """
        # What is known exactly is left out: no enclosure tells a zero from its neighbours.
        others = iter(correctly_rounded(lambda bits: self.numerator(bits).without(self.structural), target))
        known = {i: target.round(value) for i, value in self.structural.items()}
        denominator = correctly_rounded(self.denominator, target)
        return tuple(known[i] if i in known else next(others) for i in range(len(denominator))), denominator


@dataclass(frozen=True)
class Discretization:
    """A pulse transfer function together with the method that made it.

    Attributes
    ----------
    method : str
        Name of the method.
    pulse : PulseTransferFunction
        ``Gd(z)``, exact or carried to :data:`CARRIED_BITS` bits.
    conversion : Conversion
        The enclosures, for rounding to any format.
    """

    method: str
    pulse: PulseTransferFunction
    conversion: Conversion

    @property
    def has_exact_denominator(self) -> bool:
        """Whether the denominator is rational, so that its stability can be decided on it."""
        return not any(self.conversion.denominator(CARRIED_BITS).rad)

    def rounded(self, target: FloatFormat) -> tuple[tuple[float, ...], tuple[float, ...]]:
        """Correctly rounded coefficients, as :meth:`Conversion.rounded` gives them."""
        return self.conversion.rounded(target)


def pulse_transfer_function(conversion: Conversion, period_s: Fraction) -> PulseTransferFunction:
    """Carry a conversion's polynomials and find the zeros it does not map."""
    poles = conversion.poles()
    denominator = _carried(conversion.denominator, {}).midpoints()
    if conversion.zeros is not None:
        numerator = _carried(conversion.numerator, conversion.structural).midpoints()
        numerator = _with_structure(numerator, conversion.structural)
        return PulseTransferFunction(numerator, denominator, period_s, poles, conversion.zeros())
    numerator, shifted = _carried_with_shift(conversion, len(denominator) - 1)
    zeros = isolate(poly.primitive(shifted)) if any(shifted) else ()
    return PulseTransferFunction(numerator, denominator, period_s, poles, zeros)


def _carried(enclose: Enclose, structural: Mapping[int, Fraction]) -> Enclosure:
    bits = CARRIED_BITS
    while True:
        try:
            enclosure = enclose(bits)
        except Unresolved:
            enclosure = None
        if enclosure and _resolved(enclosure, structural):
            return enclosure
        if bits >= MOST_BITS:
            raise Unresolved
        bits *= 2


def _resolved(enclosure: Enclosure, structural: Mapping[int, Fraction]) -> bool:
    """Whether every entry is known to many relative bits, is negligible, or is known by structure."""
    negligible = (enclosure.factor.denominator << enclosure.bits) // abs(enclosure.factor.numerator)
    return all(
        abs(mid) >= rad << _CARRIED_RELATIVE_BITS or abs(mid) + rad < negligible >> _NEGLIGIBLE_BITS
        for i, (mid, rad) in enumerate(zip(enclosure.mid, enclosure.rad, strict=True))
        if i not in structural
    )


def _with_structure(numerator: poly.Rationals, structural: Mapping[int, Fraction]) -> poly.Rationals:
    return tuple(structural.get(i, value) for i, value in enumerate(numerator))


def _carried_with_shift(conversion: Conversion, n: int) -> tuple[poly.Rationals, poly.Rationals]:
    """The numerator of degree n in z and in ``z - 1``, structural zeros exact in both."""

    def shifted(bits: int) -> Enclosure:
        return _shifted_by_one(conversion.numerator(bits))

    known = {n - i: Fraction(0) for i in range(conversion.zeros_at_one)}
    lead_zeros = _leading_zeros(conversion.structural)
    known |= {i: Fraction(0) for i in range(lead_zeros)}
    kept = poly.trimmed(_with_structure(_carried(shifted, known).midpoints(), known))
    kept = _with_zeros_at_origin(kept, conversion.zeros_at_one)
    numerator = poly.shift(kept, Fraction(-1)) if kept else ()
    padded = (Fraction(0),) * (n + 1 - len(numerator)) + numerator
    return _with_structure(padded, conversion.structural), kept


def _with_zeros_at_origin(p: poly.Rationals, zeros_at_one: int) -> poly.Rationals:
    """Drop the last coefficients that count nowhere near the band; ``p`` is in powers of ``z - 1``.

    They come from poles that decay within a fraction of a period, and their zeros crowd together seen from z = 1.
    """
    if not p:
        return p
    near_one = p[: len(p) - zeros_at_one]
    free = poly.shift(near_one, Fraction(-1))
    least = abs(next(c for c in reversed(near_one) if c)) / (1 << _AT_ORIGIN_BITS)
    last = max(i for i, c in enumerate(free) if abs(c) > least)
    moved = free[: last + 1] + (Fraction(0),) * (len(free) - 1 - last)
    return poly.shift(moved, Fraction(1)) + p[len(p) - zeros_at_one :]


def _leading_zeros(structural: Mapping[int, Fraction]) -> int:
    count = 0
    while structural.get(count) == 0:
        count += 1
    return count


def _shifted_by_one(p: Enclosure) -> Enclosure:
    """``p(1 + d)`` in descending powers of d."""
    n = len(p) - 1
    mid, rad = p.mid * 0, p.rad * 0
    for i in range(n + 1):
        for j in range(n - i + 1):
            mid[n - j] += comb(n - i, j) * p.mid[i]
            rad[n - j] += comb(n - i, j) * p.rad[i]
    return Enclosure(mid, rad, p.bits, p.factor)


def normalised_ratio(transfer: TransferFunction, period_s: Fraction) -> tuple[poly.Integers, poly.Integers]:
    """Integer polynomials in ``x = s T`` with the ratio G."""
    n, d = (
        [Fraction(c) * period_s ** -(len(p) - 1 - i) for i, c in enumerate(p)]
        for p in (transfer.numerator, transfer.denominator)
    )
    numerator, denominator = poly.integer_form(n, d)
    return numerator, denominator


def mapped(roots: tuple[Root, ...], period_s: Fraction, apply: Callable[[Disc, int], Disc]) -> tuple[Root, ...]:
    """Images of roots in s under a map from discs in ``x = s T`` to discs in ``z - 1``."""
    return tuple(_image(root, period_s, apply) for root in roots)


def _image(root: Root, period_s: Fraction, apply: Callable[[Disc, int], Disc]) -> Root:
    if root.value == 0:
        return origin(root.multiplicity)

    def enclosure(bits: int) -> Disc:
        extra = 32
        while True:
            work = bits + extra
            re, im, rad = apply(_times(root.enclosure(work), period_s), work)
            if rad <= 1 << extra:
                sign = -1 if root.is_pair and im < 0 else 1
                return re >> extra, sign * im >> extra, 2 - (-rad >> extra)
            extra *= 2

    return Root(_value_of(enclosure, root, period_s), root.multiplicity, enclosure)


def _value_of(enclosure: Callable[[int], Disc], root: Root, period_s: Fraction) -> complex:
    """Float value of an image: both parts to a double's precision of its magnitude."""
    limit = _ALIAS_BITS + max(0, -int(log2(abs(root.value)) + log2(period_s)))
    bits = 128
    while True:
        re, im, rad = enclosure(bits)
        size = max(abs(re), abs(im))
        aliased = bits > limit and size + rad < 1 << (bits - limit)
        if size >= rad << 60 and not aliased:
            value = _as_complex(re, im, bits, root)
            # A pair stays a pair even where its imaginary part is too small for a double.
            return complex(value.real, max(value.imag, 5e-324)) if root.is_pair else complex(value.real)
        if aliased or bits > MOST_BITS:
            raise Refused(
                "method",
                f"the root at s = {root.value:.5g} rad/s falls on z = 1 although it is not 0",
                "roots that are not multiples of the sampling frequency",
                "choose another sample rate, or a method that does not alias",
            )
        bits *= 2


def _as_complex(re: int, im: int, bits: int, root: Root) -> complex:
    try:
        return complex(re / (1 << bits), im / (1 << bits))
    except OverflowError:
        raise Refused(
            "method",
            f"the image of the root at s = {root.value:.5g} rad/s is beyond every floating-point number",
            "images below 1e308",
            "choose another sample rate or method",
        ) from None


def _times(disc: Disc, factor: Fraction) -> Disc:
    n, d = factor.numerator, factor.denominator
    re, im, rad = disc
    return re * n // d, im * n // d, -(-rad * n // d) + 2


def refuse_growth(roots: tuple[Root, ...], period_s: Fraction) -> None:
    """Refuse images under ``exp`` that no double can hold, before anything is computed."""
    for root in roots:
        if root.value.real * float(period_s) > MOST_GROWTH:
            growth = root.value.real * float(period_s)
            raise Refused(
                "method",
                f"a root at s = {root.value:.5g} rad/s grows by exp({growth:.5g}) in one period",
                f"growth of at most exp({MOST_GROWTH}) per period",
                "raise the sample rate, or use a bilinear or difference method",
            )
