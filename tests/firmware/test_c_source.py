"""The source file as text and as compilers see it; its answers are compared in test_compiled.py."""

from __future__ import annotations

import platform
import re
import shutil
from fractions import Fraction
from pathlib import Path

import pytest

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.realization import Realization
from realize.firmware import Emission, render_firmware
from tests.firmware.bench import WARNINGS, ZIG, Bench, rendered
from tests.firmware.designs import PERIOD_S, UNIT_RANGE, grid, parts, rounded
from tests.firmware.designs import emission as emission_of

CLANG, GCC = (*ZIG, "cc"), ("gcc",)
COMPILERS = [CLANG, *([GCC] if shutil.which("gcc") else [])]
KNOWN = {emission.name: emission for emission in grid()}


def chosen(arithmetic: str) -> Emission:
    """A limited cascade with everything in it."""
    target = FORMATS[arithmetic]
    chain, sections = rounded(target, "0.02", "0.0004"), parts(target)["undamped"]
    return emission_of("everything", Realization(target, "cascade", chain, sections, PERIOD_S), output_range=UNIT_RANGE)


@pytest.fixture(scope="module", params=["float32", "float64"])
def emission(request: pytest.FixtureRequest) -> Emission:
    return chosen(request.param)


@pytest.mark.parametrize("flags", [("-ffast-math",), ("-ffinite-math-only",)], ids=" ".join)
@pytest.mark.parametrize("compiler", COMPILERS, ids=lambda c: c[-1])
def test_fast_math_settings_stop_the_compilation(
    compiler: tuple[str, ...], flags: tuple[str, ...], emission: Emission, bench: Bench
) -> None:
    where = bench.emitted([emission])
    done = bench.compiler((*compiler, *flags, "-c", f"{emission.name}.c", "-o", "x.o"), where)
    assert done.returncode != 0
    assert f"{emission.name} must not be compiled with fast-math settings" in done.stderr
    assert "remove -ffast-math" in done.stderr


@pytest.mark.parametrize("flag", ["-funsafe-math-optimizations", "-freciprocal-math", "-fno-signed-zeros"])
def test_the_parts_of_fast_math_that_gcc_shows_stop_it_too(flag: str, emission: Emission, bench: Bench) -> None:
    if GCC in COMPILERS:
        done = bench.compiler((*GCC, flag, "-c", f"{emission.name}.c", "-o", "x.o"), bench.emitted([emission]))
        assert "must not be compiled with fast-math settings" in done.stderr


EVALUATION = "#undef FLT_EVAL_METHOD\n#define FLT_EVAL_METHOD"


def replaced(where: Path, emission: Emission, old: str, new: str) -> None:
    """Pretend that the machine is another."""
    path = where / f"{emission.name}.c"
    text = path.read_text()
    assert old in text
    path.write_text(text.replace(old, new, 1))


@pytest.mark.parametrize(
    ("arithmetic", "machine", "says", "advises"),
    [
        ("float32", f"{EVALUATION} 1", "needs float evaluated as float", "compile with -msse2 -mfpmath=sse"),
        ("float32", f"{EVALUATION} (-1)", "needs float evaluated as float", "compile with -msse2 -mfpmath=sse"),
        ("float32", "#undef FLT_EVAL_METHOD", "needs float evaluated as float", "compile as C99 or C++11, or later"),
        ("float64", f"{EVALUATION} 2", "needs double evaluated as double", "compile with -msse2 -mfpmath=sse"),
        ("float32", "#undef FLT_RADIX\n#define FLT_RADIX 16", "needs float to be IEEE 754 binary32", "the option"),
        (
            "float64",
            "#undef DBL_MANT_DIG\n#define DBL_MANT_DIG 24",
            "needs double to be IEEE 754 binary64",
            "emit with arithmetic float32",
        ),
        ("float32", "#undef FLT_MAX_EXP\n#define FLT_MAX_EXP 127", "needs float to be IEEE 754 binary32", "the option"),
        (
            "float32",
            "#undef FLT_HAS_SUBNORM\n#define FLT_HAS_SUBNORM 0",
            "needs subnormal numbers of float",
            "switch flush-to-zero off",
        ),
    ],
)
def test_a_machine_with_other_numbers_stops_the_compilation_and_says_what_to_do(
    arithmetic: str, machine: str, says: str, advises: str, bench: Bench
) -> None:
    emission = chosen(arithmetic)
    where = bench.emitted([emission])
    replaced(where, emission, "#include <float.h>\n", f"#include <float.h>\n{machine}\n")
    done = bench.compiler((*CLANG, "-c", f"{emission.name}.c", "-o", "x.o"), where)
    assert done.returncode != 0
    assert says in done.stderr
    assert advises in done.stderr


def test_double_evaluation_of_float_does_not_harm_double(bench: Bench) -> None:
    emission = chosen("float64")
    where = bench.emitted([emission])
    machine = "#undef FLT_EVAL_METHOD\n#define FLT_EVAL_METHOD 1\n"
    replaced(where, emission, "#include <float.h>\n", f"#include <float.h>\n{machine}")
    bench.compile((*CLANG, "-c", f"{emission.name}.c", "-o", "x.o"), where)


FUSED = re.compile(r"\b(v?fn?m(add|sub)\w*)\b", re.IGNORECASE)


def fused(bench: Bench, where: Path, command: tuple[str, ...], source: str) -> list[str]:
    bench.compile((*command, "-S", source, "-o", "x.s"), where)
    return [match[0] for match in FUSED.findall((where / "x.s").read_text())]


def in_pairs() -> Emission:
    """A design for which gcc 12 makes vectors of a sum and a difference, and fuses them whatever it was told."""
    target = FORMATS["float64"]
    realization = Realization(target, "direct", (-1.0,), parts(target)["second order"], PERIOD_S)
    return emission_of("in_pairs", realization, output_range=(Fraction(0), Fraction(10)))


@pytest.mark.parametrize("emission", [chosen("float32"), chosen("float64"), in_pairs()], ids=["32", "64", "in pairs"])
def test_nothing_is_fused_where_the_processor_could(emission: Emission, bench: Bench) -> None:
    where = bench.emitted([emission])
    without = [line for line in (where / f"{emission.name}.c").read_text().splitlines() if "#pragma" not in line]
    (where / "without.c").write_text("\n".join(without) + "\n")
    tries: list[tuple[str, ...]] = [(*CLANG, "-O2", "-target", "aarch64-freestanding")]
    if GCC in COMPILERS and platform.machine() == "x86_64":
        tries.append((*GCC, "-std=gnu11", "-O3", "-march=haswell"))
    for command in tries:
        assert fused(bench, where, command, f"{emission.name}.c") == []
        assert fused(bench, where, command, "without.c"), "the pragma is what keeps it out"


@pytest.mark.parametrize("language", [("cc", "-std=c99"), ("c++", "-x", "c++", "-std=c++11")], ids=lambda c: c[0])
def test_each_file_compiles_on_its_own(language: tuple[str, ...], emission: Emission, bench: Bench) -> None:
    where = bench.emitted([emission])
    (where / "header.c").write_text(f'#include "{emission.name}.h"\n#include "{emission.name}.h"\n')
    for source in (f"{emission.name}.c", "header.c"):
        command = (*ZIG, *language, *WARNINGS, "-Wmissing-prototypes", "-c", source, "-o", "x.o")
        bench.compile(command, where)


@pytest.mark.parametrize("name", KNOWN)
def test_the_only_include_is_float_h_and_every_global_name_is_prefixed(name: str) -> None:
    text = rendered(KNOWN[name])[f"{name}.c"]
    table = [f'"{name}_schedule.h"'] if KNOWN[name].schedule else []
    assert re.findall(r"#include (.*)", text) == [f'"{name}.h"', *table, "<float.h>"]
    names = re.findall(r"^(?:static inline |static )?(?:const )?\w+ \*?(\w+)[ (]", text, re.MULTILINE)
    assert len(names) > 4
    assert all(found.startswith(f"{name}_") for found in names if found not in ("struct",))


@pytest.mark.parametrize("name", KNOWN)
def test_every_coefficient_is_written_in_decimal_and_in_hexadecimal(name: str) -> None:
    emission = KNOWN[name]
    text = render_firmware(emission)[f"{name}.c"]
    pairs = re.findall(r"(-?[\d.]+e[+-]\d+)f?[,;] /\* (\S+)", text)
    digits = 9 if emission.realization.format.name == "float32" else 17
    for decimal, exact in pairs:
        assert emission.realization.format.round(Fraction(decimal)) == float.fromhex(exact)
        assert len(re.sub(r"e.*|[-.]", "", decimal)) == digits
    stored = {float.fromhex(exact) for _, exact in pairs}
    wanted = {c for s in emission.realization.sections for c in (*s.b, *s.a) if abs(c) not in (0, 1)}
    assert {abs(c) for c in wanted} <= {abs(c) for c in stored}
