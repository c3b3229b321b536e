"""``NAME_at``, compiled: the bits of the Python lookup at points, between, at their edges and far away."""

from __future__ import annotations

import re
import subprocess
import sys
from math import ceil, inf, log2, nan, nextafter

import numpy as np
import pytest

from realize.design.schedule import CODE_NAMES, LOOKUP_NAMES
from realize.firmware import Emission, render_firmware
from realize.firmware.schedule.c_lookup import search_steps
from realize.firmware.schedule.variable import swept
from realize.firmware.vectors import answers, vectors
from tests.firmware.bench import SHARE, Bench, bits, toolchains
from tests.firmware.designs import scheduled

EMISSIONS = list(scheduled())
NAMES = [toolchain.name for toolchain in toolchains()]

#: Of the one design with back-calculation, in float32: period over tracking time, the same at every point.
TRACKING_GAIN = float(np.float32(0.05))

#: Run by a process of its own: takes a library, reads a function, a number and a field, prints the bits of the answer.
RUN = """
import ctypes, struct, sys
library = ctypes.CDLL(sys.argv[1])
for line in sys.stdin:
    name, value, field = line.split()
    function = getattr(library, name)
    function.restype, function.argtypes = ctypes.c_double, (ctypes.c_double, ctypes.c_int)
    found = function(float.fromhex(value), int(field))
    print("nan" if found != found else struct.pack(">d", found).hex())
"""


FILES = {emission.name: render_firmware(emission) for emission in EMISSIONS}


def fields(emission: Emission) -> list[str]:
    """Of the coefficients, as the header declares them."""
    header = FILES[emission.name][f"{emission.name}.h"]
    body = re.search(rf"typedef struct \{{([^}}]*)\}} {emission.name}_coefficients;", header)
    assert body is not None
    return re.findall(r"(\w+);", body[1])


def neighbours(emission: Emission, value: float) -> list[float]:
    if emission.realization.format.name == "float64":
        return [nextafter(value, -inf), value, nextafter(value, inf)]
    single = np.float32(value)
    return [float(np.nextafter(single, np.float32(end))) for end in (-inf, inf)] + [float(single)]


def looked_at(emission: Emission) -> list[float]:
    """Points and their neighbours, a staircase with both infinities and NaN, and the ends of the format."""
    assert emission.schedule is not None
    points = emission.schedule.breakpoints
    wide = float(np.finfo(np.float32 if emission.realization.format.name == "float32" else np.float64).max)
    near = [each for point in points for each in neighbours(emission, point)]
    return [*near, *swept(emission.schedule, 400)[::7], inf, -inf, nan, wide, -wide, 0.0, -0.0, 1e-40]


def wrapper(emission: Emission) -> str:
    name, real = emission.name, {"float32": "float", "float64": "double"}[emission.realization.format.name]
    return (
        f'#include "{name}.h"\ndouble {name}_field(double value, int which) {{ {name}_coefficients found; '
        f"{name}_at(({real})value, &found); return ((const {real} *)&found)[which]; }}\n"
    )


@pytest.mark.parametrize("number", range(len(NAMES)), ids=NAMES)
def test_every_compiler_has_the_bits_of_the_model(bench: Bench, number: int) -> None:
    some = EMISSIONS if number % SHARE == 0 else EMISSIONS[number % len(EMISSIONS) :][:1]
    beside = "".join(map(wrapper, some))
    library = bench.build(some, toolchains()[number], beside).directory / "library.so"
    lines, wanted = [], []
    for emission in some:
        assert emission.schedule is not None
        for value in looked_at(emission):
            model = emission.schedule.at(value)
            for k, field in enumerate(fields(emission)):
                lines.append(f"{emission.name}_field {value.hex()} {k}")
                expected = model.get(field.replace("_minus_a", "_a"), TRACKING_GAIN)
                wanted.append(bits(0.0 - expected if "_minus_a" in field else expected))
    done = subprocess.run(
        (sys.executable, "-c", RUN, library), input="\n".join(lines), capture_output=True, text=True, check=True
    )
    found = done.stdout.split()
    assert len(found) == len(wanted)
    assert [(line, got) for line, got, want in zip(lines, found, wanted, strict=True) if want != got] == []


@pytest.mark.parametrize("emission", EMISSIONS, ids=lambda emission: emission.name)
def test_the_vectors_sweep_the_variable_past_both_ends_and_come_from_looked_up_coefficients(emission: Emission) -> None:
    lines = FILES[emission.name][f"{emission.name}_vectors.csv"].splitlines()
    assert lines[0] == "variable,input,output"
    rows = [[float.fromhex(word) for word in line.split(",")] for line in lines[1:]]
    inputs, outputs = vectors(emission)
    assert [bits(row[1]) for row in rows] == [bits(x) for x in inputs]
    assert [bits(row[2]) for row in rows] == [bits(y) for y in outputs]
    assert emission.schedule is not None
    points = emission.schedule.breakpoints
    swept_through = {row[0] for row in rows}
    assert swept_through > {*points, inf, -inf}
    assert min(swept_through - {-inf}) < points[0] < points[-1] < max(swept_through - {inf})
    assert any(row[0] != row[0] for row in rows)
    # The answers are not those of the first point alone.
    model = emission.recursion()
    assert [bits(y) for y in model.run(inputs)] != [bits(y) for y in outputs]
    model.clear()
    assert [bits(y) for y in answers(emission, model, inputs, [row[0] for row in rows])] == [bits(y) for y in outputs]


@pytest.mark.parametrize("emission", EMISSIONS, ids=lambda emission: emission.name)
def test_the_table_reads_back_to_the_stored_numbers_in_decimals_and_in_hexadecimals(emission: Emission) -> None:
    text = FILES[emission.name][f"{emission.name}_schedule.h"]
    pairs = re.findall(r"^ +(-?[0-9.e+-]+)f?, /\* (-?0x[0-9a-fp.+-]+|0x0p\+0) *(\w*) \*/$", text, re.MULTILINE)
    assert emission.schedule is not None
    names = fields(emission)
    points = emission.schedule.breakpoints
    assert len(pairs) == len(points) * (1 + len(names))
    single = emission.realization.format.name == "float32"
    for decimal, hexadecimal, _ in pairs:
        read = float(np.float32(decimal)) if single else float(decimal)
        assert read == float.fromhex(hexadecimal)
    assert [float.fromhex(pair[1]) for pair in pairs[: len(points)]] == list(points)
    assert [pair[2] for pair in pairs[len(points) :]] == names * len(points)


def test_a_coefficient_that_is_1_or_0_at_some_points_alone_is_multiplied() -> None:
    by_name = {emission.name: fields(emission) for emission in EMISSIONS}
    assert {"section1_b0", "section1_a1"} <= {*by_name["s0"]}
    # 1 at both points of s1, 0 at all of s3
    assert "section1_b0" not in by_name["s1"]
    assert "section1_b0" not in by_name["s3"]


@pytest.mark.parametrize("points", [2, 3, 4, 5, 6, 9, 10, 4096])
def test_the_steps_of_the_search_are_the_logarithm_of_the_intervals(points: int) -> None:
    assert search_steps(points) == ceil(log2(points - 1))


def test_the_header_says_what_a_lookup_costs() -> None:
    for emission in EMISSIONS:
        assert emission.schedule is not None
        header = " ".join(FILES[emission.name][f"{emission.name}.h"].replace("\n *", "").split())
        points, names = len(emission.schedule.points), fields(emission)
        assert f"It takes {2 + ceil(log2(points - 1))} comparisons at most, a division" in header
        assert f"for each of {len(names)} coefficients a multiplication and two additions" in header
        assert "It need not be called every sample" in header


def test_the_set_of_the_first_point_has_a_name_that_does_not_promise_the_nominal_values() -> None:
    for emission in EMISSIONS:
        files = FILES[emission.name]
        text = "".join(files.values())
        assert f"{emission.name}_nominal" not in text
        first = re.findall(r"/\* (\S+) \w+ \*/", files[f"{emission.name}_schedule.h"].partition("{ /* point 1")[2])
        (named,) = re.findall(rf"{emission.name}_first_point = \{{(.*?)\}};", text, re.DOTALL)
        assert re.findall(r"/\* (\S+) \w+ \*/", named) == first[: named.count(",")]


def test_the_variable_can_take_no_name_that_the_code_has() -> None:
    for emission in EMISSIONS:
        files = FILES[emission.name]
        code = "".join(text for name, text in files.items() if name in (f"{emission.name}.c", f"{emission.name}.h"))
        bare = re.sub(r'/\*.*?\*/|#include ".*"', "", code, flags=re.DOTALL)
        own = set(re.findall(rf"\b{emission.name}_(\w+)", bare)) - {"H"}
        assert {name.lower() for name in own} <= set(CODE_NAMES)
        (lookup,) = re.findall(rf"^void {emission.name}_at\([^;]*?\)\n\{{.*?^\}}", bare, re.DOTALL | re.MULTILINE)
        locals_ = set(re.findall(r"(?:int|float|double|\*const) (\w+) =", lookup)) | {"coefficients"}
        assert locals_ == set(LOOKUP_NAMES)
