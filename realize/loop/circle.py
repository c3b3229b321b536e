"""Whether the roots of a polynomial with enclosed coefficients lie inside the unit circle, with a stated bound.

The recursion of Schur and Cohn runs on balls in scaled integers: an answer that it gives holds for every polynomial
in the enclosure. Coefficients are in descending powers of z.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure
from realize.checks.schur import MARGINAL, STABLE, UNSTABLE

#: Bits of the attempts: the first serves ordinary loops, and each step of the recursion that comes within 2^-k of the
#: circle costs about k bits, so 2048 decide order 16 with poles 1e-9 inside it at every step.
PRECISIONS = (256, 768, 2048)

Ball = tuple[int, int]


class Decision(NamedTuple):
    """Where the roots lie.

    Attributes
    ----------
    stability : str
        ``stable``, ``marginal`` (not told from the circle) or ``unstable``.
    bits : int
        Bits the decision took.
    """

    stability: str
    bits: int


def decide(enclose: Callable[[int], list[Ball]]) -> Decision:
    """Decide with as many bits as it takes.

    Parameters
    ----------
    enclose : callable
        ``enclose(bits)``: coefficients as balls (midpoint, radius) in units of ``2**-bits``.

    Returns
    -------
    Decision
        ``stable`` and ``unstable`` are proven for the enclosed polynomial; ``marginal`` says that it cannot be told
        from one with a root on the circle at the last of :data:`PRECISIONS`.
    """
    for bits in PRECISIONS:
        inside = _all_inside(enclose(bits), bits)
        if inside is not None:
            return Decision(STABLE if inside else UNSTABLE, bits)
    return Decision(MARGINAL, PRECISIONS[-1])


def balls(p: Enclosure, bits: int) -> list[Ball]:
    """An enclosed polynomial in units of ``2**-bits``."""
    return [_ball(low, high, unit, bits) for low, high, unit in p.intervals()]


def rational_balls(p: Sequence[Fraction], bits: int) -> list[Ball]:
    """A rational polynomial in units of ``2**-bits``."""
    return [_ball(c.numerator, c.numerator, c.denominator, bits) for c in p]


def product(a: Sequence[Ball], b: Sequence[Ball], bits: int) -> list[Ball]:
    """Product of two polynomials."""
    mids, rads = [0] * (len(a) + len(b) - 1), [0] * (len(a) + len(b) - 1)
    for i, (x, rx) in enumerate(a):
        for j, (y, ry) in enumerate(b):
            mids[i + j] += x * y
            rads[i + j] += abs(x) * ry + rx * (abs(y) + ry)
    return [(m >> bits, (r >> bits) + 2) for m, r in zip(mids, rads, strict=True)]


def total(a: Sequence[Ball], b: Sequence[Ball]) -> list[Ball]:
    """Sum of two polynomials."""
    longer, shorter = (a, b) if len(a) >= len(b) else (b, a)
    padded = [(0, 0)] * (len(longer) - len(shorter)) + list(shorter)
    return [(x + y, rx + ry) for (x, rx), (y, ry) in zip(longer, padded, strict=True)]


def without_ones(p: Sequence[Ball], count: int) -> list[Ball]:
    """Quotient by ``(z - 1)^count``, which is known to divide ``p``."""
    quotient = list(p)
    for _ in range(count):
        sums, mid, rad = [], 0, 0
        for m, r in quotient[:-1]:
            mid, rad = mid + m, rad + r
            sums.append((mid, rad))
        quotient = sums
    return quotient


def _ball(low: int, high: int, unit: int, bits: int) -> Ball:
    first, last = (low << bits) // unit, -((-high << bits) // unit)
    mid = first + last >> 1
    return mid, last - mid


def _all_inside(p: list[Ball], bits: int) -> bool | None:
    """Whether all roots lie inside the circle; None where ``bits`` do not tell.

    Notes
    -----
    ``k = a_n/a_0``; roots outside stay outside under ``a_i - k a_(n-i)`` while ``|k| < 1`` (Rouche), and ``|k| > 1``
    shows one. Every ball keeps its own radius; a lead that has shrunk is brought back up, which is exact.
    """
    while len(p) > 1:
        (lead, spread), (last, wide) = p[0], p[-1]
        if abs(last) - wide > abs(lead) + spread:
            return False
        if abs(last) + wide >= abs(lead) - spread:
            return None
        k = (last << bits) // lead
        # |k| < 1, so the quotient is off by at most (wide + spread)/(|lead| - spread), and its rounding.
        off = (wide + spread << bits) // (abs(lead) - spread) + 2
        p = [
            (x - (k * y >> bits), rx + ry + (off * (abs(y) + ry) >> bits) + 2)
            for (x, rx), (y, ry) in zip(p[:-1], p[:0:-1], strict=True)
        ]
        up = bits - abs(p[0][0]).bit_length()
        if up > 0:
            p = [(x << up, rx << up) for x, rx in p]
    return True


def at_one(p: Sequence[Fraction]) -> int:
    """Multiplicity of the root at z = 1."""
    return poly.trailing_zeros(poly.shift(poly.trimmed(p), Fraction(1)))
