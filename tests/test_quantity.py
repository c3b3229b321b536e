"""Quantities: exact factors, rates in rad/s by 400 digits of pi, and figures that read back."""

from __future__ import annotations

import re
from fractions import Fraction

import mpmath
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.errors import RealizeError
from realize.quantity import (
    MAX_LENGTH,
    Dimension,
    dimension_meant,
    format_engineering,
    parse_quantity,
    plain_number,
    round_significant,
)

F = Fraction

DIMENSIONS: tuple[Dimension, ...] = (
    "rate",
    "angular frequency",
    "time",
    "percent",
    "decibel",
    "angle",
    "samples",
)


def parse(text: str, dimension: Dimension) -> Fraction:
    return parse_quantity(text, dimension, "servo.toml, [sampling] rate")


@pytest.mark.parametrize(
    ("text", "dimension", "expected"),
    [
        ("50 Hz", "rate", F(50)),
        ("2 kHz", "rate", F(2000)),
        ("1.5MHz", "rate", F(1500000)),
        ("1900 rad/s", "angular frequency", F(1900)),
        ("0.4 s", "time", F(2, 5)),
        ("1/20 s", "time", F(1, 20)),
        ("1 / 3 ms", "time", F(1, 3000)),
        ("500 us", "time", F(1, 2000)),
        ("500 \N{MICRO SIGN}s", "time", F(1, 2000)),
        ("500 \N{GREEK SMALL LETTER MU}s", "time", F(1, 2000)),
        ("5e-1 ns", "time", F(1, 2 * 10**9)),
        ("2 min", "time", F(120)),
        ("1 h", "time", F(3600)),
        ("+6 deg", "angle", F(6)),
        ("-6 deg", "angle", F(-6)),
        ("1 %", "percent", F(1)),
        ("0.5 dB", "decibel", F(1, 2)),
        ("1 sample", "samples", F(1)),
        ("3/2 samples", "samples", F(3, 2)),
        ("  7\tdeg ", "angle", F(7)),
        ("1e-3/2e-3 s", "time", F(1, 2)),
    ],
)
def test_units_are_exact_factors(text: str, dimension: Dimension, expected: Fraction) -> None:
    assert parse(text, dimension) == expected


@pytest.mark.parametrize(("text", "hertz"), [("300 Hz", 300), ("1/3 kHz", F(1000, 3)), ("1 MHz", 10**6)])
def test_hertz_become_radians_right_to_400_digits(text: str, hertz: Fraction) -> None:
    value = parse(text, "angular frequency") / hertz
    with mpmath.workdps(450):
        error = mpmath.mpf(value.numerator) / value.denominator / (2 * mpmath.pi) - 1
        assert abs(error) < mpmath.mpf(10) ** -400


@pytest.mark.parametrize(
    ("text", "dimension", "found", "allowed", "advice"),
    [
        ("2 khz", "rate", 'the unit "khz"', "Hz, kHz, MHz", "did you mean kHz"),
        ("2 kiloherz", "rate", 'the unit "kiloherz"', "Hz, kHz, MHz", "did you mean kHz?"),
        ("2 second", "time", 'the unit "second"', "s, ms, us", "did you mean s?"),
        ("1 sampels", "samples", 'the unit "sampels"', "samples, sample", "did you mean samples?"),
        ("2 hertz", "time", 'the unit "hertz"', "s, ms, us", "give a time"),
        ("2 msec", "time", 'the unit "msec"', "ms, us", "did you mean ms"),
        ("20 rad/sec", "angular frequency", 'the unit "rad/sec"', "rad/s", "did you mean rad/s"),
        ("5 V", "time", 'the unit "V"', "s, ms, us", "give a time"),
        ("3 rad/s", "rate", "belongs to an angular frequency", "Hz, kHz, MHz", "give a rate"),
        ("5 %", "decibel", "belongs to a percentage", "dB", "give a level"),
        ("5 dB", "percent", "belongs to a level", "%", "give a percentage"),
        ("1 sample", "time", "belongs to a number of samples", "ms", "give a time"),
        ("1 s", "samples", "belongs to a time", "samples", "give a number of samples"),
        ("2000", "rate", "without a unit", '"2 kHz"', "add the unit"),
        ("kHz", "rate", "no quantity", '"2 kHz"', "number first"),
        ("", "time", "no quantity", '"500 us"', "number first"),
        ("nan s", "time", "no quantity", "a number", "number first"),
        ("inf s", "time", "no quantity", "a number", "number first"),
        ("2*pi s", "time", 'the unit "*pi s"', "a number", "give a time"),
        ("1/0 s", "time", "zero", "a number", "check the number"),
        ("1/0.0 s", "time", "zero", "a number", "check the number"),
        ("1.2.3 s", "time", "which is no number", "a number", "check the number"),
        ("1,5 s", "time", 'the unit ",5 s"', "a number", "give a time"),
        ("1e999 s", "time", "the power of ten", "a number", "check the exponent"),
        ("1" * 801 + ".5 s", "time", "a number of 803 characters", "a number", "round it"),
        ("1" * MAX_LENGTH + " s", "time", f"a quantity of {MAX_LENGTH + 2} characters", "a number", "round the number"),
    ],
)
def test_each_mistake_names_the_key_what_is_allowed_and_what_to_try(
    text: str, dimension: Dimension, found: str, allowed: str, advice: str
) -> None:
    with pytest.raises(RealizeError) as caught:
        parse(text, dimension)
    assert caught.value.where == "servo.toml, [sampling] rate"
    assert found in caught.value.found
    assert allowed in caught.value.allowed
    assert advice in caught.value.advice


@pytest.mark.parametrize(
    ("text", "told"),
    [
        ("2 ms", ("ms", "0.002 for s")),
        ("-1/3 ms", ("ms", '"-1/3000" for s')),
        ("20 kHz", ("kHz", '20000 for Hz, or "2*pi*20000" for rad/s')),
        ("5 rad/s", ("rad/s", "5 for rad/s")),
        ("2 V", None),
        ("2*ms", None),
        ("1" * 41 + " s", None),
    ],
)
def test_a_time_or_frequency_is_told_as_the_plain_number_it_is(text: str, told: tuple[str, str] | None) -> None:
    assert plain_number(text) == told


@pytest.mark.parametrize(
    ("text", "meant"),
    [("1 sample", "samples"), ("1 sampels", "samples"), ("100 us", "time"), ("1 msec", "time"), ("1 V", "time")],
)
def test_the_dimension_that_was_meant_is_told_by_the_unit(text: str, meant: Dimension) -> None:
    assert dimension_meant(text, ("time", "samples")) == meant


pieces = st.lists(
    st.sampled_from(["1", "2.5", "1e3", "/", " ", "-", "s", "kHz", "rad/s", "%", "e", ".", "\N{MICRO SIGN}s", "deg"]),
    max_size=8,
).map("".join)


@given(st.one_of(st.text(), pieces), st.sampled_from(DIMENSIONS))
@example("1 " + " " * 20000 + "x", "time")
def test_any_text_is_read_or_refused_clearly(text: str, dimension: Dimension) -> None:
    try:
        value: object = parse(text, dimension)
    except RealizeError as error:
        value = error
    assert isinstance(value, Fraction | RealizeError)


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (F(2000), "Hz", "2 kHz"),
        (F(1, 2000), "s", "500 us"),
        (F(999999, 10**9), "s", "1 ms"),
        (F(40), "s", "40 s"),
        (F(3600), "s", "3600 s"),
        (F(1, 10**12), "s", "0.001 ns"),
        (F(0), "Hz", "0 Hz"),
        (F(-35, 10**4), "s", "-3.5 ms"),
        (F("1884.9556"), "rad/s", "1885 rad/s"),
        (F("12.3455"), "%", "12.346 %"),
        (F("12.3445"), "%", "12.344 %"),
        (F(5, 2), "", "2.5"),
        (F(12345678), "", "1.2346e+7"),
        (F(1, 30000), "", "3.3333e-5"),
        (1e-3, "s", "1 ms"),
        (F(10**13), "Hz", "1e+7 MHz"),
    ],
)
def test_figures_have_five_digits_and_the_prefix_that_suits_them(value: Fraction | float, unit: str, text: str) -> None:
    assert format_engineering(value, unit) == text


@given(
    st.fractions(min_value=-(10**12), max_value=10**12),
    st.sampled_from([("Hz", "rate"), ("s", "time"), ("%", "percent"), ("rad/s", "angular frequency")]),
)
def test_a_figure_reads_back_within_half_a_unit_of_its_fifth_digit(
    value: Fraction, unit: tuple[str, Dimension]
) -> None:
    text = format_engineering(value, unit[0])
    assert abs(parse(text, unit[1]) - value) <= abs(value) * F(5, 10**5)
    assert len(re.sub(r"e.*| .*|[^0-9]", "", text).strip("0")) <= 5


@pytest.mark.parametrize(
    ("value", "digits", "expected"),
    [
        (F(12345), 4, F(12340)),
        (F(12355), 4, F(12360)),
        (F(2, 3), 3, F(667, 1000)),
        (F(-2, 3), 1, F(-7, 10)),
        (F(0), 5, F(0)),
    ],
)
def test_rounding_to_digits_is_exact_with_ties_to_even(value: Fraction, digits: int, expected: Fraction) -> None:
    assert round_significant(value, digits) == expected


@given(st.fractions())
def test_seventeen_digits_keep_a_double_apart_from_its_neighbours(value: Fraction) -> None:
    assert float(round_significant(F(float(value)), 17)) == float(value)
