"""Schur and Cohn's recursion on balls, against exact stability and known roots."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.checks import stability
from realize.loop import circle

_COEFFICIENTS = st.lists(st.fractions(min_value=-2, max_value=2, max_denominator=100), min_size=1, max_size=7)


def _decide(p: poly.Rationals, spread: Fraction = Fraction(0)) -> str:
    def enclosed(bits: int) -> list[circle.Ball]:
        widened = -(-(spread.numerator << bits) // spread.denominator)
        return [(mid, rad + widened) for mid, rad in circle.rational_balls(p, bits)]

    return circle.decide(enclosed).stability


@given(_COEFFICIENTS)
def test_the_answer_is_the_exact_one_off_the_circle(tail: list[Fraction]) -> None:
    p = (Fraction(1), *tail)
    exact = stability(p)
    # A root at 1 or -1 with others outside is unstable exactly, and not to be told apart by balls.
    assert _decide(p) in ({exact, "marginal"} if exact == "unstable" else {exact})


@pytest.mark.parametrize(
    ("p", "expected"),
    [
        pytest.param("1 -1.2 .07 .3 -.08", "stable", id="0.8, 0.5, 0.4, -0.5"),
        pytest.param("1 -1.3 -.08 .24", "unstable", id="1.2 outside"),
        pytest.param("1 .25 1 .25", "marginal", id="+-j on the circle"),
        pytest.param("1 -1.1 -.1 .2", "marginal", id="1 on the circle"),
    ],
)
def test_jury_examples_keep_their_verdict(p: str, expected: str) -> None:
    """Examples of the Jury test as taught in a course on digital control, rebuilt from their roots."""
    assert _decide(tuple(Fraction(c) for c in p.split())) == expected


@pytest.mark.parametrize("power", [3, 20, 100, 200])
def test_a_root_is_told_from_the_circle_at_any_distance(power: int) -> None:
    for sign, expected in ((-1, "stable"), (1, "unstable")):
        pole = 1 + sign * Fraction(1, 2**power)
        assert _decide(poly.multiply((Fraction(1), -pole), (Fraction(1), Fraction(1, 3), Fraction(1, 2)))) == expected


def test_an_enclosure_that_holds_both_answers_is_marginal() -> None:
    assert _decide((Fraction(1), Fraction(-999, 1000)), Fraction(1, 10**4)) == "stable"
    assert _decide((Fraction(1), Fraction(-999, 1000)), Fraction(1, 10**2)) == "marginal"


@given(_COEFFICIENTS, _COEFFICIENTS)
def test_products_and_sums_hold_the_exact_ones(p: list[Fraction], q: list[Fraction]) -> None:
    bits = 80
    a, b = (circle.rational_balls(v, bits) for v in (p, q))
    exact = [
        sum((p[i] * q[k - i] for i in range(len(p)) if 0 <= k - i < len(q)), Fraction(0))
        for k in range(len(p) + len(q) - 1)
    ]
    longest = max(len(p), len(q))
    padded = [[Fraction(0)] * (longest - len(v)) + v for v in (p, q)]
    for balls, values in (
        (circle.product(a, b, bits), exact),
        (circle.total(a, b), [x + y for x, y in zip(*padded, strict=True)]),
    ):
        assert all(abs(value * 2**bits - mid) <= rad for (mid, rad), value in zip(balls, values, strict=True))


def test_a_known_root_at_one_is_divided_out() -> None:
    p = poly.multiply((Fraction(1), Fraction(-1)), (Fraction(1), Fraction(1, 2), Fraction(1, 4)))
    found = circle.without_ones(circle.rational_balls(p, 40), 1)
    assert [Fraction(mid, 2**40) for mid, _ in found] == [1, Fraction(1, 2), Fraction(1, 4)]
