"""``NAME_selftest.c`` in integers."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import ceil

from realize.arithmetic.integer.interface import type_range
from realize.arithmetic.integer.program import Program
from realize.firmware.c_text import integer_constant
from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.integer.spelling import port_type
from realize.firmware.selftest import Held, Samples, Wording, chosen, rest_of, source_of, turns

#: The most samples an input is held for, to wind an integral up: more would take longer than all else in an emission.
MOST_WINDING = 8192


def selftest_text(emission: IntegerEmission, inputs: Sequence[int]) -> str:
    """The self-test of an emission in integers, from the inputs of its vectors."""
    interface = emission.realization.program.interface
    words = Wording(
        emission.name,
        port_type(interface.input),
        port_type(interface.output),
        _constant,
        _constant,
        emission.coefficients == "table",
        "",
    )
    return source_of(words, _samples(emission, inputs))


def _constant(value: float) -> str:
    text = integer_constant(int(value))
    assert text is not None  # counts have 32 bits at most
    return text


def _samples(emission: IntegerEmission, inputs: Sequence[int]) -> Samples:
    model, port = emission.recursion(), emission.realization.program.interface
    played = [*inputs, *_winding(emission.realization.program)]
    rows = [Held(value, held, model.run([value] * held)[-1]) for value, held in chosen(played)]
    least, most = type_range(port.output.type)
    levels = (least, port.output.offset + (port.output.low + port.output.high) // 2, most)
    rests = []
    for value, then in turns(*(port.input.offset + end for end in (port.input.low, 0, port.input.high))):
        model.clear()
        model.preset(value, levels[1])
        for output in (*levels, model.output(value)):
            rests += [rest_of(model, (value, then), output, applied) for applied in levels]
    return Samples(rows, (), rests)


def _winding(program: Program) -> list[int]:
    """Both ends of the input, held until the integral states meet limits of their own, where they soon do."""
    port, integral = program.interface.input, program.integral
    if integral is None:
        return []
    wound: list[int] = []
    for gain, limits in zip(integral.stored, integral.limits, strict=True):
        for end in (port.high, port.low):
            if limits and gain and end:
                samples = ceil(Fraction(limits[1] - limits[0], abs(gain * end))) + 1
                wound += [port.offset + end] * (samples if samples <= MOST_WINDING else 0)
    return wound
