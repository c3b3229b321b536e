"""Discs in the complex plane in fixed point, and the first terms of power series of them.

A disc is ``(re, im, rad)`` in units of ``2**-bits``; what an operation rounds off is added to the radius. A series is a
list of discs in ascending powers. Magnitudes are bounded by ``|re| + |im|``, which costs half a bit and no root.
"""

from __future__ import annotations

from collections.abc import Sequence

from realize.algebra.enclosure import Unresolved
from realize.algebra.roots import Disc

Series = list[Disc]

#: A divisor is taken to be away from zero when it is this many bits larger than its radius: what the square of the
#: relative error adds is then far below the error itself.
_APART_BITS = 8


def add(a: Disc, b: Disc) -> Disc:
    """``a + b``."""
    return a[0] + b[0], a[1] + b[1], a[2] + b[2]


def subtract(a: Disc, b: Disc) -> Disc:
    """``a - b``."""
    return a[0] - b[0], a[1] - b[1], a[2] + b[2]


def conjugate(a: Disc) -> Disc:
    """The mirror image in the real axis."""
    return a[0], -a[1], a[2]


def multiply(a: Disc, b: Disc, bits: int) -> Disc:
    """``a b``: ``|a b - a0 b0| <= |a0| rb + ra (|b0| + rb)``."""
    x, y, r = a
    u, v, s = b
    if not (y or v):
        return x * u >> bits, 0, (abs(x) * s + r * (abs(u) + s) >> bits) + 2
    spread = (abs(x) + abs(y)) * s + r * (abs(u) + abs(v) + s)
    return x * u - y * v >> bits, x * v + y * u >> bits, (spread >> bits) + 3


def scale(a: Disc, n: int, d: int) -> Disc:
    """``a n/d`` for n not negative and d positive; 0 stays exact."""
    if n == d:
        return a
    return a[0] * n // d, a[1] * n // d, -(-a[2] * n // d) + (2 if a[0] or a[1] else 0)


def invert(a: Disc, bits: int) -> Disc:
    """``1 / a``: ``|1/a - 1/a0| <= ra/(|a0| (|a0| - ra))``, and ``|a0|`` is at least either part.

    Raises
    ------
    Unresolved
        When the disc comes near 0.
    """
    x, y, r = a
    least = max(abs(x), abs(y))
    if least <= r << _APART_BITS:
        raise Unresolved
    one = 1 << 2 * bits
    spread = r * one // (least * (least - r)) + 3
    if not y:
        return one // x, 0, spread
    square = x * x + y * y
    return x * one // square, -y * one // square, spread


def multiply_series(p: Series, q: Series, bits: int) -> Series:
    """Product, to as many terms as p has; q has as many or more."""
    product = []
    for k in range(len(p)):
        total = multiply(p[0], q[k], bits)
        for i in range(1, k + 1):
            total = add(total, multiply(p[i], q[k - i], bits))
        product.append(total)
    return product


def divide_series(p: Series, inverse: Disc, bits: int) -> Series:
    """Quotient by ``d + e``, e the variable of the series, given ``1/d``."""
    quotient: Series = []
    for c in p:
        rest = subtract(c, quotient[-1]) if quotient else c
        quotient.append(multiply(rest, inverse, bits))
    return quotient


def taylor(p: Sequence[Disc], at: Disc, count: int, bits: int) -> Series:
    """First ``count`` Taylor coefficients at a place of a polynomial in descending powers."""
    rest = list(p)
    series: Series = []
    for _ in range(count):
        for j in range(1, len(rest)):
            rest[j] = add(rest[j], multiply(rest[j - 1], at, bits))
        series.append(rest.pop() if rest else (0, 0, 0))
    return series


def times_linear(p: Series, root: Disc, bits: int) -> Series:
    """``(z - root) p(z)`` for a polynomial in descending powers."""
    moved = [multiply(c, root, bits) for c in p]
    return [p[0], *(subtract(c, m) for c, m in zip(p[1:], moved, strict=False)), subtract((0, 0, 0), moved[-1])]
