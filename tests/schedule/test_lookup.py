"""The lookup against exact arithmetic rounded once an operation; and what interpolation cannot spoil."""

from __future__ import annotations

from fractions import Fraction
from math import inf, nan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra.rounding import FLOAT32, FLOAT64, FloatFormat
from realize.arithmetic.realization import Realization, Section, stored_denominator
from realize.checks.schur import MARGINAL, STABLE, stability
from realize.errors import Refused
from realize.schedule.lookup import Lookup, breakpoints, flat, shaped

FORMATS = st.sampled_from([FLOAT32, FLOAT64])
MODEST = st.fractions(-1000, 1000, max_denominator=10**6)


@st.composite
def tables(draw: st.DrawFn) -> tuple[FloatFormat, tuple[float, ...], list[list[float]]]:
    target = draw(FORMATS)
    points = sorted({target.round(x) for x in draw(st.lists(MODEST, min_size=2, max_size=6, unique=True))})
    if len(points) < 2:
        points = [0.0, 1.0]
    row = st.lists(MODEST.map(target.round), min_size=3, max_size=3)
    return target, tuple(points), [draw(row) for _ in points]


def by_hand(target: FloatFormat, points: tuple[float, ...], sets: list[list[float]], x: float) -> list[float]:
    """Exact operations, each rounded once; the interval by looking at every one."""
    if x <= points[0]:
        return sets[0]
    if x >= points[-1]:
        return sets[-1]
    i = max(k for k, point in enumerate(points) if point <= x)

    def apart(one: float, other: float) -> float:
        return target.round(Fraction(one) - Fraction(other))

    share = target.round(Fraction(apart(x, points[i])) / Fraction(apart(points[i + 1], points[i])))
    parts = [target.round(Fraction(share) * Fraction(apart(b, a))) for a, b in zip(sets[i], sets[i + 1], strict=True)]
    return [target.round(Fraction(a) + Fraction(part)) for a, part in zip(sets[i], parts, strict=True)]


@given(tables(), MODEST)
def test_every_operation_is_rounded_once(
    table: tuple[FloatFormat, tuple[float, ...], list[list[float]]], x: Fraction
) -> None:
    target, points, sets = table
    value = target.round(x)
    assert Lookup(target, points, sets).at(value) == by_hand(target, points, sets, value)


@given(tables())
def test_the_points_give_their_own_numbers_and_the_ends_hold(
    table: tuple[FloatFormat, tuple[float, ...], list[list[float]]],
) -> None:
    target, points, sets = table
    lookup = Lookup(target, points, sets)
    assert [lookup.at(point) for point in points] == sets
    assert [lookup.at(x) for x in (-inf, points[0] - 1, nan)] == [sets[0]] * 3
    assert [lookup.at(x) for x in (points[-1] + 1, inf)] == [sets[-1]] * 2


@given(tables(), st.fractions(0, 1))
def test_a_share_is_from_0_to_1_and_reaches_1_only_next_to_the_point_above(
    table: tuple[FloatFormat, tuple[float, ...], list[list[float]]], share: Fraction
) -> None:
    target, points, _ = table
    x = target.round(Fraction(points[0]) + share * (Fraction(points[1]) - Fraction(points[0])))
    (found,) = Lookup(target, points, [[float(i)] for i in range(len(points))]).at(x)
    assert 0 <= found <= 1


SHARES = st.fractions(0, 1, max_denominator=1000)


@st.composite
def stable_pairs(draw: st.DrawFn) -> tuple[Fraction, Fraction]:
    """``(a_1, a_2)`` strictly inside the triangle."""
    inside = st.fractions(Fraction(-999, 1000), Fraction(999, 1000), max_denominator=1000)
    a2 = draw(inside)
    return draw(inside) * (1 + a2), a2


@given(stable_pairs(), stable_pairs(), SHARES)
def test_exact_interpolation_between_stable_sections_is_stable(
    first: tuple[Fraction, Fraction], second: tuple[Fraction, Fraction], share: Fraction
) -> None:
    a1, a2 = (a + share * (b - a) for a, b in zip(first, second, strict=True))
    assert stability((Fraction(1), a1, a2)) == STABLE


@given(stable_pairs(), stable_pairs(), st.integers(1, 7))
def test_the_looked_up_section_is_stable_too_where_rounding_is_far_from_the_edge(
    first: tuple[Fraction, Fraction], second: tuple[Fraction, Fraction], k: int
) -> None:
    stored = [
        Realization(FLOAT64, "direct", (0.5,), (Section((1.0, 0.5, 0.25), (float(a1), float(a2))),), Fraction(1, 100))
        for a1, a2 in (first, second)
    ]
    lookup = Lookup(FLOAT64, (0.0, 8.0), [flat(each) for each in stored])
    found = shaped(lookup.at(float(k)), stored[0])
    assert len(found.sections) == len(found.integral) == 1
    assert stability((Fraction(1), *found.sections[0].in_z()[1])) == STABLE
    assert stability(stored_denominator(found)) == MARGINAL


def test_what_is_shaped_is_what_was_flattened() -> None:
    stored = Realization(
        FLOAT64, "cascade", (0.1, 0.2), (Section((1.0, 2.0), (3.0,)), Section((4.0,), ())), Fraction(1)
    )
    assert shaped(flat(stored), stored) == stored
    assert flat(stored) == [1.0, 2.0, 3.0, 4.0, 0.1, 0.2]


def test_points_that_the_format_does_not_tell_apart_are_refused() -> None:
    points = (Fraction(1), 1 + Fraction(1, 10**9))
    assert breakpoints(points, FLOAT64)[0] < breakpoints(points, FLOAT64)[1]
    with pytest.raises(Refused) as caught:
        breakpoints(points, FLOAT32)
    assert "points 1 and 2 are the same number in float32" in caught.value.found
    with pytest.raises(Refused, match="point 2 is beyond float32"):
        breakpoints((Fraction(0), Fraction(10**39)), FLOAT32)
    with pytest.raises(Refused, match="neighbours, with nothing between in float64"):
        breakpoints((Fraction(1), 1 + Fraction(1, 2**52)), FLOAT64)
    # Each is a number of the format, but their distance is not.
    with pytest.raises(Refused, match="the distance of points 1 and 2 is beyond float32"):
        breakpoints((Fraction(-(10**38) * 3), Fraction(10**38 * 3)), FLOAT32)
