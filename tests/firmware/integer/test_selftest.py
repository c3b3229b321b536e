"""The self-test in integers: content with what it stands beside; it reaches every branch that can be reached soon."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

from realize.firmware.integer import IntegerEmission, render_integer_firmware
from realize.firmware.integer.selftest import MOST_WINDING
from tests.firmware.integer.bench import SHARE, IntegerBench, toolchains
from tests.firmware.integer.designs import grid
from tests.firmware.selftests import missed, returned

#: A third of the designs, 3 being prime to what the grid turns over: every structure, format and option is among them.
GRID = list(grid())[::3]
DESIGNS = {emission.name: emission for emission in GRID}
NAMES = [toolchain.name for toolchain in toolchains()]


@pytest.fixture(scope="module")
def where(integer_bench: IntegerBench) -> Path:
    return integer_bench.emitted_integers(GRID)


@pytest.mark.parametrize("number", range(len(NAMES)), ids=NAMES)
def test_every_compiler_passes_without_a_warning_or_a_trap(
    integer_bench: IntegerBench, where: Path, number: int
) -> None:
    names = list(DESIGNS)[number :: 2 * SHARE]
    assert returned(integer_bench, where, names, toolchains()[number]) == dict.fromkeys(names, 0)


def never(emission: IntegerEmission) -> set[str]:
    """Functions that hold something to a limit which cannot be met, or not soon; or refuse what is never asked for."""
    program, name = emission.realization.program, emission.name
    if program.integral is None:  # the input that attains the peak gain is among the vectors, and both its signs
        return {f"{name}_{helper}" for helper in ("limited", "saturated", "within")}
    # With an integral every output within the range can be next, and none is beyond a range that fills its type.
    found = set() if any(program.interface.output.limits_type) else {f"{name}_preset"}
    for i, (gain, limits) in enumerate(zip(program.integral.stored, program.integral.limits, strict=True), 1):
        reach = min(abs(end) for end in program.interface.input[:2] if end)
        # Back-calculation draws it back from its limits; in a chain, one state drives another.
        free = emission.anti_windup != "back-calculation" and len(program.integral.stored) == 1
        if limits and not (free and limits[1] - limits[0] < (MOST_WINDING - 1) * abs(gain) * reach):
            found.add(f"{name}_held{i}")
    return found


@pytest.mark.parametrize("flags", [(), ("-D__ARM_ARCH_6M__",)], ids=["long products", "short products"])
def test_it_reaches_every_branch_but_those_of_limits_that_are_out_of_reach(
    integer_bench: IntegerBench, where: Path, flags: tuple[str, ...]
) -> None:
    found = missed(integer_bench, where, list(DESIGNS), *flags)
    assert {*found} - {function for emission in GRID for function in never(emission)} == set()


def test_the_last_bit_of_a_coefficient_is_found(integer_bench: IntegerBench) -> None:
    """Of a 16-bit design whose coefficients are all heard at full scale."""
    emission = next(e for e in GRID if e.coefficients == "inline" and e.realization.widths.bits == 16)
    files = render_integer_firmware(emission)
    source = files[f"{emission.name}.c"]
    changed = re.sub(r"(_b0 = )(-?\d+);", lambda m: f"{m[1]}{int(m[2]) + 1};", source, count=1)
    assert changed != source
    place = integer_bench.directory()
    for name, text in (files | {f"{emission.name}.c": changed}).items():
        (place / name).write_text(text)
    assert returned(integer_bench, place, [emission.name], toolchains()[0]) != {emission.name: 0}
