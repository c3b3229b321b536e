"""The vectors reach every branch of the emitted code, as instrumented code shows that the compiler made it."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from realize.firmware import Emission
from tests.firmware.bench import ZIG, Bench, Program, Toolchain, inputs_of, vectors_of
from tests.firmware.designs import grid

# every function visible, every branch as written
INSTRUMENTED = Toolchain(
    "instrumented",
    (
        *(*ZIG, "cc", "-std=c99", "-O0", "-fno-sanitize=all", "-Dstatic=", "-Dinline="),
        "-fsanitize-coverage=trace-pc-guard,pc-table",
    ),
    (*ZIG, "cc"),
)
GRID = list(grid())


@pytest.fixture(scope="module")
def program(bench: Bench) -> Program:
    coverage = Path(__file__).with_name("coverage.c").read_text()
    return bench.build(GRID, INSTRUMENTED, beside=coverage)


def missed(program: Program, work: dict[str, list[str]], functions: dict[str, list[str]]) -> dict[str, int]:
    """Branches never taken, by function, after working the designs."""
    commands = [command for emission in GRID for command in (f"d {emission.name}", "c", *work[emission.name])]
    asked = [function for emission in GRID for function in functions[emission.name]]
    answers = program.run([*commands, *(f"b {function} 1" for function in asked)])[-len(asked) :]
    return {function: int(count) for function, count in zip(asked, answers, strict=True) if int(count)}


def called_by(emission: Emission, program: Path, *public: str) -> list[str]:
    """Full names of some public functions and of every helper they call."""
    text = (program / f"{emission.name}.c").read_text()
    bodies = dict(re.findall(r"^[a-z ]+ \*?(\w+)\([^;{]*\)\n\{\n(.*?)^\}", text, re.MULTILINE | re.DOTALL))
    names = [f"{emission.name}_{name}" for name in public]
    helpers = [name for name in bodies if any(re.search(rf"\b{name}\(", bodies[caller]) for caller in names)]
    return [*names, *helpers]


def updates(emission: Emission) -> list[str]:
    return [f"u {x}" for x in inputs_of(emission)]


def obstructed(emission: Emission) -> list[str]:
    """The vectors through output and advance, the command applied; then some of the actuator's own, or no number."""
    work = [f"o {x}\na {x} {command}" for x, command in vectors_of(emission)]
    odd = [f"o {x.hex()}\na {x.hex()} {applied}" for x in (1.0, -1.0) for applied in ("-0x1p+100", "0x1p+100")]
    return [*work, *odd, *(["a 0x1p+0 nan", "a 0x1p+0 inf"] if emission.guard_nonfinite else [])]


def test_the_instrumentation_sees_branches_that_are_not_taken(program: Program) -> None:
    guarded = next(emission for emission in GRID if emission.guard_nonfinite)
    told = program.run(
        [f"d {guarded.name}", "c", "u 0x1p+0", f"b {guarded.name}_update 0", f"b {guarded.name}_update 1"]
    )
    assert int(told[1]) > int(told[2]) > 0


def test_the_vectors_reach_every_branch_of_update(program: Program) -> None:
    work = {emission.name: updates(emission) for emission in GRID}
    functions = {emission.name: called_by(emission, program.directory, "update") for emission in GRID}
    assert missed(program, work, functions) == {}


def test_the_vectors_and_an_obstructed_actuator_reach_every_branch_of_output_and_advance(program: Program) -> None:
    work = {emission.name: obstructed(emission) for emission in GRID}
    functions = {emission.name: called_by(emission, program.directory, "output", "advance") for emission in GRID}
    assert missed(program, work, functions) == {}
