"""The emitted C, compiled by every compiler of the machine, against the model: bit for bit."""

from __future__ import annotations

from collections.abc import Sequence
from random import Random

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.firmware import Emission
from tests.firmware.bench import Bench, Toolchain, bits, inputs_of, toolchains
from tests.firmware.designs import grid, in_delta, random_emission

NAMES = [toolchain.name for toolchain in toolchains()]
GRID = list(grid())


class Exercise:
    """Commands for the runner and what the model answers to them."""

    def __init__(self, emission: Emission) -> None:
        self.emission = emission
        self.model = emission.recursion()
        self.commands = [f"d {emission.name}", "c"]
        self.expected: list[str] = []

    def update(self, inputs: Sequence[float]) -> None:
        self.commands += [f"u {x.hex()}" for x in inputs]
        self.expected += map(bits, self.model.run(inputs))

    def output(self, x: float) -> float:
        self.commands.append(f"o {x.hex()}")
        command = self.model.output(x)
        self.expected.append(bits(command))
        return command

    def advance(self, x: float, applied: float) -> None:
        self.commands.append(f"a {x.hex()} {applied.hex()}")
        self.model.advance(x, applied)

    def preset(self, x: float, output: float) -> None:
        self.commands.append(f"p {x.hex()} {output.hex()}")
        self.expected.append(str(int(self.model.preset(x, output))))


def exercise(index: int, emission: Emission) -> Exercise:
    """The vectors, then odd values, actuators that do not obey, and bumpless starts."""
    work = Exercise(emission)
    draw = Random(index)
    work.update([*map(float.fromhex, inputs_of(emission))])
    for _ in range(12):
        work.preset(_odd(draw, emission), _odd(draw, emission))
        for _ in range(6):
            x = _odd(draw, emission)
            command = work.output(x)
            work.advance(x, draw.choice((command, command / 2, _odd(draw, emission))))
        work.update([_odd(draw, emission) for _ in range(3)])
    return work


def _odd(draw: Random, emission: Emission) -> float:
    """A value of the format that may be special; inputs that are not guarded stay finite."""
    ordinary = draw.gauss(0, 1) * 10.0 ** draw.randint(-3, 3)
    special = [0.0, -0.0, 1.0, 1e-44, -1e-40, 3e38]
    guarded = [float("nan"), float("inf"), -float("inf")] if emission.guard_nonfinite else []
    value = draw.choice((*[ordinary] * 12, *special, *guarded))
    return float(np.float32(value)) if emission.realization.format.name == "float32" else value


def mismatches(program_says: Sequence[str], exercises: Sequence[Exercise]) -> list[str]:
    """Design and answer number of everything that differs."""
    expected = [(work, k, answer) for work in exercises for k, answer in enumerate(work.expected)]
    assert len(program_says) == len(expected)
    return [
        f"{work.emission.name} answer {k}: C {said}, model {answer}"
        for said, (work, k, answer) in zip(program_says, expected, strict=True)
        if said != answer
    ]


@pytest.fixture(scope="module")
def exercises() -> list[Exercise]:
    return [exercise(index, emission) for index, emission in enumerate(GRID)]


@pytest.mark.parametrize("toolchain", toolchains(), ids=NAMES)
def test_the_compiled_c_answers_what_the_model_answers(
    toolchain: Toolchain, bench: Bench, exercises: list[Exercise]
) -> None:
    works = exercises[toolchain.share]
    program = bench.build([work.emission for work in works], toolchain)
    said = program.run([command for work in works for command in work.commands])
    assert mismatches(said, works) == []


@settings(max_examples=3)
@given(st.integers(0, 1 << 32))
def test_any_realization_answers_what_the_model_answers(bench: Bench, seed: int) -> None:
    drawn = [random_emission(f"r{k}", seed * 25 + k) for k in range(25)]
    emissions = [in_delta(each) if k % 3 == 0 else each for k, each in enumerate(drawn)]
    works = [exercise(index, emission) for index, emission in enumerate(emissions)]
    program = bench.build(emissions, toolchains()[0])
    said = program.run([command for work in works for command in work.commands])
    assert mismatches(said, works) == []
