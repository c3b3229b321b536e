from __future__ import annotations

from fractions import Fraction
from typing import Any

import pytest

from realize.algebra import exponential
from realize.algebra import polynomial as poly
from realize.algebra.irrational import pi
from realize.algebra.rounding import FLOAT32, FLOAT64
from realize.errors import RealizeError, Refused
from realize.methods import METHODS, coefficients, conversion, discretize, invariant, mapped
from realize.transfer import TransferFunction

EXPONENTIAL = ("step-invariant", "ramp-invariant", "impulse-invariant", "pole-zero-mapped")
OTHER = tuple(method for method in METHODS if method not in EXPONENTIAL)


def transfer(numerator: tuple[Any, ...], denominator: tuple[Any, ...]) -> TransferFunction:
    return TransferFunction.from_polynomials(numerator, denominator)


def exact_at(method: str, rad_s: Fraction) -> Fraction | None:
    return rad_s if method == "bilinear-prewarped" else None


def test_the_nine_methods_stand_in_the_order_of_the_tables() -> None:
    assert tuple(METHODS) == (
        "step-invariant",
        "ramp-invariant",
        "impulse-invariant",
        "forward-difference",
        "backward-difference",
        "bilinear",
        "bilinear-prewarped",
        "blended-difference",
        "pole-zero-mapped",
    )


def test_an_unknown_method_is_named_beside_the_known_ones() -> None:
    with pytest.raises(RealizeError) as error:
        discretize(transfer((1,), (1, 1)), Fraction(1), "trapezoid")
    assert not isinstance(error.value, Refused)
    assert error.value.where == "method"
    assert "'trapezoid'" in error.value.found
    assert all(name in error.value.allowed for name in METHODS)
    with pytest.raises(RealizeError, match="unknown name 'trapezoid'"):
        coefficients(transfer((1,), (1, 1)), Fraction(1), "trapezoid", FLOAT64)


@pytest.mark.parametrize("method", METHODS)
def test_an_improper_function_is_refused_by_every_method(method: str) -> None:
    with pytest.raises(Refused) as refusal:
        discretize(transfer((9, 420, 1800), (100, 0)), Fraction(1, 100), method, exact_at(method, Fraction(1)))
    assert refusal.value.where == "transfer"
    assert refusal.value.found.startswith("it is improper")
    assert "roll-off" in refusal.value.advice
    with pytest.raises(Refused, match="it is improper"):
        coefficients(transfer((9, 420, 1800), (100, 0)), Fraction(1, 100), method, FLOAT64)


@pytest.mark.parametrize("method", METHODS)
def test_coefficients_are_equally_many_and_the_denominator_is_monic(method: str) -> None:
    g = transfer((2, 5), (1, 3, 7, 0))
    pulse = discretize(g, Fraction(1, 20), method, exact_at(method, Fraction(2))).pulse
    assert len(pulse.numerator) == len(pulse.denominator) == g.order + 1
    assert pulse.denominator[0] == 1
    assert pulse.period_s == Fraction(1, 20)
    assert sum(pole.count for pole in pulse.poles) == g.order


@pytest.mark.parametrize("method", EXPONENTIAL)
def test_growth_beyond_a_double_is_refused_before_anything_is_computed(
    method: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    def never(*arguments: object) -> None:
        raise AssertionError("the exponential was taken")

    for module in (exponential, invariant, mapped):
        for name in ("image_polynomial", "pulse_numerator", "exponential"):
            if hasattr(module, name):
                monkeypatch.setattr(module, name, never)
    g = transfer((1,), poly.multiply((1, -1), poly.power((1, 1), 7)))
    with pytest.raises(Refused) as refusal:
        discretize(g, Fraction(10**5), method)
    assert refusal.value.where == "method"
    assert "grows by exp(1e+05) in one period" in refusal.value.found
    assert refusal.value.allowed == "growth of at most exp(709) per period"
    with pytest.raises(Refused, match="grows by exp"):
        coefficients(g, Fraction(10**5), method, FLOAT64)


def test_growth_of_a_zero_is_refused_where_zeros_are_mapped_only() -> None:
    g = transfer((-1, 1), (1, 2, 1))
    with pytest.raises(Refused, match="grows by exp"):
        discretize(g, Fraction(1000), "pole-zero-mapped")
    for method in EXPONENTIAL[:3]:
        assert discretize(g, Fraction(1000), method).pulse.gain != 0


@pytest.mark.parametrize("method", OTHER)
def test_growth_is_no_matter_for_methods_without_exponentials(method: str) -> None:
    g = transfer((1,), poly.multiply((1, -1), poly.power((1, 1), 7)))
    pulse = discretize(g, Fraction(10**5), method, exact_at(method, Fraction(1, 10**6))).pulse
    assert sum(pole.count for pole in pulse.poles) == 8


@pytest.mark.parametrize("method", EXPONENTIAL)
@pytest.mark.parametrize("turns", [1, 3])
def test_a_pole_that_falls_on_z_1_without_being_0_is_refused_with_its_place(method: str, turns: int) -> None:
    w = 2 * pi() * 200 * turns
    with pytest.raises(Refused) as refusal:
        discretize(transfer((1,), (1, 0, w**2)), Fraction(1, 200), method)
    assert refusal.value.where == "method"
    assert "falls on z = 1 although it is not 0" in refusal.value.found
    assert f"{float(w):.5g}j" in refusal.value.found


@pytest.mark.parametrize("method", EXPONENTIAL[:3])
def test_coefficients_alone_do_not_need_the_roots_that_make_the_whole_refused(method: str) -> None:
    g = transfer((1,), (1, 0, (2 * pi() * 200) ** 2))
    _, denominator = coefficients(g, Fraction(1, 200), method, FLOAT64)
    assert denominator == (1.0, -2.0, 1.0)


@pytest.mark.parametrize("method", METHODS)
def test_coefficients_alone_are_found_without_carrying_anything(method: str, monkeypatch: pytest.MonkeyPatch) -> None:
    g = transfer((2, 5), (1, 3, 7, 0))
    whole = discretize(g, Fraction(1, 20), method, exact_at(method, Fraction(2)))

    def never(*arguments: object) -> None:
        raise AssertionError("more than the coefficients was computed")

    for name in ("_carried", "_image", "isolate"):
        monkeypatch.setattr(conversion, name, never)
    alone = coefficients(g, Fraction(1, 20), method, FLOAT64, exact_at(method, Fraction(2)))
    assert alone == whole.rounded(FLOAT64)


def test_a_coefficient_beyond_the_format_is_refused_also_alone() -> None:
    g = transfer((10**40,), (1, 1))
    with pytest.raises(Refused, match="beyond the largest float32"):
        coefficients(g, Fraction(1, 2), "step-invariant", FLOAT32)


def test_a_zero_that_falls_on_z_1_without_being_0_is_refused_by_the_mapping() -> None:
    w = 2 * pi() * 200
    g = transfer((1, 0, w**2), (1, 3, 5))
    with pytest.raises(Refused, match="falls on z = 1 although it is not 0"):
        discretize(g, Fraction(1, 200), "pole-zero-mapped")
    assert discretize(g, Fraction(1, 200), "step-invariant").pulse.zeros_minus_poles_at_one == 0


@pytest.mark.parametrize("method", OTHER)
def test_methods_that_do_not_alias_take_the_same_pole(method: str) -> None:
    w = 2 * pi() * 200
    pulse = discretize(transfer((1,), (1, 0, w**2)), Fraction(1, 200), method, exact_at(method, Fraction(9))).pulse
    assert pulse.zeros_minus_poles_at_one == 0


@pytest.mark.parametrize("method", EXPONENTIAL)
def test_half_a_turn_per_period_is_a_double_pole_at_minus_one(method: str) -> None:
    # 2 pi 100 rad/s at 200 Hz: exp(+-j pi) = -1.
    g = transfer((1,), (1, 0, (2 * pi() * 100) ** 2))
    _, denominator = discretize(g, Fraction(1, 200), method).rounded(FLOAT64)
    assert denominator == (1.0, 2.0, 1.0)


@pytest.mark.parametrize(
    "fraction_of_pi",
    [Fraction(1), Fraction(1) + Fraction(1, 10**30), Fraction(3, 2), Fraction(10)],
    ids=["at", "just above", "above", "far above"],
)
def test_prewarping_at_or_above_half_the_rate_is_refused_with_both_frequencies(fraction_of_pi: Fraction) -> None:
    with pytest.raises(Refused) as refusal:
        discretize(transfer((1,), (1, 1)), Fraction(1, 200), "bilinear-prewarped", fraction_of_pi * pi() * 200)
    assert refusal.value.where == "method"
    assert f"{float(100 * fraction_of_pi):.5g} Hz" in refusal.value.found
    assert "half the sample rate, 100 Hz" in refusal.value.found


@pytest.mark.parametrize(
    "rad_s",
    [None, Fraction(0), Fraction(-5)],
    ids=["not given", "zero", "negative"],
)
def test_prewarping_needs_a_positive_frequency(rad_s: Fraction | None) -> None:
    with pytest.raises(RealizeError):
        discretize(transfer((1,), (1, 1)), Fraction(1, 200), "bilinear-prewarped", rad_s)


@pytest.mark.parametrize(
    "rad_s", [Fraction(1, 10**70), 200 * pi() * (1 - Fraction(1, 10**60))], ids=["next to 0", "next to half the rate"]
)
def test_prewarping_at_the_very_ends_is_done_or_refused_in_words(rad_s: Fraction) -> None:
    # Next to 0 it is the bilinear method; next to half the rate the factor of s vanishes.
    g = transfer((1,), (1, 1))
    try:
        obtained = discretize(g, Fraction(1, 200), "bilinear-prewarped", rad_s).rounded(FLOAT64)
    except Refused:
        return
    near_0 = discretize(g, Fraction(1, 200), "bilinear").rounded(FLOAT64)
    assert obtained in (near_0, ((1.0, 1.0), (1.0, 1.0)))
