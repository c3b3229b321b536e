"""The self-test in floats: content with what it stands beside, discontent with anything else, and it reaches every
branch."""

from __future__ import annotations

import re
from fractions import Fraction
from random import Random

import pytest

from realize.arithmetic.sample import largest
from realize.firmware import Emission, write_all
from realize.firmware.selftest import STRETCH, chosen, refusals
from tests.firmware.bench import SHARE, Bench, rendered, toolchains
from tests.firmware.designs import grid
from tests.firmware.selftests import missed, returned

GRID = list(grid())
#: The first compiler, silent about what is wrong.
WHATEVER = toolchains()[0]._replace(code=(*toolchains()[0].code, "-w"))
NAMES = [toolchain.name for toolchain in toolchains()]


@pytest.mark.parametrize("number", range(len(NAMES)), ids=NAMES)
def test_every_compiler_passes_without_a_warning_or_a_trap(bench: Bench, number: int) -> None:
    designs = GRID[number :: 2 * SHARE]
    names = [emission.name for emission in designs]
    assert returned(bench, bench.emitted(designs), names, toolchains()[number]) == dict.fromkeys(names, 0)


def drawn(emission: Emission) -> set[str | None]:
    """Fields that the preset refuses for some finite arguments, of every size and sign."""
    model, draw, most = emission.recursion(), Random(1), largest(emission.realization.format)
    pairs = (
        (draw.choice((1, -1)) * most * 2 ** -draw.uniform(0, 40), draw.choice((0, most, -most))) for _ in range(300)
    )
    return {model.refused(emission.realization.format.round(Fraction(x)), y) for x, y in pairs} - {None}


def test_it_reaches_every_branch_but_refusals_that_no_finite_argument_makes(bench: Bench) -> None:
    some = GRID[::3]
    where = bench.emitted(some)
    expected = {}
    for emission in some:
        model = emission.recursion()
        played = {model.refused(*pair) for pair in refusals(model, largest(emission.realization.format))}
        assert drawn(emission) <= played - {None}
        preset = (
            (where / f"{emission.name}.c").read_text().partition(f"int {emission.name}_preset(")[2].partition("\n}")[0]
        )
        expected[f"{emission.name}_preset"] = preset.count("_is_finite(") - len(("input", "output")) - len(played)
    assert missed(bench, where, [emission.name for emission in some]) == {f: n for f, n in expected.items() if n}


def wrong(emission: Emission, pattern: str, to: str) -> dict[str, str]:
    files = rendered(emission)
    source = files[f"{emission.name}.c"]
    changed = re.sub(pattern, to, source, count=1)
    assert changed != source
    return files | {f"{emission.name}.c": changed}


def integrating() -> list[Emission]:
    """Guarded, limited and holding the integral, in both formats, coefficients inline."""
    found = [
        emission
        for emission in GRID
        if emission.guard_nonfinite
        and emission.output_range
        and emission.anti_windup == "hold-integral"
        and emission.realization.integral
        and emission.realization.structure != "delta"
    ]
    return [next(e for e in found if e.realization.format.name == name) for name in ("float32", "float64")]


WRONG = [
    (r"(return raised < \w+ \? raised : \w+);", r"\1 / 2;"),
    (r"increment > 0\.0f?;", "increment < 0;"),
    (r"return increment < 0\.0f?;", "return 0;"),
    (r"(_update\([^{]*\{\n    if \()!", r"\1"),
    (r"(_advance\([^{]*\{.*?)state->accepted = input;", r"\1"),
    (r"(_output\([^{]*\{.*?)state->unclamped = unclamped;", r"\1"),
    (r"(_preset\([^{]*\{.*?)return input >= 0.0f? && ", r"\1return "),
    (r"(_preset\([^{]*\{.*?\{\n        )return 0;", r"\1return 1;"),
]


@pytest.fixture(scope="module")
def returned_by_wrong(bench: Bench) -> list[list[int]]:
    """What the self-tests of the designs return, for each line that is wrong."""
    where, names = bench.directory(), []
    for k, (pattern, to) in enumerate(WRONG):
        names.append([f"{each.name}_{k}" for each in integrating()])
        for each, name in zip(integrating(), names[k], strict=True):
            write_all(where, wrong(each._replace(name=name), f"(?s){pattern}", to))
    answers = returned(bench, where, [name for some in names for name in some], WHATEVER)
    return [[answers[name] for name in some] for some in names]


@pytest.mark.parametrize("number", range(len(WRONG)), ids=[pattern for pattern, _ in WRONG])
def test_a_line_of_c_that_is_wrong_is_found(number: int, returned_by_wrong: list[list[int]]) -> None:
    assert 0 not in returned_by_wrong[number]


@pytest.mark.parametrize("line", [1, 2, 77, -1])
def test_it_returns_the_number_of_the_first_line_that_differs(bench: Bench, line: int) -> None:
    emission = integrating()[0]
    files = rendered(emission)
    name = f"{emission.name}_selftest.c"
    start = files[name].index("_held_lines[")
    lines = re.findall(r"^    \{.*\},$", files[name][start:].partition("};")[0], re.MULTILINE)
    number = line if line > 0 else len(lines)
    head, changed = files[name][:start], files[name][start:].split("\n")
    changed[number] = re.sub(r", \S+, (\d+)\},", r", 123.25f, \1},", changed[number])
    where = bench.directory()
    write_all(where, files | {name: head + "\n".join(changed)})
    assert returned(bench, where, [emission.name], toolchains()[0]) == {emission.name: number}


def test_a_zero_of_the_other_sign_differs(bench: Bench) -> None:
    emission = next(e for e in GRID if ", 0.0f, " in rendered(e)[f"{e.name}_selftest.c"])
    files = rendered(emission)
    name = f"{emission.name}_selftest.c"
    where = bench.directory()
    write_all(where, files | {name: files[name].replace(", 0.0f, ", ", -0.0f, ", 1)})
    assert returned(bench, where, [emission.name], toolchains()[0]) != {emission.name: 0}


def test_a_run_is_compared_early_and_at_its_end() -> None:
    assert list(chosen([5] * 20 + [1])) == [(5, 1), (5, 1), (5, 2), (5, 4), (5, 8), (5, 4), (1, 1)]


def test_a_stretch_between_runs_is_cut_and_the_runs_are_whole() -> None:
    inputs = [*range(100), *[7] * 30, *range(100)]
    taken = list(chosen(inputs))
    assert sum(held for value, held in taken if value == 7) == 30 + 1 + 1
    assert len(taken) == 2 * STRETCH + 6


def test_it_holds_a_few_hundred_lines() -> None:
    for emission in GRID:
        rows = re.findall(r"^    \{.*\},$", rendered(emission)[f"{emission.name}_selftest.c"], re.MULTILINE)
        assert 100 < len(rows) < 500
