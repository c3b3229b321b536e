"""Stability of a pulse transfer function, decided exactly.

Coefficients are rationals in descending powers of z. The answer is ``stable`` (every root inside the unit
circle), ``marginal`` (simple roots on the circle, the others inside) or ``unstable``.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from realize.algebra import polynomial as poly

STABLE, MARGINAL, UNSTABLE = CLASSES = ("stable", "marginal", "unstable")

#: Precisions of the enclosed recursion. Each step loses about log2(1/(1 - k^2)) bits, twenty or so for a pole
#: 1e-6 inside the circle, so 512 bits carry order 8 at a high rate and 2048 order 32; what still cannot be told
#: is decided in exact integers.
_PRECISIONS = (512, 2048)


def stability(denominator: Sequence[Fraction]) -> str:
    """Decide where the roots of a polynomial lie with respect to the unit circle.

    Parameters
    ----------
    denominator : sequence of Fraction
        Descending powers of z, the leading one not zero.

    Returns
    -------
    str
        One of :data:`CLASSES`.

    Notes
    -----
    Roots at 0, 1 and -1 are divided out first. The recursion of Schur and Cohn (``k = a_n/a_0``, ``a_i`` less
    ``k a_{n-i}``, degree less one; stable when every ``|k| < 1``) is run on enclosures. Where these cannot tell
    ``|k|`` from 1, as for roots on the circle, the map ``z = (1 + w)/(1 - w)`` takes the circle to the
    imaginary axis and Routh's array in integers decides: with all leads positive until a row vanishes, the row
    above holds the roots that lie symmetrically about the axis; they are simple and on it exactly when the
    array continued with its derivative has positive leads too (Hermite-Biehler).
    """
    p = poly.primitive(denominator)
    p = p[: len(p) - poly.trailing_zeros(p)]
    ones, p = _divided_out(p, 1)
    minus_ones, p = _divided_out(p, -1)
    if max(ones, minus_ones) > 1:
        return UNSTABLE
    rest = _away_from_real_points(p)
    return MARGINAL if rest == STABLE and ones + minus_ones else rest


def _divided_out(p: poly.Integers, root: int) -> tuple[int, poly.Integers]:
    """How often ``z - root`` divides ``p``, and what is left."""
    count = 0
    while len(p) > 1 and poly.evaluate(p, root) == 0:
        quotient, value = [], 0
        for c in p[:-1]:
            value = value * root + c
            quotient.append(value)
        count, p = count + 1, tuple(quotient)
    return count, p


def _away_from_real_points(p: poly.Integers) -> str:
    for bits in _PRECISIONS:
        inside = _schur_cohn(p, bits)
        if inside is not None:
            return STABLE if inside else UNSTABLE
    return _exactly(p)


def _schur_cohn(p: poly.Integers, bits: int) -> bool | None:
    """Whether all roots lie inside the circle; ``None`` where ``bits`` do not tell.

    Every coefficient is known to within ``radius``, and is kept so that the lead has about ``bits`` bits.
    """
    up = bits - p[0].bit_length()
    a = [c << up if up >= 0 else c >> -up for c in p]
    radius = 0 if up >= 0 else 1
    while len(a) > 1:
        lead, last = a[0], abs(a[-1])
        if last - radius > lead + radius:
            return False
        if last + radius >= lead - radius:
            return None
        k = (a[-1] << bits) // lead
        # |k| < 1: the quotient is off by at most 2 radius/(lead - radius), and 1 by its own rounding.
        spread = (2 * radius << bits) // (lead - radius) + 2
        most = max(map(abs, a)) + radius
        a = [c - (k * d >> bits) for c, d in zip(a[:-1], a[:0:-1], strict=True)]
        radius = 2 * radius + (spread * most >> bits) + 2
        up = max(0, bits - a[0].bit_length())
        a, radius = [c << up for c in a], radius << up
    return True


def _exactly(p: poly.Integers) -> str:
    """The answer by Routh's array; no root at 1 or -1."""
    q = _from_disc(p)
    q = q if q[0] > 0 else tuple(-c for c in q)
    symmetric = _routh(q[::2], q[1::2])
    if symmetric is None:
        return UNSTABLE
    if not symmetric:
        return STABLE
    return MARGINAL if _routh(symmetric, poly.derivative(symmetric)) == () else UNSTABLE


def _from_disc(p: poly.Integers) -> poly.Integers:
    """``(1 - w)^n p((1 + w)/(1 - w))``, descending powers of w, by Horner's rule."""
    q: poly.Integers = (p[0],)
    weight: poly.Integers = (1,)
    for c in p[1:]:
        weight = poly.multiply(weight, (-1, 1))
        q = poly.add(poly.multiply(q, (1, 1)), poly.scale(weight, c))
    return q


def _routh(upper: poly.Integers, lower: poly.Integers) -> poly.Integers | None:
    """Build the array from its first two rows.

    Returns
    -------
    tuple of int or None
        ``()`` when every lead is positive, ``None`` when one is not, and the row above the vanishing one (a
        polynomial in w^2) when a row vanishes before.

    Notes
    -----
    Fraction-free: each row is the classical one times a Hurwitz determinant, and the lead of the row two above
    divides the products exactly (Bareiss 1968).
    """
    divisors = [1, 1]
    while lower:
        if not any(lower):
            return upper
        if lower[0] <= 0:
            return None
        divisor = divisors.pop(0)
        padded = (*lower[1:], *(0 for _ in range(len(upper) - len(lower))))
        row = ((lower[0] * a - upper[0] * b) // divisor for a, b in zip(upper[1:], padded, strict=True))
        divisors.append(lower[0])
        upper, lower = lower, tuple(row)
    return ()
