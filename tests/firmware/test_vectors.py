"""The vectors: what they contain, that any machine makes the same ones, and that they work the design."""

from __future__ import annotations

from fractions import Fraction
from math import isfinite, isnan
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.arithmetic.formats import FLOAT32, FORMATS, FloatFormat
from realize.arithmetic.realization import Realization
from realize.firmware import Emission
from realize.firmware.patterns import IMPULSE, SWEEP
from realize.firmware.vectors import HELD, LEVELS, NOISE, QUIET, SATURATING, STEP, vectors, vectors_text
from tests.firmware.designs import PERIOD_S, UNIT_RANGE, emission, grid, random_emission, section

LIMITED = [e for e in grid() if e.output_range]


def servo(target: FloatFormat = FLOAT32, **options: Any) -> Emission:
    rest = (section(target, ("4.2", "-3.1"), ("-0.38",)),)
    return emission("servo", Realization(target, "direct", (2.0**-7,), rest, PERIOD_S), **options)


def segments(inputs: list[float]) -> dict[str, list[float]]:
    parts = {"impulse": IMPULSE, "quiet": QUIET, "step": STEP, "sweep": SWEEP, "noise": NOISE}
    parts["saturating"] = 2 * HELD * len(LEVELS)
    found, start = {}, 0
    for name, count in parts.items():
        found[name] = inputs[start : start + count]
        start += count
    return found | {"not finite": inputs[start:]}


@given(st.integers(0, 1 << 32))
def test_there_are_a_thousand_samples_and_every_one_is_a_value_of_the_format(seed: int) -> None:
    drawn = random_emission("any", seed)
    inputs, outputs = vectors(drawn)
    assert len(inputs) == len(outputs) >= 1000
    if drawn.realization.format is FLOAT32:
        assert all(isnan(x) or float(np.float32(x)) == x for x in (*inputs, *outputs))


def test_the_segments_are_what_they_are_called() -> None:
    found = segments(vectors(servo(output_range=UNIT_RANGE))[0])
    assert found["impulse"] == [8.0] + [0.0] * (IMPULSE - 1)
    assert found["step"] == [8.0] * STEP
    assert max(found["sweep"]) > 7.9
    assert min(found["sweep"]) < -7.9
    assert {isnan(x) or abs(x) for x in found["not finite"]} == {True, 8.0, float("inf")}
    assert -float("inf") in found["not finite"]


def test_the_sweep_turns_ever_faster_up_to_half_the_rate() -> None:
    sweep = segments(vectors(servo())[0])["sweep"]
    crossings = [k for k in range(1, SWEEP) if (sweep[k] < 0) != (sweep[k - 1] < 0)]
    early, late = crossings[1] - crossings[0], crossings[-1] - crossings[-2]
    assert crossings[0] >= 20
    assert early >= 8
    assert late <= 2


def test_the_noise_fills_the_range_evenly() -> None:
    noise = segments(vectors(servo())[0])["noise"]
    counts = np.histogram(noise, bins=8, range=(-8.0, 8.0))[0]
    assert sum(counts) == NOISE
    assert min(counts) >= NOISE / 8 * 0.5
    assert len(set(noise)) > 0.95 * NOISE
    assert abs(np.corrcoef(noise[1:], noise[:-1])[0, 1]) < 0.2


@pytest.mark.parametrize("limits", [(Fraction(-1, 3), Fraction(2)), (Fraction(0), Fraction(10)), None])
def test_full_scale_is_the_input_range_or_one(limits: tuple[Fraction, Fraction] | None) -> None:
    found = segments(vectors(servo(input_range=limits))[0])
    low, high = (FLOAT32.round(limit) for limit in limits or (Fraction(-1), Fraction(1)))
    assert found["step"][0] == high
    assert all(min(low, 0.0) <= x <= high for name in ("step", "sweep", "noise") for x in found[name])


@pytest.mark.parametrize("design", LIMITED, ids=lambda e: e.name)
def test_the_command_meets_both_limits_and_comes_back(design: Emission) -> None:
    sample = design.recursion().sample
    _, outputs = vectors(design)
    saturating = outputs[SATURATING:]
    assert sample.low is not None
    assert sample.high is not None
    assert min(saturating) == sample.low
    assert max(saturating) == sample.high


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_the_quiet_noise_shows_its_roundings_beside_the_clamp(target: FloatFormat) -> None:
    inputs, outputs = vectors(servo(target, output_range=UNIT_RANGE))
    quiet = segments(outputs)["quiet"]
    assert all(abs(y) < 1.0 for y in quiet)
    assert max(map(abs, quiet)) > 1 / 8
    assert len(set(quiet)) > 0.9 * QUIET
    assert max(map(abs, segments(inputs)["quiet"])) < 8.0


@pytest.mark.parametrize("target", FORMATS.values(), ids=FORMATS)
def test_a_held_integral_leaves_the_limits_between_the_overdriven_steps(target: FloatFormat) -> None:
    saturating = segments(vectors(servo(target, output_range=UNIT_RANGE))[1])["saturating"]
    # from the second reversal on; the noise before leaves the integral anywhere
    released = [saturating[k * HELD : (k + 1) * HELD] for k in range(3, 2 * len(LEVELS), 2)]
    assert all(any(abs(y) < 1.0 for y in stretch) for stretch in released)


def test_unguarded_inputs_are_finite() -> None:
    inputs, _ = vectors(servo(guard_nonfinite=False))
    assert all(map(isfinite, inputs))
    assert len(inputs) == 1216


def test_the_text_reads_back_to_the_same_values() -> None:
    design = servo(output_range=UNIT_RANGE)
    first, *rows = vectors_text(design, *vectors(design)).splitlines()
    assert first == "input,output"
    read = [[float.fromhex(word) for word in row.split(",")] for row in rows]
    for column, values in zip(zip(*read, strict=True), vectors(design), strict=True):
        assert np.array_equal(column, values, equal_nan=True)


def test_the_outputs_are_those_of_a_cleared_state() -> None:
    design = servo(output_range=UNIT_RANGE)
    inputs, outputs = vectors(design)
    assert design.recursion().run(inputs) == outputs
