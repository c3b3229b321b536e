"""Single corners under each method, where a closed form is published or one line of algebra.

Every source stands beside its check; figures from memory are recomputed apart from this project.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import e, exp, tanh

import pytest

from realize.algebra import polynomial as poly
from realize.algebra.expression import evaluate_constant
from realize.algebra.rounding import FLOAT32, FLOAT64, FloatFormat
from realize.arithmetic.realization import realization
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction

Make = Callable[..., TransferFunction]

#: Both sides of a comparison are rounded to a double once or twice each.
_TWO_ROUNDINGS = 2**-51


def _at_one(pulse: PulseTransferFunction) -> Fraction:
    return sum(pulse.numerator, Fraction(0)) / sum(pulse.denominator, Fraction(0))


@pytest.mark.parametrize("period_s", ["0.1", "1", "3"])
def test_corrected_impulse_response_of_a_lag_sums_to_half_t_coth_half_t(period_s: str, transfer: Make) -> None:
    """Jackson, IEEE Signal Processing Letters 7(10):273-275, 2000: the first sample counts half."""
    pulse = discretize(transfer("1/(s + 1)"), Fraction(period_s), "impulse-invariant").pulse
    half = float(period_s) / 2
    assert float(_at_one(pulse)) == pytest.approx(half / tanh(half), rel=_TWO_ROUNDINGS)


def test_corrected_and_uncorrected_sums_at_a_tenth_have_the_known_digits(
    transfer: Make, agrees: Callable[..., bool]
) -> None:
    """1.0008331945 with the correction, 1.0508331945 without it."""
    period_s = Fraction(1, 10)
    corrected = _at_one(discretize(transfer("1/(s + 1)"), period_s, "impulse-invariant").pulse)
    assert agrees(corrected, "1.0008331945")
    assert agrees(corrected + period_s / 2, "1.0508331945")


def test_correction_vanishes_where_the_impulse_response_starts_at_zero(transfer: Make) -> None:
    """``1/(s + 1)^2``: ``g(t) = t e^-t``, so ``Gd = T^2 e^-T z/(z - e^-T)^2``; from memory, by hand."""
    numerator, _ = discretize(transfer("1/(s + 1)^2"), Fraction(1), "impulse-invariant").rounded(FLOAT64)
    assert numerator == (0.0, exp(-1), 0.0)


def test_ramp_invariant_lag_has_the_printed_digits(transfer: Make, agrees: Callable[..., bool]) -> None:
    """Franklin, Powell & Workman: ``b0 = (T - 1 + e)/T``, ``b1 = (1 - e - T e)/T``; from memory, T = 1/2."""
    numerator, denominator = discretize(transfer("1/(s + 1)"), Fraction(1, 2), "ramp-invariant").rounded(FLOAT64)
    for value, printed in zip((*numerator, -denominator[1]), ("0.213061", "0.180408", "0.606531"), strict=True):
        assert agrees(value, printed)


#: Images of a real pole ``-x/T``, printed in three decimals for x = 1, 2, 4, 10, 100. From memory, recomputed.
_FAST_POLES = {
    "bilinear": ("0.333", "0", "-0.333", "-0.667", "-0.961"),
    "backward-difference": ("0.5", "0.333", "0.2", "0.091", "0.0099"),
    "blended-difference": ("0.467", "0.273", "0.111", "-0.026", "-0.130"),
    "step-invariant": ("0.368", "0.135", "0.018", "4.5e-5", "0.0000"),
    "pole-zero-mapped": ("0.368", "0.135", "0.018", "4.5e-5", "0.0000"),
}


@pytest.mark.parametrize("method", _FAST_POLES)
def test_fast_poles_land_where_printed(method: str, transfer: Make, agrees: Callable[..., bool]) -> None:
    for x, printed in zip((1, 2, 4, 10, 100), _FAST_POLES[method], strict=True):
        pulse = discretize(transfer("1/(s + x)", x=str(x)), Fraction(1), method).pulse
        assert agrees(-pulse.denominator[1], printed), x


def test_forward_difference_rings_beyond_one_and_is_unstable_beyond_two(transfer: Make) -> None:
    """``z = 1 - x``: between 0 and 1 up to x = 1, in the unit circle up to x = 2 (Euler)."""
    images = [
        -discretize(transfer("1/(s + x)", x=x), Fraction(1), "forward-difference").pulse.denominator[1]
        for x in ("1/2", "3/2", "5/2")
    ]
    assert images == [Fraction(1, 2), Fraction(-1, 2), Fraction(-3, 2)]


def test_blended_integrator_is_three_quarters_rectangle_one_quarter_trapezoid_reflected(transfer: Make) -> None:
    """Al-Alaoui, Electronics Letters 29(4):376-378, 1993: ``(7T/8)(z + 1/7)/(z - 1)``."""
    period_s = Fraction(1, 100)
    pulse = discretize(transfer("1/s"), period_s, "blended-difference").pulse
    assert pulse.numerator == poly.scale((Fraction(1), Fraction(1, 7)), Fraction(7, 8) * period_s)
    assert pulse.denominator == (Fraction(1), Fraction(-1))


@pytest.mark.parametrize(
    ("frequency_over_rate", "printed"),
    [
        ("0.01", "1.00033"),
        ("0.05", "1.0083"),
        ("0.1", "1.0343"),
        ("0.2", "1.1563"),
        ("0.25", "1.2732"),
        ("0.4", "2.449"),
    ],
)
def test_bilinear_integrator_warps_frequency_by_tan_x_over_x(
    frequency_over_rate: str,
    printed: str,
    transfer: Make,
    agrees: Callable[..., bool],
    response: Callable[..., complex],
) -> None:
    """Tustin 1947: ``Gd(exp(j w T)) = G(j (2/T) tan(w T/2))``.

    Quotient at x = w T/2 = pi f/rate, from memory, recomputed.
    """
    frequency_hz = Fraction(frequency_over_rate)
    integrator = transfer("1/s")
    ratio = response(integrator, frequency_hz) / response(
        discretize(integrator, Fraction(1), "bilinear").pulse, frequency_hz
    )
    assert agrees(ratio.real, printed)
    assert abs(ratio.imag) < 1e-15


def test_prewarping_scales_an_integral_gain_by_tan_x_over_x(transfer: Make, agrees: Callable[..., bool]) -> None:
    """The price of being exact at one frequency, here a tenth of the rate: 3.43 % more integral action."""
    w = evaluate_constant("2*pi/10", {}, "w")
    plain, warped = (
        realization(discretize(transfer("1/s"), Fraction(1), method, w).pulse, FLOAT64).integral
        for method in ("bilinear", "bilinear-prewarped")
    )
    assert agrees(warped[0] / plain[0], "1.0343")


@pytest.mark.parametrize(
    ("method", "variance", "worst_case"),
    [("backward-difference", "303.03", "33.333"), ("bilinear", "363.64", "36.364")],
)
def test_rolled_off_derivative_amplifies_white_noise_as_derived(
    method: str, variance: str, worst_case: str, transfer: Make, agrees: Callable[..., bool]
) -> None:
    """``s/(s/20 + 1)`` at T = 0.01: sum of squares and of magnitudes of its impulse response.

    Closed forms ``2/((Tf + T)(2 Tf + T))`` and ``2/(Tf + T)`` backward, ``2/(Tf (2 Tf + T))`` and ``4/(2 Tf + T)``
    bilinear, with Tf = 0.05: derived, recomputed; no source.
    """
    pulse = discretize(transfer("s/(s/20 + 1)"), Fraction(1, 100), method).pulse
    (b0, b1), pole = pulse.numerator, -pulse.denominator[1]
    second = b1 + pole * b0
    assert agrees(b0**2 + second**2 / (1 - pole**2), variance)
    assert agrees(abs(b0) + abs(second) / (1 - pole), worst_case)


def test_pure_derivative_is_an_oscillation_at_the_nyquist_frequency_under_bilinear(transfer: Make) -> None:
    """``(2/T)(z - 1)/(z + 1)``: as Tf goes to 0 the pole goes to -1; known trade trouble, by hand."""
    poles = [
        -discretize(transfer("s/(s*tf + 1)", tf=tf), Fraction(1), "bilinear").pulse.denominator[1]
        for tf in ("1/2", "1/20", "1/2000")
    ]
    assert poles == [0, Fraction(-9, 11), Fraction(-999, 1001)]


def test_one_lag_under_all_exponential_methods_has_the_pole_exp_minus_one(transfer: Make) -> None:
    for method in ("step-invariant", "ramp-invariant", "impulse-invariant", "pole-zero-mapped"):
        pulse = discretize(transfer("1/(s + 1)"), Fraction(1), method).pulse
        assert float(-pulse.denominator[1]) == pytest.approx(1 / e, rel=_TWO_ROUNDINGS), method


def test_bilinear_low_pass_has_the_published_coefficients_of_the_delta_operator(transfer: Make) -> None:
    """Middleton & Goodwin 1990, formulas from memory: ``k = w0 T/2``, ``Dn = 1 + k/Q + k^2``.

    ``T^2 d0 = 1 + a1 + a2 = 4 k^2/Dn`` and ``T d1 = 2 + a1 = (2 k/Q + 4 k^2)/Dn``; w0 = 3, Q = 5, T = 1/1000.
    """
    w0, quality, period_s = Fraction(3), Fraction(5), Fraction(1, 1000)
    pulse = discretize(transfer("9/(s^2 + 3/5*s + 9)"), period_s, "bilinear").pulse
    k = w0 * period_s / 2
    below = 1 + k / quality + k**2
    _, a1, a2 = pulse.denominator
    assert 1 + a1 + a2 == 4 * k**2 / below
    assert 2 + a1 == (2 * k / quality + 4 * k**2) / below


def test_second_order_low_pass_at_2_hz_and_500_khz_loses_its_gain_in_single_precision(
    transfer: Make, agrees: Callable[..., bool]
) -> None:
    """A question asked in public (dsp.stackexchange): ``1 + a1 + a2`` is 6.3e-10, and in float32 it is 0.

    In double precision each coefficient is off by at most 2^-53 (a1 near 2) and 2^-54, so the sum keeps
    1.7e-16/6.3e-10, 2.7e-7 of itself.
    """
    low_pass = transfer("w^2/(s^2 + sqrt(2)*w*s + w^2)", w="2*pi*2")
    pulse = discretize(low_pass, Fraction(1, 500000), "bilinear").pulse

    def at_one(target: FloatFormat) -> Fraction:
        (section,) = realization(pulse, target).sections
        return 1 + sum(map(Fraction, section.a), Fraction(0))

    exact = sum(pulse.denominator, Fraction(0))
    assert agrees(exact, "6.3e-10")
    assert at_one(FLOAT32) == 0
    assert abs(at_one(FLOAT64) / exact - 1) < 2.7e-7
