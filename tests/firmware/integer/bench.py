"""Compiling emitted integer code: undefined behaviour and conversions that change a value trap, sign changes warn."""

from __future__ import annotations

import shutil
from collections.abc import Sequence
from pathlib import Path

from realize.firmware import write_all
from realize.firmware.integer import IntegerEmission
from tests.firmware.bench import WARNINGS, ZIG, Bench, Program, Toolchain, rendered

INTEGER_WARNINGS = (*WARNINGS, "-Wsign-conversion", "-Wsign-compare", "-Wstrict-overflow=2")
#: The wrapper around clang reads ``undefined`` only where it stands alone.
ZIG_TRAPS = tuple(f"-fsanitize{trap}={what}" for what in ("undefined", "implicit-conversion") for trap in ("", "-trap"))
GCC_TRAPS = ("-fsanitize=undefined", "-fsanitize-undefined-trap-on-error")

#: One design in so many for the toolchains after the first of a family: prime to the number of options in the grid.
SHARE = 5


def toolchains() -> list[Toolchain]:
    """Every compiler and language mode of this machine."""
    zig = (*ZIG, "cc")
    short = ("-D__ARM_ARCH_6M__",)  # what stands there for processors without long products, run here
    found = [
        Toolchain("clang-c99", (*zig, "-std=c99", "-O2", *ZIG_TRAPS), zig),
        Toolchain("clang-c99-short-products", (*zig, "-std=c99", "-O2", *ZIG_TRAPS, *short), zig, slice(4, None, 3)),
        Toolchain(
            "clang-c++11", (*ZIG, "c++", "-x", "c++", "-std=c++11", "-O1", *ZIG_TRAPS), zig, slice(1, None, SHARE)
        ),
    ]
    if shutil.which("gcc"):
        found.append(Toolchain("gcc-c99", ("gcc", "-std=c99", "-O1", *GCC_TRAPS), ("gcc",), slice(2, None, SHARE)))
    if shutil.which("g++") and shutil.which("gcc"):
        cpp = ("g++", "-x", "c++", "-std=c++11", "-O2", *GCC_TRAPS)
        found.append(Toolchain("g++-c++11", cpp, ("gcc",), slice(3, None, SHARE)))
    return found


class IntegerBench(Bench):
    """A place to compile in, with the compiler's cache in it."""

    def emitted_integers(self, emissions: Sequence[IntegerEmission]) -> Path:
        """A directory with the files of the emissions."""
        where = self.directory()
        for emission in emissions:
            write_all(where, rendered(emission))
        return where

    def build_integers(self, emissions: Sequence[IntegerEmission], toolchain: Toolchain) -> Program:
        """Compile the emissions into one library: the code as the toolchain says, wrappers as plain C."""
        return self.build_in(self.emitted_integers(emissions), emissions, toolchain)

    def build_in(
        self, where: Path, emissions: Sequence[IntegerEmission], toolchain: Toolchain, beside: str = ""
    ) -> Program:
        """Compile what stands in a directory, whether or not it was changed there, and what is beside as plain C."""
        (where / "code.c").write_text("".join(f'#include "{emission.name}.c"\n' for emission in emissions))
        (where / "wrappers.c").write_text("".join(map(_wrappers, emissions)) + beside)
        self.compile((*toolchain.code, *INTEGER_WARNINGS, "-fPIC", "-c", "code.c", "-o", "code.o"), where)
        self.compile((*toolchain.plain, "-w", "-O1", "-fPIC", "-c", "wrappers.c", "-o", "wrappers.o"), where)
        alone = ("-shared", "-nostdlib", "-Wl,-z,defs")  # whatever the code called would be missing
        self.compile((*toolchain.plain, *alone, "code.o", "wrappers.o", "-o", "library.so"), where)
        return Program(where / "library.so")


def _wrappers(emission: IntegerEmission) -> str:
    """Functions on doubles, which hold every count, around the functions of a design: NAME and NAME_twin."""
    name = emission.name
    return f'#include "{name}.h"\n' + wrappers(emission, name) + wrappers(emission, f"{name}_twin")


def wrappers(emission: IntegerEmission, called: str, table: str = "") -> str:
    """The functions under a name of their own, with a state of its own."""
    name, interface = emission.name, emission.realization.program.interface
    given, made = f"{interface.input.type}_t", f"{interface.output.type}_t"
    own = f"&{called}_s" + (f", &{table or f'{name}_nominal'}" if emission.coefficients == "table" else "")
    return (
        f"static {name}_state {called}_s;\n"
        f"void {called}_clear_(void) {{ {name}_clear(&{called}_s); }}\n"
        f"double {called}_update_(double x) {{ return {name}_update({own}, ({given})x); }}\n"
        f"double {called}_output_(double x) {{ return {name}_output({own}, ({given})x); }}\n"
        f"void {called}_advance_(double x, double y) {{ {name}_advance({own}, ({given})x, ({made})y); }}\n"
        f"int {called}_preset_(double x, double y) {{ return {name}_preset({own}, ({given})x, ({made})y); }}\n"
    )
