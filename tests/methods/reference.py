"""The nine methods once more, by other formulas and in mpmath: partial fractions instead of matrix functions.

Every figure comes with a bound on what cancellation may have done to it; the precision is doubled until the
bound is negligible, so that a figure is never trusted because two precisions agree.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import Any

import mpmath as mp

from tests.strategies import ExactRoot, Factored

#: First number of digits, and the most.
_FIRST_DIGITS, _MOST_DIGITS = 300, 20000

#: Digits of the rounding errors of a few hundred operations, and of differences of neighbouring roots.
_SLACK_DIGITS = 60

#: Digits every coefficient is right to when it is handed out, unless more are asked for.
DIGITS = 40

#: Below half the least subnormal double (2**-1075 = 2.5e-324) a coefficient is stored as 0.
NEGLIGIBLE = mp.mpf(10) ** -330

#: Weights of the difference family.
THETA = {
    "forward-difference": Fraction(0),
    "backward-difference": Fraction(1),
    "bilinear": Fraction(1, 2),
    "blended-difference": Fraction(7, 8),
}

#: Methods that map poles by the exponential.
EXPONENTIAL = ("step-invariant", "ramp-invariant", "impulse-invariant", "pole-zero-mapped")

#: A value and the sum of the magnitudes it was formed from.
Tracked = tuple[Any, Any]
Polynomial = list[Tracked]
Coefficients = tuple[list[Fraction], list[Fraction]]


def coefficients(
    design: Factored,
    period_s: Fraction,
    method: str,
    exact_at_rad_s: Fraction | None = None,
    digits: int = DIGITS,
) -> Coefficients:
    """Numerator and denominator, descending powers of z, each right to 40 digits or below 1e-330 and then 0."""
    working = max(_FIRST_DIGITS, 2 * digits)
    while working <= _MOST_DIGITS:
        with mp.workdps(working):
            numerator, denominator = _REFERENCES[method](design, period_s, exact_at_rad_s)
            allowed = mp.mpf(10) ** (_SLACK_DIGITS + digits - working)
            if all(_is_good(c, allowed) for c in numerator + denominator):
                return [_settled(c) for c in numerator], [_settled(c) for c in denominator]
        working *= 2
    raise ArithmeticError("the reference did not settle")


def number(x: Fraction) -> Any:
    """A rational at the working precision."""
    return mp.mpf(x.numerator) / x.denominator


def exactly(x: Any) -> Fraction:
    """The rational a binary number of mpmath is."""
    sign, mantissa, exponent, _ = mp.mpf(x)._mpf_
    size: Fraction = int(mantissa) * Fraction(2) ** exponent
    return -size if sign else size


def image(root: ExactRoot, period_s: Fraction, method: str, angle: Fraction | None) -> Any:
    """``z - 1`` of a root in s (the member of a pair in the upper half plane), by the definition of the method.

    ``angle`` is the frequency to be exact at times the period.
    """
    x = mp.mpc(number(root.re * period_s), number(root.im * period_s))
    if method in EXPONENTIAL:
        return mp.expm1(x)
    if method == "bilinear-prewarped":
        assert angle is not None
        factor = number(angle) / mp.tan(number(angle) / 2)
        return 2 * x / (factor - x)
    # s T = (z - 1)/(theta z + 1 - theta), solved for z - 1.
    return x / (1 - number(THETA[method]) * x)


def normalised(roots: Sequence[ExactRoot], period_s: Fraction) -> list[tuple[Any, int]]:
    """``root T`` with multiplicity, both members of a pair."""
    found = []
    for root in roots:
        x, y = number(root.re * period_s), number(root.im * period_s)
        found += [(mp.mpc(x, s * y), root.multiplicity) for s in ((1, -1) if root.im else (0,))]
    return found


def responses(
    design: Factored, integrations: int, period_s: Fraction, count: int, offset: Fraction = Fraction(0)
) -> Polynomial:
    """Samples of the inverse transform of ``G(x/T)/x^integrations``, its direct feed-through left out.

    Each is taken later by ``offset``, a part of a period.
    """
    poles = normalised(design.poles, period_s)
    at_origin = sum(m for p, m in poles if p == 0)
    poles = [(p, m) for p, m in poles if p != 0]
    if at_origin + integrations:
        poles.append((mp.mpc(0), at_origin + integrations))
    zeros = normalised(design.zeros, period_s)
    gain = number(design.gain * period_s**design.relative_degree)
    terms = [
        (p, m - 1 - i, gain * c / mp.factorial(m - 1 - i))
        for p, m in poles
        for i, c in enumerate(_taylor(p, m, zeros, poles))
    ]
    samples = []
    for k in range(count):
        time = k + number(offset)
        values = [c * (time**j if j else 1) * mp.exp(p * time) for p, j, c in terms]
        samples.append((mp.fsum(v.real for v in values), mp.fsum(abs(v) for v in values)))
    return samples


def _taylor(p: Any, count: int, zeros: list[tuple[Any, int]], poles: list[tuple[Any, int]]) -> list[Any]:
    """Taylor coefficients at p of ``prod(x - zero)/prod(x - other pole)``."""
    series = [mp.mpc(1)] + [mp.mpc(0)] * (count - 1)
    for zero, m in zeros:
        for _ in range(m):
            series = [(p - zero) * c + (series[i - 1] if i else 0) for i, c in enumerate(series)]
    for pole, m in poles:
        for _ in range(m if pole != p else 0):
            quotient: list[Any] = []
            for i, c in enumerate(series):
                quotient.append((c - (quotient[i - 1] if i else 0)) / (p - pole))
            series = quotient
    return series


def _step(design: Factored, period_s: Fraction, _: object) -> tuple[Polynomial, Polynomial]:
    count = design.order + 1
    denominator = _images(design.poles, period_s)
    response = responses(design, 1, period_s, count)
    return _product(_product(response, _whole((1, -1))), denominator)[:count], denominator


def _ramp(design: Factored, period_s: Fraction, _: object) -> tuple[Polynomial, Polynomial]:
    count = design.order + 2
    denominator = _images(design.poles, period_s)
    response = responses(design, 2, period_s, count)
    return _product(_product(response, _whole((1, -2, 1))), denominator)[1:count], denominator


def _impulse(design: Factored, period_s: Fraction, _: object) -> tuple[Polynomial, Polynomial]:
    count = design.order + 1
    denominator = _images(design.poles, period_s)
    response = responses(design, 0, period_s, count)
    direct = number(design.gain) if design.relative_degree == 0 else mp.mpf(0)
    response[0] = (response[0][0] / 2 + direct, response[0][1] + abs(direct))
    return _product(response, denominator)[:count], denominator


def _mapped(design: Factored, period_s: Fraction, _: object) -> tuple[Polynomial, Polynomial]:
    excess = design.relative_degree
    zeros, poles = (normalised(r, period_s) for r in (design.zeros, design.poles))
    top, bottom = (mp.fprod((-mp.expm1(x)) ** m for x, m in r if x != 0).real for r in (zeros, poles))
    low, below = (mp.fprod((-x) ** m for x, m in r if x != 0).real for r in (zeros, poles))
    # In normalised time lim x^-k G = gain T^excess low/below, and (z - 1)^-k Gd tends to K 2^excess top/bottom
    # (signs of (0 - root) and of (1 - exp(root)) run alike).
    gain = number(design.gain * period_s**excess) * low / below * bottom / top / 2**excess
    numerator = _product(_images(design.zeros, period_s), _whole(_binomial(1, excess)))
    return _times(numerator, gain), _images(design.poles, period_s)


def _binomial(sign: int, n: int) -> tuple[int, ...]:
    return tuple(sign**i * int(mp.binomial(n, i)) for i in range(n + 1))


def _substituted(
    design: Factored, scale: Any, over: tuple[Any, Any], convert: Callable[[Fraction], Any]
) -> tuple[Polynomial, Polynomial]:
    """``s = scale (z - 1)/(over_0 z + over_1)`` in every factor."""

    def linear(a: Any) -> Polynomial:
        return [
            (scale - a * over[0], abs(scale) + abs(a * over[0])),
            (-scale - a * over[1], abs(scale) + abs(a * over[1])),
        ]

    def image(roots: Sequence[ExactRoot]) -> Polynomial:
        product = [(convert(Fraction(1)), convert(Fraction(1)))]
        for root in roots:
            first = linear(convert(root.re))
            factor = first
            if root.im:
                turned = [(convert(root.im) * c, abs(convert(root.im) * c)) for c in over]
                factor = _sum(_product(first, first), _product(turned, turned))
            for _ in range(root.multiplicity):
                product = _product(product, factor)
        return product

    numerator, denominator = image(design.zeros), image(design.poles)
    for _ in range(design.relative_degree):
        numerator = _product(numerator, [(c, abs(c)) for c in over])
    lead = denominator[0][0]
    return _times(numerator, convert(design.gain) / lead), _times(denominator, 1 / lead)


def _prewarped(design: Factored, period_s: Fraction, exact_at_rad_s: Fraction | None) -> Any:
    assert exact_at_rad_s is not None
    w = number(exact_at_rad_s)
    scale = w / mp.tan(w * number(period_s) / 2)
    return _substituted(design, scale, (mp.mpf(1), mp.mpf(1)), number)


def _theta(scale: Fraction, over: tuple[Fraction | int, Fraction | int]) -> Callable[..., Any]:
    def convert(design: Factored, period_s: Fraction, _: object) -> tuple[Polynomial, Polynomial]:
        ends = (Fraction(over[0]), Fraction(over[1]))
        # Exact: nothing cancels by rounding, and the bound must not say it does.
        numerator, denominator = _substituted(design, scale / period_s, ends, Fraction)
        return [(c, 0) for c, _ in numerator], [(c, 0) for c, _ in denominator]

    return convert


_REFERENCES: dict[str, Callable[..., Any]] = {
    "step-invariant": _step,
    "ramp-invariant": _ramp,
    "impulse-invariant": _impulse,
    "forward-difference": _theta(Fraction(1), (0, 1)),
    "backward-difference": _theta(Fraction(1), (1, 0)),
    "bilinear": _theta(Fraction(2), (1, 1)),
    "bilinear-prewarped": _prewarped,
    "blended-difference": _theta(Fraction(8, 7), (1, Fraction(1, 7))),
    "pole-zero-mapped": _mapped,
}

METHODS = tuple(_REFERENCES)


def _images(roots: Sequence[ExactRoot], period_s: Fraction) -> Polynomial:
    """``prod(z - exp(root T))``."""
    product = _whole((1,))
    for root in roots:
        x, y = number(root.re * period_s), number(root.im * period_s)
        size = mp.exp(x)
        factor: Polynomial = [(mp.mpf(1), mp.mpf(1)), (-size, size)]
        if root.im:
            factor = [(mp.mpf(1), mp.mpf(1)), (-2 * size * mp.cos(y), 2 * size), (size**2, size**2)]
        for _ in range(root.multiplicity):
            product = _product(product, factor)
    return product


def _whole(p: Sequence[int]) -> Polynomial:
    return [(mp.mpf(c), mp.mpf(abs(c))) for c in p]


def _product(p: Polynomial, q: Polynomial) -> Polynomial:
    values: Any = [0] * (len(p) + len(q) - 1)
    sizes: Any = [0] * (len(p) + len(q) - 1)
    for i, (a, size_a) in enumerate(p):
        for j, (b, size_b) in enumerate(q):
            values[i + j] += a * b
            sizes[i + j] += size_a * size_b
    return list(zip(values, sizes, strict=True))


def _sum(p: Polynomial, q: Polynomial) -> Polynomial:
    return [(a + b, m + n) for (a, m), (b, n) in zip(p, q, strict=True)]


def _times(p: Polynomial, factor: Any) -> Polynomial:
    return [(c * factor, size * abs(factor)) for c, size in p]


def _is_good(c: Tracked, allowed: Any) -> bool:
    """Whether rounding errors are below the digits asked for; ``allowed`` is the error with those digits added."""
    value, size = c
    return isinstance(value, Fraction) or bool(size * allowed <= abs(value) or abs(value) + size * allowed < NEGLIGIBLE)


def _settled(c: Tracked) -> Fraction:
    value, _ = c
    if isinstance(value, Fraction):
        return value
    return exactly(value) if abs(value) >= NEGLIGIBLE else Fraction(0)
