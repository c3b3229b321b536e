"""The vectors in integers hold what their name promises, for every design."""

from __future__ import annotations

import pytest

from realize.arithmetic.integer.interface import type_range
from realize.firmware.integer import IntegerEmission
from realize.firmware.integer.vectors import (
    ATTAINING,
    DIRECTED,
    ENDS,
    FAINT,
    QUIET,
    REST,
    STEP,
    vectors,
    vectors_text,
)
from realize.firmware.patterns import IMPULSE, UNIT, noise
from tests.firmware.integer.designs import INPUTS, OUTPUTS, WIDTHS, emission, grid

GRID = [(one, *vectors(one)) for one in list(grid())[::5]]
NAMES = [f"{one.name} {one.realization.structure}" for one, _, _ in GRID]


def ends(one: IntegerEmission, outward: bool = False) -> tuple[int, int]:
    port = one.realization.program.interface[outward]
    return port.low + port.offset, port.high + port.offset


@pytest.mark.parametrize(("one", "inputs", "outputs"), GRID, ids=NAMES)
def test_inputs_are_of_the_type_and_outputs_within_the_range(
    one: IntegerEmission, inputs: list[int], outputs: list[int]
) -> None:
    kind = one.realization.program.interface.input.type
    low, high = ends(one, outward=True)
    assert len(inputs) == len(outputs) >= 1000
    assert (min(inputs), max(inputs)) == type_range(kind)
    assert low <= min(outputs) <= max(outputs) <= high


@pytest.mark.parametrize(("one", "inputs", "outputs"), GRID, ids=NAMES)
def test_segments_stand_where_they_are_said_to(one: IntegerEmission, inputs: list[int], outputs: list[int]) -> None:
    low, high = ends(one)
    offset = one.realization.program.interface.input.offset
    assert set(inputs[:ATTAINING]) <= {low, high}
    assert inputs[ATTAINING : ATTAINING + IMPULSE] == [high] + [offset] * (IMPULSE - 1)
    step = ATTAINING + IMPULSE + QUIET
    assert inputs[step : step + STEP] == [high] * STEP
    assert inputs[-FAINT:] == [offset + 1] * FAINT
    assert inputs[-FAINT - REST : -FAINT] == [offset] * REST
    least, most = type_range(one.realization.program.interface.input.type)
    types_ends = inputs[-FAINT - REST - DIRECTED - 2 * ENDS : -FAINT - REST - DIRECTED]
    assert types_ends == [least] * ENDS + [most] * ENDS


@pytest.mark.parametrize(("one", "inputs", "outputs"), GRID, ids=NAMES)
def test_quiet_noise_leaves_the_command_within_its_limits_or_is_of_few_counts(
    one: IntegerEmission, inputs: list[int], outputs: list[int]
) -> None:
    quiet, interface = inputs[ATTAINING + IMPULSE :][:QUIET], one.realization.program.interface
    assert len(set(quiet)) > 1
    reached = {y - interface.output.offset for y in one.recursion().run(quiet)} - {0}
    few = max(abs(x - interface.input.offset) for x in quiet) <= 4
    assert few or not {interface.output.low, interface.output.high} & reached


def test_both_limits_are_met_where_the_gain_allows_it() -> None:
    for transfer, structure in (("pid", "cascade"), ("slow", "delta"), ("notch", "normal"), ("double", "direct")):
        one = emission("x", transfer, structure, WIDTHS[0])
        assert set(ends(one, outward=True)) <= set(vectors(one)[1])


def test_attaining_input_attains_the_largest_command_of_all_inputs() -> None:
    # Nothing clamps here: the output's range is wider than the peak gain makes of the input's.
    wide = OUTPUTS["int32"]
    one = emission("x", "notch", "cascade", WIDTHS[2], (INPUTS["int16"], wide))
    outputs = vectors(one)[1]
    offset = one.realization.program.interface.output.offset
    largest = max(abs(y - offset) for y in outputs)
    assert abs(outputs[ATTAINING - 1] - offset) == largest


def test_text_is_a_line_for_each_sample_under_a_heading() -> None:
    one = emission("x", "pi", "cascade", WIDTHS[0])
    lines = vectors_text(*vectors(one)).splitlines()
    assert lines[0] == "input,output"
    assert lines[1:] == [f"{x},{y}" for x, y in zip(*vectors(one), strict=True)]


def test_noise_is_the_published_generator() -> None:
    # s <- 1664525 s + 1013904223 mod 2^32 (Knuth and Lewis, from memory): the first two states from 1.
    assert noise(2) == [(1015568748 >> 16) - UNIT, ((1664525 * 1015568748 + 1013904223) % 2**32 >> 16) - UNIT]
