"""Spelling: numbers that read back to the same bits, text that cannot leave its comment."""

from __future__ import annotations

from fractions import Fraction

import numpy as np
import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.arithmetic.formats import FLOAT32, FLOAT64
from realize.arithmetic.realization import Realization, Section
from realize.arithmetic.sample import Sum, Term
from realize.errors import RealizeError
from realize.firmware.c_text import (
    WIDTH,
    Dialect,
    comment,
    comment_safe,
    dialect,
    hexadecimal,
    integer_constant,
    number_text,
    statement,
    wrapped,
)
from realize.firmware.emission import Emission
from tests.firmware.designs import PERIOD_S

SINGLE = Dialect("n", "float", "f", 9, "FLT", table=False, adds=False)
DOUBLE = Dialect("n", "double", "", 17, "DBL", table=False, adds=False)


@given(st.floats(width=32, allow_nan=False, allow_infinity=False))
@example(2.0**-149)
@example(3.4028234663852886e38)
@example(16777217.0 - 1)
def test_nine_digits_bring_back_every_float32(value: float) -> None:
    text = SINGLE.literal(value)
    assert text.endswith("f")
    assert float(np.float32(text[:-1])) == value


@given(st.floats(allow_nan=False, allow_infinity=False))
@example(5e-324)
@example(1.7976931348623157e308)
def test_seventeen_digits_bring_back_every_float64(value: float) -> None:
    assert float(DOUBLE.literal(value)) == value
    assert set(DOUBLE.literal(value)) & set(".e"), "a C literal without either would be an integer"


@given(st.floats())
@example(5e-324)
@example(-0.0)
def test_hexadecimal_text_brings_back_every_value(value: float) -> None:
    text = hexadecimal(value)
    back = float.fromhex(text)
    assert (back == value and np.signbit(back) == np.signbit(value)) or (back != back and value != value)
    assert "0p" not in text.replace("0x0p", "") or text.startswith(("0x1", "-0x1")), "no trailing zeros"


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (1.0, "0x1p+0"),
        (-0.5, "-0x1p-1"),
        (10.0, "0x1.4p+3"),
        (0.0, "0x0p+0"),
        (float("nan"), "nan"),
        (float("inf"), "inf"),
        (-float("inf"), "-inf"),
    ],
)
def test_hexadecimal_text_is_short(value: float, text: str) -> None:
    assert hexadecimal(value) == text


@given(st.text())
@example("*/ int x; /*")
@example("/*/ */* **//")
@example("???/ ??\\")
@example("a\\\nb\r\n\tc\x00\x7f\u2028\ud800\U0001f600")
def test_any_text_stays_inside_its_comment(text: str) -> None:
    safe = comment_safe(text)
    assert all(pair not in safe for pair in ("*/", "/*", "??", "\\", "  "))
    assert all(" " <= c <= "~" for c in safe)
    lines = comment(wrapped(text) or ["-"])
    whole = "\n".join(lines)
    assert whole.startswith("/*")
    assert whole.endswith("*/")
    assert whole.count("/*") == whole.count("*/") == 1
    assert max(map(len, lines)) <= WIDTH


@given(st.text())
def test_making_text_safe_twice_changes_nothing(text: str) -> None:
    assert comment_safe(comment_safe(text)) == comment_safe(text)


@pytest.mark.parametrize(
    ("text", "safe"),
    [
        ("kp + ki/s + kd*s", "kp + ki/s + kd*s"),
        ("a */ b", "a * / b"),
        ("10 \u00b5s", "10 <U+00B5>s"),
        ("one\n  two", "one two"),
        ("what??/", "what? ?/"),
        ("C:\\", "C:<U+005C>"),
    ],
)
def test_text_that_is_harmless_is_kept_and_the_rest_is_readable(text: str, safe: str) -> None:
    assert comment_safe(text) == safe


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0, "0"),
        (-1, "(-1)"),
        (2**31 - 1, "2147483647"),
        (2**31, "2147483648LL"),
        (-(2**31), "(-2147483648LL)"),
        (2**63 - 1, "9223372036854775807LL"),
        (2**63, None),
        (-(2**63), None),
    ],
)
def test_integer_constants_fit_the_preprocessor(value: int, text: str | None) -> None:
    assert integer_constant(value) == text


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (Fraction(1, 2000), "0.0005"),
        (Fraction(1, 3), "1/3"),
        (Fraction(-8), "-8"),
        (Fraction(10**50, 3), "about 3.3333e+49"),
        (Fraction(1, 10) + Fraction(1, 10**40), "about 0.1"),
    ],
)
def test_numbers_for_readers_are_exact_or_say_that_they_are_not(value: Fraction, text: str) -> None:
    assert number_text(value) == text


def test_a_sum_is_written_in_the_order_in_which_it_is_added() -> None:
    terms = Sum(
        "state.section1_1",
        (
            Term(1, None, 1.0, "state.section1_2"),
            Term(1, "section1_b1", 0.5, "input"),
            Term(-1, "section1_a1", 0.25, "section1_output"),
        ),
    ).terms
    assert SINGLE.total(terms) == ["state->section1_2", "+ n_section1_b1 * input", "- n_section1_a1 * section1_output"]
    table = SINGLE._replace(table=True, adds=True)
    assert table.total(terms)[2] == "+ coefficients->section1_minus_a1 * section1_output"
    assert table.stored([Sum("y", terms)]) == {"section1_b1": 0.5, "section1_minus_a1": -0.25}


def test_a_first_term_that_is_subtracted_keeps_its_sign() -> None:
    back = Term(-1, "section1_a1", 0.25, "y")
    assert SINGLE.total([back]) == ["-n_section1_a1 * y"]
    assert SINGLE._replace(adds=True).total([back]) == ["n_section1_minus_a1 * y"]
    assert SINGLE.total([Term(-1, None, 1.0, "y")]) == ["-y"]
    assert SINGLE.total([]) == ["0.0f"]


def test_a_long_statement_gets_a_line_for_each_term() -> None:
    pieces = ["a" * 60, "+ " + "b" * 60]
    assert statement("x = ", pieces) == ["    x = " + "a" * 60, "        + " + "b" * 60 + ";"]
    assert statement("x = ", ["a", "+ b"]) == ["    x = a + b;"]


@pytest.mark.parametrize("name", ["", "1st", "a b", "a-b", "_reserved", "na\u00efve", "x;"])
def test_a_name_that_is_no_identifier_is_refused(name: str) -> None:
    realization = Realization(FLOAT32, "direct", (), (Section((2.0,), ()),), PERIOD_S)
    with pytest.raises(RealizeError, match=r"design\.name"):
        dialect(Emission(name, realization, "bilinear", "2"))


def test_the_dialect_follows_the_format() -> None:
    for target, real in ((FLOAT32, "float"), (FLOAT64, "double")):
        realization = Realization(target, "direct", (), (Section((2.0,), ()),), PERIOD_S)
        assert dialect(Emission("n", realization, "bilinear", "2")).real == real
