from __future__ import annotations

from fractions import Fraction
from math import prod

import numpy as np
import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.checks.schur import stability
from tests.checks.designs import monic

RATIONAL = st.fractions(min_value=-2, max_value=2, max_denominator=40)
#: Rational points of the unit circle, from Pythagorean triples.
ON_CIRCLE = [(Fraction(3, 5), Fraction(4, 5)), (Fraction(-5, 13), Fraction(12, 13)), (Fraction(0), Fraction(1))]


def pair(re: Fraction, im: Fraction) -> poly.Rationals:
    return (Fraction(1), -2 * re, re * re + im * im)


def product(*factors: poly.Rationals) -> poly.Rationals:
    result: poly.Rationals = (Fraction(1),)
    for factor in factors:
        result = poly.multiply(result, factor)
    return result


UNDAMPED = pair(*ON_CIRCLE[0])


@pytest.mark.parametrize(
    ("p", "expected"),
    [
        # The roots stand beside each; Jury's test, J. Frank. Inst. 1962, treats such polynomials.
        pytest.param(monic("0.8", "0.5", "0.4", "-0.5"), "stable", id="four real roots inside"),
        pytest.param(monic("1.2", "0.5", "-0.4"), "unstable", id="one real root outside"),
        pytest.param(product((Fraction(1), Fraction(0), Fraction(1)), monic("-1/4")), "marginal", id="+-j and -1/4"),
        pytest.param(monic(1, "1/2", "-2/5"), "marginal", id="one root at 1"),
        pytest.param(monic(-1, "1/2"), "marginal", id="one root at -1"),
        pytest.param(monic(1, -1), "marginal", id="1 and -1"),
        pytest.param(monic(1, 1), "unstable", id="double integrator"),
        pytest.param(monic(-1, -1, "1/2"), "unstable", id="double root at -1"),
        pytest.param(monic(), "stable", id="static gain"),
        pytest.param(monic(0, 0, 0), "stable", id="pure delay"),
        pytest.param(UNDAMPED, "marginal", id="undamped pair"),
        pytest.param(product(UNDAMPED, UNDAMPED), "unstable", id="double undamped pair"),
        pytest.param(product(UNDAMPED, *(pair(*z) for z in ON_CIRCLE[1:])), "marginal", id="three pairs"),
        pytest.param(product(UNDAMPED, monic("1/2", 1)), "marginal", id="pair, integrator and a decaying root"),
        pytest.param(product(UNDAMPED, monic(2, "1/2")), "unstable", id="pair, and two reciprocal roots"),
        pytest.param(monic(2, "1/2", "1/3"), "unstable", id="reciprocal roots, k of modulus below 1"),
        pytest.param(monic(2, 2, "1/4"), "unstable", id="k of modulus 1 without a root on the circle"),
        pytest.param(monic(1 - Fraction(1, 2**900)), "stable", id="2**-900 inside"),
        pytest.param(monic(1 + Fraction(1, 2**900)), "unstable", id="2**-900 outside"),
        pytest.param(product(pair(Fraction(3, 5), Fraction(4, 5) - Fraction(1, 10**99))), "stable", id="1e-99 inside"),
        pytest.param(product(pair(Fraction(3, 5), Fraction(4, 5) + Fraction(1, 10**99))), "unstable", id="1e-99 out"),
    ],
)
def test_the_class_is_that_of_the_known_roots(p: poly.Rationals, expected: str) -> None:
    assert stability(p) == expected


def test_a_step_of_the_recursion_with_k_of_modulus_one_and_no_root_on_the_circle_is_decided() -> None:
    # P = z Q + k reversed(Q) has Q for its successor, and Q = (z - 2)^2 (z - 1/4) has |product of roots| = 1.
    q = monic(2, 2, "1/4")
    p = poly.add((*q, Fraction(0)), poly.scale(q[::-1], Fraction(1, 3)))
    assert max(abs(np.roots([float(c) for c in p]))) > 1.5
    assert stability(p) == "unstable"


@given(
    st.lists(RATIONAL, max_size=4),
    st.lists(st.tuples(RATIONAL, RATIONAL), max_size=2),
    st.lists(st.sampled_from(ON_CIRCLE), max_size=3),
)
@example([Fraction(1), Fraction(-1)], [], [ON_CIRCLE[0]])
@example([], [(Fraction(3, 5), Fraction(4, 5))], [ON_CIRCLE[0]])
def test_the_class_follows_from_the_radii_and_multiplicities(
    real: list[Fraction], pairs: list[tuple[Fraction, Fraction]], on_circle: list[tuple[Fraction, Fraction]]
) -> None:
    pairs = [*pairs, *on_circle]
    squares = [r * r for r in real] + [re * re + im * im for re, im in pairs]
    # A pair with imaginary part 0 is a double real root.
    on = [(r, Fraction(0)) for r in real if r * r == 1]
    on += [(re, s * im) for re, im in pairs if re * re + im * im == 1 for s in (1, -1)]
    expected = "stable" if all(q < 1 for q in squares) else "unstable"
    if all(q <= 1 for q in squares) and on:
        expected = "marginal" if len(set(on)) == len(on) else "unstable"
    assert stability(product(monic(*real), *(pair(re, im) for re, im in pairs))) == expected


@given(st.lists(st.integers(-50, 50), min_size=1, max_size=9), st.integers(1, 50))
def test_away_from_the_circle_it_agrees_with_the_roots_numpy_finds(rest: list[int], lead: int) -> None:
    radius = max(abs(np.roots([lead, *rest])), default=0.0)
    # Roots of multiplicity up to 4 of a degree-9 polynomial are found to 1e-4.
    assume(abs(radius - 1) > 1e-3)
    assert stability([Fraction(c) for c in (lead, *rest)]) == ("stable" if radius < 1 else "unstable")


@given(st.lists(RATIONAL, min_size=1, max_size=6), st.fractions(min_value=1, max_value=9, max_denominator=9))
def test_neither_a_factor_nor_a_delay_changes_the_class(real: list[Fraction], factor: Fraction) -> None:
    p = monic(*real)
    assert stability([*(-factor * c for c in p), Fraction(0), Fraction(0)]) == stability(p)


@pytest.mark.parametrize(
    ("last", "expected"), [(pair(Fraction(1, 2), Fraction(1, 3)), "stable"), (UNDAMPED, "marginal")]
)
def test_degree_32_with_coefficients_of_a_thousand_bits_is_decided(last: poly.Rationals, expected: str) -> None:
    moduli = [Fraction(10**9 - i * 12345677, 10**9 + 7) for i in range(15)]
    angles = [Fraction(10**8 * (2 * i + 1), 31 * 10**8 + 1) for i in range(15)]
    p = product(*((Fraction(1), -2 * r * c, r * r) for r, c in zip(moduli, angles, strict=True)), last)
    assert max(c.bit_length() for c in poly.primitive(p)) > 900
    assert len(p) == 33
    assert stability(p) == expected


def test_slow_poles_at_a_high_rate_are_told_from_the_circle() -> None:
    slow = [1 - Fraction(i, 10**9) for i in range(1, 33)]
    assert stability(monic(*slow)) == "stable"
    assert stability(monic(*slow[:-1], 2 - slow[-1])) == "unstable"
    assert prod(slow) > Fraction(999999, 10**6)
