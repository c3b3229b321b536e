"""Emissions in integers for the tests: every structure, width and interface, options in turn. All data invented."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from fractions import Fraction
from functools import cache
from itertools import product
from random import Random

from realize.arithmetic.integer import STRUCTURES, Widths, integer_realization, interface_of
from realize.design import Signal, design_from_text
from realize.errors import Refused
from realize.firmware.integer import IntegerEmission
from realize.methods import discretize
from realize.transfer import PulseTransferFunction

#: Transfer functions by what is special about them, and their rates.
TRANSFERS = {
    "pi": ("4.2 + 18/s", "2 kHz"),
    "pid": ("4.2 + 18/s + 0.09*s/(0.0005*s + 1)", "2 kHz"),
    "slow": ("1 + 1/(40*s)", "10 kHz"),
    "lead": ("50*(s + 5)/(s + 50)", "200 Hz"),
    "notch": ("(s^2 + 31.4*s + 98700)/(s^2 + 440*s + 98700)", "8 kHz"),
    "three": ("2e4/((s + 10)*(s^2 + 4*s + 1600))", "500 Hz"),
    "fast": ("0.4*s^2/((s + 900)*(s + 1200))", "400 Hz"),
    "gain": ("-1.5", "1 kHz"),
    "double": ("(s + 1)*(s + 2)/s^2", "100 Hz"),
}

WIDTHS = (Widths(16, 32), Widths(16, 64), Widths(32, 64))


def signal(low: str, high: str, per_count: str, offset: int, kind: str) -> Signal:
    return Signal((Fraction(low), Fraction(high)), "mm", Fraction(per_count), offset, kind)


#: Inputs and outputs of every type, with and without an offset, one-sided, and filling their types.
INPUTS = {
    "int16": signal("-8", "8", "1/2000", 0, "int16"),
    "uint16": signal("-8", "8", "1/2000", 1 << 15, "uint16"),
    "all of int16": signal("-32767/4000", "32767/4000", "1/4000", 0, "int16"),
    "int8": signal("-8", "7", "1/12", 5, "int8"),
    "uint8": signal("-8", "8", "1/15", 128, "uint8"),
    "shifted": signal("-6", "7", "1/3000", -700, "int32"),
    "uint32": signal("-8", "8", "1/4000", 1 << 31, "uint32"),
}
WIDE_INPUTS = {
    "int32": signal("-8", "8", "1/200000000", -500000000, "int32"),
    "wide uint32": signal("-2", "5", "1/400000000", 1 << 30, "uint32"),
    "all of int32": signal("-2147483647/200000000", "2147483647/200000000", "1/200000000", 0, "int32"),
}
OUTPUTS = {
    "int16": signal("-1", "1", "1/4200", 0, "int16"),
    "uint16": signal("-1", "1", "1/4200", 5000, "uint16"),
    "one side": signal("0", "10", "1/1000", 0, "uint16"),
    "int8": signal("-2", "1", "1/50", -7, "int8"),
    "uint8": signal("-1", "1", "1/127", 128, "uint8"),
    "full": signal("-32768/4200", "32767/4200", "1/4200", 0, "int16"),
    "int32": signal("-20", "20", "1/30000", 1 << 20, "int32"),
    "uint32": signal("-20", "10", "1/30000", 1 << 31, "uint32"),
}

ANTI_WINDUP = ("hold-integral", "back-calculation", "none")

#: Step through the options from design to design: prime to their number, so that all meet all kinds of design.
STRIDE = 5


def pulse(name: str, method: str = "bilinear") -> PulseTransferFunction:
    """A transfer function of the tests, in z."""
    transfer, rate = TRANSFERS[name]
    text = f'[design]\ntransfer = "{transfer}"\n[sampling]\nrate = "{rate}"\n'
    design = design_from_text(text, "invented")
    assert design.period_s is not None
    return discretize(design.transfer, design.period_s, method).pulse


def emission(
    name: str,
    transfer: str,
    structure: str,
    widths: Widths,
    ends: tuple[Signal, Signal] = (INPUTS["int16"], OUTPUTS["int16"]),
    options: tuple[str, str, str] = ("hold-integral", "inline", "subtract"),
) -> IntegerEmission:
    """One of the designs with everything chosen.

    Raises
    ------
    Refused
        Where they do not go together.
    """
    anti_windup, coefficients, sign = options
    found = pulse(transfer)
    time_s = Fraction(1, 20) if anti_windup == "back-calculation" else None
    realization = integer_realization(
        found,
        interface_of(*ends, f"int{widths.bits}"),
        widths,
        structure,
        hold=anti_windup == "hold-integral",
        tracking=found.period_s / time_s if time_s else Fraction(0),
    )
    return IntegerEmission(
        name,
        realization,
        "bilinear",
        TRANSFERS[transfer][0],
        input_range=ends[0].range,
        output_range=ends[1].range,
        input_unit=ends[0].unit,
        coefficients=coefficients,
        recursion_sign=sign,
        anti_windup=anti_windup,
        tracking_time_s=time_s,
    )


@cache
def grid() -> tuple[IntegerEmission, ...]:
    """What :func:`made` makes, once: every module has the same objects."""
    return tuple(made())


def made() -> Iterator[IntegerEmission]:
    """Every transfer, structure and width that go together; ends and options in turn."""
    options = list(product(ANTI_WINDUP, ("inline", "table"), ("subtract", "add")))
    for count, (transfer, structure, widths) in enumerate(product(TRANSFERS, STRUCTURES, WIDTHS)):
        for attempt in range(3):
            chosen = ends(widths, count + 5 * attempt)
            try:
                yield emission(f"g{count}", transfer, structure, widths, chosen, options[count * STRIDE % len(options)])
            except Refused:
                continue
            break


def ends(widths: Widths, count: int) -> tuple[Signal, Signal]:
    """An input and an output, each pair in its turn."""
    inputs: Sequence[Signal] = tuple((INPUTS if widths.bits == 16 else INPUTS | WIDE_INPUTS).values())
    outputs = tuple(OUTPUTS.values())
    return inputs[count % len(inputs)], outputs[count // 2 % len(outputs)]


def some_count(draw: Random, low: int, high: int) -> int:
    """A value of a type, often an extreme or a small one."""
    return draw.choice((low, high, 0 if low <= 0 else low, draw.randint(low, high), draw.randint(low, high)))
