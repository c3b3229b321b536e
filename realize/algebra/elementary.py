"""The exponential and the tangent of enclosed numbers, by scaling and squaring in integers.

No constant such as pi is needed: a large argument is halved until its series is short, and the result squared
back. All numbers are integers in units of ``2**-bits``; radii are rounded outward.
"""

from __future__ import annotations

from math import isqrt

from realize.algebra.enclosure import reciprocal
from realize.algebra.roots import Disc


def exponential(z: Disc, bits: int) -> Disc:
    """Disc that holds ``exp`` of every point of a disc of radius below 1/2.

    Notes
    -----
    The series of ``z / 2**j`` is summed while its terms reach the last bit; its remainder is below the last
    term, since ``|z / 2**j| < 1/2``. Then ``|exp(z + d) - exp(z)| <= 2 |exp z| |d|`` for ``|d| <= 1``.
    """
    re, im, rad = z
    # As many bits a term as there are terms, and about as many squarings.
    halvings = max(0, max(abs(re), abs(im)).bit_length() - bits + isqrt(bits) + 1)
    # Each squaring doubles the absolute error, and where the result grows the error grows with it.
    guard = 2 * halvings + 16
    work = bits + guard
    x, y = re << guard >> halvings, im << guard >> halvings
    (a, b), terms = _series(x, y, work) if y else _real_series(x, work)
    error = 4 * terms + 4
    for _ in range(halvings):
        error = (2 * (abs(a) + abs(b) + error) * error >> work) + 4
        a, b = a * a - b * b >> work, 2 * a * b >> work
    spread = 2 * (isqrt(a * a + b * b) + 1 + error) * rad >> bits
    return a >> guard, b >> guard, (error + spread >> guard) + 3


def _series(x: int, y: int, bits: int) -> tuple[tuple[int, int], int]:
    """Sum of the series of ``exp(x + i y)``, and the number of its terms."""
    a, b = total_re, total_im = 1 << bits, 0
    k = 0
    while a or b:
        k += 1
        a, b = _toward_zero(a * x - b * y >> bits, k), _toward_zero(a * y + b * x >> bits, k)
        total_re, total_im = total_re + a, total_im + b
    return (total_re, total_im), k


def _real_series(x: int, bits: int) -> tuple[tuple[int, int], int]:
    a = total = 1 << bits
    k = 0
    while a:
        k += 1
        a = _toward_zero(a * x >> bits, k)
        total += a
    return (total, 0), k


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


def _toward_zero(n: int, k: int) -> int:
    return n // k if n >= 0 else -(-n // k)
