"""Small inputs, held for very long, in the compiled C: one count is integrated to the end; the deadband is what it is.

The loops are in C: some 1e8 samples of each arithmetic.
"""

from __future__ import annotations

from fractions import Fraction
from math import ceil
from pathlib import Path
from typing import NamedTuple

import pytest

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.integer import Widths, integer_realization, interface_of
from realize.arithmetic.integer.quiet import quiet
from realize.arithmetic.realization import realization
from realize.design import design_from_text
from realize.firmware import Emission, render_firmware, write_all
from realize.firmware.integer import IntegerEmission
from realize.methods import discretize
from realize.transfer import PulseTransferFunction
from tests.firmware.bench import ZIG
from tests.firmware.integer.bench import IntegerBench
from tests.firmware.integer.designs import WIDTHS, emission, signal

#: A PI with an integral time of 40 s at 10 kHz: a count adds 2.5e-6 counts a sample. Counts and limits are powers of
#: two, so that a product with an input of one count, and the limit, are exact in every format.
PI = ("1 + 1/(40*s)", "10 kHz")
COUNT = Fraction(1, 1 << 10)
FULL = 32
PORT = signal("-1/32", "1/32", "1/1024", 0, "int16")

#: Samples of zero input, in the middle of the integration.
PAUSE = 10**8

LOOP = """
static long long NAME_until(TYPE input, TYPE limit, long long most, NAME_state *s)
{
    long long k;
    for (k = 0; k < most; ++k) {
        if (NAME_update(s, input) == limit) return k;
    }
    return -1;
}
static int NAME_is_constant(TYPE input, long long samples, NAME_state *s)
{
    const TYPE first = NAME_update(s, input);
    long long k;
    for (k = 1; k < samples; ++k) {
        if (NAME_update(s, input) != first) return 0;
    }
    return 1;
}
"""


def pulse_of(transfer: str, rate: str) -> PulseTransferFunction:
    design = design_from_text(f'[design]\ntransfer = "{transfer}"\n[sampling]\nrate = "{rate}"\n', "invented")
    assert design.period_s is not None
    return discretize(design.transfer, design.period_s, "bilinear").pulse


def integers(bits: int, accumulator_bits: int) -> IntegerEmission:
    made = integer_realization(
        pulse_of(*PI), interface_of(PORT, PORT, f"int{bits}"), Widths(bits, accumulator_bits), "cascade"
    )
    return IntegerEmission(f"int{bits}", made, "bilinear", PI[0])


def floats(name: str) -> Emission:
    made = realization(pulse_of(*PI), FORMATS[name])
    return Emission(name, made, "bilinear", PI[0], output_range=PORT.range)


class Integrated(NamedTuple):
    """What a count, and the limit, are in C, and the sample in which the limit is reached: first and last possible."""

    name: str
    type: str
    one_count: str
    limit: str
    first: int
    last: int


def of_integers(one: IntegerEmission) -> Integrated:
    """The command is ``b0 + k R``, rounded once, half upward: at the upper limit from ``FULL - 1/2`` on.

    At the lower limit the halves go the other way; ``b0`` and R, as stored, come to no half here.
    """
    ((b0,), ()), (gain,) = one.realization.sections[0], one.realization.integral
    sample = (FULL - Fraction(1, 2) - b0) / gain
    assert sample.denominator > 1
    return Integrated(one.name, "int16_t", "1", str(FULL), ceil(sample), ceil(sample))


def of_floats(one: Emission) -> Integrated:
    """The command is ``b0 x + k R x``, both products exact, when sum and output round nothing.

    A double rounds every sum by half a unit at most. A compensated float loses nothing of an addition whose increment
    is the smaller one, and rounds what waits, below half a unit of the state, to half a unit of its own. So after n
    samples the state is off by at most n such errors, and the output by half a unit of the limit more.
    """
    stored = one.realization
    (b0,), gain = (Fraction(b) for b in stored.sections[0].b), Fraction(stored.integral[0])
    bits = {"float32": 24, "float64": 53}[one.name]
    limit, unit = FULL * COUNT, FULL * COUNT * Fraction(1, 1 << bits - 1)
    step = unit / (1 << bits) if one.name == "float32" else unit
    sample = (limit - b0 * COUNT) / (gain * COUNT)
    uncertain = (ceil(sample) * step / 2 + unit / 2) / (gain * COUNT)
    real = {"float32": "float", "float64": "double"}[one.name]
    return Integrated(
        one.name,
        real,
        float(COUNT).hex(),
        float(limit).hex(),
        ceil(sample - uncertain),
        ceil(sample + uncertain),
    )


INTEGERS, FLOATS = [integers(*WIDTHS[0]), integers(*WIDTHS[2])], [floats("float32"), floats("float64")]
CASES = [*map(of_integers, INTEGERS), *map(of_floats, FLOATS)]


def run(bench: IntegerBench, where: Path, body: str, loops: str) -> list[list[int]]:
    """Compile everything into one program, and read what it prints."""
    text = f"#include <stdio.h>\n{loops}int main(void)\n{{\n{body}return 0;\n}}\n"
    (where / "main.c").write_text(text)
    bench.compile((*ZIG, "cc", "-std=c99", "-O2", "main.c", "-o", "main"), where)
    return [[int(word) for word in line.split()] for line in bench.compile((str(where / "main"),), where).splitlines()]


def loop(name: str, kind: str) -> str:
    return f'#include "{name}.c"\n' + LOOP.replace("NAME", name).replace("TYPE", kind)


@pytest.fixture(scope="module")
def integrated(integer_bench: IntegerBench) -> dict[str, list[int]]:
    """Of every arithmetic: sample in which each limit is reached, whether the pause changed anything, and the rest."""
    where, body = integer_bench.emitted_integers(INTEGERS), ""
    for one in FLOATS:
        write_all(where, render_firmware(one))
    for case in CASES:
        n, half, most = case.name, case.first // 2, case.last + 10
        body += (
            f"{{ {n}_state s; long long up, down, part, rest; int still;\n"
            f"{n}_clear(&s); up = {n}_until({case.one_count}, {case.limit}, {most}, &s);\n"
            f"{n}_clear(&s); down = {n}_until(-{case.one_count}, -{case.limit}, {most}, &s);\n"
            f"{n}_clear(&s); part = {n}_until({case.one_count}, {case.limit}, {half}, &s);\n"
            f"still = {n}_is_constant(0, {PAUSE}, &s); rest = {n}_until({case.one_count}, {case.limit}, {most}, &s);\n"
            'printf("%lld %lld %lld %d %lld\\n", up, down, part, still, rest); }\n'
        )
    answers = run(integer_bench, where, body, "".join(loop(case.name, case.type) for case in CASES))
    return dict(zip((case.name for case in CASES), answers, strict=True))


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_one_count_integrates_to_the_full_output_in_the_computed_time(
    case: Integrated, integrated: dict[str, list[int]]
) -> None:
    up, down = integrated[case.name][:2]
    assert 10**7 < case.first <= up <= case.last
    assert case.first <= down <= case.last
    assert case.last - case.first <= 4  # of more than 1e7


@pytest.mark.parametrize("case", CASES, ids=lambda case: case.name)
def test_a_hundred_million_samples_of_zero_change_nothing(case: Integrated, integrated: dict[str, list[int]]) -> None:
    up, _, part, still, rest = integrated[case.name]
    assert part == -1
    assert still == 1
    assert case.first // 2 + rest == up


def test_the_proven_time_is_that_of_the_stored_integral() -> None:
    """Of the integral alone, over the whole range: ``ceil(2 FULL/R)``."""
    for one in INTEGERS:
        found = quiet(one.realization).integration
        assert found is not None
        (gain,) = one.realization.integral
        assert found == (ceil(1 / gain), ceil(2 * FULL / gain))


# ---------------------------------------------------------------- deadband


def lag() -> IntegerEmission:
    """A lag that stalls where a sample would move its output by less than half a unit."""
    port = signal("-8", "8", "1/2000", 0, "int16")
    made = integer_realization(pulse_of("1/(s + 1)", "200 Hz"), interface_of(port, port, "int16"), WIDTHS[0], "direct")
    return IntegerEmission("lag", made, "bilinear", "1/(s + 1)")


def answered_by_lag(one: IntegerEmission) -> int:
    """Smallest positive input that the output ever answers, from the stored section.

    In units, n goes to ``floor(a n + b x + 1/2)``: it rises while ``b x - (1 - a) n >= 1/2``, and the output is 1 count
    from half a count of it on.
    """
    (b, (a1,)), bits = one.realization.sections[0], one.realization.program.words["section1_output"].fraction_bits
    half_a_count = 1 << bits - 1
    return ceil((Fraction(1, 2) + (1 + a1) * (half_a_count - 1)) / (sum(b) * 2**bits))


def answered_by_search(one: IntegerEmission) -> int:
    answer = quiet(one.realization).positive
    assert answer.exact
    assert answer.counts is not None
    return answer.counts


def test_a_constant_input_below_the_deadband_is_never_answered_and_the_next_one_is(integer_bench: IntegerBench) -> None:
    found, normal = lag(), emission("normal", "three", "normal", WIDTHS[0])
    limits = [(found, answered_by_lag(found)), (normal, answered_by_search(normal))]
    assert answered_by_lag(found) == answered_by_search(found)
    where, body, loops = integer_bench.emitted_integers([one for one, _ in limits]), "", ""
    for one, least in limits:
        n = one.name
        assert least > 10
        loops += loop(n, "int16_t")
        body += f"{{ {n}_state s; int below, at;\n"
        body += f"{n}_clear(&s); below = {n}_is_constant({least - 1}, 10000000, &s) && !{n}_update(&s, {least - 1});\n"
        body += f'{n}_clear(&s); at = {n}_is_constant({least}, 10000000, &s); printf("%d %d\\n", below, at); }}\n'
    assert run(integer_bench, where, body, loops) == [[1, 0]] * len(limits)
