from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import assume, given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.roots import isolate
from realize.errors import Refused
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.strategies import ExactRoot, Factored, expanded, sampled_designs

coefficients = st.builds(Fraction, st.integers(-50, 50), st.integers(1, 9))
polynomials = st.lists(coefficients, min_size=1, max_size=5).filter(any)

#: Factors all of whose roots decay or lie on the imaginary axis, so that they may be cancelled.
calm = st.sampled_from(((1, 2), (1, 0), (3, 1, 1), (1, 0, 4), (1, 4, 4)))


def value(p: tuple[int, ...] | list[Fraction], x: Fraction) -> Fraction:
    return poly.evaluate(tuple(Fraction(c) for c in p), x)


def hides_growth(n: list[Fraction], d: list[Fraction]) -> bool:
    """Whether a common factor has a root in the right half plane."""
    common = poly.greatest_common_divisor(*poly.integer_form(poly.trimmed(n), poly.trimmed(d)))
    return any(root.value.real > 0 for root in isolate(common))


@given(polynomials, polynomials, st.integers(2, 99))
def test_reduction_keeps_the_ratio_and_leaves_integers_in_lowest_terms(
    n: list[Fraction], d: list[Fraction], x: int
) -> None:
    assume(not hides_growth(n, d))
    transfer = TransferFunction.from_polynomials(n, d)
    point = Fraction(x)
    assume(value(d, point) != 0)
    assert value(transfer.numerator, point) / value(transfer.denominator, point) == value(n, point) / value(d, point)
    assert poly.greatest_common_divisor(transfer.numerator, transfer.denominator) == (1,)
    assert transfer.denominator[0] > 0
    assert poly.integer_form(transfer.numerator, transfer.denominator) == (transfer.numerator, transfer.denominator)


@given(polynomials, polynomials, calm)
def test_a_common_factor_is_divided_out_and_reported(
    n: list[Fraction], d: list[Fraction], common: poly.Integers
) -> None:
    assume(poly.greatest_common_divisor(*poly.integer_form(poly.trimmed(n), poly.trimmed(d))) == (1,))
    plain = TransferFunction.from_polynomials(n, d)
    factor = tuple(Fraction(c) for c in common)
    scaled = TransferFunction.from_polynomials(poly.multiply(tuple(n), factor), poly.multiply(tuple(d), factor))
    assert (scaled.numerator, scaled.denominator) == (plain.numerator, plain.denominator)
    assert (plain.cancelled, scaled.cancelled) == ((1,), common)


@pytest.mark.parametrize(
    "common",
    [(1, -1), (1, -2, 5), (1, -1, 0), (1, Fraction(-1, 10**30))],
    ids=["s=1", "s=1+2j", "s=0 and 1", "s=1e-30"],
)
def test_cancelling_a_growing_mode_is_refused_with_its_place(common: tuple[Fraction | int, ...]) -> None:
    factor = tuple(Fraction(c) for c in common)
    with pytest.raises(
        Refused, match="common factor of numerator and denominator hides a growing mode at s ="
    ) as refusal:
        TransferFunction.from_polynomials(factor, poly.multiply(factor, (Fraction(1), Fraction(3))))
    assert refusal.value.where == "transfer"


@pytest.mark.parametrize(
    ("n", "d", "found"),
    [((1,), (), "the denominator is zero"), ((1,), (0, 0), "the denominator is zero"), ((0,), (1, 1), "it is zero")],
)
def test_a_ratio_without_a_value_is_refused(n: tuple[int, ...], d: tuple[int, ...], found: str) -> None:
    with pytest.raises(Refused) as refusal:
        TransferFunction.from_polynomials(n, d)
    assert (refusal.value.where, refusal.value.found) == ("transfer", found)


@given(sampled_designs(8))
def test_poles_zeros_and_gain_are_those_the_function_was_built_from(drawn: tuple[Factored, Fraction]) -> None:
    design, _ = drawn
    transfer = design.transfer()
    assert transfer.order == design.order
    assert transfer.relative_degree == design.relative_degree
    assert transfer.gain == design.gain
    assert transfer.feed_through == (design.gain if design.relative_degree == 0 else 0)
    assert sum(pole.count for pole in transfer.poles) == design.order
    assert sum(zero.count for zero in transfer.zeros) == design.order - design.relative_degree
    assert transfer.zeros_minus_poles_at_origin == at_origin(design.zeros) - at_origin(design.poles)


def at_origin(roots: tuple[ExactRoot, ...]) -> int:
    return sum(root.multiplicity for root in roots if root.re == root.im == 0)


@given(sampled_designs(8))
def test_low_frequency_gain_is_the_limit_over_the_roots_away_from_the_origin(
    drawn: tuple[Factored, Fraction],
) -> None:
    design, _ = drawn
    top, bottom = (
        expanded(tuple(root for root in roots if root.re or root.im))[-1] for roots in (design.zeros, design.poles)
    )
    assert design.transfer().low_frequency_gain == design.gain * top / bottom


def test_an_improper_function_has_negative_relative_degree_and_no_feed_through() -> None:
    pid = TransferFunction.from_polynomials((Fraction(9, 100), Fraction(42, 10), 18), (1, 0))
    assert (pid.numerator, pid.denominator) == ((9, 420, 1800), (100, 0))
    assert (pid.relative_degree, pid.order) == (-1, 1)
    assert pid.feed_through == 0
    assert pid.low_frequency_gain == 18
    assert pid.zeros_minus_poles_at_origin == -1


def pulse(numerator: tuple[int | Fraction, ...], denominator: tuple[int | Fraction, ...]) -> PulseTransferFunction:
    n, d = (tuple(Fraction(c) for c in p) for p in (numerator, denominator))
    roots = [isolate(poly.primitive(poly.shift(poly.trimmed(p), Fraction(1)))) for p in (n, d)]
    return PulseTransferFunction(n, d, Fraction(1, 4), roots[1], roots[0])


def test_low_frequency_gain_of_a_pulse_transfer_function_counts_steps_of_z_as_periods() -> None:
    # 3 (z + 1)/(2 (z - 1)^2) behaves like 3/(z - 1)^2 = 3/T^2 / ((z - 1)/T)^2 at T = 1/4.
    integrating = pulse((0, Fraction(3, 2), Fraction(3, 2)), (1, -2, 1))
    assert integrating.zeros_minus_poles_at_one == -2
    assert integrating.low_frequency_gain == 48
    assert integrating.gain == Fraction(3, 2)
    assert integrating.feed_through == 0
    # (z - 1)/(z - 1/2) behaves like 2 (z - 1) = 2 T (z - 1)/T.
    washout = pulse((1, -1), (1, Fraction(-1, 2)))
    assert washout.zeros_minus_poles_at_one == 1
    assert washout.low_frequency_gain == Fraction(1, 2)
    assert washout.feed_through == 1
    plain = pulse((0, 1), (1, Fraction(-1, 2)))
    assert plain.zeros_minus_poles_at_one == 0
    assert plain.low_frequency_gain == 2
