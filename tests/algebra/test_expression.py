"""Expressions: exact values by independent arithmetic, round trips, and a clear refusal of everything else."""

from __future__ import annotations

import contextlib
import re
import time
from collections.abc import Callable
from fractions import Fraction

import mpmath
import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.expression import (
    DelayedTransfer,
    decimal_text,
    evaluate_constant,
    evaluate_delayed_transfer,
    evaluate_transfer,
    exact_text,
    format_polynomial,
    format_transfer,
    names_in,
    read_exact,
)
from realize.algebra.expression.grammar import MAX_NESTING
from realize.algebra.expression.printing import MAX_EXACT_DIGITS
from realize.algebra.expression.ratio import MAX_DEGREE, MAX_EXPONENT, UnfitError
from realize.algebra.expression.tokens import MAX_DIGITS, MAX_LENGTH
from realize.errors import RealizeError, Refused
from realize.transfer import TransferFunction

F = Fraction
VALUES = {"kp": F("4.2"), "ki": F(18), "kd": F("0.09"), "tau": F(1, 500), "zero": F(0), "w_1": F(3)}

#: Long enough for any machine that is not stuck: the slowest of the hostile texts takes two seconds on a slow one.
NOT_A_HANG_S = 20.0


def constant(text: str) -> Fraction:
    return evaluate_constant(text, VALUES, "here")


def transfer(text: str) -> tuple[poly.Rationals, poly.Rationals]:
    return evaluate_transfer(text, VALUES, "here")


def outcome(text: str) -> tuple[poly.Rationals, poly.Rationals] | RealizeError:
    try:
        return transfer(text)
    except RealizeError as error:
        return error


def refusal(text: str) -> RealizeError:
    refused = outcome(text)
    assert isinstance(refused, RealizeError)
    return refused


def same_ratio(a: tuple[poly.Rationals, poly.Rationals], b: tuple[poly.Rationals, poly.Rationals]) -> bool:
    """Whether two ratios are alike factor by factor: only a common number may differ."""
    lengths = [len(p) for p in a] == [len(p) for p in b]
    return lengths and poly.multiply(a[0], b[1]) == poly.multiply(b[0], a[1])


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("0.1", F(1, 10)),
        ("1.5e-3", F(15, 10000)),
        ("1E+2", F(100)),
        (".5", F(1, 2)),
        ("5.", F(5)),
        ("1 - 2 - 3", F(-4)),
        ("8/4/2", F(1)),
        ("2+3*4^2", F(50)),
        ("2^3^2", F(512)),
        ("-2^2", F(-4)),
        ("2^-2", F(1, 4)),
        ("2*-3", F(-6)),
        ("--3", F(3)),
        ("-(+3)", F(-3)),
        ("(1+2)*3", F(9)),
        ("kp*zero", F(0)),
        ("zero^3", F(0)),
        ("kp^0", F(1)),
        ("w_1/kd", F(300, 9)),
        ("sqrt(9/16)", F(3, 4)),
        ("sqrt(0)", F(0)),
        ("sqrt(2*8)", F(4)),
        ("pi/pi", F(1)),
        ("sqrt(2)/sqrt(2)", F(1)),
        ("pi - pi", F(0)),
        ("1e400*1e-400", F(1)),
        ("\t1\n+\r\n1 ", F(2)),
        ("(-1)^400", F(1)),
    ],
)
def test_constants_are_exact(text: str, expected: Fraction) -> None:
    assert constant(text) == expected


@pytest.mark.parametrize(
    ("text", "numerator", "denominator"),
    [
        ("kp", (F("4.2"),), (F(1),)),
        ("0*s", (), (F(1),)),
        ("kd*s + kp", (F("0.09"), F("4.2")), (F(1),)),
        ("s^2/4", (F(1, 4), F(0), F(0)), (F(1),)),
        ("-s^2", (F(-1), F(0), F(0)), (F(1),)),
        ("s^-2", (F(1),), (F(1), F(0), F(0))),
        ("(s+1)/(s+1)", (F(1), F(1)), (F(1), F(1))),
        ("s*(1/s)", (F(1), F(0)), (F(1), F(0))),
        ("1/s + 1/s", (F(2),), (F(1), F(0))),
        ("1/s + 1/s^2", (F(1), F(1)), (F(1), F(0), F(0))),
        ("1/(2*s) + 1/(3*s)", (F(5),), (F(6), F(0))),
        ("1/(s+1) + 1/((s+1)*(s+2))", (F(1), F(3)), (F(1), F(3), F(2))),
        ("1/(2-s)", (F(-1),), (F(1), F(-2))),
    ],
)
def test_sums_take_the_least_common_denominator_and_nothing_is_cancelled(
    text: str, numerator: poly.Rationals, denominator: poly.Rationals
) -> None:
    assert same_ratio(transfer(text), (numerator, denominator))


def test_a_polynomial_keeps_its_coefficients_as_written() -> None:
    assert transfer("kd*s + 1/3") == ((F("0.09"), F(1, 3)), (F(1),))


def test_a_pid_with_filtered_derivative_has_no_cancellation() -> None:
    pid = TransferFunction.from_polynomials(*transfer("kp + ki/s + kd*s/(tau*s + 1)"))
    assert pid.cancelled == (1,)
    assert pid.order == 2


def test_a_growing_mode_hidden_by_a_difference_is_refused_later() -> None:
    with pytest.raises(Refused, match="hides a growing mode at s = 1"):
        TransferFunction.from_polynomials(*transfer("s/(s-1) - 1/(s-1)"))


@pytest.mark.parametrize(("text", "factor"), [("2*pi*50", F(100)), ("pi/3", F(1, 3)), ("pi^2/pi", F(1))])
def test_pi_is_right_to_400_digits(text: str, factor: Fraction) -> None:
    value = constant(text) / factor
    with mpmath.workdps(450):
        error = mpmath.mpf(value.numerator) / value.denominator / mpmath.pi - 1
        assert abs(error) < mpmath.mpf(10) ** -400


# -- a second evaluator: plain fractions at one point --------------------------------------------------------

Evaluator = Callable[[Fraction], Fraction]
Tree = tuple[str, Evaluator]

OPERATIONS: dict[str, Callable[[Fraction, Fraction], Fraction]] = {
    "+": lambda a, b: a + b,
    "-": lambda a, b: a - b,
    "*": lambda a, b: a * b,
    "/": lambda a, b: a / b,
}


def number_leaf(text: str) -> Tree:
    return text, lambda s: F(text)


def name_leaf(name: str) -> Tree:
    return name, lambda s: VALUES[name]


def binary(operator: str, left: Tree, right: Tree) -> Tree:
    return f"({left[0]}) {operator} ({right[0]})", lambda s: OPERATIONS[operator](left[1](s), right[1](s))


def powered(base: Tree, exponent: int) -> Tree:
    return f"({base[0]})^{exponent}", lambda s: base[1](s) ** exponent


def negated(operand: Tree) -> Tree:
    return f"-({operand[0]})", lambda s: -operand[1](s)


leaves = st.one_of(
    st.just(("s", lambda s: s)),
    st.sampled_from(["1", "2.5", "0.03", "4e-2", "0"]).map(number_leaf),
    st.sampled_from(sorted(VALUES)).map(name_leaf),
)
trees = st.recursive(
    leaves,
    lambda inner: st.one_of(
        st.builds(binary, st.sampled_from(sorted(OPERATIONS)), inner, inner),
        st.builds(powered, inner, st.integers(-2, 3)),
        st.builds(negated, inner),
    ),
    max_leaves=12,
)
points = st.fractions(min_value=-5, max_value=5, max_denominator=7)


@given(trees, points)
def test_the_ratio_has_the_value_that_plain_fractions_give(tree: Tree, point: Fraction) -> None:
    text, evaluate = tree
    try:
        expected = evaluate(point)
        numerator, denominator = transfer(text)
    except (ZeroDivisionError, RealizeError):
        assume(False)
    assume(poly.evaluate(denominator, point) != 0)
    assert poly.evaluate(numerator, point) / poly.evaluate(denominator, point) == expected


@given(trees)
def test_only_a_division_by_zero_or_a_bound_refuses_a_well_formed_expression(tree: Tree) -> None:
    result = outcome(tree[0])
    if isinstance(result, RealizeError):
        assert re.search("division by zero|zero to the power|degree", result.found)


# -- printing -------------------------------------------------------------------------------------------------

coefficients = st.one_of(
    st.integers(-(10**25), 10**25).map(F),
    st.fractions(max_denominator=10**12),
    st.decimals(allow_nan=False, allow_infinity=False, min_value=-(10**20), max_value=10**20, places=20).map(F),
    st.builds(lambda m, e: F(m) * F(10) ** e, st.integers(-999, 999), st.integers(-300, 300)),
)
polynomials = st.lists(coefficients, min_size=1, max_size=6).map(lambda p: poly.trimmed(p)).filter(bool)


@given(polynomials)
@example((F(1),))
@example((F(-1), F(0)))
@example((F(1, 10**10),))
@example((F(10**17),))
@example((F(123456789012345678, 10**30), F(-1, 3)))
def test_a_printed_polynomial_reads_back_exactly(p: poly.Rationals) -> None:
    assert transfer(format_polynomial(p)) == (p, (F(1),))


@given(polynomials, polynomials)
@example((F(2),), (F(1), F(0)))
@example((F(1), F(1)), (F(-3), F(0)))
@example((F(1, 3),), (F(1, 7), F(2)))
def test_a_printed_transfer_reads_back_exactly(numerator: poly.Rationals, denominator: poly.Rationals) -> None:
    read = transfer(format_transfer(numerator, denominator))
    assert same_ratio(
        read, (numerator, denominator) if len(denominator) > 1 else (poly.scale(numerator, 1 / denominator[0]), (F(1),))
    )


@pytest.mark.parametrize(
    ("p", "text"),
    [
        ((), "0"),
        ((F(1),), "1"),
        ((F("0.09"), F(-1), F(1, 3)), "0.09*s^2 - s + 1/3"),
        ((F(-1), F(0), F(0)), "-s^2"),
        ((F(1, 10**6),), "1e-6"),
        ((F(12, 10**6),), "1.2e-5"),
        ((F(10**20),), "1e20"),
        ((F(1234, 100), F(0)), "12.34*s"),
    ],
)
def test_polynomials_are_printed_the_way_people_write_them(p: poly.Rationals, text: str) -> None:
    assert format_polynomial(p) == text


def test_a_decimal_beyond_the_powers_of_ten_that_are_read_is_printed_as_a_quotient() -> None:
    assert format_polynomial((F(3, 10**410),)) == f"3/1{'0' * 410}"


def test_the_variable_can_be_z() -> None:
    assert format_transfer((F(1), F(2)), (F(1), F(-1)), "z") == "(z + 2)/(z - 1)"


@given(st.fractions())
@example(F(0))
def test_an_exact_number_reads_back_from_its_text(value: Fraction) -> None:
    assert read_exact(exact_text(value)) == value


def test_an_exact_number_may_be_longer_than_the_4300_digits_that_str_converts() -> None:
    value = F(10) ** 5000 + F(1, 3**9000)
    assert read_exact(exact_text(value)) == value


@pytest.mark.parametrize("text", ["", "1.5", "+1", "1/-2", "0x1", "1 /2", "1/2/3", "\u0663", "1_0"])
def test_what_is_no_exact_number_is_not_read_as_one(text: str) -> None:
    assert read_exact(text) is None


@pytest.mark.parametrize("text", ["1/0", "9" * (MAX_EXACT_DIGITS + 1)])
def test_exact_numbers_are_bounded_and_have_a_denominator(text: str) -> None:
    with pytest.raises(UnfitError):
        read_exact(text)


@pytest.mark.parametrize(
    ("text", "digits"),
    [
        # pi = 3.14159 26535 89793 23846 264..., from memory; sqrt(2) = 1.41421 35623 73095 04880 168...
        ("pi", "3.1415926535897932385"),
        ("sqrt(2)", "1.4142135623730950488"),
        ("1/4", "0.25"),
        ("-2e30/3", "-6.6666666666666666667E+29"),
    ],
)
def test_the_decimal_twin_has_20_digits(text: str, digits: str) -> None:
    assert decimal_text(constant(text)) == digits


# -- refusals -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "column", "found", "advice"),
    [
        ("2s", 2, '"s" right after "2"', r"write 2\*s"),
        ("2(s+1)", 2, r'"\(" right after "2"', r"write 2\*\("),
        ("(s+1)(s+2)", 6, r'"\(" right after "\)"', r"write \)\*\("),
        (")(", 1, r'"\)" where an operand is expected', "complete"),
        ("s 2", 3, '"2" right after "s"', r"write s\*2"),
        ("1.2.3", 4, '".3" right after "1.2"', "write"),
        ("0x10", 2, '"x10" right after "0"', "write"),
        ("2e", 2, '"e" right after "2"', "write"),
        ("2 ms*s + 1", 3, '"ms" right after "2"', r"write 2\*ms and define ms under .*; a unit is not written"),
        ("2 Tau", 3, '"Tau" right after "2"', r"write 2\*Tau$"),
        ("(1 2)", 4, '"2" right after "1"', "write"),
        (f"({'9' * 50} 2)", 53, "right after", r"write a \* between them"),
        ("s**2", 2, r"\*\*", r"s\^2 instead of s\*\*2"),
        ("s + ", 4, "the end of the expression", "complete"),
        ("*s", 1, r'"\*" where an operand is expected', "complete"),
        ("()", 2, r'"\)" where an operand', "complete"),
        ("(s", 1, "never closed", "close it"),
        ("sqrt(2", 5, "never closed", "close it"),
        ("s)", 2, r"a \) without its \(", "remove it"),
        ("kq + 1", 1, 'the unknown name "kq"', "define kq under"),
        ("2*TAU", 3, 'the unknown name "TAU"', "did you mean tau?"),
        ("S + 1", 1, 'the unknown name "S"', "did you mean s?"),
        ("Pi", 1, 'the unknown name "Pi"', "did you mean pi?"),
        ("momentum", 1, "unknown name", "define momentum under"),
        ("nan", 1, "nan, which is no finite number", "write a number"),
        ("1 + inf", 5, "inf, which is no finite number", "write a number"),
        ("sqrt", 1, "sqrt without parentheses", "sqrt"),
        ("1 + 2*exp(-0.1*s)", 7, "exp, which makes no ratio", "dead time belongs to the plant: write it under"),
        ("exp", 1, "exp, which makes no ratio", "dead time belongs to the plant"),
        ("exq(1)", 1, 'the unknown function "exq"', "a ratio of polynomials"),
        ("kp(s)", 1, "kp used like a function", r"write kp\*\("),
        ("s(1)", 1, "s used like a function", r"write s\*\("),
        ("pi(1)", 1, "pi used like a function", "write"),
        ("sqr(2)", 1, 'the unknown function "sqr"', "did you mean sqrt"),
        ("sinus(2)", 1, 'the unknown function "sinus"', "a ratio of polynomials"),
        ("__import__('os')", 12, "the character", "remove it"),
        ("s.real", 2, "a point that belongs to no number", "no points"),
        ("(s).__class__", 4, "a point that belongs to no number", "no points"),
        ("s[0]", 2, r"the character \"\[\"", r"write \("),
        ("0,5*s", 2, 'the character ","', "a decimal point"),
        ("2 %", 3, 'the character "%"', "write /100"),
        ("s \N{MINUS SIGN} 1", 3, r"U\+2212", "write -"),
        ("2\N{MULTIPLICATION SIGN}s", 2, r"U\+00D7", r"write \*"),
        ("s\N{SUPERSCRIPT TWO}", 2, r"U\+00B2", r"write \^2"),
        ("\N{GREEK SMALL LETTER OMEGA}^2", 1, r"U\+03C9", "ASCII"),
        ("s\N{ZERO WIDTH SPACE}+1", 2, r"U\+200B", "remove it"),
        ("\N{FULLWIDTH DIGIT ONE}", 1, r"U\+FF11", "remove it"),
        ("\N{ARABIC-INDIC DIGIT THREE}", 1, r"U\+0663", "remove it"),
        ("s\x00", 2, r"U\+0000", "remove it"),
        ("1/0", 2, "a division by zero", "values that make it zero"),
        ("s/(kp - 4.2)", 2, "a division by zero", "values that make it zero"),
        ("zero^-1", 5, "zero to the power -1", "values"),
        ("0^0", 2, "zero to the power 0", "values"),
        ("(s-s)^0", 6, "zero to the power 0", "values"),
        ("s^0.5", 2, "an exponent that is not an integer", "sqrt"),
        ("s^s", 2, "an exponent that contains s", "ratio of polynomials"),
        ("sqrt(s)", 1, "the square root of something that contains s", "approximates"),
        ("1 + sqrt(1-2)", 5, "the square root of a negative number", "check the sign"),
        ("sqrt(2)^2 - 2", 11, "below 1e-300 of its terms", "write the exact result"),
        ("sqrt(8) - 2*sqrt(2)", 9, "below 1e-300 of its terms", "write the exact result"),
        ("(s+sqrt(2))*(s-sqrt(2)) - s^2 + 2", 31, "below 1e-300", "write the exact result"),
        ("(s+sqrt(2))*(sqrt(2)*s-2)", 12, "below 1e-300", "write the exact result"),
        ("1/(s+sqrt(2)^2) - 1/(s+2)", 17, "below 1e-300", "write the exact result"),
        ("9^9^9^9", 4, "an exponent out of bounds", "check the exponent"),
        ("(s+1)^1000", 6, "an exponent out of bounds", "check the exponent"),
        ("(s+1)^33", 6, "a polynomial of degree 33", "several designs in series"),
        ("s^20*s^20", 5, "a polynomial of degree 40", "several designs in series"),
        ("1/s^20 + 1/(s+1)^20", 8, "a polynomial of degree 40", "several designs in series"),
        ("1e999999999", 1, "the power of ten", "float64 ends at"),
        ("1e" + "9" * 900, 1, "a number of 902 characters", "round it"),
        ("((2^400)^400)^400", 9, "a number that becomes too long", "fewer digits"),
        ("-" * 100 + "1", MAX_NESTING + 1, "nested too deeply", "give the inner part a name"),
        ("(" * 100 + "1", MAX_NESTING + 1, "nested too deeply", "give the inner part a name"),
    ],
)
def test_each_mistake_is_named_with_its_column_and_what_to_try(text: str, column: int, found: str, advice: str) -> None:
    error = refusal(text)
    assert error.where == f"here, column {column}"
    assert re.search(found, error.found)
    assert re.search(advice, error.advice)
    assert error.allowed
    assert error.exit_status == 2


@pytest.mark.parametrize("text", ["", "   ", "\n\t"])
def test_an_empty_expression_is_refused_without_a_column(text: str) -> None:
    error = refusal(text)
    assert error.where == "here"
    assert error.found == "no expression"


def test_s_is_refused_where_a_constant_is_expected() -> None:
    with pytest.raises(RealizeError, match="here, column 3: s where a constant is expected"):
        constant("2*s")


@pytest.mark.parametrize(("text", "column"), [("2*exp(1)", 3), ("exp", 1)])
def test_exp_is_refused_where_a_constant_is_expected(text: str, column: int) -> None:
    with pytest.raises(RealizeError, match=f"here, column {column}: exp where a constant is expected"):
        constant(text)


def test_names_are_listed_once_and_without_the_reserved_ones() -> None:
    assert names_in("kp + ki/s + sqrt(kp)*pi*exp(-kp*s)", "here") == ("kp", "ki")


# -- dead time ------------------------------------------------------------------------------------------------


def with_dead_time(text: str) -> DelayedTransfer:
    return evaluate_delayed_transfer(text, VALUES, "here", "[plant.values]")


@pytest.mark.parametrize(
    ("text", "ratio_text", "dead_time_s"),
    [
        ("kp/(s+1)", "kp/(s+1)", F(0)),
        ("exp(-0.002*s)", "1", F(2, 1000)),
        ("exp(-tau*s)/(s+1)", "1/(s+1)", F(2, 1000)),
        ("2/(s+1)*exp(-s/3)*exp(-tau*s)", "2/(s+1)", F(1, 3) + F(2, 1000)),
        ("(kp*exp(-s)/s)*(s+1)", "(kp/s)*(s+1)", F(1)),
        ("-exp(-(s + 2*s))", "-1", F(3)),
        ("(2*exp(-s)/s)^2", "4/s^2", F(2)),
        ("exp(-s)^0", "1", F(0)),
        ("exp(-zero*s)/s", "1/s", F(0)),
        ("exp(0)", "1", F(0)),
        ("exp((zero - 1)*s)", "1", F(1)),
        ("exp(-sqrt(4)*s)", "1", F(2)),
        ("1/(s + sqrt(2))", "1/(s + sqrt(2))", F(0)),
    ],
)
def test_dead_time_is_a_factor_and_factors_add_up(text: str, ratio_text: str, dead_time_s: Fraction) -> None:
    assert with_dead_time(text) == (*transfer(ratio_text), dead_time_s)


times = st.fractions(min_value=0, max_value=10, max_denominator=1000)


@given(trees, st.lists(st.tuples(times, st.booleans()), max_size=4))
def test_dead_time_leaves_the_ratio_as_it_is(tree: Tree, delays: list[tuple[Fraction, bool]]) -> None:
    plain = outcome(tree[0])
    assume(not isinstance(plain, RealizeError))
    text = f"({tree[0]})"
    for time_s, behind in delays:
        factor = f"exp(-{time_s}*s)"
        text = f"({text})*{factor}" if behind else f"{factor}*({text})"
    assert with_dead_time(text) == (*plain, sum((time_s for time_s, _ in delays), F(0)))  # type: ignore[misc]


@pytest.mark.parametrize(
    ("text", "column", "found", "advice"),
    [
        ("exp(0.1*s)", 1, "a prediction: acausal", r"exp\(-0.002\*s\)"),
        ("exp(-(zero - kp)*s)", 1, "a prediction: acausal", "minus sign"),
        ("2/exp(-s)", 2, "a division by dead time, which is a prediction", "minus sign"),
        ("1/(exp(-zero*s)*s)", 2, "a division by dead time", "minus sign"),
        ("exp(-s)^-1", 8, "a negative power of dead time, which is a prediction", "minus sign"),
        ("exp(-s)^0.5", 8, "an exponent that is not an integer", "sqrt"),
        ("1 + exp(-s)", 3, "dead time in one term of a sum", "measured response"),
        ("exp(-s) - exp(-s)", 9, "dead time in one term of a sum", "multiply the whole"),
        ("1/(s + 2*exp(-zero*s))", 6, "dead time in one term of a sum", "multiply the whole"),
        ("exp(-1)", 1, "something other than a constant times s", "exponential of a constant as a number"),
        ("exp(-s-1)", 1, "something other than a constant times s", "dead time as"),
        ("exp(-s^2)", 1, "something other than a constant times s", "anything else as a ratio"),
        ("exp(-1/s)", 1, "something other than a constant times s", "dead time as"),
        ("exp(-s^2/s)", 1, "something other than a constant times s", "dead time as"),
        ("exp(-exp(-s))", 1, "dead time in the exponent of exp", "as a factor"),
        ("2^exp(-s)", 2, "dead time in an exponent", "as a factor"),
        ("sqrt(exp(-s))", 1, "dead time in a square root", "as a factor"),
        ("exp", 1, "exp without parentheses", r"write exp\(-0.002\*s\)"),
        ("EXP(-s)", 1, 'the unknown function "EXP"', "did you mean exp"),
        ("exp(-s", 4, "never closed", "close it"),
        ("exp(-td*s)", 6, 'the unknown name "td"', r"under \[plant.values\]"),
        # Each has 9 * 1369 bits below the line; six are more than the bound.
        ("*".join(f"exp(-s/(pi+{k})^9)" for k in range(20)), 85, "a number that becomes too long", "fewer digits"),
    ],
)
def test_each_mistake_with_dead_time_is_named(text: str, column: int, found: str, advice: str) -> None:
    with pytest.raises(RealizeError) as caught:
        with_dead_time(text)
    assert caught.value.where == f"here, column {column}"
    assert re.search(found, caught.value.found)
    assert re.search(advice, caught.value.advice)
    assert caught.value.allowed


@pytest.mark.parametrize("text", [" " * MAX_LENGTH + "s", "(" * 100])
def test_the_table_that_names_values_is_the_one_of_the_expression(text: str) -> None:
    with pytest.raises(RealizeError, match=r"under \[plant.values\]"):
        with_dead_time(text)


@pytest.mark.parametrize(
    ("largest", "beyond"),
    [
        ("s" + " " * (MAX_LENGTH - 1), "s" + " " * MAX_LENGTH),
        ("(" * (MAX_NESTING - 1) + "1" + ")" * (MAX_NESTING - 1), "(" * MAX_NESTING + "1" + ")" * MAX_NESTING),
        ("sqrt(" * (MAX_NESTING - 1) + "1" + ")" * (MAX_NESTING - 1), "-" * MAX_NESTING + "1"),
        (f"s^{MAX_DEGREE}", f"s^{MAX_DEGREE + 1}"),
        (f"2^{MAX_EXPONENT}", f"2^{MAX_EXPONENT + 1}"),
        (f"2^-{MAX_EXPONENT}", f"2^-{MAX_EXPONENT + 1}"),
        (f"1e{MAX_EXPONENT}", f"1e{MAX_EXPONENT + 1}"),
        (f"1e-{MAX_EXPONENT}", f"1e-{MAX_EXPONENT + 1}"),
        ("1" * MAX_DIGITS, "1" * (MAX_DIGITS + 1)),
        ("0." + "1" * (MAX_DIGITS - 1), "0." + "1" * MAX_DIGITS),
        ("(s+pi)^32", "(s+pi)^32*pi^20"),
    ],
    ids=[
        "length",
        "parentheses",
        "roots and signs",
        "degree",
        "power",
        "inverse power",
        "power of ten",
        "small power of ten",
        "digits",
        "decimals",
        "bits",
    ],
)
def test_each_bound_admits_its_limit_and_refuses_the_next(largest: str, beyond: str) -> None:
    transfer(largest)
    refusal(beyond)


@pytest.mark.parametrize(
    "text",
    [
        "+".join(["1/(s-pi)^32"] * 300),
        "+".join(f"1/(pi+{k})" for k in range(300)),
        "+".join(f"1/(s+{k}/pi+sqrt({k + 1}))" for k in range(1, 33)),
        "+".join(["s"] * 2000),
        "9" * 799 + "^400^400",
        "2^" * 1999 + "2",
        "*".join(f"exp(-s/(pi+{k}))" for k in range(220)),
    ],
    ids=["powers of pi", "reciprocals", "poles", "terms", "large base", "tower", "dead times"],
)
def test_hostile_texts_are_answered_not_computed_forever(text: str) -> None:
    started = time.perf_counter()
    with contextlib.suppress(RealizeError):
        with_dead_time(text)
    assert time.perf_counter() - started < NOT_A_HANG_S


grammar_like = st.text(alphabet="s0123456789.e+-*/^() \tkpidqrt_,", max_size=40)
pieces = st.lists(
    st.sampled_from(
        ["s", "2", "0.5", "1e3", "kp", "pi", "sqrt(", "(", ")", "+", "-", "*", "/", "^", " ", "exp(", "zz"]
    ),
    max_size=20,
).map("".join)


@given(st.one_of(st.text(), grammar_like, pieces))
def test_any_text_is_read_or_refused_clearly(text: str) -> None:
    for read in (transfer, with_dead_time):
        try:
            result = read(text)
        except RealizeError as error:
            assert error.where.startswith("here")
            assert error.allowed
            assert all(line.isprintable() for line in str(error).split("\n"))
        else:
            assert any(result[1])
            assert getattr(result, "dead_time_s", 0) >= 0


@given(st.text(alphabet="s+*/^() 12kp\u00b2\u2212\t", min_size=1, max_size=200))
def test_the_caret_stands_below_the_column_named(text: str) -> None:
    refused = outcome(text)
    place = re.fullmatch(r"here, column (\d+)", refused.where) if isinstance(refused, RealizeError) else None
    assume(place)
    assert isinstance(refused, RealizeError)
    assert place is not None
    line, caret = refused.excerpt.split("\n")
    assert caret.strip(" ") == "^"
    assert len(line) <= 90
    assert (line + " ")[len(caret) - 1] == (text + " ")[int(place[1]) - 1].replace("\t", " ")
