from __future__ import annotations

from fractions import Fraction

import mpmath as mp
import pytest
from hypothesis import given, settings

from realize.algebra import polynomial as poly
from realize.algebra.irrational import pi
from realize.errors import Refused
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.methods.reference import number
from tests.strategies import Factored, decimals, sampled_designs

#: ``1/(theta T)``, which each method sends to z = infinity, times the period.
AT_INFINITY = {
    "backward-difference": Fraction(1),
    "bilinear": Fraction(2),
    "blended-difference": Fraction(8, 7),
}

#: Where each method puts the zeros that G has at infinity, as ``z``.
FAR_ZERO = {
    "backward-difference": Fraction(0),
    "bilinear": Fraction(-1),
    "bilinear-prewarped": Fraction(-1),
    "blended-difference": Fraction(-1, 7),
}


def converted(
    numerator: tuple[Fraction | int, ...],
    denominator: tuple[Fraction | int, ...],
    period_s: Fraction,
    method: str,
    exact_at_rad_s: Fraction | None = None,
) -> PulseTransferFunction:
    transfer = TransferFunction.from_polynomials(numerator, denominator)
    return discretize(transfer, period_s, method, exact_at_rad_s).pulse


@pytest.mark.parametrize("method", AT_INFINITY)
@pytest.mark.parametrize("period_s", [Fraction(1, 8), Fraction(3, 7)])
def test_a_pole_at_the_image_of_infinity_is_refused_with_its_place(method: str, period_s: Fraction) -> None:
    pole = AT_INFINITY[method] / period_s
    with pytest.raises(Refused) as refusal:
        converted((1,), poly.multiply((Fraction(1), -pole), (Fraction(1), Fraction(5))), period_s, method)
    assert refusal.value.where == "method"
    assert f"the pole at s = {float(pole):.5g} rad/s has no image" in refusal.value.found


@pytest.mark.parametrize("method", AT_INFINITY)
@pytest.mark.parametrize(
    "period_s", [Fraction(1, 8), Fraction(3, 7), Fraction(2, 9007199254740993), Fraction(16, 7 * 9007199254740995)]
)
@pytest.mark.parametrize("multiplicity", [1, 2])
def test_a_zero_at_the_image_of_infinity_leaves_a_zero_coefficient_and_one_zero_fewer(
    method: str, period_s: Fraction, multiplicity: int
) -> None:
    zero = AT_INFINITY[method] / period_s
    numerator = poly.multiply(poly.power((Fraction(1), -zero), multiplicity), (Fraction(1), Fraction(4)))
    pulse = converted(numerator, (1, 6, 11, 6), period_s, method)
    assert pulse.numerator[:multiplicity] == (0,) * multiplicity
    assert pulse.numerator[multiplicity] != 0
    assert sum(z.count for z in pulse.zeros) == 3 - multiplicity


@pytest.mark.parametrize("method", AT_INFINITY)
def test_a_zero_next_to_the_image_of_infinity_is_kept_beside_the_one_that_is_there(method: str) -> None:
    # Nearer than two doubles can be: only exact arithmetic tells the two apart.
    there = AT_INFINITY[method] * 3
    beside = there + Fraction(1, 10**25)
    numerator = poly.multiply((Fraction(1), -there), (Fraction(1), -beside))
    pulse = converted(numerator, (1, 6, 11, 6), Fraction(1, 3), method)
    assert pulse.numerator[0] == 0
    assert pulse.numerator[1] != 0
    assert sum(z.count for z in pulse.zeros) == 2
    assert max(abs(z.value) for z in pulse.zeros) > 1e24


@pytest.mark.parametrize("method", FAR_ZERO)
def test_zeros_at_infinity_go_where_the_method_puts_them(method: str) -> None:
    exact_at = Fraction(3) if method == "bilinear-prewarped" else None
    pulse = converted((1,), (1, 3, 3, 1), Fraction(1, 5), method, exact_at)
    (zero,) = pulse.zeros
    assert zero.multiplicity == 3
    assert zero.value == float(FAR_ZERO[method] - 1)
    at_zero = poly.evaluate(pulse.numerator, FAR_ZERO[method])
    assert abs(at_zero) <= abs(pulse.gain) / 2**900
    assert at_zero == 0 or method == "bilinear-prewarped"


def test_the_forward_difference_delays_by_the_relative_degree() -> None:
    pulse = converted((1,), (1, 3, 2), Fraction(1, 5), "forward-difference")
    assert list(pulse.numerator) == [0, 0, Fraction(1, 25)]
    assert pulse.zeros == ()
    assert pulse.feed_through == 0


@given(sampled_designs(6, ("ordinary", "damped", "origin"), ("ordinary", "damped")), decimals(-3, 0))
@settings(max_examples=40)
def test_prewarping_keeps_the_response_at_its_frequency(drawn: tuple[Factored, Fraction], angle: Fraction) -> None:
    design, period_s = drawn
    w = 3 * angle / period_s
    transfer = design.transfer()
    pulse = discretize(transfer, period_s, "bilinear-prewarped", w).pulse
    with mp.workdps(200):
        z = mp.expj(number(w * period_s))
        s = mp.mpc(0, number(w))
        discrete = horner(pulse.numerator, z) / horner(pulse.denominator, z)
        continuous = horner(transfer.numerator, s) / horner(transfer.denominator, s)
        assert abs(discrete / continuous - 1) < mp.mpf(10) ** -100


def horner(p: tuple[Fraction, ...] | tuple[int, ...], x: mp.mpc) -> mp.mpc:
    value = mp.mpc(0)
    for c in p:
        value = value * x + number(Fraction(c))
    return value


def test_prewarping_at_a_low_frequency_tends_to_the_bilinear_method() -> None:
    plain = converted((2, 5), (1, 3, 7), Fraction(1, 20), "bilinear")
    warped = converted((2, 5), (1, 3, 7), Fraction(1, 20), "bilinear-prewarped", Fraction(1, 10**12))
    # tan(x)/x = 1 + x^2/3: here x = 2.5e-14.
    for a, b in zip(plain.numerator + plain.denominator, warped.numerator + warped.denominator, strict=True):
        assert abs(a - b) < Fraction(1, 10**26)


def test_prewarping_just_below_half_the_rate_is_accepted() -> None:
    w = 2 * pi() * 100 * Fraction(999, 1000)
    pulse = converted((1,), (1, 1), Fraction(1, 200), "bilinear-prewarped", w)
    assert 0 < pulse.gain < 1


def test_a_quarter_turn_prewarped_is_the_plain_half_tangent() -> None:
    # At w T = pi/2 the factor is w itself: 1/(s/w + 1) becomes (z + 1)/(2 z).
    w = 2 * pi() * 50
    pulse = converted((w,), (1, w), Fraction(1, 200), "bilinear-prewarped", w)
    for c, expected in zip(pulse.numerator + pulse.denominator, (0.5, 0.5, 1, 0), strict=True):
        assert abs(c - Fraction(expected)) < Fraction(1, 10**300)


def test_images_under_the_difference_family_are_one_formula_at_four_weights() -> None:
    # z = (1 + p T (1 - theta))/(1 - p T theta) for p T = -1/2.
    expected = {
        "forward-difference": Fraction(1, 2),
        "backward-difference": Fraction(2, 3),
        "bilinear": Fraction(3, 5),
        "blended-difference": Fraction(15, 23),
    }
    for method, z in expected.items():
        pulse = converted((1,), (1, 5), Fraction(1, 10), method)
        assert list(pulse.denominator) == [1, -z]
        assert pulse.poles[0].value == float(z - 1)
