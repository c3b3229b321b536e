"""The self-test of a schedule: content with what it stands beside, discontent with a lookup that is wrong."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from realize.firmware import Emission, render_firmware, write_all
from tests.firmware.bench import Bench, Toolchain, toolchains
from tests.firmware.designs import scheduled
from tests.firmware.selftests import missed, returned

EMISSIONS = list(scheduled())
NAMES = [emission.name for emission in EMISSIONS]
FILES = {emission.name: render_firmware(emission) for emission in EMISSIONS}
#: One of each family of compilers, silent about what is wrong.
SILENT = [t._replace(code=(*t.code, "-w")) for t in toolchains() if t.name in ("clang-c99", "gcc-gnu11")]


def written(bench: Bench, emissions: list[Emission]) -> Path:
    where = bench.directory()
    for emission in emissions:
        write_all(where, FILES[emission.name])
    return where


@pytest.mark.parametrize("toolchain", [t for t in toolchains() if t.share == slice(None)], ids=lambda each: each.name)
def test_it_passes_without_a_warning_or_a_trap(bench: Bench, toolchain: Toolchain) -> None:
    assert returned(bench, written(bench, EMISSIONS), NAMES, toolchain) == dict.fromkeys(NAMES, 0)


def test_it_reaches_every_branch_of_the_lookup(bench: Bench) -> None:
    found = missed(bench, written(bench, EMISSIONS), NAMES)
    assert {function for function in found if not function.endswith("_preset")} == set()


#: What may go wrong in ``NAME.c`` or in the table of a schedule with more than two points.
WRONG = [
    (r"return first \+ part;", "return first;"),
    (r"return first \+ part;", "return second;"),
    (r"upper = lower \+ 1;", "upper = lower;"),
    (r"(\w+_point_below\(float value\)[^}]*low = )0", r"\g<1>1"),
    (r"k < 2;", "k < 1;"),
    (r">= (\w+_points)\[\w+_LAST\]", r"> 2 * \1[s0_LAST]"),
]


@pytest.mark.parametrize(("pattern", "to"), WRONG)
def test_a_lookup_that_is_wrong_is_found(bench: Bench, pattern: str, to: str) -> None:
    files = FILES["s0"]
    changed = re.sub(pattern, to, files["s0.c"], count=1)
    assert changed != files["s0.c"]
    where = bench.directory()
    write_all(where, files | {"s0.c": changed})
    assert returned(bench, where, ["s0"], SILENT[0])["s0"] != 0


def test_a_number_of_the_table_that_is_wrong_is_found(bench: Bench) -> None:
    files = FILES["s0"]
    changed = files["s0_schedule.h"].replace(
        "5.00000000e-01f, /* 0x1p-1 integral1", "6.00000000e-01f, /* 0x1p-1 integral1"
    )
    assert changed != files["s0_schedule.h"]
    where = bench.directory()
    write_all(where, files | {"s0_schedule.h": changed})
    assert returned(bench, where, ["s0"], SILENT[0])["s0"] != 0
