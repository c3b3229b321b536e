from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.algebra.discs import (
    add,
    conjugate,
    divide_series,
    invert,
    multiply,
    multiply_series,
    scale,
    subtract,
    taylor,
    times_linear,
)
from realize.algebra.enclosure import Unresolved
from realize.algebra.roots import Disc

BITS = 40


class Point(NamedTuple):
    """An exact complex number."""

    re: Fraction
    im: Fraction

    def plus(self, other: Point) -> Point:
        return Point(self.re + other.re, self.im + other.im)

    def times(self, other: Point) -> Point:
        return Point(self.re * other.re - self.im * other.im, self.re * other.im + self.im * other.re)

    def inverse(self) -> Point:
        square = self.re**2 + self.im**2
        return Point(self.re / square, -self.im / square)


ZERO, MINUS_ONE = Point(Fraction(0), Fraction(0)), Point(Fraction(-1), Fraction(0))

numbers = st.builds(Fraction, st.integers(-(10**6), 10**6), st.integers(1, 10**4))
points = st.builds(Point, numbers, numbers | st.just(Fraction(0)))


@st.composite
def enclosed(draw: st.DrawFn) -> tuple[Point, Disc]:
    """A number, and a disc about a centre up to twelve units away; on the real axis where the number is."""
    point = draw(points)
    offsets = [draw(st.integers(-8, 8)), draw(st.integers(-8, 8)) if point.im else 0]
    re, im = ((c.numerator << BITS) // c.denominator + k for c, k in zip(point, offsets, strict=True))
    return point, (re, im, abs(offsets[0]) + abs(offsets[1]) + 2)


series = st.lists(enclosed(), min_size=1, max_size=4)


def holds(disc: Disc, point: Point) -> bool:
    re, im, rad = disc
    return (point.re * 2**BITS - re) ** 2 + (point.im * 2**BITS - im) ** 2 <= rad**2


def all_hold(discs: list[Disc], truth: list[Point]) -> bool:
    return all(holds(disc, point) for disc, point in zip(discs, truth, strict=True))


def split(pairs: list[tuple[Point, Disc]]) -> tuple[list[Point], list[Disc]]:
    return [point for point, _ in pairs], [disc for _, disc in pairs]


@given(enclosed(), enclosed())
def test_sums_differences_products_and_mirror_images_hold_the_truth(
    a: tuple[Point, Disc], b: tuple[Point, Disc]
) -> None:
    assert holds(add(a[1], b[1]), a[0].plus(b[0]))
    assert holds(subtract(a[1], b[1]), a[0].plus(MINUS_ONE.times(b[0])))
    assert holds(multiply(a[1], b[1], BITS), a[0].times(b[0]))
    assert holds(conjugate(a[1]), Point(a[0].re, -a[0].im))


@given(enclosed(), st.integers(0, 10**5), st.integers(1, 10**5))
def test_a_multiple_holds_the_truth_and_nothing_stays_exact(a: tuple[Point, Disc], n: int, d: int) -> None:
    assert holds(scale(a[1], n, d), a[0].times(Point(Fraction(n, d), Fraction(0))))
    assert scale((0, 0, 0), n, d) == (0, 0, 0)


@given(enclosed())
def test_the_inverse_holds_the_truth(a: tuple[Point, Disc]) -> None:
    re, im, rad = a[1]
    assume(max(abs(re), abs(im)) > rad << 8)
    assert holds(invert(a[1], BITS), a[0].inverse())


@pytest.mark.parametrize("disc", [(0, 0, 0), (3, -4, 5), (1 << 9, 0, 2), (0, -(1 << 8), 1)])
def test_a_disc_near_zero_has_no_inverse_yet(disc: Disc) -> None:
    with pytest.raises(Unresolved):
        invert(disc, BITS)


@given(series, series)
def test_products_of_series_hold_the_truth(p: list[tuple[Point, Disc]], q: list[tuple[Point, Disc]]) -> None:
    short, long = sorted((p, q), key=len)
    (a, first), (b, second) = split(short), split(long)
    truth = [ZERO] * len(a)
    for i, x in enumerate(a):
        for j, y in enumerate(b[: len(a) - i]):
            truth[i + j] = truth[i + j].plus(x.times(y))
    assert all_hold(multiply_series(first, second, BITS), truth)


@given(series, enclosed())
def test_quotients_of_series_hold_what_times_the_divisor_is_the_dividend(
    p: list[tuple[Point, Disc]], divisor: tuple[Point, Disc]
) -> None:
    re, im, rad = divisor[1]
    assume(max(abs(re), abs(im)) > rad << 8)
    truth: list[Point] = []
    for c in split(p)[0]:
        rest = c.plus(MINUS_ONE.times(truth[-1])) if truth else c
        truth.append(rest.times(divisor[0].inverse()))
    assert all_hold(divide_series(split(p)[1], invert(divisor[1], BITS), BITS), truth)


@given(series, enclosed(), st.integers(1, 5))
def test_taylor_coefficients_hold_those_that_add_up_to_the_polynomial(
    p: list[tuple[Point, Disc]], at: tuple[Point, Disc], count: int
) -> None:
    # By the binomial theorem, from the powers of the place.
    coefficients, discs = split(p)
    truth = [ZERO] * max(count, len(p))
    for power, c in enumerate(reversed(coefficients)):
        expanded = [c]
        for _ in range(power):
            raised = [x.times(at[0]) for x in expanded]
            expanded = [a.plus(b) for a, b in zip([*raised, ZERO], [ZERO, *expanded], strict=True)]
        for k, x in enumerate(expanded):
            truth[k] = truth[k].plus(x)
    assert all_hold(taylor(discs, at[1], count, BITS), truth[:count])


@given(series, enclosed())
def test_a_root_can_be_multiplied_in(p: list[tuple[Point, Disc]], root: tuple[Point, Disc]) -> None:
    coefficients, discs = split(p)
    below = [MINUS_ONE.times(root[0]).times(c) for c in coefficients]
    truth = [a.plus(b) for a, b in zip([*coefficients, ZERO], [ZERO, *below], strict=True)]
    assert all_hold(times_linear(discs, root[1], BITS), truth)
