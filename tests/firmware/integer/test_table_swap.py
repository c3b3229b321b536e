"""Tables of coefficients, swapped whole between two samples, in the compiled C and in the model."""

from __future__ import annotations

import re
from collections.abc import Sequence
from random import Random
from typing import Any

import pytest

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.integer import Widths, integer_realization, interface_of
from realize.arithmetic.realization import realization
from realize.arithmetic.recursion import Recursion
from realize.design import design_from_text
from realize.firmware import Emission, render_firmware, write_all
from realize.firmware.integer import IntegerEmission, render_integer_firmware
from realize.methods import discretize
from realize.transfer import PulseTransferFunction
from tests.firmware.bench import ZIG, bits
from tests.firmware.integer.bench import IntegerBench
from tests.firmware.integer.designs import INPUTS, OUTPUTS, WIDTHS

#: A controller for two rollers: gains so near that the binary points are the same. Data invented.
GAINS = ((4.2, 18, 0.0009), (4.1, 17, 0.0008))
ENDS = INPUTS["int16"], OUTPUTS["int16"]

SAMPLES, LONGEST = 400, 7

#: Two emissions that differ in their numbers only.
Pair = Sequence[IntegerEmission | Emission]


def pulse_of(gains: tuple[float, ...]) -> PulseTransferFunction:
    kp, ki, kd = gains
    transfer = f"{kp} + {ki}/s + {kd}*s/(0.0005*s + 1)"
    design = design_from_text(f'[design]\ntransfer = "{transfer}"\n[sampling]\nrate = "2 kHz"\n', "invented")
    assert design.period_s is not None
    return discretize(design.transfer, design.period_s, "bilinear").pulse


def integers(structure: str, widths: Widths) -> list[IntegerEmission]:
    ports = interface_of(*ENDS, f"int{widths.bits}")
    made = (integer_realization(pulse_of(gains), ports, widths, structure) for gains in GAINS)
    return [IntegerEmission("x", one, "bilinear", "a PID", coefficients="table") for one in made]


def floats(name: str, structure: str) -> list[Emission]:
    made = (realization(pulse_of(gains), FORMATS[name], structure) for gains in GAINS)
    return [Emission("x", one, "bilinear", "a PID", output_range=ENDS[1].range, coefficients="table") for one in made]


def models(pair: Pair) -> list[Any]:
    return [
        one.recursion() if isinstance(one, IntegerEmission) else Recursion(one.realization, one.output_range)
        for one in pair
    ]


CASES: dict[str, Pair] = {
    "int16": integers("cascade", WIDTHS[0]),
    "int16, delta": integers("delta", WIDTHS[0]),
    "int32, error feedback": integers("error-feedback", WIDTHS[2]),
    "float32": floats("float32", "cascade"),
    "float32, delta": floats("float32", "delta"),
    "float64": floats("float64", "cascade"),
}
TYPES = {"float32": "float", "float64": "double"}


def rendered(one: IntegerEmission | Emission) -> dict[str, str]:
    return render_integer_firmware(one) if isinstance(one, IntegerEmission) else render_firmware(one)


def table(text: str) -> str:
    """The nominal table of a source, under another name."""
    found = re.search(r"const x_coefficients x_nominal = \{.*?\};", text, re.DOTALL)
    assert found
    return found[0].replace("x_nominal", "other")


def turns(seed: int) -> list[int]:
    """Which table serves each sample."""
    draw = Random(seed)
    found: list[int] = []
    while len(found) < SAMPLES:
        found += [len(found) and 1 - found[-1]] * draw.randint(1, LONGEST)
    return found[:SAMPLES]


@pytest.mark.parametrize("name", CASES)
def test_output_is_that_of_the_model_with_the_same_swap(name: str, integer_bench: IntegerBench) -> None:
    pair, whole = CASES[name], name.startswith("int")
    nominal, changed = (rendered(one) for one in pair)
    where, draw = integer_bench.directory(), Random(3)
    write_all(where, nominal)
    kind = "int16_t" if whole else TYPES[name.partition(",")[0]]
    # Mostly small, so that the integral counts, now and then into the limit.
    inputs = [draw.randint(-100, 100) * draw.choice((1, 1, 1, 20)) for _ in range(SAMPLES)]
    values = [float(x) if whole else x / 2048 for x in inputs]
    which = turns(4)
    text = f'#include <stdio.h>\n#include "x.c"\nstatic {table(changed["x.c"])}\n'
    text += f"static const double x[] = {{ {', '.join(value.hex() for value in values)} }};\n"
    text += f"static const char which[] = {{ {', '.join(map(str, which))} }};\nint main(void)\n{{\n"
    text += "const x_coefficients *at[2]; x_state s; int k;\nat[0] = &x_nominal; at[1] = &other; x_clear(&s);\n"
    text += f'for (k = 0; k < {SAMPLES}; ++k) printf("%a\\n", (double)x_update(&s, at[(int)which[k]], ({kind})x[k]));\n'
    (where / "main.c").write_text(text + "return 0;\n}\n")
    integer_bench.compile((*ZIG, "cc", "-std=c99", "-O2", "main.c", "-o", "main"), where)
    said = [float.fromhex(line) for line in integer_bench.compile((str(where / "main"),), where).split()]
    assert [bits(value) for value in said] == [bits(float(value)) for value in swapped(pair, inputs, values, which)]
    assert said != [float(value) for value in swapped(pair, inputs, values, [0] * SAMPLES)]


def swapped(pair: Pair, inputs: list[int], values: list[float], which: list[int]) -> list[float]:
    """What two models answer that hand one state to and fro."""
    both = models(pair)
    state = "state" if isinstance(pair[0], IntegerEmission) else "_state"
    found = []
    for k, turn in enumerate(which):
        setattr(both[turn], state, getattr(both[which[k - 1] if k else turn], state))
        found.append(both[turn].update(inputs[k] if state == "state" else values[k]))
    return found


@pytest.mark.parametrize("name", [name for name in CASES if name.startswith("int")])
def test_both_designs_have_the_same_binary_points(name: str) -> None:
    """Else one could not be the table of the other."""
    programs = [one.realization.program for one in CASES[name] if isinstance(one, IntegerEmission)]
    points = [(dict(p.words), {key: t.fraction_bits for key, t in p.coefficients.items()}) for p in programs]
    assert points[0] == points[1]
    assert len({program.integral.word for program in programs if program.integral}) == 1
