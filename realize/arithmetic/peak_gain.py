"""Worst-case peak gains: the sum of ``|h[k]|``, enclosed.

It is the largest output that any input within -+1 can cause, and no bound below it holds. The impulse response is
summed in scaled integers; what is left when that takes too long is summed by blocks.

Conventions: polynomials in descending powers of z; a denominator is monic.
"""

from __future__ import annotations

from fractions import Fraction
from operator import mul
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.arithmetic.block_sums import U, by_blocks
from realize.arithmetic.lattice import DIGITS, Lattice, floor_log2, lattice_of
from realize.arithmetic.state_space import PulseRatio
from realize.checks.schur import STABLE, stability
from realize.errors import Refused

#: Relative width of an enclosure: a format needs one bit of it, an error bound three digits; this leaves both room.
DEFAULT_WIDTH = Fraction(1, 1 << 20)

#: Terms summed one by one before anything cleverer is set up, which costs about as much.
_FEW_TERMS = 512

#: Terms summed one by one where the width asked for is beyond what double precision can add up: a tenth of a second.
_MANY_TERMS = 1 << 16

#: Narrowest width left to double precision. Its errors are about ``n`` units in the last place for each of up to
#: 100 steps, 1e-13 in all for order 8.
_FLOAT_WIDTH = Fraction(1, 1 << 34)


class PeakGain(NamedTuple):
    """An enclosure of a worst-case peak gain.

    Attributes
    ----------
    low : Fraction
        No bound below this holds.
    high : Fraction or None
        Proven; ``None`` where there is no bound.
    reason : str
        Why there is no bound; else empty.
    """

    low: Fraction
    high: Fraction | None
    reason: str = ""

    @property
    def width_reached(self) -> Fraction | None:
        """Relative width of the enclosure; ``None`` without a bound."""
        if self.high is None:
            return None
        return (self.high - self.low) / self.low if self.high else Fraction(0)


def peak_gain(ratio: PulseRatio, width: Fraction = DEFAULT_WIDTH) -> PeakGain:
    """Enclose ``sum |h[k]|`` of a path, its worst-case peak gain.

    Parameters
    ----------
    ratio : PulseRatio
        In lowest terms.
    width : Fraction
        Relative width to reach, positive. :attr:`PeakGain.width_reached` tells where that took too long: widths
        below 6e-11 need the response to die out within 65536 terms (else 1e-12 or so is reached), and hardly damped
        pairs within 1e-8 of the circle are only enclosed to -21 and +11 %.

    Notes
    -----
    Poles on or outside the unit circle have no bound. The sum of the first terms is exact up to rounding errors
    that ``1/a`` passes on; the rest is bounded by :meth:`Lattice.tail` or summed by blocks.
    """
    if not ratio.numerator:
        return PeakGain(Fraction(0), Fraction(0))
    order = poly.degree(ratio.denominator) - poly.trailing_zeros(ratio.denominator)
    verdict = stability(ratio.denominator)
    if verdict != STABLE:
        place = "outside the unit circle or repeated on it" if verdict == "unstable" else "on the unit circle"
        return PeakGain(Fraction(0), None, f"a pole lies {place}: a bounded input can make any output")
    if order == 0:
        exact = sum(map(abs, ratio.numerator), Fraction(0))
        return PeakGain(exact, exact)
    lattice = lattice_of(ratio.denominator[: order + 1])
    if not lattice.resolved:
        return PeakGain(Fraction(0), None, "a pole lies within 1e-18 of the unit circle: no bound is computed")
    return _enclosed(ratio, lattice, width)


def attaining_input(ratio: PulseRatio, count: int) -> tuple[int, ...]:
    """Input of -1 and 1 that makes the output reach the sum of the first ``count`` ``|h[k]|`` at its last sample.

    Parameters
    ----------
    ratio : PulseRatio
        Stable.
    count : int
        Length of the input.

    Raises
    ------
    Refused
        When the path has no peak gain.

    Notes
    -----
    ``u[k] = sign h[N - k]`` with ``N = count - 1``. A term below 2**-100 of the numerator's lead may get either sign.
    """
    if not ratio.numerator:
        return (1,) * count
    if stability(ratio.denominator) != STABLE:
        raise Refused("path", "a pole on or outside the unit circle", "stable paths", "take the integral states apart")
    order = poly.degree(ratio.denominator) - poly.trailing_zeros(ratio.denominator)
    errors = lattice_of(ratio.denominator[: order + 1]).growth * count if order else Fraction(count)
    response = _Response(ratio, 101 + max(0, floor_log2(errors / abs(ratio.numerator[0]))))
    response.extend(count)
    return tuple(-1 if h < 0 else 1 for h in reversed(response.terms[:count]))


class _Response:
    """First terms of an impulse response, in units of ``2**-bits``.

    Each is rounded down once, to within a unit; that error then passes through ``1/a`` like an input.
    """

    def __init__(self, ratio: PulseRatio, bits: int) -> None:
        top, bottom = poly.integer_form(ratio.numerator, ratio.denominator)
        self.lead, *self.back = bottom[: len(bottom) - poly.trailing_zeros(bottom)]
        self.forward = [0] * (len(bottom) - len(top)) + [c << bits for c in top]
        self.terms: list[int] = []

    def extend(self, count: int) -> None:
        """Have at least ``count`` terms."""
        terms, back, lead, n = self.terms, self.back, self.lead, len(self.back)
        for k in range(len(terms), count):
            b = self.forward[k] if k < len(self.forward) else 0
            # From the last term back: terms[:-n-1:-1] is short at the start, where what is missing is 0.
            terms.append((b - sum(map(mul, back, terms[: -n - 1 : -1]))) // lead)

    def rest(self, bits: int) -> list[Fraction]:
        """``p`` of degree n - 1 with ``z p/a`` the response from the last n terms on, without those errors."""
        n = len(self.back)
        last = self.terms[-n:]
        alpha = [self.lead, *self.back]
        unit = self.lead << bits
        return [Fraction(sum(alpha[i] * last[j - i] for i in range(j + 1)), unit) for j in range(n)]


def _bits(ratio: PulseRatio, lattice: Lattice, count: int, spare: int) -> int:
    """Bits so that all errors of ``count`` terms, passed twice through ``1/a``, stay ``spare`` bits below the first."""
    errors = lattice.growth**2 * count * sum(map(abs, ratio.denominator)) / abs(ratio.numerator[0])
    return max(0, floor_log2(errors)) + 1 + spare


def _enclosed(ratio: PulseRatio, lattice: Lattice, width: Fraction) -> PeakGain:
    """Sum terms one by one; when that takes too many, the rest by blocks."""
    n = lattice.order
    start = poly.degree(ratio.denominator) + 1 + n
    most = start + (_FEW_TERMS if width >= _FLOAT_WIDTH else _MANY_TERMS)
    # 64 bits more than the width needs: double precision then adds its own errors to the state, not these.
    bits = _bits(ratio, lattice, most, 64 - floor_log2(width))
    response, unit = _Response(ratio, bits), Fraction(1, 1 << bits)
    error = lattice.growth * most * unit
    # Off by ``error`` in all, the last n terms make p off by that times sum |a|, and the rest by that times |1/a|.
    error += error * sum(map(abs, ratio.denominator)) * lattice.growth
    count, total = start, 0
    while True:
        done = max(0, len(response.terms) - n)
        response.extend(count)
        total += sum(map(abs, response.terms[done:-n]))
        if count == most or sum(map(abs, response.terms[-n:])) <= width * total:
            rest = response.rest(bits)
            state = lattice.coordinates(rest)
            energy = lattice.energy(state)
            tail = lattice.tail(energy)
            if tail + 2 * error <= width * (total * unit - error):
                return _outward(total * unit - error, total * unit + error + tail)
            if count == most:
                break
        count = min(count + max(lattice.halving, n), most)
    # Double precision gets no narrower than its own errors.
    tolerance = max(width, Fraction(U)) * (total * unit + lattice.least(rest, energy)) / 4
    low, high = by_blocks(lattice, state, energy, tolerance)
    return _outward(total * unit + low - error, total * unit + high + error)


def _outward(low: Fraction, high: Fraction) -> PeakGain:
    """Ends rounded outward to some :data:`DIGITS` bits beyond what tells them apart."""
    shift = max(0, DIGITS - floor_log2(high - low))
    bottom = (max(low, Fraction(0)).numerator << shift) // low.denominator
    top = -((-high.numerator << shift) // high.denominator)
    return PeakGain(Fraction(bottom, 1 << shift), Fraction(top, 1 << shift))
