"""Ratios of polynomials as an expression builds them: bounded, and never cancelled.

A sum is brought over the least common denominator; products and quotients keep every factor. So a common
factor that is left at the end is a cancellation the user wrote, which the reader of the result can report
or refuse. Coefficients are integers in descending powers of s; a constant is a ratio of degree 0 in lowest
terms.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import gcd, lcm
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.irrational import CARRIED_DIGITS, DIGITS, square_root

#: Highest degree of a numerator or denominator: twice the order (16) up to which every coefficient is proven
#: right, so that the intermediate forms of such a design fit as well.
MAX_DEGREE = 32

#: Largest exponent, of ten in a literal and in a power of constants: float64 spans 1e-324 to 1e308, and
#: nothing beyond can be stored in the end.
MAX_EXPONENT = 400

#: Longest coefficient: the 32nd power of a number right to 400 digits has 32 * 1369 = 43808 bits, and half as
#: much again leaves room for its factors. Longer ones could make the exact algebra take minutes.
MAX_BITS = 3 * MAX_DEGREE * (10**CARRIED_DIGITS).bit_length() // 2

#: A sum this many digits below its own terms may well be zero: of the 400 digits to which ``pi`` and ``sqrt``
#: are right, less than 100 are left.
LEAST_REMAINDER_DIGITS = 300

_LEAST_REMAINDER = 10**LEAST_REMAINDER_DIGITS


class UnfitError(Exception):
    """Raised where an operation has no answer: what was found, what is allowed, what to try."""

    def __init__(self, found: str, allowed: str, advice: str) -> None:
        super().__init__(found, allowed, advice)
        self.found = found
        self.allowed = allowed
        self.advice = advice


class Ratio(NamedTuple):
    """Numerator over denominator: integers without a common divisor, the leading denominator one positive."""

    numerator: poly.Integers
    denominator: poly.Integers


VARIABLE = Ratio((1, 0), (1,))


def constant(value: Fraction) -> Ratio:
    """Make a ratio of degree 0."""
    return Ratio((value.numerator,) if value else (), (value.denominator,))


def polynomial(p: Sequence[Fraction]) -> Ratio:
    """Bring a polynomial over one denominator.

    Raises
    ------
    UnfitError
        Above a bound.
    """
    multiple = 1
    for c in p:
        # Checked one by one: the common multiple of many long denominators takes long to compute.
        multiple = lcm(multiple, c.denominator)
        _refuse_bits(multiple.bit_length())
    return _bounded(poly.trimmed(int(c * multiple) for c in p), (multiple,))


def bits_of(r: Ratio) -> int:
    """Bits of all coefficients together."""
    return sum(c.bit_length() for p in r for c in p)


def value_of(r: Ratio) -> Fraction | None:
    """Value of a constant; ``None`` for anything that contains s."""
    if len(r.numerator) > 1 or len(r.denominator) > 1:
        return None
    return Fraction(*r.numerator, *r.denominator) if r.numerator else Fraction(0)


def add(a: Ratio, b: Ratio) -> Ratio:
    """Sum over the least common denominator.

    Raises
    ------
    UnfitError
        Above a bound, or when the sum is nothing but the digits an irrational number does not have.
    """
    factor_a, factor_b = _factors_to_common(a.denominator, b.denominator)
    _refuse_degree(poly.degree(a.denominator) + poly.degree(factor_a))
    term_a, term_b = _multiply(a.numerator, factor_a), _multiply(b.numerator, factor_b)
    total = poly.add(term_a, term_b)
    _refuse_lost_digits(total, poly.add(_magnitudes(term_a), _magnitudes(term_b)))
    return _bounded(total, _multiply(a.denominator, factor_a))


def negate(a: Ratio) -> Ratio:
    """Opposite of ``a``."""
    return Ratio(poly.scale(a.numerator, -1), a.denominator)


def multiply(a: Ratio, b: Ratio) -> Ratio:
    """Product, nothing cancelled.

    Raises
    ------
    UnfitError
        Above a bound.
    """
    _refuse_degree(max(poly.degree(p) + poly.degree(q) for p, q in zip(a, b, strict=True)))
    return _bounded(_multiply(a.numerator, b.numerator), _multiply(a.denominator, b.denominator))


def divide(a: Ratio, b: Ratio) -> Ratio:
    """Quotient, nothing cancelled.

    Raises
    ------
    UnfitError
        When ``b`` is zero, or above a bound.
    """
    return multiply(a, _inverse(b))


def power(a: Ratio, exponent: Ratio) -> Ratio:
    """``a`` to a constant integer power, negative ones too.

    Raises
    ------
    UnfitError
        When the exponent is no integer, for a negative power of zero and for ``0^0``, or above a bound.
    """
    n = _integer_exponent(exponent)
    if n <= 0 and not a.numerator:
        raise UnfitError(f"zero to the power {n}", "positive powers of zero", "check the values that make it zero")
    base = a if n >= 0 else _inverse(a)
    steps = abs(n)
    _refuse_degree(steps * max(poly.degree(p) for p in base))
    # A coefficient of k bits is at least 2**(k - 1); 1 and -1 never grow.
    _refuse_bits(steps * (_longest(base) - 1))
    value = value_of(base)
    if value is not None:
        return _bounded(*constant(value**steps))
    return _bounded(*(_power(p, steps) for p in base))


def root(a: Ratio) -> Ratio:
    """Square root of a constant that is not negative.

    Raises
    ------
    UnfitError
        When ``a`` contains s or is negative.
    """
    value = value_of(a)
    if value is None:
        raise UnfitError(
            "the square root of something that contains s",
            "sqrt(...) of constants",
            "write a ratio of polynomials that approximates it in the band",
        )
    if value < 0:
        raise UnfitError(
            "the square root of a negative number",
            "sqrt(...) of constants that are zero or positive",
            "check the sign; a complex pair of poles is written as a polynomial, such as s^2 + 4",
        )
    return _bounded(*constant(square_root(value)))


def _integer_exponent(exponent: Ratio) -> int:
    allowed = f"integer exponents from -{MAX_EXPONENT} to {MAX_EXPONENT}, and up to degree {MAX_DEGREE} in s"
    value = value_of(exponent)
    if value is None:
        raise UnfitError("an exponent that contains s", allowed, "write a ratio of polynomials in s")
    if value.denominator != 1:
        raise UnfitError(
            "an exponent that is not an integer", allowed, "write sqrt(...) for the power 1/2 of a constant"
        )
    if abs(value) > MAX_EXPONENT:
        raise UnfitError("an exponent out of bounds", allowed, "check the exponent")
    return int(value)


def _inverse(a: Ratio) -> Ratio:
    if not a.numerator:
        raise UnfitError("a division by zero", "a divisor other than zero", "check the values that make it zero")
    sign = 1 if a.numerator[0] > 0 else -1
    return Ratio(poly.scale(a.denominator, sign), poly.scale(a.numerator, sign))


def _factors_to_common(p: poly.Integers, q: poly.Integers) -> tuple[poly.Integers, poly.Integers]:
    """What each of two denominators lacks to their least common multiple."""
    if p == q:
        return (1,), (1,)
    content_p, content_q = gcd(*p), gcd(*q)
    common = poly.greatest_common_divisor(p, q)
    multiple = lcm(content_p, content_q)
    return (
        poly.scale(poly.quotient(q, common), multiple // content_p),
        poly.scale(poly.quotient(p, common), multiple // content_q),
    )


def _multiply(p: poly.Integers, q: poly.Integers) -> poly.Integers:
    product = poly.multiply(p, q)
    # Digits are lost where terms of either sign meet.
    if len(p) > 1 and len(q) > 1 and min(*p, *q) < 0:
        _refuse_lost_digits(product, poly.multiply(_magnitudes(p), _magnitudes(q)))
    return product


def _power(p: poly.Integers, exponent: int) -> poly.Integers:
    """Power by repeated squaring: its last product is most of the work."""
    result: poly.Integers = (1,)
    for bit in f"{exponent:b}":
        result = _multiply(result, result)
        if bit == "1":
            result = _multiply(result, p)
    return result


def _magnitudes(p: poly.Integers) -> poly.Integers:
    return tuple(abs(c) for c in p)


def _refuse_lost_digits(total: Sequence[int], terms: Sequence[int]) -> None:
    """Compare each coefficient of a sum with the size of what it is the sum of."""
    # A leading coefficient that cancelled exactly is gone from ``total``.
    for c, size in zip(total, terms[len(terms) - len(total) :], strict=True):
        if c and abs(c) * _LEAST_REMAINDER < size:
            raise UnfitError(
                f"a difference below 1e-{LEAST_REMAINDER_DIGITS} of its terms",
                f"sums that keep some of the {DIGITS} digits to which pi and sqrt are known",
                "write the exact result in its place; if the terms are meant to cancel, that is 0",
            )


def _refuse_degree(degree: int) -> None:
    if degree > MAX_DEGREE:
        raise UnfitError(
            f"a polynomial of degree {degree} in s",
            f"at most degree {MAX_DEGREE}, before anything cancels",
            "split the transfer function into several designs in series",
        )


def _refuse_bits(bits: int) -> None:
    if bits > MAX_BITS:
        raise UnfitError(
            "a number that becomes too long",
            f"exact numbers of at most {MAX_BITS} bits above and below the line",
            "use fewer digits, or smaller exponents",
        )


def _bounded(numerator: poly.Integers, denominator: poly.Integers) -> Ratio:
    """Bring to the normal form of :class:`Ratio` and hold against the bounds."""
    divisor = gcd(*numerator, *denominator)
    reduced = Ratio(*(tuple(c // divisor for c in p) for p in (numerator, denominator)))
    _refuse_bits(_longest(reduced))
    _refuse_degree(max(poly.degree(p) for p in reduced))
    return reduced


def _longest(r: Ratio) -> int:
    """Bits of the longest coefficient."""
    return max(abs(c).bit_length() for p in r for c in p)
