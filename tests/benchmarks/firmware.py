"""Instructions per sample of emitted code against hand-written kernels, per structure and processor.

Run from the top of the project: ``python -m tests.benchmarks.firmware``, with names of processors to see those alone.
Needs the extra ``target``.

``kernels.c`` and ``kernels.h`` beside this file are the yardstick: difference equations written by hand, of several
formulations the one with the fewest instructions on each processor. They may use what emitted code may not: intrinsics,
inline assembly, right shifts of negative numbers. Like is put beside like: the same coefficients, no clamp, no guard
against what is not finite, where the kernel has none.

The kernels of 32 bits, and the two controllers, keep the limited output in their history, which emitted code must not
do: it keeps the unlimited one. They serve as a measure of cost only, and say "beside" where the others have a goal. In
32 bits the unlimited output needs a 33rd bit here, in the cascade a 34th: emitted code keeps it half as fine or a
quarter, and multiplies by two or four while it limits. Like for like are the same equations with an output whose counts
are so coarse that no limit can be reached: there emitted code compares nothing, as is proven, and the kernels still do.

What stays above a tenth, beside the kernels of 32 bits and of packed samples, by instructions:

- direct on cortex-m3, 27 to 24: one loads the pointer to the table of coefficients, which the kernel hides from the
  compiler by inline assembly (without a table it would be four more); two are of the limit. Twice the kept output,
  saturated, is ``adds, mov, it, eor`` after ``lsrs, orr``, where the kernel's ``lsls, cmp, ittt, orr`` decides and then
  leaves what it expects to be rare to a branch, for which the C standard has no word.
- cascade on rv32imac, 113 to 101: nine limit to a quarter of the range and multiply by four (``lui, blt, lui, addi,
  blt, sub, srli, slli, or``), and are not there where no limit acts; the other three, one of them the load of the
  pointer, are there as well.
- int16 packed on cortex-m4f and cortex-m7f, 21 and 23 to 16: intrinsics multiply two pairs of halves and add both
  products in one instruction, and load and pack two samples at once.

Compiled alike, with ``-O2`` and nothing contracted; fed with the same inputs, saturating ones among them.
"""

from __future__ import annotations

import sys
from collections.abc import Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.arithmetic.formats import FORMATS
from realize.arithmetic.integer import Interface, Port, Widths, integer_realization
from realize.arithmetic.realization import Realization, Section, exact_pulse
from realize.firmware import Emission, render_firmware
from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.integer.render import render_integer_firmware
from realize.report.paragraphs import figures_table
from realize.trial.c_types import Value
from realize.trial.emitted import Code, Vectors, code_of
from realize.trial.outcome import least_median_most
from realize.trial.run import attempts
from realize.trial.targets import HOST, NAMES, TARGETS, Target

HERE = Path(__file__).parent
KERNELS = {name: (HERE / name).read_bytes() for name in ("kernels.c", "kernels.h")}

#: What the project allows itself: as cheap as by hand, or a tenth more where the kernel uses what emitted code may not.
GOAL, GOAL_OTHERWISE = 1.0, 1.1

PERIOD_S = Fraction(1, 1000)
SAMPLES = 2000

#: Coefficients of the kernels: b, and a for subtraction, in ascending powers of 1/z.
SECTION_1 = (("0.41", "-0.23", "0.17"), ("-1.21", "0.53"))
SECTION_2 = (("0.62", "0.33", "-0.19"), ("-0.87", "0.44"))
PI = (Fraction("0.83"), Fraction("-0.71"))
PID = (Fraction("2.35"), Fraction("-3.61"), Fraction("1.37"))
PID_POLE = Fraction("0.37")
CLAMP = (Fraction("-0.9"), Fraction("1.1"))

#: Where the kernels use inline assembly to keep a register.
PINNED = ("cortex-m4f",)

#: In place of a goal where the kernel keeps the limited output.
BESIDE = "beside"

Sections = Sequence[tuple[Sequence[str], Sequence[str]]]


class Pair(NamedTuple):
    """Emitted code and the kernel beside it.

    Attributes
    ----------
    says : str
        What it is.
    kernel : str
        Name of the kernel.
    kinds : tuple of str
        C types of input and output.
    files : mapping
        What is emitted.
    scale : float
        Of the inputs.
    beyond : tuple of str
        Processors where the kernel uses more than the standard.
    alike : bool
        Whether both compute the same: else the kernel keeps the limited output in its history.
    """

    says: str
    kernel: str
    kinds: tuple[str, str]
    files: Mapping[str, str]
    scale: float = 1.0
    beyond: tuple[str, ...] = ()
    alike: bool = True


def floats(
    sections: Sections, integral: Sequence[Fraction] = (), limits: tuple[Fraction, Fraction] | None = None
) -> dict[str, str]:
    """The files of a float32 emission."""
    form = FORMATS["float32"]
    stored = tuple(
        Section(tuple(form.round(Fraction(c)) for c in b), tuple(form.round(Fraction(c)) for c in a))
        for b, a in sections
    )
    gains = tuple(form.round(gain) for gain in integral)
    structure = "direct" if len(stored) < 2 else "cascade"
    realization = Realization(form, structure, gains, stored, PERIOD_S)
    return render_firmware(Emission("ours", realization, "", "", output_range=limits, guard_nonfinite=False))


def integers(sections: Sections, structure: str, bits: int, sum_bits: int, per_count: int = 1) -> dict[str, str]:
    """The files of an emission in integers whose input and output fill the word; an output count is so many inputs."""
    numerator: tuple[Fraction, ...] = (Fraction(1),)
    for b, _ in sections:
        numerator = poly.multiply(numerator, tuple(map(Fraction, b)))
    bottoms = [(Fraction(1), *map(Fraction, a)) for _, a in sections]
    end = Port(-(1 << bits - 1), (1 << bits - 1) - 1, 0, f"int{bits}", Fraction(1))
    pulse = exact_pulse(numerator, bottoms, (), PERIOD_S)
    ends = Interface(end, end._replace(per_count=Fraction(per_count)))
    realization = integer_realization(pulse, ends, Widths(bits, sum_bits), structure)
    return render_integer_firmware(IntegerEmission("ours", realization, "", ""))


def proportional_integral() -> dict[str, str]:
    """``(b0 + b1/z)/(1 - 1/z) = b0 + (b0 + b1)/(z - 1)``."""
    b0, b1 = PI
    return floats([([str(b0)], [])], [b0 + b1], CLAMP)


def with_derivative() -> dict[str, str]:
    """``B/((1 - 1/z)(1 - p/z)) = R/(z - 1) + (c0 + c1/z)/(1 - p/z)``, by comparing coefficients."""
    b0, b1, b2 = PID
    gain = (b0 + b1 + b2) / (1 - PID_POLE)
    c0, c1 = b0, b1 - gain + b0
    assert b2 == -PID_POLE * gain - c1
    return floats([([str(c0), str(c1)], [str(-PID_POLE)])], [gain], CLAMP)


def pairs() -> list[Pair]:
    """Every structure that has a kernel."""
    real, words, shorts = ("float", "float"), ("int32_t", "int32_t"), ("int16_t", "int16_t")
    one, two = [SECTION_1], [SECTION_1, SECTION_2]
    direct_16 = integers(one, "direct", 16, 32)
    return [
        Pair("float32 section", "float32_transposed_two", real, floats(one), beyond=PINNED),
        Pair("float32 section, by hand in direct form I", "float32_direct_one", real, floats(one)),
        Pair("float32 cascade of two", "float32_two_sections", real, floats(two), beyond=PINNED),
        Pair("float32 PI, clamped", "float32_pi", real, proportional_integral(), 2.0, alike=False),
        Pair("float32 PID, clamped", "float32_pid", real, with_derivative(), 2.0, alike=False),
        *(
            pair
            for says, kernel, form, name, coarse in (
                ("int32 direct", "int32_direct_one", one, "direct", 2),
                ("int32 error feedback", "int32_error_feedback", one, "error-feedback", 2),
                ("int32 cascade of two", "int32_two_sections", two, "cascade", 4),
            )
            for pair in (
                Pair(f"{says}, limited", kernel, words, integers(form, name, 32, 64), alike=False),
                Pair(f"{says}, proven in range", kernel, words, integers(form, name, 32, 64, coarse), beyond=NAMES),
            )
        ),
        Pair("int16 direct", "int16_direct_one", shorts, direct_16, beyond=NAMES),
        Pair("int16 direct, by hand packed", "int16_packed", shorts, direct_16, beyond=NAMES),
    ]


def inputs(kind: str, scale: float) -> list[Value]:
    """Noise, by the generator of the vectors, and an eighth of the samples at either end of the scale."""
    state = 1
    values: list[Value] = []
    for k in range(SAMPLES):
        state = (1664525 * state + 1013904223) % (1 << 32)
        part = (state >> 16) - (1 << 15)
        values.append((1 << 15) - 1 if k % 64 < 4 else -(1 << 15) if 32 <= k % 64 < 36 else part)
    if kind == "float":
        return [scale * value / (1 << 15) for value in values]
    return values if kind == "int16_t" else [int(value) << 16 for value in values]


def measured(code: Code, values: Sequence[Value], targets: Sequence[Target]) -> dict[str, tuple[int, int, int]]:
    """Least, median and most instructions per sample, by processor."""
    runs = attempts(code, Vectors(values, ()), targets)
    return {attempt.target: least_median_most(attempt.run.instructions) for attempt in runs}


def rows(pair: Pair, targets: Sequence[Target]) -> list[list[str]]:
    """A row for each processor; the ratio is marked where it is above its goal."""
    by_hand = Code(pair.kernel, KERNELS, "kernels.h", *pair.kinds, functions=("clear", "update"))
    files = {name: text.encode() for name, text in pair.files.items() if name.endswith((".c", ".h"))}
    values = inputs(pair.kinds[0], pair.scale)
    kernel, emitted = (measured(code, values, targets) for code in (by_hand, code_of("ours", files)))
    goals = {name: GOAL_OTHERWISE if name in pair.beyond else GOAL for name in emitted}
    return [
        [
            pair.says,
            name,
            *map(str, emitted[name]),
            *map(str, kernel[name]),
            f"{ratio:.2f}{'!' * (pair.alike and ratio > goals[name])}",
            f"{goals[name]}" if pair.alike else BESIDE,
        ]
        for name in emitted
        for ratio in [emitted[name][1] / kernel[name][1]]
    ]


def main(names: Sequence[str]) -> None:
    """Print the table."""
    targets = [target for target in TARGETS if target.name in (names or [t.name for t in TARGETS if t.name != HOST])]
    head = [
        ["", "", "emitted", "", "", "by hand", "", "", "ratio of", "goal"],
        ["", "", "least", "median", "most", "least", "median", "most", "medians", ""],
    ]
    print("instructions per sample, not cycles; ! above the goal; beside: by hand the limited output is kept, which")
    print("emitted code must not do")
    print(figures_table(head, [row for pair in pairs() for row in rows(pair, targets)], first=2), end="")


if __name__ == "__main__":
    main(sys.argv[1:])
