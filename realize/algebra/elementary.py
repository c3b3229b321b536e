"""The exponential and the tangent of enclosed numbers, by scaling and squaring in integers.

No constant such as pi is needed: a large argument is halved until its series is short, and the result squared
back. All numbers are integers in units of ``2**-bits``; radii are rounded outward.
"""

from __future__ import annotations

from math import isqrt

from realize.algebra.enclosure import reciprocal
from realize.algebra.roots import Disc

#: The argument of the series is brought below ``2**-_SERIES_BITS``: balances terms against squarings at the few
#: hundred bits in common use.
_SERIES_BITS = 8


def exponential(z: Disc, bits: int) -> Disc:
    """Disc that holds ``exp`` of every point of a disc of radius below 1/2.

    Notes
    -----
    The series of ``z / 2**j`` is summed while its terms reach the last bit; its remainder is below the last
    term, since ``|z / 2**j| < 1/2``. Then ``|exp(z + d) - exp(z)| <= 2 |exp z| |d|`` for ``|d| <= 1``.
    """
    re, im, rad = z
    halvings = max(0, max(abs(re), abs(im)).bit_length() - bits + _SERIES_BITS + 1)
    # Each squaring doubles the absolute error, and where the result grows the error grows with it.
    guard = 2 * halvings + 16
    work = bits + guard
    x, y = re << guard >> halvings, im << guard >> halvings
    term, total, k = (1 << work, 0), (1 << work, 0), 0
    while term[0] or term[1]:
        k += 1
        a, b = term[0] * x - term[1] * y >> work, term[0] * y + term[1] * x >> work
        term = _toward_zero(a, k), _toward_zero(b, k)
        total = total[0] + term[0], total[1] + term[1]
    error = 4 * k + 4
    for _ in range(halvings):
        size = _size(total) + error
        a, b = total
        total, error = (a * a - b * b >> work, 2 * a * b >> work), (2 * size * error >> work) + 4
    spread = 2 * (_size(total) + error) * rad >> bits
    radius = (error + spread >> guard) + 3
    return total[0] >> guard, total[1] >> guard, radius


def tangent(angle: int, bits: int) -> tuple[int, int]:
    """Midpoint and radius of ``tan`` of a real number known to one unit.

    Raises
    ------
    Unresolved
        When the cosine cannot be told from zero.
    """
    cosine, sine, rad = exponential((0, angle, 1), bits)
    inverse, spread = reciprocal(cosine, rad, bits)
    return sine * inverse >> bits, (abs(sine) * spread + rad * (abs(inverse) + spread) >> bits) + 2


def _size(z: tuple[int, int]) -> int:
    return isqrt(z[0] * z[0] + z[1] * z[1]) + 1


def _toward_zero(n: int, k: int) -> int:
    return n // k if n >= 0 else -(-n // k)
