from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, Unresolved, integers, reciprocal

BITS = 40

#: Numbers that do not fit the unit, and some that do.
numbers = st.builds(Fraction, st.integers(-(10**6), 10**6), st.integers(1, 10**4))
vectors = st.lists(numbers, min_size=1, max_size=5)
factors = numbers.filter(bool)


@st.composite
def enclosed(draw: st.DrawFn, entries: st.SearchStrategy[list[Fraction]] = vectors) -> tuple[list[Fraction], Enclosure]:
    """A vector and an enclosure of it whose midpoints are off by as much as the radii allow."""
    truth = draw(entries)
    offsets = draw(st.lists(st.integers(-9, 9), min_size=len(truth), max_size=len(truth)))
    mid = [(x.numerator << BITS) // x.denominator + k for x, k in zip(truth, offsets, strict=True)]
    rad = [abs(k) + 1 for k in offsets]
    return truth, Enclosure(integers(mid), integers(rad), BITS)


def check(result: Enclosure, truth: list[Fraction]) -> None:
    assert len(result) == len(truth)
    for (low, high, unit), x in zip(result.intervals(), truth, strict=True):
        assert unit > 0
        assert Fraction(low, unit) <= x <= Fraction(high, unit)


def inside(mid: int, rad: int, x: Fraction) -> bool:
    return abs(x * 2**BITS - Fraction(mid)) <= Fraction(rad)


@given(enclosed(), factors)
def test_intervals_hold_the_truth_also_under_a_negative_factor(
    pair: tuple[list[Fraction], Enclosure], factor: Fraction
) -> None:
    truth, enclosure = pair
    check(enclosure, truth)
    check(enclosure.scaled(factor), [x * factor for x in truth])
    check(enclosure.scaled(factor).scaled(-2 / factor), [-2 * x for x in truth])


@given(vectors)
def test_an_exact_vector_has_no_width(truth: list[Fraction]) -> None:
    exact = Enclosure.exact(truth)
    assert [(Fraction(low, unit), Fraction(high, unit)) for low, high, unit in exact.intervals()] == [
        (x, x) for x in truth
    ]
    assert exact.midpoints() == tuple(truth)


@given(vectors, st.integers(1, 200))
def test_rounding_a_vector_costs_one_unit_at_most_and_nothing_where_it_fits(truth: list[Fraction], bits: int) -> None:
    rounded = Enclosure.rounded(truth, bits)
    check(rounded, truth)
    for (low, high, unit), x in zip(rounded.intervals(), truth, strict=True):
        fits = (x * 2**bits).denominator == 1
        assert Fraction(high - low, unit) <= (0 if fits else 2 * Fraction(1, 2**bits))


@given(enclosed(), st.data())
def test_sums_hold_the_truth(pair: tuple[list[Fraction], Enclosure], data: st.DataObject) -> None:
    a, first = pair
    b, second = data.draw(enclosed(st.lists(numbers, min_size=len(a), max_size=len(a))))
    check(first + second, [x + y for x, y in zip(a, b, strict=True)])


@given(enclosed(), enclosed(), factors)
def test_products_of_polynomials_hold_the_truth(
    p: tuple[list[Fraction], Enclosure], q: tuple[list[Fraction], Enclosure], factor: Fraction
) -> None:
    product = [Fraction(0)] * (len(p[0]) + len(q[0]) - 1)
    for i, x in enumerate(p[0]):
        for j, y in enumerate(q[0]):
            product[i + j] += x * y
    check(p[1].convolve(q[1]), product)
    check(p[1].scaled(factor).convolve(q[1]), [factor * x for x in product])


@given(enclosed(), st.lists(st.integers(-9, 9), min_size=1, max_size=4).filter(lambda p: p[0]))
def test_products_with_integer_polynomials_hold_the_truth(p: tuple[list[Fraction], Enclosure], q: list[int]) -> None:
    truth = [Fraction(0)] * (len(p[0]) + len(q) - 1)
    for i, x in enumerate(p[0]):
        for j, c in enumerate(q):
            truth[i + j] += x * c
    check(p[1].convolve_integers(q), truth)


@given(enclosed(), enclosed(st.lists(numbers, min_size=1, max_size=1)))
def test_products_with_a_number_hold_the_truth(
    p: tuple[list[Fraction], Enclosure], number: tuple[list[Fraction], Enclosure]
) -> None:
    check(p[1].times(*number[1].entry(0)), [x * number[0][0] for x in p[0]])


@given(enclosed())
def test_total_holds_the_sum(p: tuple[list[Fraction], Enclosure]) -> None:
    assert inside(*p[1].total(), sum(p[0], Fraction(0)))


@given(enclosed(), numbers, factors)
def test_the_first_entry_can_be_replaced_under_any_factor(
    p: tuple[list[Fraction], Enclosure], value: Fraction, factor: Fraction
) -> None:
    check(p[1].scaled(factor).with_first(value), [value, *(factor * x for x in p[0][1:])])
    assert Enclosure.exact(p[0]).with_first(value).midpoints() == (value, *p[0][1:])


@given(enclosed(), st.sets(st.integers(0, 5)))
def test_entries_can_be_left_out(p: tuple[list[Fraction], Enclosure], left_out: set[int]) -> None:
    truth = [-x / 3 for i, x in enumerate(p[0]) if i not in left_out]
    check(p[1].scaled(Fraction(-1, 3)).without(left_out), truth)


@given(enclosed(st.lists(factors, min_size=1, max_size=1)))
def test_the_reciprocal_holds_the_truth(number: tuple[list[Fraction], Enclosure]) -> None:
    mid, rad = number[1].entry(0)
    if abs(mid) > 2 * rad:
        assert inside(*reciprocal(mid, rad, BITS), 1 / number[0][0])


@pytest.mark.parametrize(("mid", "rad"), [(0, 0), (0, 5), (9, 5), (-10, 5), (5, 9)])
def test_a_number_that_may_be_zero_has_no_reciprocal_yet(mid: int, rad: int) -> None:
    with pytest.raises(Unresolved):
        reciprocal(mid, rad, BITS)


def test_vectors_of_different_units_or_factors_are_not_added() -> None:
    a = Enclosure.rounded([Fraction(1)], 10)
    for other in (Enclosure.rounded([Fraction(1)], 11), a.scaled(Fraction(2))):
        with pytest.raises(AssertionError):
            a + other


def test_squaring_sixty_times_keeps_the_truth_and_a_useful_width() -> None:
    p = (Fraction(999, 1000), Fraction(1, 7))
    enclosure = Enclosure.rounded(list(p), 200)
    truth: poly.Rationals = p
    for _ in range(5):
        enclosure, truth = enclosure.convolve(enclosure), poly.multiply(truth, truth)
    check(enclosure, list(truth))
    assert max(enclosure.rad) < 1 << 40
