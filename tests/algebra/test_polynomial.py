from __future__ import annotations

from fractions import Fraction
from itertools import combinations
from math import gcd

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly

#: The prime by which the common case of the greatest common divisor is settled (2**61 - 1, Mersenne).
PRIME = 2**61 - 1

integers = st.lists(st.integers(-50, 50), max_size=6).map(poly.trimmed)
nonzero = integers.filter(bool)
ratios = st.builds(Fraction, st.integers(-60, 60), st.integers(1, 12))
rationals = st.lists(ratios, max_size=6).map(poly.trimmed)
points = st.builds(Fraction, st.integers(-20, 20), st.integers(1, 7))


def value(p: poly.Integers | poly.Rationals, x: Fraction) -> Fraction:
    """Value by powers, unlike the Horner scheme under test."""
    n = len(p) - 1
    total = Fraction(0)
    for i in range(n + 1):
        total += Fraction(p[i]) * x ** (n - i)
    return total


@given(rationals, points)
def test_horner_gives_the_sum_of_powers(p: poly.Rationals, x: Fraction) -> None:
    assert poly.evaluate(p, x) == value(p, x)


@given(rationals, rationals, points)
def test_evaluation_carries_sums_differences_and_products(p: poly.Rationals, q: poly.Rationals, x: Fraction) -> None:
    assert value(poly.add(p, q), x) == value(p, x) + value(q, x)
    assert value(poly.subtract(p, q), x) == value(p, x) - value(q, x)
    assert value(poly.multiply(p, q), x) == value(p, x) * value(q, x)


@given(rationals.filter(bool), st.integers(0, 5), points)
def test_power_and_scale_act_on_values(p: poly.Rationals, n: int, x: Fraction) -> None:
    assert value(poly.power(p, n), x) == value(p, x) ** n
    assert value(poly.scale(p, Fraction(-3, 7)), x) == Fraction(-3, 7) * value(p, x)
    assert poly.scale(p, Fraction(0)) == ()


@given(rationals, rationals)
def test_no_result_has_a_leading_zero(p: poly.Rationals, q: poly.Rationals) -> None:
    for result in (poly.add(p, q), poly.subtract(p, q), poly.multiply(p, q), poly.derivative(p)):
        assert not result or result[0] != 0


@given(rationals, points, points)
def test_shift_moves_the_argument(p: poly.Rationals, offset: Fraction, x: Fraction) -> None:
    assert value(poly.shift(p, offset), x) == value(p, x + offset)


@given(integers, points)
def test_reflect_turns_the_argument_round(p: poly.Integers, x: Fraction) -> None:
    assert value(poly.reflect(p), x) == value(p, -x)


@given(rationals, rationals)
def test_derivative_obeys_the_product_rule(p: poly.Rationals, q: poly.Rationals) -> None:
    left = poly.derivative(poly.multiply(p, q))
    right = poly.add(poly.multiply(poly.derivative(p), q), poly.multiply(p, poly.derivative(q)))
    assert left == right


def test_derivative_of_a_monomial_is_the_school_rule() -> None:
    assert poly.derivative((5, 0, 0, 0)) == (15, 0, 0)


@given(nonzero, st.integers(0, 4))
def test_trailing_zeros_counts_roots_at_the_origin(p: poly.Integers, n: int) -> None:
    own = len(p) - max(i for i, c in enumerate(p) if c) - 1
    assert poly.trailing_zeros((*p, *(0,) * n)) == own + n


@given(rationals, rationals.filter(bool))
def test_division_with_remainder_goes_back(p: poly.Rationals, q: poly.Rationals) -> None:
    quotient, rest = poly.divide(p, q)
    assert poly.add(poly.multiply(quotient, q), rest) == p
    assert len(rest) < len(q)


def test_division_by_the_zero_polynomial_is_an_error() -> None:
    with pytest.raises(ZeroDivisionError, match="zero polynomial"):
        poly.divide((Fraction(1),), ())


@given(rationals.filter(bool), rationals)
def test_integer_form_keeps_every_ratio_and_leaves_no_common_divisor(p: poly.Rationals, q: poly.Rationals) -> None:
    a, b = poly.integer_form(p, q)
    assert gcd(*a, *b) == 1
    factor = Fraction(a[0]) / p[0]
    assert factor > 0
    assert all(poly.scale(r, factor) == tuple(map(Fraction, s)) for r, s in ((p, a), (q, b)))


@given(rationals.filter(bool))
def test_primitive_is_the_only_coprime_multiple_with_positive_lead(p: poly.Rationals) -> None:
    q = poly.primitive(p)
    assert gcd(*q) == 1
    assert q[0] > 0
    assert poly.scale(p, q[0] / p[0]) == q
    assert all(isinstance(c, int) for c in q)


@given(nonzero, nonzero, nonzero)
def test_greatest_common_divisor_divides_both_and_holds_every_common_factor(
    p: poly.Integers, q: poly.Integers, common: poly.Integers
) -> None:
    a, b = poly.multiply(p, common), poly.multiply(q, common)
    found = poly.greatest_common_divisor(a, b)
    assert divides(found, a)
    assert divides(found, b)
    assert divides(common, found)
    assert found == poly.primitive(found)


def divides(q: poly.Integers, p: poly.Integers) -> bool:
    as_fractions = [tuple(Fraction(c) for c in r) for r in (p, q)]
    return poly.divide(*as_fractions)[1] == ()


@given(nonzero)
def test_greatest_common_divisor_with_zero_is_the_other(p: poly.Integers) -> None:
    assert poly.greatest_common_divisor(p, ()) == poly.primitive(p)
    assert poly.greatest_common_divisor((), p) == poly.primitive(p)


@pytest.mark.parametrize(
    ("p", "q", "expected"),
    [
        # The images modulo the prime share the root 0, the polynomials share nothing.
        ((1, 0), (1, PRIME), (1,)),
        ((1, 0, -PRIME), (1, 0), (1,)),
        # The prime swallows a leading coefficient, and with it the common factor PRIME x + 1.
        ((PRIME, 1), poly.multiply((PRIME, 1), (1, 2)), (PRIME, 1)),
        (poly.multiply((PRIME, 1), (1, 5)), poly.multiply((PRIME, 1), (1, 2)), (PRIME, 1)),
        (poly.multiply((1, -PRIME), (1, 5)), poly.multiply((1, -PRIME), (1, 2)), (1, -PRIME)),
        ((6, 12), (4, 8), (1, 2)),
        ((-1, -2), (3, 6), (1, 2)),
    ],
)
def test_greatest_common_divisor_is_not_misled_by_its_probe(
    p: poly.Integers, q: poly.Integers, expected: poly.Integers
) -> None:
    assert poly.greatest_common_divisor(p, q) == expected
    assert poly.greatest_common_divisor(q, p) == expected


@given(st.lists(st.tuples(nonzero, st.integers(1, 3)), min_size=1, max_size=3))
def test_square_free_factors_multiply_back_and_share_no_root(
    parts: list[tuple[poly.Integers, int]],
) -> None:
    p: poly.Integers = (1,)
    for factor, multiplicity in parts:
        p = poly.multiply(p, poly.power(factor, multiplicity))
    factors = poly.square_free(p)
    back: poly.Integers = (1,)
    for factor, multiplicity in factors:
        assert poly.greatest_common_divisor(factor, poly.derivative(factor)) == (1,)
        back = poly.multiply(back, poly.power(factor, multiplicity))
    assert back == poly.primitive(p)
    assert all(poly.greatest_common_divisor(f, g) == (1,) for (f, _), (g, _) in combinations(factors, 2))
    assert len({multiplicity for _, multiplicity in factors}) == len(factors)


def test_square_free_names_each_multiplicity() -> None:
    p = poly.multiply(poly.multiply((2, 1), poly.power((1, -3), 2)), poly.power((1, 0, 5), 4))
    assert poly.square_free(p) == (((2, 1), 1), ((1, -3), 2), ((1, 0, 5), 4))
    assert poly.square_free((7,)) == ()
