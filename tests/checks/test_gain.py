from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.checks import Tolerances
from realize.checks.counterpart import Counterpart
from realize.checks.gain import check_converter_step, check_low_frequency_gain
from tests.checks.designs import DEFAULT, converted, monic, pulse, transfer


def gain(text: str, numerator: list, denominator: list, period_s: str = "0.1", **tolerance: str):  # type: ignore
    tolerances = Tolerances.of([(k, Fraction(v)) for k, v in tolerance.items()])
    return check_low_frequency_gain(
        transfer(text), Counterpart(pulse(numerator, denominator, period_s)), "stored", tolerances
    )


@pytest.mark.parametrize("method", ["forward-difference", "bilinear", "backward-difference", "pole-zero-mapped"])
@pytest.mark.parametrize("text", ["3/(s + 2)", "2 + 5/s", "(s + 1)/s^2", "s^2/((s + 1)*(s + 2))", "-4"])
def test_the_methods_that_keep_it_keep_it(text: str, method: str) -> None:
    check = check_low_frequency_gain(transfer(text), Counterpart(converted(text, "1/8", method)), "exact", DEFAULT)
    assert check.verdict == "within"
    assert check.difference == pytest.approx(0, abs=1e-200)
    assert check.reference == check.obtained == float(transfer(text).low_frequency_gain)


def test_a_method_that_keeps_one_zero_of_two_at_z_1_is_found_out() -> None:
    # The step response of s^2/((s + 1)(s + 2)) integrates to 0, but its samples do not add up to 0.
    text = "s^2/((s + 1)*(s + 2))"
    kept_one = Counterpart(converted(text, "1/8", "step-invariant"))
    check = check_low_frequency_gain(transfer(text), kept_one, "exact", DEFAULT)
    assert (check.verdict, check.reason) == ("out", "the gain goes as (z - 1)^1, and should as s^2")


@given(st.fractions(min_value=-100, max_value=100, max_denominator=10**30))
def test_the_difference_is_exact(percent: Fraction) -> None:
    # Gd = g (1 - 1/2)/(z - 1/2) has the gain g at z = 1.
    g = 1 + percent / 100
    check = gain("2/(s + 2)", [g / 2], [1, "-1/2"])
    # A millionth of the tolerance, 0.1 %, counts as nothing.
    assert check.difference == (float(abs(percent)) if float(abs(percent)) > 0.1 * 1e-6 else 0)
    assert check.obtained == float(g)


def test_the_gain_of_an_integrator_is_counted_per_second() -> None:
    # R/(z - 1) at period T integrates at R/T per second.
    assert gain("5/s", ["1/2"], [1, -1]).difference == 0
    assert gain("5/s", ["1/2"], [1, -1], "0.2").difference == 50


@pytest.mark.parametrize(
    ("text", "numerator", "denominator", "tolerance"),
    [
        ("1/(s + 1)", ["1001/2000"], [1, "-1/2"], 0.1),
        ("1/s", ["101/1000"], [1, -1], 1.0),
    ],
)
def test_the_tolerance_depends_on_whether_there_is_a_steady_value(
    text: str, numerator: list[str], denominator: list[str], tolerance: float
) -> None:
    check = gain(text, numerator, denominator)
    assert (check.tolerance, check.verdict, check.difference) == (tolerance, "within", tolerance)
    assert gain(text, numerator, denominator, low_frequency_gain="0.05").verdict == "out"
    assert gain(text, numerator, denominator, low_frequency_gain="2").tolerance == 2.0


@pytest.mark.parametrize(
    ("text", "denominator", "reason"),
    [
        ("1/s", [1, "-0.9999"], "the gain goes as (z - 1)^0, and should as s^-1"),
        ("1/(s + 1)", [1, -1], "the gain goes as (z - 1)^-1, and should as s^0"),
    ],
)
def test_a_pole_off_z_1_is_out_without_a_figure(text: str, denominator: list[str], reason: str) -> None:
    check = gain(text, [1], denominator)
    assert (check.verdict, check.difference, check.obtained, check.reason) == ("out", None, None, reason)


def test_coefficients_that_are_carried_to_finitely_many_bits_keep_the_roots_at_1() -> None:
    # Prewarping multiplies 1/s by a number that is known to a thousand bits only.
    from realize.methods import discretize

    g = transfer("2 + 5/s")
    discrete = discretize(g, Fraction(1, 10), "bilinear-prewarped", Fraction(7)).pulse
    check = check_low_frequency_gain(g, Counterpart(discrete), "exact", DEFAULT)
    # The residue of an integrator scales by tan(wT/2)/(wT/2).
    assert check.difference == pytest.approx(100 * (0.36502849483 / 0.35 - 1), rel=1e-9)


def test_the_converter_step_is_the_feed_through_of_one_count_in_percent_of_the_range() -> None:
    g, discrete = transfer("(40*s + 1)/(s + 1)"), pulse([30, -29], [1, 0], "0.1")
    check = check_converter_step(g, discrete, "stored", DEFAULT, Fraction(1, 200), Fraction(2))
    assert (check.reference, check.obtained, check.difference, check.verdict) == (10.0, 7.5, 7.5, "out")
    assert check.tolerance == 5
    down = pulse([-20, 19], [1, 0], "0.1")
    assert check_converter_step(g, down, "stored", DEFAULT, Fraction(1, 200), Fraction(2)).difference == 5.0
    assert check_converter_step(g, down, "stored", DEFAULT, Fraction(1, 200), Fraction(2)).verdict == "within"


def test_a_counterpart_that_answers_a_sample_later_has_no_converter_step() -> None:
    later = pulse([30], monic("1/2"), "0.1")
    check = check_converter_step(transfer("30/(s + 1)"), later, "stored", DEFAULT, Fraction(1), Fraction(2))
    assert (check.difference, check.verdict) == (0.0, "within")


@pytest.mark.parametrize(
    ("per_count", "span", "reason"),
    [
        (None, Fraction(2), "it needs per_count of the input"),
        (Fraction(1), None, "it needs the output range"),
        (None, None, "it needs per_count of the input"),
    ],
)
def test_the_converter_step_needs_both_signals(per_count: Fraction | None, span: Fraction | None, reason: str) -> None:
    check = check_converter_step(transfer("1"), pulse([1], [1], "1"), "stored", DEFAULT, per_count, span)
    assert (check.verdict, check.reason, check.difference) == ("undefined", reason, None)
