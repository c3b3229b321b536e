"""What the integer header and source say, and what they must not hold."""

from __future__ import annotations

import re
from dataclasses import replace
from fractions import Fraction
from itertools import islice

import pytest

from realize.arithmetic.integer.settling import settle
from realize.errors import RealizeError
from realize.firmware.integer import IntegerEmission, render_integer_firmware
from realize.firmware.integer.spelling import Spelling, constant
from tests.firmware.bench import rendered
from tests.firmware.integer.designs import INPUTS, OUTPUTS, WIDE_INPUTS, WIDTHS, emission, grid, made

WIDTH = 100
GRID = list(grid())[::4]


def texts(one: IntegerEmission) -> tuple[str, str]:
    files = rendered(one)
    return files[f"{one.name}.h"], files[f"{one.name}.c"]


def code(text: str) -> str:
    """Without comments."""
    return re.sub(r"/\*.*?\*/", " ", text, flags=re.DOTALL)


def prose(text: str) -> str:
    """The first comment, as running text."""
    return " ".join(text.partition("*/")[0].replace("\n * ", " ").replace("\n *", " ").split())


def test_same_emission_gives_the_same_bytes() -> None:
    for one, again in zip(GRID[:6], islice(made(), 0, None, 4), strict=False):
        assert render_integer_firmware(one) == render_integer_firmware(again)


@pytest.mark.parametrize("one", GRID, ids=[one.name for one in GRID])
def test_text_is_integers_within_the_width_and_needs_stdint_alone(one: IntegerEmission) -> None:
    header, source = texts(one)
    assert (header + source).isascii()
    assert max(len(line) for line in (header + source).splitlines()) <= WIDTH
    assert re.findall(r"#include (\S+)", header) == ["<stdint.h>"]
    assert re.findall(r"#include (\S+)", source) == [f'"{one.name}.h"']
    words = set(re.findall(r"[A-Za-z_]\w*", code(source)))
    assert not words & {"float", "double", "malloc", "free", "memset", "abs", "goto", "long", "short"}
    assert "<<" not in code(source)
    assert "errno" not in source


@pytest.mark.parametrize("one", GRID, ids=[one.name for one in GRID])
def test_right_shifts_stand_on_unsigned_images_alone(one: IntegerEmission) -> None:
    shifts = [line for line in code(texts(one)[1]).splitlines() if ">>" in line]
    allowed = (
        r"    const (uint(?:32|64)_t) image = \(\(\1\)sum \+ \d+u(ll)?\) >> \d+;",
        r"    const (uint(?:32|64)_t) image = \(\1\)sum >> \d+;",
        r"    return \(int32_t\)\(\(\(uint32_t\)value \^ 2147483648u\) >> 16\) - 32768;",
        r"    const uint32_t more = \(\(uint32_t\)held - \(uint32_t\)unclamped\) >> \d+;",
    )
    assert all(any(re.fullmatch(pattern, s) for pattern in allowed) for s in shifts)


@pytest.mark.parametrize("one", GRID, ids=[one.name for one in GRID])
def test_names_at_file_scope_have_the_prefix(one: IntegerEmission) -> None:
    header, source = texts(one)
    outer = re.findall(
        r"^(?:static |inline |const |extern |void |u?int\d+_t |int |\w+_coefficients )+(\w+)", source, re.M
    )
    assert outer
    assert all(name.startswith(f"{one.name}_") for name in outer)
    macros = re.findall(r"#(?:define|ifndef) (\w+)", header)
    assert all(name.startswith(f"{one.name}_") for name in macros)


def test_every_sum_of_several_terms_has_its_proven_bound_beside_it() -> None:
    one = emission("x", "three", "error-feedback", WIDTHS[0])
    source = texts(one)[1]
    lines = source.splitlines()
    sums = [k for k, line in enumerate(lines) if re.match(r"    const int\d+_t \w+_sum = ", line)]
    assert sums
    assert all("/* proven: -" in lines[k - 1] for k in sums)
    bound = {bound.variable: bound for bound in one.realization.proof.bounds}["section1_output (sum)"]
    says = f"proven: {-bound.largest - 1} <= sum <= {bound.largest}, {bound.spare_bits} bits? to spare of 32"
    assert re.search(says, source)


def test_no_sum_of_32_bit_variables_is_wider_than_is_proven_that_it_needs() -> None:
    """A long product counts by its size, as the sum it stands in does."""
    wide, narrow = 0, 0
    for one in GRID:
        header, source = texts(one)
        long = re.findall(r"int64_t (\w+);", header.partition("} ")[0])
        for largest, kind, terms in re.findall(
            r"proven: -\d+ <= sum <= (\d+), .*?const (int\d+_t) \w+_sum = (.*?);", source, re.DOTALL
        ):
            if one.coefficients == "inline" and not any(f"state->{name}" in terms for name in long):
                assert (kind == "int64_t") == (int(largest) >= 1 << 31)
                wide, narrow = wide + (kind == "int64_t"), narrow + (kind == "int32_t")
    assert wide
    assert narrow


@pytest.mark.parametrize("sign", ["subtract", "add"])
def test_recursion_sign_is_that_of_the_stored_text(sign: str) -> None:
    one = emission("x", "lead", "cascade", WIDTHS[0], options=("none", "inline", sign))
    added = one.realization.program.coefficients["section1_a1"].stored
    source = texts(one)[1]
    if sign == "subtract":
        assert f"x_section1_a1 = {-added};" in source
        assert "- (int32_t)x_section1_a1 * " in source
    else:
        assert f"x_section1_minus_a1 = {added};" in source
        assert "+ (int32_t)x_section1_minus_a1 * " in source


@pytest.mark.parametrize("sign", ["subtract", "add"])
@pytest.mark.parametrize("structure", ["cascade", "error-feedback", "normal", "parallel"])
def test_long_coefficients_stand_in_a_constant_table_as_they_are_added(structure: str, sign: str) -> None:
    one = emission("x", "three", structure, WIDTHS[2], options=("none", "inline", sign))
    source = code(texts(one)[1])
    fields = re.findall(r"int32_t (\w+);", source.partition("typedef struct {")[2].partition("} x_table;")[0])
    values = source.partition("x_stored = {")[2].partition("};")[0]
    stored = dict(zip(fields, map(int, re.sub(r"-\(-(\d+)\)", r"\1", values).split(",")[:-1]), strict=True))
    wanted = {
        name.replace("_a", "_minus_a"): term.stored for name, term in one.realization.program.coefficients.items()
    }
    assert stored == wanted
    added = [stored for name, stored in wanted.items() if "_minus_a" in name]
    assert [f"-(-{value})" in values for value in added] == [sign == "subtract" and value > 0 for value in added]
    assert source.count("*const volatile x_lookup = &x_stored;") == 1


def test_short_coefficients_stand_in_the_code() -> None:
    source = texts(emission("x", "three", "cascade", WIDTHS[0]))[1]
    assert "x_lookup" not in source
    assert "SHORT_PRODUCTS" not in source


@pytest.mark.parametrize("one", GRID, ids=[one.name for one in GRID])
def test_states_have_the_width_of_registers_or_twice_that(one: IntegerEmission) -> None:
    state = texts(one)[0].partition("typedef struct {\n")[2].partition("\n}")[0]
    assert {line.split()[0] for line in state.splitlines()} <= {"int32_t", "int64_t"} or "unused" in state


def test_command_that_is_proven_within_its_range_is_not_compared_but_for_any_table() -> None:
    ends = INPUTS["int16"], OUTPUTS["int32"]

    def limited(coefficients: str) -> str:
        source = texts(emission("x", "gain", "direct", WIDTHS[0], ends, ("none", coefficients, "subtract")))[1]
        return source.partition("x_limited(int32_t unclamped)\n{\n")[2].partition("}\n\n")[0]

    assert limited("inline") == "    return unclamped;\n"
    assert limited("table").count("if (unclamped") == 2


def test_table_has_a_field_for_every_multiplied_number() -> None:
    one = emission("x", "pid", "cascade", WIDTHS[2], options=("back-calculation", "table", "subtract"))
    header, source = texts(one)
    fields = re.findall(r"    int\d+_t (\w+); /\* -?\d+ fraction bits \*/", header.partition("x_state;")[2])
    assert fields == [
        "section1_b0", "section1_b1", "section1_a1", "section1_gain", "integral1_gain", "tracking_gain",
    ]  # fmt: skip
    assert all(f"coefficients->{field}" in source for field in fields)
    assert "extern const x_coefficients x_nominal;" in header


def test_one_name_with_two_numbers_becomes_two_fields() -> None:
    one = emission("x", "notch", "normal", WIDTHS[0])
    program = one.realization.program
    first = program.updates[0]
    other = first._replace(terms=(first.terms[0]._replace(stored=first.terms[0].stored // 2), *first.terms[1:]))
    changed = replace(one.realization, program=program._replace(updates=(other, *program.updates[1:])))
    spelling = Spelling(one._replace(realization=changed), settle(program))
    stored = {field: number.stored for field, number in spelling.fields.items()}
    assert {stored["section1_s"], stored["section1_s_2"]} == {first.terms[0].stored // 2, first.terms[0].stored}


def test_header_says_what_is_saturated_where_there_is_no_rest_and_what_is_proven() -> None:
    one = emission("x", "pid", "cascade", WIDTHS[0], (INPUTS["uint16"], OUTPUTS["uint16"]))
    text = texts(one)[0]
    first = prose(text)
    assert "range -8 to 8 mm; saturated on entry to counts 16768 to 48768" in first
    assert "uint16_t; 1 count = 0.0005 mm; count 32768 stands for 0" in first
    assert "clamped to -1 to 1: counts 800 to 9200" in first
    assert "no state and no sum overflows" in first
    assert "from a cleared state, while no limit acts, rounding moves the output by at most" in first
    rest = " ".join(text.replace("\n * ", " ").split())
    assert "no steady state exists but at input 32768" in rest
    assert "#define x_INPUT_LOW 16768" in text
    assert "#define x_OUTPUT_HIGH 9200" in text


def test_header_without_an_integral_promises_a_rest_at_any_input() -> None:
    text = texts(emission("x", "notch", "delta", WIDTHS[0], (INPUTS["all of int16"], OUTPUTS["int16"])))[0]
    assert "steady state exists" not in text
    assert "anti-windup" not in text
    assert "This design does not use it." in text


def test_type_filled_by_its_range_is_not_compared() -> None:
    header, source = texts(emission("x", "gain", "direct", WIDTHS[2], (WIDE_INPUTS["all of int32"], OUTPUTS["full"])))
    assert "x_INPUT_HIGH" in header
    entry = source.partition("x_input_count(int32_t value)")[2].partition("}\n\n")[0]
    assert "x_INPUT_LOW" in entry
    assert "x_INPUT_HIGH" not in entry


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (5, "5"),
        (-5, "(-5)"),
        (-(2**31), "(-2147483647 - 1)"),
        (2**31, "2147483648LL"),
        (-(2**63), "(-9223372036854775807LL - 1)"),
    ],
)
def test_constants_have_a_type_that_holds_them(value: int, text: str) -> None:
    assert constant(value) == text


def test_name_must_be_an_identifier() -> None:
    one = emission("x", "pi", "cascade", WIDTHS[0])
    with pytest.raises(RealizeError) as refused:
        render_integer_firmware(one._replace(name="2nd"))
    assert refused.value.where == "design.name"


def test_design_text_is_harmless_in_the_header() -> None:
    one = emission("x", "pi", "cascade", WIDTHS[0])
    text = texts(one._replace(about="ends */ int leak; /* here", revision="??/", notes=["a\nb\\"]))[0]
    assert "int leak" not in code(text)
    assert "??/" not in text


def test_period_is_exact() -> None:
    one = emission("x", "notch", "cascade", WIDTHS[0])
    assert one.realization.period_s == Fraction(1, 8000)
    assert "#define x_PERIOD_NUMERATOR 1\n#define x_PERIOD_DENOMINATOR 8000\n" in texts(one)[0]
