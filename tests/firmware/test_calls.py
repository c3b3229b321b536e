"""The emitted code calls no library, at any level of optimisation: on the smallest processor only what divides long
arithmetic into steps there is left to be linked, which comes with the compiler."""

from __future__ import annotations

import re
from pathlib import Path

import pytest
from elftools.elf.elffile import ELFFile
from elftools.elf.sections import SymbolTableSection

from realize.firmware import write_all
from realize.firmware.integer import render_integer_firmware
from realize.trial.compile import LEVELS
from realize.trial.targets import targets_named
from tests.firmware.bench import ZIG, Bench, rendered
from tests.firmware.designs import grid
from tests.firmware.integer.designs import grid as integer_grid

(SMALLEST,) = targets_named("cortex-m0")

#: Run-time ABI for the Arm architecture, tables 2 to 5 and 9: arithmetic and comparisons of numbers, in floats and in
#: integers of 64 bits. Functions that copy and set memory are in table 10.
ARITHMETIC = re.compile(r"__aeabi_([dfl](add|sub|mul)|[df]cmp(eq|lt|le|ge|gt|un))")


@pytest.fixture(scope="module")
def place(bench: Bench) -> Path:
    """One file of designs in floats and in integers, and of their self-tests."""
    where, names = bench.directory(), []
    for real in list(grid())[::20]:
        write_all(where, rendered(real))
        names.append(real.name)
    for whole in list(integer_grid())[::11]:
        names.append(f"i{whole.name}")
        write_all(where, render_integer_firmware(whole._replace(name=names[-1])))
    (where / "all.c").write_text("".join(f'#include "{name}.c"\n#include "{name}_selftest.c"\n' for name in names))
    return where


def undefined(bench: Bench, where: Path, name: str, level: str) -> set[str]:
    """What an object for the smallest processor leaves to be linked."""
    options = (*SMALLEST.flags, "-std=c99", "-fno-sanitize=undefined", "-fno-unwind-tables", *LEVELS[level])
    bench.compile((*ZIG, "cc", *options, "-c", name, "-o", "object.o"), where)
    with (where / "object.o").open("rb") as file:
        tables = [part for part in ELFFile(file).iter_sections() if isinstance(part, SymbolTableSection)]
        symbols = [symbol for table in tables for symbol in table.iter_symbols()]
    return {symbol.name for symbol in symbols if symbol["st_shndx"] == "SHN_UNDEF"} - {""}


@pytest.mark.parametrize("level", ["O0", "Os"])
def test_nothing_but_arithmetic_is_left_to_be_linked(bench: Bench, place: Path, level: str) -> None:
    assert {name for name in undefined(bench, place, "all.c", level) if not ARITHMETIC.fullmatch(name)} == set()


def test_a_call_that_the_compiler_makes_of_an_initialiser_is_found(bench: Bench) -> None:
    where = bench.directory()
    body = "typedef struct { long long a[9]; } many; many f(void); many f(void) { many x = {{0}}; return x; }\n"
    (where / "call.c").write_text(body)
    assert any("mem" in name for name in undefined(bench, where, "call.c", "O0"))


def test_no_object_of_a_function_is_set_as_a_whole(place: Path) -> None:
    """Compilers make calls of that, some sooner than others; tables stand outside of functions."""
    sources = [path.read_text() for path in place.glob("*.c")]
    assert [line for source in sources for line in re.findall(r"^ +[^\n/]*= ?\{", source, re.MULTILINE)] == []
