"""The emitted integer C, compiled by every compiler of the machine, against the model: bit for bit, trapping."""

from __future__ import annotations

import re
import subprocess
import sys
from collections.abc import Sequence
from fractions import Fraction
from random import Random

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.arithmetic.integer import IntegerRecursion, Widths
from realize.arithmetic.integer.interface import type_range
from realize.design import Signal
from realize.firmware import write_all
from realize.firmware.integer import IntegerEmission, render_integer_firmware
from realize.firmware.integer.vectors import vectors
from tests.firmware.bench import ZIG, Program, Toolchain, bits, inputs_of, rendered
from tests.firmware.integer.bench import ZIG_TRAPS, IntegerBench, toolchains
from tests.firmware.integer.designs import INPUTS, OUTPUTS, WIDE_INPUTS, WIDTHS, emission, grid, signal, some_count

TOOLCHAINS = toolchains()
GRID = list(grid())


class Exercise:
    """Commands for the runner and what the model answers to them."""

    def __init__(self, emission: IntegerEmission) -> None:
        self.emission = emission
        self.model = IntegerRecursion(emission.realization.program, checked=True)
        self.commands = [f"d {emission.name}", "c"]
        self.expected: list[str] = []

    def update(self, inputs: Sequence[int]) -> None:
        self.commands += [f"u {float(x).hex()}" for x in inputs]
        self.expected += [bits(float(y)) for y in self.model.run(inputs)]

    def output(self, x: int) -> int:
        self.commands.append(f"o {float(x).hex()}")
        command = self.model.output(x)
        self.expected.append(bits(float(command)))
        return command

    def advance(self, x: int, applied: int) -> None:
        self.commands.append(f"a {float(x).hex()} {float(applied).hex()}")
        self.model.advance(x, applied)

    def preset(self, x: int, output: int) -> None:
        self.commands.append(f"p {float(x).hex()} {float(output).hex()}")
        self.expected.append(str(int(self.model.preset(x, output))))


def exercise(index: int, emission: IntegerEmission) -> Exercise:
    """The vectors, then extremes, actuators that do not obey, and bumpless starts."""
    work, draw = Exercise(emission), Random(index)
    interface = emission.realization.program.interface
    incoming, outgoing = type_range(interface.input.type), type_range(interface.output.type)
    work.update([*map(int, inputs_of(emission))])
    for _ in range(12):
        work.preset(some_count(draw, *incoming), some_count(draw, *outgoing))
        for _ in range(6):
            x = some_count(draw, *incoming)
            command = work.output(x)
            if draw.random() < 0.2:
                work.output(x)
            work.advance(x, draw.choice((command, command // 2, some_count(draw, *outgoing))))
        work.update([some_count(draw, *incoming) for _ in range(3)])
    return work


def mismatches(said: Sequence[str], exercises: Sequence[Exercise]) -> list[str]:
    """Design and answer number of everything that differs."""
    expected = [(work, k, answer) for work in exercises for k, answer in enumerate(work.expected)]
    assert len(said) == len(expected)
    return [
        f"{work.emission.name} answer {k}: C {found}, model {answer}"
        for found, (work, k, answer) in zip(said, expected, strict=True)
        if found != answer
    ]


@pytest.fixture(scope="module")
def exercises() -> list[Exercise]:
    return [exercise(index, emission) for index, emission in enumerate(GRID)]


@pytest.mark.parametrize("toolchain", TOOLCHAINS, ids=[toolchain.name for toolchain in TOOLCHAINS])
def test_the_compiled_c_answers_what_the_model_answers(
    toolchain: Toolchain, integer_bench: IntegerBench, exercises: list[Exercise]
) -> None:
    works = exercises[toolchain.share]
    program = integer_bench.build_integers([work.emission for work in works], toolchain)
    said = program.run([command for work in works for command in work.commands])
    assert mismatches(said, works) == []


@pytest.mark.parametrize(
    "body",
    {
        "overflow": "int32_t f(int32_t x) { return x + 2147483647; }",
        "shift of a negative number": "int32_t f(int32_t x) { return (-x) << 3; }",
        "lost bits": "int16_t f(int32_t x) { return x * 70000; }",
        "lost sign": "uint32_t f(int32_t x) { return -x; }",
    }.items(),
    ids=lambda item: item[0],
)
def test_what_must_not_happen_would_trap(body: tuple[str, str], integer_bench: IntegerBench) -> None:
    where = integer_bench.directory()
    (where / "trap.c").write_text(f"#include <stdint.h>\n{body[1]}\n")
    alone = ("-shared", "-nostdlib", "-fPIC")
    integer_bench.compile((*ZIG, "cc", "-std=c99", "-O1", *ZIG_TRAPS, *alone, "trap.c", "-o", "trap.so"), where)
    call = "import ctypes, sys; ctypes.CDLL(sys.argv[1]).f(1)"
    done = subprocess.run((sys.executable, "-c", call, where / "trap.so"), check=False, capture_output=True)
    assert done.returncode != 0


def test_two_instances_are_independent(shared: Program) -> None:
    draw = Random(2)
    for one in SHARED:
        low, high = type_range(one.realization.program.interface.input.type)
        inputs = [[draw.randint(low, high) for _ in range(40)] for _ in range(2)]
        commands, expected = [], []
        models = one.recursion(), one.recursion()
        names = one.name, f"{one.name}_twin"
        commands += [line for name in names for line in (f"d {name}", "c")]
        for pair in zip(*inputs, strict=True):
            for name, model, x in zip(names, models, pair, strict=True):
                commands += [f"d {name}", f"u {float(x).hex()}"]
                expected.append(bits(float(model.update(x))))
        assert shared.run(commands) == expected


SHARED = [
    emission("one", "pid", "error-feedback", WIDTHS[0]),
    emission("two", "three", "normal", WIDTHS[1], (INPUTS["uint16"], OUTPUTS["uint8"]), ("none", "table", "add")),
    emission("three", "notch", "delta", WIDTHS[2], (WIDE_INPUTS["int32"], OUTPUTS["uint32"])),
    emission("four", "double", "cascade", WIDTHS[2], options=("back-calculation", "table", "subtract")),
]


@pytest.fixture(scope="module")
def shared(integer_bench: IntegerBench) -> Program:
    return integer_bench.build_integers(SHARED, TOOLCHAINS[0])


@settings(max_examples=12)
@given(st.data())
def test_any_inputs_and_actuators_are_answered_alike(shared: Program, data: st.DataObject) -> None:
    works = []
    for one in SHARED:
        work, interface = Exercise(one), one.realization.program.interface
        given_, made = (st.integers(*type_range(port.type)) for port in interface)
        for x, applied, kind in data.draw(st.lists(st.tuples(given_, made, st.integers(0, 3)), max_size=60)):
            if kind == 0:
                work.preset(x, applied)
            elif kind == 1:
                work.output(x)
                work.advance(x, applied)
            else:
                work.update([x])
        works.append(work)
    assert mismatches(shared.run([command for work in works for command in work.commands]), works) == []


def test_coefficients_are_swapped_whole_between_samples(integer_bench: IntegerBench) -> None:
    nominal = emission("swap", "pi", "cascade", WIDTHS[0], options=("hold-integral", "table", "subtract"))
    program = nominal.realization.program
    term, integral = program.command.terms[0], program.integral
    assert term.name == "section1_b0"
    assert integral is not None
    halved = term._replace(stored=term.stored // 2)
    other = IntegerRecursion(
        program._replace(
            command=program.command._replace(terms=(halved, *program.command.terms[1:])),
            integral=integral._replace(stored=(integral.stored[0] // 3,)),
        )
    )
    table = f"static const swap_coefficients other = {{ {halved.stored}, {integral.stored[0] // 3} }};\n"
    beside = (
        table
        + "double change_update_(double x) { return swap_update(&swap_s, &other, (int16_t)x); }\n"
        + "".join(f"void change_{name}_(void) {{}}\n" for name in ("clear", "output", "advance", "preset"))
    )
    where = integer_bench.emitted_integers([nominal])
    built = integer_bench.build_in(where, [nominal], TOOLCHAINS[0], beside)
    model, draw = nominal.recursion(), Random(5)
    commands, expected = ["d swap", "c"], []
    for k in range(60):
        x = draw.randint(-300, 300)
        commands += [f"d {('swap', 'change')[k // 10 % 2]}", f"u {float(x).hex()}"]
        other.state = model.state
        expected.append(bits(float((model, other)[k // 10 % 2].update(x))))
    assert built.run(commands) == expected


def output_of_int32(low: int, high: int, finer: str) -> Signal:
    """Counts of the size of those of the input, or so many times finer."""
    scale = 200_000_000 * Fraction(finer)
    return signal(str(low / scale), str(high / scale), str(1 / scale), 0, "int32")


#: Limits of a command that is a power of two times what 32 bits hold: at the ends of the type, odd, on one side. How
#: many times finer its counts are than those of the input.
LIMITS = [
    *((-(2**31), 2**31 - 1, finer) for finer in ("1/2", "1", "3/2", "2")),
    *((-1_000_000_001, 1_500_000_003, "1"), (0, 2**31 - 1, "1"), (-2_000_000_001, 0, "1"), (-5, 3, "1")),
]


def test_limits_beyond_what_a_variable_holds_are_those_of_the_model(integer_bench: IntegerBench) -> None:
    ends = [(WIDE_INPUTS["all of int32"], output_of_int32(*limits)) for limits in LIMITS]
    forms = [("direct", pair) for pair in ends] + [(form, ends[1]) for form in ("cascade", "error-feedback")]
    works = [exercise(k, emission(f"late{k}", "notch", form, WIDTHS[2], pair)) for k, (form, pair) in enumerate(forms)]
    sources = [rendered(work.emission)[f"{work.emission.name}.c"] for work in works]
    powers = [re.findall(r"The command, (\d+) times what is given, held", source) for source in sources]
    assert all(powers)
    for power, way in (("2", "_saturated("), ("4", "_within("), ("4", "if (unclamped >="), ("8", "if (unclamped >=")):
        assert any(way in source and power == found for source, (found,) in zip(sources, powers, strict=True))
    program = integer_bench.build_integers([work.emission for work in works], TOOLCHAINS[0])
    assert mismatches(program.run([command for work in works for command in work.commands]), works) == []


#: Designs with a 32-bit sum that the input enters directly and with which every remainder can be made; its shift.
MUTANTS = [
    ("pid", "cascade", 15),
    ("notch", "error-feedback", 14),
    ("notch", "delta", 14),
    ("notch", "direct", 14),
]


def test_vectors_notice_a_rounding_constant_or_a_limit_that_is_off_by_one(integer_bench: IntegerBench) -> None:
    where, changes = integer_bench.directory(), []
    emissions: list[IntegerEmission] = []
    for transfer, structure, shift in MUTANTS:
        half = 1 << shift - 1
        before, after = ("remainder = ", ";") if structure == "error-feedback" else (" + ", "u")
        for old, new in (
            (f"{before}{half}{after}", f"{before}{half - 1}{after}"),
            (f"{before}{half}{after}", f"{before}{half + 1}{after}"),
            ("return -4200", "return -4199"),
            ("return 4200", "return 4201"),
        ):
            mutant = emission(f"m{len(emissions)}", transfer, structure, WIDTHS[0])
            files = render_integer_firmware(mutant)
            assert old in files[f"{mutant.name}.c"]
            write_all(where, files | {f"{mutant.name}.c": files[f"{mutant.name}.c"].replace(old, new)})
            emissions.append(mutant)
            changes.append(f"{transfer} {structure}: {old} to {new}")
    program = integer_bench.build_in(where, emissions, TOOLCHAINS[0])
    unnoticed = []
    for mutant, change in zip(emissions, changes, strict=True):
        inputs, outputs = vectors(mutant)
        said = program.run([f"d {mutant.name}", "c", *(f"u {float(x).hex()}" for x in inputs)])
        unnoticed += [change] if said == [bits(float(y)) for y in outputs] else []
    assert unnoticed == []


@pytest.mark.parametrize(
    ("structure", "widths"), [("cascade", WIDTHS[0]), ("delta", WIDTHS[2])], ids=["32-bit sums", "64-bit sums"]
)
def test_rounding_is_an_addition_and_an_arithmetic_shift(
    structure: str, widths: Widths, integer_bench: IntegerBench
) -> None:
    one = emission("round", "pid", structure, widths)
    where = integer_bench.emitted_integers([one])
    source = (where / "round.c").read_text()
    name, kind = re.findall(r"(round_rounded(?:32|64)_\d+)\((int\d+_t) sum", source)[-1]
    probe = f"{kind} probe({kind} x);\n{kind} probe({kind} x) {{ return {name}(x); }}\n"
    (where / "probe.c").write_text(f'#include "round.c"\n{probe}')
    core = ("-target", "thumb-freestanding-eabi", "-mcpu=cortex_m3", "-fno-sanitize=undefined", "-fomit-frame-pointer")
    integer_bench.compile((*ZIG, "cc", "-std=c99", "-O2", *core, "-S", "probe.c", "-o", "probe.s"), where)
    text = (where / "probe.s").read_text().partition("probe:")[2].partition("bx\tlr")[0]
    code = [line.split()[0] for line in text.splitlines() if line.startswith("\t") and line.strip()[:1] not in ".@"]
    assert {operation.removesuffix(".w") for operation in code} & {"asr", "asrs"}
    assert not {operation[:3] for operation in code} & {"eor", "sub", "sbc", "cmp"}


def test_ends_of_the_ranges_and_the_period_are_known_to_the_preprocessor(integer_bench: IntegerBench) -> None:
    one = emission("macros", "pi", "cascade", WIDTHS[2], (WIDE_INPUTS["wide uint32"], OUTPUTS["uint32"]))
    where = integer_bench.emitted_integers([one])
    offset, given_ = 1 << 31, 1 << 30
    expected = {
        "INPUT_LOW": given_ - 800_000_000,
        "INPUT_HIGH": given_ + 2_000_000_000,
        "OUTPUT_LOW": offset - 600_000,
        "OUTPUT_HIGH": offset + 300_000,
        "PERIOD_NUMERATOR": 1,
        "PERIOD_DENOMINATOR": 2000,
    }
    checks = "".join(f"#if macros_{name} != {value}\n#error {name}\n#endif\n" for name, value in expected.items())
    (where / "checks.c").write_text(f'#include "macros.h"\n{checks}')
    for standard in ("c99", "c++11"):
        language = ("c++", "-x", "c++") if standard == "c++11" else ("cc",)
        integer_bench.compile((*ZIG, *language, f"-std={standard}", "-c", "checks.c", "-o", "checks.o"), where)
