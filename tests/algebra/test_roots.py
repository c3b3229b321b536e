from __future__ import annotations

from fractions import Fraction
from math import comb, copysign
from typing import Any

import mpmath as mp
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.roots import Root, isolate, origin, rational
from tests.strategies import ExactRoot, expanded, root_sets

#: Widths at which enclosures are looked at, out of order on purpose: a search refined once serves them all.
WIDTHS = (300, 50, 3000, 64)

#: The same for polynomials of high degree, which take their time at the largest width.
LESSER_WIDTHS = (300, 50, 1000, 64)

#: "Right to about one unit in the last place": half of one for rounding, half of one for the enclosure.
FLOAT_ERROR = Fraction(1, 2**52)


def real(x: int | str | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(x), Fraction(0), multiplicity)


def pair(re: int | str | Fraction, im: int | str | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(re), Fraction(im), multiplicity)


def holds(root: Root, bits: int, re: Fraction, im: Fraction) -> bool:
    """Whether the enclosure at a width holds a point."""
    x, y, radius = root.enclosure(bits)
    unit = Fraction(1, 2**bits)
    return (x * unit - re) ** 2 + (y * unit - im) ** 2 <= (radius * unit) ** 2


def is_close(value: float, exact: Fraction) -> bool:
    return value == 0 if exact == 0 else abs(Fraction(value) - exact) <= FLOAT_ERROR * abs(exact)


def check_against(found: tuple[Root, ...], exact: tuple[ExactRoot, ...]) -> None:
    """Every exact root is found once, with its multiplicity, to its last bit, inside every enclosure."""
    assert len(found) == len(exact)
    widths = WIDTHS if len(exact) < 16 else LESSER_WIDTHS
    left = list(exact)
    for root in found:
        # Far narrower than any two of the roots are apart.
        (match,) = [r for r in left if holds(root, max(widths), r.re, r.im)]
        left.remove(match)
        assert root.multiplicity == match.multiplicity
        assert root.is_pair == (match.im > 0)
        assert root.count == match.count
        assert is_close(root.value.real, match.re)
        assert is_close(root.value.imag, match.im)
        for bits in widths:
            re, im, radius = root.enclosure(bits)
            assert holds(root, bits, match.re, match.im)
            assert 0 <= radius <= 2
            assert re == 0 or match.re != 0
            assert im == 0 or match.im != 0
    assert not left


@given(root_sets(Fraction(1), 16))
@settings(max_examples=40)
def test_roots_that_are_known_are_found_exactly_once_inside_their_enclosures(
    exact: tuple[ExactRoot, ...],
) -> None:
    check_against(isolate(poly.primitive(expanded(exact))), exact)


@given(st.lists(st.integers(-(10**6), 10**6), min_size=2, max_size=11).filter(lambda p: p[0] and p[-1]))
@settings(max_examples=40)
def test_roots_of_random_polynomials_agree_with_newton_iterations_to_two_hundred_digits(p: list[int]) -> None:
    found = isolate(tuple(p))
    assert sum(root.count for root in found) == len(p) - 1
    bits = 600
    with mp.workdps(260):
        for root in found:
            z = newton(p, root.value, root.multiplicity)
            re, im, radius = root.enclosure(bits)
            unit = mp.mpf(2) ** -bits
            assert abs(mp.mpc(re, im) * unit - z) <= radius * unit + mp.mpf(10) ** -200
            assert abs(root.value.real - z.real) <= 2.0**-52 * abs(z.real) + mp.mpf(10) ** -200
            assert abs(root.value.imag - z.imag) <= 2.0**-52 * abs(z.imag) + mp.mpf(10) ** -200
            for other in found:
                assert other is root or abs(mp.mpc(*other.enclosure(bits)[:2]) * unit - z) > 4 * unit


def newton(p: list[int], start: complex, multiplicity: int) -> Any:
    """The root next to ``start``, by Newton's iteration on the (m-1)-th derivative."""
    q = tuple(p)
    for _ in range(multiplicity - 1):
        q = poly.derivative(q)
    slope = poly.derivative(q)
    z = mp.mpc(start)
    for _ in range(9):
        z -= poly.evaluate(q, z) / poly.evaluate(slope, z)
    return z


@pytest.mark.parametrize(
    "exact",
    [
        pytest.param(tuple(real(k) for k in range(1, 21)), id="the twenty of Wilkinson"),
        pytest.param(tuple(real(-k) for k in range(1, 33)), id="degree 32"),
        pytest.param(tuple(pair(-k, 33 - k) for k in range(1, 17)), id="degree 32 in pairs"),
        pytest.param((real(-1), real(Fraction(-1) - Fraction(1, 10**12)), real(-3)), id="two 1e-12 apart"),
        pytest.param(tuple(real(Fraction(-1) - Fraction(k, 10**12)) for k in range(5)), id="five 1e-12 apart each"),
        pytest.param(
            (pair(-1, 2), pair(Fraction(-1) - Fraction(1, 10**12), 2), pair(-1, 2 + Fraction(1, 10**12))),
            id="pairs 1e-12 apart",
        ),
        pytest.param((pair(-1, Fraction(1, 10**30)), real(-2)), id="a pair that is nearly two equal real roots"),
        pytest.param(tuple(real(-(Fraction(10) ** k)) for k in range(-5, 9)), id="from 1e-5 to 1e8"),
        pytest.param((real("-1e-60"), real("-3e-60"), real(-1), real("-1e50")), id="farther apart than a double"),
        pytest.param((pair(0, 3), pair(0, 5, 2), real(0, 3)), id="all on the imaginary axis"),
        pytest.param(
            (pair(0, 2), pair(-1, 2), pair(1, 2), real(-2), real(2), real(-7, 3)),
            id="an undamped pair hidden among others",
        ),
        pytest.param((pair(0, 2), pair("1e-30", 2), pair("-1e-30", 2)), id="damping of 1e-30 on both sides of none"),
        pytest.param((pair("-1e-30", 1), real(-1)), id="damping of 1e-30"),
        pytest.param((pair("-1e-200", 1), pair(0, 1), real(-5)), id="damping of 1e-200"),
        pytest.param((real(0, 16), real(-1, 16)), id="multiplicity 16 twice"),
        pytest.param((pair(-3, 4, 8), pair(-3, 5, 7)), id="repeated pairs"),
        pytest.param((real(Fraction(10) ** 300), real(Fraction(1, 10**300))), id="the ends of a double"),
        pytest.param((real(5),), id="degree 1"),
    ],
)
def test_hard_sets_of_roots_are_separated_to_the_last_bit(exact: tuple[ExactRoot, ...]) -> None:
    check_against(isolate(poly.primitive(expanded(exact))), exact)


@pytest.mark.parametrize(
    ("p", "frequencies_squared"),
    [
        ((1, 0, 2), (2,)),
        ((1, 0, 5, 0, 6), (2, 3)),
        (poly.multiply((1, 0, 7), (1, 3, 9, 27, 1)), (7,)),
        (poly.multiply((1, 0, 7), (1, 0, 0, 0, 1)), (7,)),
        (poly.multiply((1, 0, 7), (1, 0, -7)), (7,)),
        (poly.multiply(poly.power((1, 0, 7), 3), (1, 0, 0, 0, 0, 1)), (7,)),
    ],
)
def test_undamped_pairs_of_irrational_frequency_have_no_real_part_at_all(
    p: poly.Integers, frequencies_squared: tuple[int, ...]
) -> None:
    undamped = [root for root in isolate(p) if root.value.real == 0]
    assert len(undamped) == len(frequencies_squared)
    for root, square in zip(undamped, frequencies_squared, strict=True):
        assert copysign(1, root.value.real) == 1
        assert root.enclosure(500)[0] == 0
        low, high = (Fraction(root.enclosure(500)[1] + side, 2**500) for side in (-2, 2))
        assert low**2 < square < high**2
    others = [root for root in isolate(p) if root.value.real != 0]
    assert all(root.enclosure(500)[0] != 0 for root in others)


def test_roots_of_unity_lie_on_the_axes_where_they_do() -> None:
    found = isolate((1, *(0,) * 23, -1))
    assert sum(root.count for root in found) == 24
    assert [root.value for root in found if root.value.imag == 0] == [-1, 1]
    assert [root.value for root in found if root.value.real == 0] == [1j]
    with mp.workdps(200):
        truth = [mp.expjpi(mp.mpf(k) / 12) for k in range(13)]
        for root in found:
            re, im, radius = root.enclosure(600)
            centre = mp.mpc(re, im) / mp.mpf(2) ** 600
            assert min(abs(centre - z) for z in truth) <= (radius + 1) * mp.mpf(2) ** -600


def test_a_cubic_with_irrational_real_roots_agrees_with_the_cosine_formula() -> None:
    # x^3 - 3x + 1 has the roots 2 cos(2 pi k/9), k = 1, 2, 4 (Vieta's trigonometric solution).
    with mp.workdps(60):
        truth = sorted(float(2 * mp.cos(2 * mp.pi * k / 9)) for k in (1, 2, 4))
    assert sorted(root.value.real for root in isolate((1, 0, -3, 1))) == truth
    assert all(root.value.imag == 0 for root in isolate((1, 0, -3, 1)))


def test_all_roots_of_a_legendre_polynomial_are_real_and_alternate_in_sign() -> None:
    # Rodrigues: 2**n P_n = sum (-1)^k C(n,k) C(2n-2k,n) x^(n-2k).
    n = 24
    p = [0] * (n + 1)
    for k in range(n // 2 + 1):
        p[2 * k] = (-1) ** k * comb(n, k) * comb(2 * n - 2 * k, n)
    found = isolate(poly.primitive(p))
    assert len(found) == n
    assert all(not root.is_pair and abs(root.value) < 1 for root in found)
    assert sorted(root.value.real for root in found) == sorted(-root.value.real for root in found)


def test_order_is_ascending_magnitude_whatever_the_order_of_the_search() -> None:
    exact = (real(-9), pair(-3, 4), real(5), real("-0.5"), pair(0, 1, 2), real(0))
    values = [root.value for root in isolate(poly.primitive(expanded(exact)))]
    assert values == [0, -0.5, 1j, 5, -3 + 4j, -9]


def test_the_sign_and_size_of_the_polynomial_do_not_matter() -> None:
    p = poly.primitive(expanded((real(-9), pair(-3, 4, 2))))
    assert isolate(tuple(-7 * c for c in p)) == isolate(p)


def test_a_constant_has_no_roots() -> None:
    assert isolate((5,)) == ()
    assert isolate((-1,)) == ()


@given(st.builds(Fraction, st.integers(-(10**9), 10**9), st.integers(1, 10**9)), st.integers(1, 5))
def test_a_rational_root_is_held_by_its_own_enclosure(value: Fraction, multiplicity: int) -> None:
    root = rational(value, multiplicity)
    assert (root.value, root.count, root.is_pair) == (float(value), multiplicity, False)
    for bits in WIDTHS:
        assert holds(root, bits, value, Fraction(0))
        assert root.enclosure(bits)[2] <= 2


def test_a_root_at_the_origin_is_there_exactly() -> None:
    root = origin(3)
    assert (root.value, root.count, root.is_pair) == (0, 3, False)
    assert root.enclosure(1000) == (0, 0, 0)


@pytest.mark.parametrize("bits", [50, 1000])
def test_an_enclosure_at_one_width_does_not_depend_on_what_was_asked_before(bits: int) -> None:
    p = (3, 1, 4, 1, 5, 9)
    isolate.cache_clear()
    fresh: Any = [root.enclosure(bits) for root in isolate(p)]
    isolate.cache_clear()
    used = isolate(p)
    for root in used:
        root.enclosure(2500)
    for (x, y, r), root in zip(fresh, used, strict=True):
        u, v, s = root.enclosure(bits)
        assert (x - u) ** 2 + (y - v) ** 2 <= (r + s) ** 2
    assert [root.value for root in used] == [root.value for root in isolate(p)]
