"""Compiling emitted code and running it: one program for many designs, since every name is prefixed.

The compiler that pip installs is always there; gcc is used as well where the machine has it. Undefined behaviour traps.
"""

from __future__ import annotations

import os
import shutil
import struct
import subprocess
import sys
from collections.abc import Sequence
from math import isnan
from pathlib import Path
from typing import NamedTuple

from realize.firmware import Emission, render_firmware, write_all
from realize.firmware.c_text import own_set
from realize.firmware.integer import IntegerEmission, render_integer_firmware

WARNINGS = (
    *("-pedantic", "-Wall", "-Wextra", "-Wconversion", "-Wdouble-promotion", "-Wshadow", "-Werror"),
    # common in firmware builds, though not asked for
    *("-Wfloat-equal", "-Wundef", "-Wcast-qual", "-Wswitch-default"),
)
ZIG = (sys.executable, "-m", "ziglang")
ZIG_TRAPS = ("-fsanitize=undefined", "-fsanitize-trap=undefined")
GCC_TRAPS = ("-fsanitize=undefined", "-fsanitize-undefined-trap-on-error")
#: One design in so many: prime to the number of options in the grid, so that every share has them all.
SHARE = 5
RUNNER = Path(__file__).with_name("runner.py")


_RENDERED: dict[int, tuple[object, dict[str, str]]] = {}


def rendered(emission: Emission | IntegerEmission) -> dict[str, str]:
    """The files of an emission, made once for each object: designs of the grids are the same in every module."""
    if id(emission) not in _RENDERED:
        files = render_firmware(emission) if isinstance(emission, Emission) else render_integer_firmware(emission)
        _RENDERED[id(emission)] = emission, files
    return _RENDERED[id(emission)][1]


def inputs_of(emission: Emission | IntegerEmission) -> list[str]:
    """Inputs of the vectors, as their file has them."""
    return [value for value, _ in vectors_of(emission)]


def vectors_of(emission: Emission | IntegerEmission) -> list[tuple[str, str]]:
    """Inputs and outputs of the vectors, as their file has them; what a schedule's variable is stands before them."""
    rows = (line.split(",") for line in rendered(emission)[f"{emission.name}_vectors.csv"].splitlines()[1:])
    return [(row[-2], row[-1]) for row in rows]


class Toolchain(NamedTuple):
    """How emitted code is compiled (``code``), and how what is only there to test it is (``plain``).

    The first of each family takes every design, the others a ``share`` of them, each its own.
    """

    name: str
    code: tuple[str, ...]
    plain: tuple[str, ...]
    share: slice = slice(None)


def toolchains() -> list[Toolchain]:
    """Every compiler and language mode of this machine."""
    zig = (*ZIG, "cc")
    found = [
        Toolchain("clang-c99", (*zig, "-std=c99", "-O2", *ZIG_TRAPS), zig),
        Toolchain("clang-gnu11-unoptimised", (*zig, "-std=gnu11", "-O0", *ZIG_TRAPS), zig, slice(0, None, SHARE)),
        Toolchain(
            "clang-c++11", (*ZIG, "c++", "-x", "c++", "-std=c++11", "-O2", *ZIG_TRAPS), zig, slice(1, None, SHARE)
        ),
    ]
    if shutil.which("gcc"):
        found += [
            Toolchain("gcc-gnu11", ("gcc", "-std=gnu11", "-O2", *_widest()), ("gcc",)),
            Toolchain("gcc-c99", ("gcc", "-std=c99", "-O1", *GCC_TRAPS), ("gcc",), slice(2, None, SHARE)),
        ]
    if shutil.which("g++") and shutil.which("gcc"):
        cpp = ("g++", "-x", "c++", "-std=c++11", "-O2", *GCC_TRAPS)
        found += [Toolchain("g++-c++11", cpp, ("gcc",), slice(3, None, SHARE))]
    return found


def _widest() -> tuple[str, ...]:
    """Fused multiply-add where this processor has it, so that contraction would show."""
    try:
        return ("-mfma",) if " fma " in Path("/proc/cpuinfo").read_text() else ()
    except OSError:
        return ()


class Program:
    """Designs, compiled into a library that a process of its own works."""

    def __init__(self, path: Path) -> None:
        self._path = path
        self.directory = path.parent

    def run(self, commands: Sequence[str]) -> list[str]:
        """What the runner prints, line by line; a trap fails the test."""
        done = subprocess.run(
            (sys.executable, RUNNER, self._path), input="\n".join(commands), capture_output=True, text=True, check=False
        )
        assert done.returncode == 0, f"the program ended with {done.returncode}: {done.stderr}"
        return done.stdout.split()


class Bench:
    """A place to compile in, with the compiler's cache in it, but for its runtime: that is built once for all."""

    def __init__(self, place: Path) -> None:
        self.place = place
        self._environment = os.environ | {"ZIG_LOCAL_CACHE_DIR": str(place / "zig-local")}
        self._count = 0

    def compiler(self, command: Sequence[str], where: Path) -> subprocess.CompletedProcess[str]:
        """Run a compiler in a directory."""
        return subprocess.run(command, cwd=where, env=self._environment, capture_output=True, text=True, check=False)

    def compile(self, command: Sequence[str], where: Path) -> str:
        """Run a compiler that must be content, and say nothing."""
        done = self.compiler(command, where)
        assert done.returncode == 0, done.stderr
        return done.stdout

    def directory(self) -> Path:
        """A fresh one."""
        self._count += 1
        path = self.place / f"build{self._count}"
        path.mkdir()
        return path

    def emitted(self, emissions: Sequence[Emission]) -> Path:
        """A directory with the files of the emissions."""
        where = self.directory()
        for emission in emissions:
            write_all(where, rendered(emission))
        return where

    def build(self, emissions: Sequence[Emission], toolchain: Toolchain, beside: str = "") -> Program:
        """Compile the emissions into one library: the code as the toolchain says, wrappers and what is beside as C."""
        where = self.emitted(emissions)
        (where / "code.c").write_text("".join(f'#include "{emission.name}.c"\n' for emission in emissions))
        (where / "wrappers.c").write_text(beside + "".join(map(_wrappers, emissions)))
        self.compile((*toolchain.code, *WARNINGS, "-fPIC", "-c", "code.c", "-o", "code.o"), where)
        self.compile((*toolchain.plain, "-w", "-O1", "-fPIC", "-c", "wrappers.c", "-o", "wrappers.o"), where)
        alone = ("-shared", "-nostdlib", "-Wl,-z,defs")  # whatever the code called would be missing
        self.compile((*toolchain.plain, *alone, "code.o", "wrappers.o", "-o", "library.so"), where)
        return Program(where / "library.so")


def _wrappers(emission: Emission) -> str:
    """Functions on doubles around the functions of a design, with one state."""
    name = emission.name
    real = {"float32": "float", "float64": "double"}[emission.realization.format.name]
    own = (
        f"&{name}_s, &{own_set(name, scheduled=emission.schedule is not None)}"
        if emission.coefficients == "table"
        else f"&{name}_s"
    )
    return (
        f'#include "{name}.h"\nstatic {name}_state {name}_s;\n'
        f"void {name}_clear_(void) {{ {name}_clear(&{name}_s); }}\n"
        f"double {name}_update_(double x) {{ return {name}_update({own}, ({real})x); }}\n"
        f"double {name}_output_(double x) {{ return {name}_output({own}, ({real})x); }}\n"
        f"void {name}_advance_(double x, double y) {{ {name}_advance({own}, ({real})x, ({real})y); }}\n"
        f"int {name}_preset_(double x, double y) {{ return {name}_preset({own}, ({real})x, ({real})y); }}\n"
    )


def bits(value: float) -> str:
    """What the runner prints for a value."""
    return "nan" if isnan(value) else struct.pack(">d", value).hex()


def value(printed: str) -> float:
    """The value the runner printed."""
    return float("nan") if printed == "nan" else float(struct.unpack(">d", bytes.fromhex(printed))[0])
