"""The list of steps: what is left out, what is kept, and what is refused."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.arithmetic.formats import FLOAT32, FLOAT64, FORMATS, FloatFormat
from realize.arithmetic.realization import DeltaSection, Realization, Section
from realize.arithmetic.sample import Guard, Sample, Sum, coefficients, describe, largest, least_normal, variables
from realize.errors import RealizeError
from tests.firmware.designs import PERIOD_S, UNIT_RANGE, section


def one_section(*numbers: tuple[float, ...], integral: tuple[float, ...] = ()) -> Realization:
    b, a = numbers
    return Realization(FLOAT64, "direct", integral, (Section(b, a),), PERIOD_S)


def sums(sample: Sample) -> dict[str, list[str]]:
    """Target and terms of every sum of ``update``, as text."""
    return {
        step.target: [f"{term.sign:+d} {term.coefficient or 1} {term.variable}" for term in step.terms]
        for step in sample.update
        if isinstance(step, Sum)
    }


def test_coefficients_of_0_1_and_minus_1_are_not_multiplied() -> None:
    found = sums(describe(one_section((0.0, 1.0, -1.0), (-1.0, 0.5))))
    assert found["section1_output"] == ["+1 1 state.section1_1"]
    assert found["state.section1_1"] == ["+1 1 state.section1_2", "+1 1 input", "+1 1 section1_output"]
    assert found["state.section1_2"] == ["-1 1 input", "-1 section1_a2 section1_output"]


def in_delta(target: FloatFormat) -> Sample:
    section = DeltaSection((0.5, 0.25, 2.0), (1.5, 0.75))
    return describe(Realization(target, "delta", (), (section,), PERIOD_S))


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_in_delta_an_increment_is_summed_first_and_then_added_to_its_state(target: FloatFormat) -> None:
    sample = in_delta(target)
    assert sums(sample)["section1_1_increment"] == [
        "+1 1 state.section1_2",
        "+1 section1_b1 input",
        "-1 section1_a1 section1_output",
    ]
    assert sums(sample)["section1_2_increment"] == ["+1 section1_b2 input", "-1 section1_a2 section1_output"]
    added = [step.target for step in sample.update if not isinstance(step, Guard)]
    assert added[1:5] == ["section1_1_increment", "state.section1_1", "section1_2_increment", "state.section1_2"]


def test_in_float32_states_in_delta_carry_what_their_additions_lost() -> None:
    behind = ("accepted", "section1_output")
    assert in_delta(FLOAT64).fields == ("section1_1", "section1_2", *behind)
    assert in_delta(FLOAT32).fields == ("section1_1", "section1_1_rest", "section1_2", "section1_2_rest", *behind)


def test_other_coefficients_are_multiplied_in_the_order_state_forward_back() -> None:
    sample = describe(one_section((0.5, 0.25, 2.0), (-1.5, 0.75)))
    assert sums(sample)["state.section1_1"] == [
        "+1 1 state.section1_2",
        "+1 section1_b1 input",
        "-1 section1_a1 section1_output",
    ]
    assert coefficients(sample.update) == {
        "section1_b0": 0.5,
        "section1_b1": 0.25,
        "section1_a1": -1.5,
        "section1_b2": 2.0,
        "section1_a2": 0.75,
    }


def test_only_what_advance_needs_is_kept_for_it() -> None:
    bare = describe(one_section((0.5,), ()), guard_nonfinite=False)
    assert bare.fields == ()
    held = describe(one_section((0.5,), (), integral=(0.25,)), UNIT_RANGE, guard_nonfinite=False)
    assert held.fields == ("integral1", "unclamped")
    free = describe(one_section((0.5,), (), integral=(0.25,)), UNIT_RANGE, "none", guard_nonfinite=True)
    assert free.fields == ("integral1", "accepted")


def test_the_output_does_no_state_update() -> None:
    sample = describe(one_section((0.5, 0.25), (-0.5,), integral=(0.25,)), UNIT_RANGE)
    assert {step.target for step in sample.output} == {
        *("input", "section1_output", "unclamped", "command"),
        *("state.section1_output", "state.unclamped", "state.command"),
    }


def test_what_nothing_reads_is_not_computed() -> None:
    behind = Realization(
        FLOAT64, "cascade", (), (section(FLOAT64, ("3",)), section(FLOAT64, ("0", "0"), ("-0.5",))), PERIOD_S
    )
    assert "section1_output" not in {step.target for step in describe(behind).update}
    assert "section1_output" not in variables(describe(behind).update)


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_limits_are_the_outermost_values_inside_the_range(target: FloatFormat) -> None:
    realization = Realization(target, "direct", (), (Section((2.0,), ()),), PERIOD_S)
    limits = (Fraction(-1, 3), Fraction(1, 3))
    sample = describe(realization, limits)
    assert sample.low is not None
    assert sample.high is not None
    unit = Fraction(2) ** (-2 - target.precision + 1)
    assert limits[0] <= Fraction(sample.low) < limits[0] + unit
    assert limits[1] - unit < Fraction(sample.high) <= limits[1]


def test_a_range_beyond_the_format_is_limited_by_its_largest_value() -> None:
    realization = Realization(FLOAT32, "direct", (), (Section((2.0,), ()),), PERIOD_S)
    sample = describe(realization, (Fraction(-(10**40)), Fraction(10**40)))
    assert (sample.low, sample.high) == (-largest(FLOAT32), largest(FLOAT32))


def test_the_ends_of_the_formats() -> None:
    # IEEE 754-2008, table 3.5; spelled as in <float.h>
    assert largest(FLOAT32).hex() == "0x1.fffffe0000000p+127"
    assert largest(FLOAT64).hex() == "0x1.fffffffffffffp+1023"
    assert least_normal(FLOAT32).hex() == "0x1.0000000000000p-126"
    assert least_normal(FLOAT64).hex() == "0x1.0000000000000p-1022"


def test_a_realization_of_nothing_is_refused() -> None:
    with pytest.raises(RealizeError, match="realization: it is empty"):
        describe(Realization(FLOAT32, "direct", (), (), PERIOD_S))


def test_a_range_between_two_values_of_the_format_is_refused() -> None:
    realization = Realization(FLOAT32, "direct", (), (Section((2.0,), ()),), PERIOD_S)
    gap = (1 + Fraction(1, 10**9), 1 + Fraction(2, 10**9))
    with pytest.raises(RealizeError, match=r"signals\.output\.range: no value of float32 lies in it"):
        describe(realization, gap)


@pytest.mark.parametrize(("time_s", "found"), [(None, "it is missing"), (Fraction(0), "0 s"), (Fraction(-1), "-1 s")])
def test_back_calculation_without_a_positive_tracking_time_is_refused(time_s: Fraction | None, found: str) -> None:
    realization = Realization(FLOAT32, "direct", (0.5,), (), PERIOD_S)
    with pytest.raises(RealizeError, match=rf"target\.tracking_time: {found}"):
        describe(realization, UNIT_RANGE, "back-calculation", time_s)
