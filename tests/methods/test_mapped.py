from __future__ import annotations

from fractions import Fraction

import mpmath as mp
import pytest
from hypothesis import given, settings

from realize.algebra import polynomial as poly
from realize.methods import discretize
from realize.transfer import TransferFunction
from tests.methods.reference import number
from tests.strategies import ExactRoot, Factored, sampled_designs


def real(x: int | Fraction, multiplicity: int = 1) -> ExactRoot:
    return ExactRoot(Fraction(x), Fraction(0), multiplicity)


@given(sampled_designs(7, ("slow", "ordinary", "damped", "undamped", "origin", "growing")))
@settings(max_examples=40)
def test_finite_zeros_go_to_their_exponentials_and_the_others_to_minus_one(
    drawn: tuple[Factored, Fraction],
) -> None:
    design, period_s = drawn
    zeros = discretize(design.transfer(), period_s, "pole-zero-mapped").pulse.zeros
    bits = 600
    with mp.workdps(400):
        truth = [mp.expm1(mp.mpc(number(z.re * period_s), number(z.im * period_s))) for z in design.zeros]
        counts = [(z.multiplicity, z.im > 0) for z in design.zeros]
        if design.relative_degree:
            truth.append(mp.mpc(-2))
            counts.append((design.relative_degree, False))
        assert len(zeros) == len(truth)
        for zero in zeros:
            re, im, radius = zero.enclosure(bits)
            centre = mp.mpc(re, im) / mp.mpf(2) ** bits
            near = min(range(len(truth)), key=lambda i: min(abs(centre - truth[i]), abs(mp.conj(centre) - truth[i])))
            true, count = truth.pop(near), counts.pop(near)
            assert (zero.multiplicity, zero.is_pair) == count
            assert min(abs(centre - true), abs(mp.conj(centre) - true)) <= (radius + 1) * mp.mpf(2) ** -bits


@pytest.mark.parametrize("excess", [1, 2, 3])
def test_zeros_at_minus_one_and_one_are_exact_factors_of_the_numerator(excess: int) -> None:
    design = Factored(Fraction(3), (real(0), real(-1)), (real(-2), real(-5), *(real(-7 - i) for i in range(excess))))
    numerator = discretize(design.transfer(), Fraction(1, 10), "pole-zero-mapped").pulse.numerator
    for _ in range(excess):
        assert poly.evaluate(numerator, Fraction(-1)) == 0
        numerator = poly.divide(poly.trimmed(numerator), (Fraction(1), Fraction(1)))[0]
    assert poly.evaluate(numerator, Fraction(1)) == 0
    assert poly.evaluate(numerator, Fraction(-1)) != 0


def test_the_gain_of_a_lag_makes_its_final_value_right() -> None:
    # 2/(s + 3): K (z + 1)/(z - E) with 2 K/(1 - E) = 2/3.
    pulse = discretize(TransferFunction.from_polynomials((2,), (1, 3)), Fraction(1, 10), "pole-zero-mapped").pulse
    with mp.workdps(100):
        expected = (1 - mp.exp(mp.mpf(-3) / 10)) / 3
        assert abs(number(pulse.gain) / expected - 1) < mp.mpf(10) ** -90
        assert pulse.numerator[1] == pulse.numerator[0]


def test_the_gain_of_a_differentiation_counts_in_periods() -> None:
    # s/(s + 3) rises like s/3: K (z - 1)/(z - E) rises like K T s/(1 - E), so K = (1 - E)/(3 T).
    pulse = discretize(TransferFunction.from_polynomials((1, 0), (1, 3)), Fraction(1, 10), "pole-zero-mapped").pulse
    with mp.workdps(100):
        expected = (1 - mp.exp(mp.mpf(-3) / 10)) * 10 / 3
        assert abs(number(pulse.gain) / expected - 1) < mp.mpf(10) ** -90
    assert pulse.zeros_minus_poles_at_one == 1
    assert pulse.numerator[0] == -pulse.numerator[1]


def test_a_decayed_pole_maps_to_the_origin_and_leaves_the_rest() -> None:
    # exp(-10^6) is 0 to every double; 1/((s + 1)(s + 10^6)) at 1 s.
    design = Factored(Fraction(1), (), (real(-1), real(-(10**6))))
    pulse = discretize(design.transfer(), Fraction(1), "pole-zero-mapped").pulse
    assert pulse.poles[1].value == -1
    assert float(pulse.denominator[2]) == 0
