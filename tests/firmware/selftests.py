"""Self-tests of many designs in one program: what each returns, and which branches it reaches."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Sequence
from pathlib import Path

from tests.firmware.bench import ZIG, Bench, Toolchain

COVERAGE = Path(__file__).with_name("coverage.c")

#: Every function visible, every branch as written.
INSTRUMENTED = Toolchain(
    "instrumented",
    (
        *(*ZIG, "cc", "-std=c99", "-O0", "-fno-sanitize=all", "-Dstatic=", "-Dinline="),
        "-fsanitize-coverage=trace-pc-guard,pc-table",
    ),
    (*ZIG, "cc"),
)


#: Run by a process of its own, so that a trap ends that one: takes a library and a count, prints what it answers.
RUN = """
import ctypes, sys
answers = (ctypes.c_int * int(sys.argv[2]))()
ctypes.CDLL(sys.argv[1]).work(answers)
print(*answers)
"""


def returned(bench: Bench, where: Path, names: Sequence[str], toolchain: Toolchain) -> dict[str, int]:
    """What the self-test of each name returns, the files being there; undefined behaviour traps."""
    answers = [f"{name}_selftest()" for name in names]
    return dict(zip(names, _run(bench, where, names, toolchain, "", answers), strict=True))


def missed(bench: Bench, where: Path, names: Sequence[str], *flags: str) -> dict[str, int]:
    """Functions of the C of each name with the branches that its self-test never takes."""
    functions = [f for name in names for f in defined((where / f"{name}.c").read_text())]
    tests = [f"{name}_selftest()" for name in names]
    asked = [f"{f} ? branches((uintptr_t){f}, 1) : 0" for f in functions]
    declared = "".join(f"extern __attribute__((weak)) void {f}(void);" for f in functions)
    toolchain = INSTRUMENTED._replace(code=(*INSTRUMENTED.code, *flags))
    found = _run(bench, where, names, toolchain, COVERAGE.read_text() + declared, [*tests, *asked])
    return {function: count for function, count in zip(functions, found[len(names) :], strict=True) if count}


def defined(source: str) -> list[str]:
    """Functions that a C file defines."""
    return re.findall(r"^[a-z][a-z0-9_ ]* \*?(\w+)\([^;{]*\)\n\{", source, re.MULTILINE)


def _run(
    bench: Bench, where: Path, names: Sequence[str], toolchain: Toolchain, beside: str, answers: Sequence[str]
) -> list[int]:
    """Values of expressions, one after the other, in a library that nothing else is linked to."""
    included = "".join(f'#include "{name}.c"\n#include "{name}_selftest.c"\n' for name in names)
    declared = "".join(f"int {name}_selftest(void);" for name in names)
    body = "".join(f"found[{k}] = {answer};\n" for k, answer in enumerate(answers))
    (where / "tested.c").write_text(included)
    (where / "work.c").write_text(f"{beside}{declared}\nvoid work(int *found) {{\n{body}}}\n")
    warnings = ("-Wall", "-Wextra", "-Wconversion", "-Wdouble-promotion", "-Wshadow", "-Wfloat-equal", "-Werror")
    bench.compile(
        (*toolchain.code, *warnings, "-fno-stack-protector", "-fPIC", "-c", "tested.c", "-o", "tested.o"), where
    )
    bench.compile((*toolchain.plain, "-w", "-O1", "-fPIC", "-c", "work.c", "-o", "work.o"), where)
    alone = ("-shared", "-nostdlib", "-Wl,-z,defs")
    bench.compile((*toolchain.plain, *alone, "tested.o", "work.o", "-o", "tested.so"), where)
    command = (sys.executable, "-c", RUN, where / "tested.so", str(len(answers)))
    done = subprocess.run(command, capture_output=True, text=True, check=True)
    return [int(word) for word in done.stdout.split()]
