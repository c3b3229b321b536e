"""Static analysis finds nothing in any emitted file: every structure, format, storage and anti-windup.

What is switched off is listed with its reason; everything else of the families named is on.
"""

from __future__ import annotations

import subprocess
import sys
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path

import pytest

from realize.arithmetic.integer import STRUCTURES
from realize.firmware import write_all
from realize.firmware.integer import IntegerEmission, render_integer_firmware
from tests.firmware.bench import rendered
from tests.firmware.designs import grid, scheduled
from tests.firmware.integer.designs import WIDTHS
from tests.firmware.integer.designs import grid as integer_grid

TOOLS = Path(sys.executable).parent

#: Families of clang-tidy that are on.
FAMILIES = ("bugprone", "cert", "clang-analyzer", "misc", "performance", "portability", "readability")

#: Checks of them that are off, and why.
OFF = {
    "bugprone-easily-swappable-parameters": "an input and an output of one type are what a controller has",
    "bugprone-implicit-widening-of-multiplication-result": "two 16-bit halves are multiplied in 32 bits, which fits",
    "bugprone-misplaced-widening-cast": "a product proven to fit 32 bits is made in 32 bits and widened on purpose",
    "bugprone-signed-bitwise": "what is shifted is unsigned; only the count, a literal, is an int",
    "misc-include-cleaner": "<stdint.h> comes through the header of the same name, on purpose",
    "misc-redundant-expression": "infinity less itself is how a self-test makes what is not a number",
    "readability-magic-numbers": "limits and binary points are the design's, named in the comments beside them",
    "readability-redundant-parentheses": "a sum or a test of one part keeps the parentheses of one of many",
    "readability-redundant-casting": "one spelling for factors of every width: a few casts are to the type they have",
    "readability-uppercase-literal-suffix": "the suffixes f, u and ull are the common spelling; l alone is not used",
    "readability-math-missing-parentheses": "a * b + c is read as in mathematics; warnings of compilers stay on",
    "readability-use-concise-preprocessor-directives": "#if !defined is what stands beside the other conditions",
}

#: What cppcheck would say that does not apply, and why.
SUPPRESSED = {
    "missingIncludeSystem": "it needs no system header, and says so",
    "unusedFunction": "the caller is the user's code",
    "staticFunction": "likewise",
    "constParameterPointer": "a function has one signature in every design, whether or not it moves the state",
    "unmatchedSuppression": "not every set of files has all that is listed here",
    "checkersReport": "a summary of its own run",
}

#: What <float.h> of every processor that is asked for says; cppcheck reads no system header.
FLOAT_H = (
    *("-DFLT_EVAL_METHOD=0", "-DFLT_RADIX=2", "-DFLT_MANT_DIG=24", "-DFLT_MIN_EXP=-125", "-DFLT_MAX_EXP=128"),
    *("-DDBL_MANT_DIG=53", "-DDBL_MIN_EXP=-1021", "-DDBL_MAX_EXP=1024"),
)

#: What a compiler for a processor without a long multiply defines.
SHORT = "-D__ARM_ARCH_6M__"


@pytest.fixture(scope="module")
def files(tmp_path_factory: pytest.TempPathFactory) -> list[Path]:
    """C of a set that has every structure in every format, and every option."""
    where = tmp_path_factory.mktemp("analysed")
    chosen = list(grid())[::9]
    kinds = {
        (e.realization.format.name, e.realization.structure, e.anti_windup, e.coefficients): e for e in reversed(chosen)
    }
    for each in (*kinds.values(), *scheduled()):
        write_all(where, rendered(each))
    found: dict[tuple[object, ...], IntegerEmission] = {}
    for one in sorted(integer_grid(), key=lambda one: one.coefficients):  # inline first: it has two ways to multiply
        found.setdefault((one.realization.structure, one.realization.widths), one)
        found.setdefault((one.anti_windup, one.coefficients, one.realization.widths.bits), one)
    assert {(structure, widths) for structure in STRUCTURES for widths in WIDTHS} - {*found} == set()
    for one in {one.name: one._replace(name=f"i{one.name}") for one in found.values()}.values():
        write_all(where, render_integer_firmware(one))
    return sorted(where.glob("*.c"))


def complaints(tool: str, options: tuple[str, ...], after: tuple[str, ...], files: list[Path]) -> str:
    """What a tool says of files, in two processes."""

    def run(some: list[Path]) -> str:
        command = [str(part) for part in (TOOLS / tool, *options, *some, *after)]
        done = subprocess.run(command, capture_output=True, text=True, check=False)
        assert done.returncode in (0, 1), done.stderr
        return "\n".join(
            line for line in (done.stdout + done.stderr).splitlines() if ": " in line and line.endswith("]")
        )

    with ThreadPoolExecutor(2) as pool:
        return "".join(pool.map(run, (files[::2], files[1::2])))


def with_short_products(files: list[Path]) -> list[Path]:
    """Those that have other code for processors without a long multiply."""
    found = [path for path in files if "SHORT_PRODUCTS" in path.read_text()]
    assert len(found) >= len(STRUCTURES)
    return found


def tidy(off: dict[str, str]) -> tuple[str, ...]:
    checks = ",".join(("-*", *(f"{family}-*" for family in FAMILIES), *(f"-{check}" for check in off)))
    return "--quiet", f"--checks={checks}"


CPPCHECK = (
    *("--enable=all", "--check-level=exhaustive", "--inconclusive", "--std=c99", "--quiet", *FLOAT_H),
    *(f"--suppress={name}" for name in SUPPRESSED),
)


def test_clang_tidy_finds_nothing(files: list[Path]) -> None:
    assert complaints("clang-tidy", tidy(OFF), ("--", "-std=c99"), files) == ""


def test_clang_tidy_finds_nothing_in_the_code_for_short_products(files: list[Path]) -> None:
    assert complaints("clang-tidy", tidy(OFF), ("--", "-std=c99", SHORT), with_short_products(files)) == ""


def test_cppcheck_finds_nothing(files: list[Path]) -> None:
    assert complaints("cppcheck", CPPCHECK, (), files) == ""


def test_cppcheck_finds_nothing_in_the_code_for_short_products(files: list[Path]) -> None:
    assert complaints("cppcheck", (*CPPCHECK, SHORT), (), with_short_products(files)) == ""


def test_cppcheck_reads_the_code_for_short_products_where_it_is_told_to(tmp_path: Path) -> None:
    fault = next(source for source, (tool, _) in FAULTS.items() if tool == "cppcheck")
    path = tmp_path / "fault.c"
    path.write_text(
        f"#if defined(__ARM_ARCH_6M__)\n#define x_SHORT_PRODUCTS\n#endif\n#ifdef x_SHORT_PRODUCTS\n{fault}\n#endif\n"
    )
    assert [bool(complaints("cppcheck", (*CPPCHECK, *more), (), [path])) for more in ((), (SHORT,))] == [False, True]


FAULTS = {
    "static int f(int x) { int unset; if (x) unset = 1; return unset; } int g(int x); int g(int x) { return f(x); }": (
        "clang-tidy",
        "clang-analyzer-core.uninitialized",
    ),
    "int g(int x); int g(int x) { int a[2] = {0, 0}; a[2] = x; return a[0]; }": ("cppcheck", "arrayIndexOutOfBounds"),
}


@pytest.mark.parametrize(("source", "found"), FAULTS.items())
def test_a_fault_is_found(tmp_path: Path, source: str, found: tuple[str, str]) -> None:
    (tmp_path / "fault.c").write_text(source)
    tool, name = found
    options, after = (tidy(OFF), ("--", "-std=c99")) if tool == "clang-tidy" else (CPPCHECK, ())
    assert name in complaints(tool, options, after, [tmp_path / "fault.c"])
