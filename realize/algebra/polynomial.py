"""Polynomials over the integers and the rationals, exactly.

A polynomial is a tuple of coefficients in descending powers, without leading zeros; the zero polynomial is
the empty tuple. Every function returns such a tuple.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from itertools import zip_longest
from math import gcd, lcm
from typing import TypeVar

Number = TypeVar("Number", int, Fraction)
Integers = tuple[int, ...]
Rationals = tuple[Fraction, ...]

#: A prime just below 2**61: two polynomials without a common factor modulo a prime have none at all (as long
#: as the prime spares the leading coefficients), which settles the common case without any large numbers.
_PROBE_PRIME = 2**61 - 1

#: Evaluation points tried for a common divisor: each misses only by an accident of the digits.
_EVALUATION_TRIES = 6


def trimmed(coefficients: Iterable[Number]) -> tuple[Number, ...]:
    """Drop leading zeros."""
    kept = tuple(coefficients)
    first = next((i for i, c in enumerate(kept) if c != 0), len(kept))
    return kept[first:]


def degree(p: Sequence[Number]) -> int:
    """Degree of ``p``; -1 for the zero polynomial."""
    return len(p) - 1


def add(p: Sequence[Number], q: Sequence[Number]) -> tuple[Number, ...]:
    """Sum ``p + q``."""
    if len(p) < len(q):
        return add(q, p)
    total = list(p)
    for i, c in enumerate(q, start=len(p) - len(q)):
        total[i] += c
    return trimmed(total)


def scale(p: Sequence[Number], factor: Number) -> tuple[Number, ...]:
    """Product of ``p`` and a number."""
    return trimmed(factor * c for c in p)


def subtract(p: Sequence[Number], q: Sequence[Number]) -> tuple[Number, ...]:
    """Difference ``p - q``."""
    return add(p, tuple(-c for c in q))


def multiply(p: Sequence[Number], q: Sequence[Number]) -> tuple[Number, ...]:
    """Product ``p q``."""
    if not p or not q:
        return ()
    product: list[Number] = [p[0] * 0] * (len(p) + len(q) - 1)
    for i, a in enumerate(p):
        for j, b in enumerate(q):
            product[i + j] += a * b
    return trimmed(product)


def power(p: Sequence[Number], exponent: int) -> tuple[Number, ...]:
    """``p``, not zero, to a non-negative integer power."""
    result: tuple[Number, ...] = (p[0] * 0 + 1,)
    for _ in range(exponent):
        result = multiply(result, p)
    return result


def evaluate(p: Sequence[Number], x: Number) -> Number:
    """Value of ``p`` at ``x`` by Horner's rule."""
    value = x * 0
    for c in p:
        value = value * x + c
    return value


def derivative(p: Sequence[Number]) -> tuple[Number, ...]:
    """First derivative of ``p``."""
    n = degree(p)
    return trimmed(c * (n - i) for i, c in enumerate(p[:-1]))


def shift(p: Sequence[Number], offset: Number) -> tuple[Number, ...]:
    """``p(x + offset)`` by repeated synthetic division."""
    coefficients = list(p)
    for end in range(len(coefficients), 1, -1):
        for i in range(1, end):
            coefficients[i] += offset * coefficients[i - 1]
    return tuple(coefficients)


def reflect(p: Sequence[Number]) -> tuple[Number, ...]:
    """``p(-x)``."""
    n = degree(p)
    return tuple(c if (n - i) % 2 == 0 else -c for i, c in enumerate(p))


def trailing_zeros(p: Sequence[Number]) -> int:
    """Multiplicity of the root at the origin."""
    return next((i for i, c in enumerate(reversed(p)) if c != 0), 0)


def divide(p: Sequence[Fraction], q: Sequence[Fraction]) -> tuple[Rationals, Rationals]:
    """Quotient and remainder of ``p`` by ``q``, exactly.

    Raises
    ------
    ZeroDivisionError
        When ``q`` is the zero polynomial.
    """
    if not q:
        raise ZeroDivisionError("division by the zero polynomial")
    rest = [Fraction(c) for c in p]
    quotient = []
    for i in range(len(p) - len(q) + 1):
        factor = rest[i] / q[0]
        quotient.append(factor)
        for j, c in enumerate(q):
            rest[i + j] -= factor * c
    return trimmed(quotient), trimmed(rest)


def integer_form(*polynomials: Sequence[Fraction] | Sequence[int]) -> tuple[Integers, ...]:
    """Multiply several rational polynomials by one positive number: integers without a common divisor."""
    denominator = lcm(*(Fraction(c).denominator for p in polynomials for c in p))
    scaled = [[int(c * denominator) for c in p] for p in polynomials]
    divisor = gcd(*(c for p in scaled for c in p)) or 1
    return tuple(trimmed(c // divisor for c in p) for p in scaled)


def primitive(p: Sequence[Fraction] | Sequence[int]) -> Integers:
    """The integer polynomial with coprime coefficients and positive lead that has the roots of ``p``."""
    (q,) = integer_form(p)
    return tuple(-c for c in q) if q and q[0] < 0 else q


def greatest_common_divisor(p: Sequence[int], q: Sequence[int]) -> Integers:
    """Greatest common divisor of two integer polynomials, primitive with a positive lead.

    Notes
    -----
    Images modulo a prime settle that there is none. Else it is read off the values at one large integer (Char,
    Geddes & Gonnet 1984), or, should that fail, found by Euclid's algorithm on primitive remainders (Knuth, The
    Art of Computer Programming 2, section 4.6.1), whose numbers grow.
    """
    a, b = primitive(p), primitive(q)
    if not a or not b:
        return a or b
    if _coprime_modulo_prime(a, b):
        return (1,)
    found = _common_divisor_by_evaluation(a, b)
    if found is not None:
        return found
    while b:
        a, b = b, primitive(_pseudo_remainder(a, b))
    return a


def _common_divisor_by_evaluation(a: Integers, b: Integers) -> Integers | None:
    """Greatest common divisor of two primitive polynomials, read off the digits of that of their values.

    Notes
    -----
    Char, Geddes & Gonnet 1984 (GCDHEU): with x at least twice the smaller height plus two, a candidate that
    divides both is the greatest common divisor. ``None`` when no x of a few gave one.
    """
    height = min(max(map(abs, a)), max(map(abs, b)))
    bits = (2 * height + 2).bit_length() + 1
    for _ in range(_EVALUATION_TRIES):
        candidate = primitive(_symmetric_digits(gcd(evaluate(a, 1 << bits), evaluate(b, 1 << bits)), bits))
        if _divides(candidate, a) and _divides(candidate, b):
            return candidate
        bits += bits // 4 + 1
    return None


def _symmetric_digits(n: int, bits: int) -> Integers:
    """Digits of ``n`` to base ``2**bits`` between minus and plus half the base, descending."""
    digits = []
    while n:
        digit = n & ((1 << bits) - 1)
        digit -= (digit >> (bits - 1)) << bits
        digits.append(digit)
        n = (n - digit) >> bits
    return tuple(reversed(digits))


def _divides(q: Integers, p: Integers) -> bool:
    """Whether ``q`` divides ``p`` over the integers."""
    rest = list(p)
    while len(rest) >= len(q):
        factor, left_over = divmod(rest[0], q[0])
        if left_over:
            return False
        for j, c in enumerate(q):
            rest[j] -= factor * c
        rest = rest[1:]
    return not any(rest)


def _pseudo_remainder(p: Integers, q: Integers) -> Integers:
    """Remainder of a multiple of ``p`` by ``q`` that needs no fractions."""
    rest = list(p)
    while len(rest) >= len(q):
        lead = rest[0]
        rest = [c * q[0] for c in rest]
        for j, c in enumerate(q):
            rest[j] -= lead * c
        rest = rest[1:]
    return trimmed(rest)


def _coprime_modulo_prime(p: Integers, q: Integers) -> bool:
    """Whether ``p`` and ``q`` are shown coprime by their images modulo one prime; ``False`` decides nothing."""
    m = _PROBE_PRIME
    if p[0] % m == 0 or q[0] % m == 0:
        return False
    a, b = [c % m for c in p], [c % m for c in q]
    while b:
        a, b = b, _remainder_modulo_prime(a, b)
    return len(a) == 1


def _remainder_modulo_prime(p: list[int], q: list[int]) -> list[int]:
    """Remainder of ``p`` by ``q`` over the field of ``_PROBE_PRIME`` elements."""
    m = _PROBE_PRIME
    inverse = pow(q[0], -1, m)
    rest = list(p)
    while len(rest) >= len(q):
        factor = rest[0] * inverse % m
        rest = [(c - factor * d) % m for c, d in zip_longest(rest, q, fillvalue=0)][1:]
    return list(trimmed(rest))


def quotient(p: Sequence[int], q: Sequence[int]) -> Integers:
    """Primitive quotient of ``p`` by a divisor ``q`` that is known to leave no remainder."""
    return primitive(divide(rationals(p), rationals(q))[0])


def square_free(p: Sequence[int]) -> tuple[tuple[Integers, int], ...]:
    """Split ``p`` into square-free, pairwise coprime factors with their multiplicities (Yun 1976).

    Constant factors are dropped: only the roots survive.
    """
    factors = []
    common = greatest_common_divisor(p, derivative(p))
    simple = quotient(p, common)
    multiplicity = 1
    while degree(simple) > 0:
        shared = greatest_common_divisor(simple, common)
        factor = quotient(simple, shared)
        if degree(factor) > 0:
            factors.append((factor, multiplicity))
        simple, common = shared, quotient(common, shared)
        multiplicity += 1
    return tuple(factors)


def rationals(p: Sequence[Fraction | int]) -> Rationals:
    """The same coefficients as rationals."""
    return tuple(Fraction(c) for c in p)
