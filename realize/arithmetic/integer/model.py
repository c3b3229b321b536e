"""The bit-exact model: what the firmware answers, in Python's integers.

The steps of a program are printed as Python functions and compiled, the way the firmware prints them as C. Counts come
and go as the converters have them, offsets included.
"""

from __future__ import annotations

from collections.abc import Sequence
from types import SimpleNamespace
from typing import Any

from realize.arithmetic.integer.interface import type_range
from realize.arithmetic.integer.program import COMMAND, INPUT, Program, Sum
from realize.arithmetic.integer.settling import Gain, Settled, settle


class IntegerRecursion:
    """A program at work, with one state; it starts cleared.

    Parameters
    ----------
    program : Program
        What a sample does.
    checked : bool
        Whether every variable and every sum is compared with its word; for tests.

    Notes
    -----
    A right shift of Python rounds down for every value; so does what the C text does in its place.
    """

    def __init__(self, program: Program, *, checked: bool = False) -> None:
        self.program = program
        self._checked = checked
        self._functions = _compiled(program, checked)
        self.clear()

    def clear(self) -> None:
        """All state zero."""
        integrals = len(self.program.integral.stored) if self.program.integral else 0
        names = [name.removeprefix("state.") for name in self.program.states]
        names += [f"integral{i}" for i in range(1, integrals + 1)]
        self.state = SimpleNamespace(**dict.fromkeys(names, 0))

    def output(self, value: int) -> int:
        """The limited command for an input; changes nothing."""
        return int(self._functions["output"](self.state, _of_type(value, self.program.interface.input.type)))

    def advance(self, value: int, applied: int) -> None:
        """The rest of the sample, given what was really applied."""
        port = self.program.interface
        self._functions["advance"](self.state, _of_type(value, port.input.type), _of_type(applied, port.output.type))

    def update(self, value: int) -> int:
        """One sample: output, then advance with it."""
        return int(self._functions["update"](self.state, _of_type(value, self.program.interface.input.type)))

    def preset(self, value: int, output: int) -> bool:
        """At rest at an input, with ``output`` as the next output; whether that is possible.

        Both count as the limit where they lie beyond it. With an integral only the input that stands for zero is at
        rest; at any other the next output is still the one asked for. Where it is not possible without one, the
        state is the one at rest for the input.
        """
        port = self.program.interface
        if "preset" not in self._functions:
            self._functions |= _executed(_preset(self.program, self._checked))
        value, output = _of_type(value, port.input.type), _of_type(output, port.output.type)
        return bool(self._functions["preset"](self.state, value, output)) and self.output(value) == output

    def run(self, values: Sequence[int]) -> list[int]:
        """``update`` for many inputs."""
        return [self.update(value) for value in values]


class Overflow(ArithmeticError):
    """A word or an accumulator that does not hold its value."""


def held(value: int, bits: int, what: str) -> int:
    """The value, if a signed word of so many bits holds it.

    Raises
    ------
    Overflow
        Otherwise.
    """
    if not -(1 << bits - 1) <= value < 1 << bits - 1:
        raise Overflow(f"{what}: {value} in {bits} bits")
    return value


def _of_type(value: int, kind: str) -> int:
    least, most = type_range(kind)
    if not least <= value <= most:
        raise ValueError(f"{value} is no {kind}")
    return value


def _compiled(program: Program, checked: bool) -> dict[str, Any]:
    output = [*_input(program), *_sums(program, program.outputs, checked), *_command(program, checked)]
    advance = [
        *_sums(program, program.updates, checked),
        *_moves(program),
        *(f"{each.remainder} = {_local(each.remainder)}" for each in program.outputs if each.remainder),
        *_integrals(program, checked),
    ]
    port = program.interface.output
    given = [f"command = applied - {port.offset}", *_limited("command", "command", port.low, port.high)]
    text = [
        *_function("output", "state, raw", output, f"command + {port.offset}"),
        *_function("advance", "state, raw, applied", [*output, *given, *advance], "None"),
        *_function("update", "state, raw", [*output, *advance], f"command + {port.offset}"),
    ]
    return _executed(text)


def _executed(text: Sequence[str]) -> dict[str, Any]:
    names: dict[str, Any] = {"held": held}
    exec("\n".join(text), names)
    return names


def _function(name: str, parameters: str, lines: Sequence[str], result: str) -> list[str]:
    return [f"def {name}({parameters}):", *(f"    {line}" for line in lines), f"    return {result}"]


def _input(program: Program) -> list[str]:
    port = program.interface.input
    return [f"{INPUT} = raw - {port.offset}", *_limited(INPUT, INPUT, port.low, port.high)]


def _limited(target: str, source: str, low: int, high: int) -> list[str]:
    return [f"{target} = {low} if {source} < {low} else {high} if {source} > {high} else {source}"]


def _command(program: Program, checked: bool) -> list[str]:
    port = program.interface.output
    return [*_sums(program, (program.command,), checked), *_limited("command", COMMAND, port.low, port.high)]


def _sums(program: Program, sums: Sequence[Sum], checked: bool) -> list[str]:
    return [line for each in sums for line in _sum(program, each, checked)]


def _sum(program: Program, each: Sum, checked: bool) -> list[str]:
    terms = [_product(term.stored, term.shift, term.variable) for term in each.terms]
    parts = [*([each.remainder] if each.remainder else []), *terms]
    added = [f"total = {_checked(f'total + {part}', each.bits, each.target, checked)}" for part in parts]
    lines = ["total = 0", *added]
    half = 1 << each.shift - 1 if each.shift else 0
    rounded = f"({_checked(f'total + {half}', each.bits, each.target, checked)}) >> {each.shift}" if half else "total"
    base = f" + {each.base}" if each.base else ""
    lines.append(f"rounded = {rounded}")
    if each.remainder:
        lines.append(f"{_local(each.remainder)} = total - (rounded << {each.shift})")
    bits = program.words[each.target].bits
    return [*lines, f"{each.target} = {_checked(f'rounded{base}', bits, each.target, checked)}"]


def _local(state: str) -> str:
    """Name of what goes into a state at the end of a sample."""
    return state.removeprefix("state.")


def _product(stored: int, shift: int, variable: str) -> str:
    factor = stored << shift
    return variable if factor == 1 else f"{factor} * {variable}"


def _checked(value: str, bits: int, what: str, checked: bool) -> str:
    return f"held({value}, {bits}, '{what}')" if checked else value


def _moves(program: Program) -> list[str]:
    return [f"{target} = {source}" for target, source in program.moves]


def _integrals(program: Program, checked: bool) -> list[str]:
    """``I_i += R_i x + I_{i+1}``, with the state above as it was before this sample."""
    integral = program.integral
    if integral is None:
        return []
    lines = []
    for i, (gain, limits) in enumerate(zip(integral.stored, integral.limits, strict=True), 1):
        what, bits = f"state.integral{i}", integral.word.bits
        lines.append(f"increment = {_checked(f'{gain} * {INPUT}', bits, what, checked)}")
        added = [f"state.integral{i + 1}"] if i < len(integral.stored) else []
        added += [f"{integral.tracking} * (command - {COMMAND})"] if i == 1 and integral.tracking else []
        lines += [f"increment = {_checked(f'increment + {part}', bits, what, checked)}" for part in added]
        following = _checked(f"{what} + increment", bits, what, checked)
        moved = [f"state.integral{i} = {following}"]
        if limits:
            moved += _limited(f"state.integral{i}", f"state.integral{i}", *limits)
        if program.hold:
            pushes = f"{COMMAND} > command and increment > 0 or {COMMAND} < command and increment < 0"
            lines += [f"if not ({pushes}):", *(f"    {line}" for line in moved)]
        else:
            lines += moved
    return lines


# ---------------------------------------------------------------- coming to rest


def _preset(program: Program, checked: bool) -> list[str]:
    """A function that brings a state to rest and tells whether the input lets it."""
    settling, port = settle(program), program.interface.output
    lines = [
        *_input(program),
        f"wanted = raw_output - {port.offset}",
        *_limited("wanted", "wanted", port.low, port.high),
    ]
    lines += [f"{name} = {INPUT}" for name in settling.inputs]
    lines += [line for section in settling.sections for line in _settled(program, section, checked)]
    if program.integral:
        terms = [_product(term.stored, term.shift, term.variable) for term in settling.rest]
        lines.append(f"missing = (wanted << {program.command.shift}) - ({' + '.join(terms) or '0'})")
        half = 1 << settling.shift - 1 if settling.shift else 0
        bits = program.integral.word.bits
        lines.append(f"state.integral1 = {_checked(f'missing + {half} >> {settling.shift}', bits, 'preset', checked)}")
        for i, gain in enumerate(program.integral.stored[:-1], 1):
            limits = program.integral.limits[i]
            lines.append(f"state.integral{i + 1} = {-gain} * {INPUT}")
            lines += _limited(f"state.integral{i + 1}", f"state.integral{i + 1}", *limits) if limits else []
    return _function("preset", "state, raw, raw_output", lines, f"{INPUT} == 0" if settling.integrating else "True")


def _settled(program: Program, section: Settled, checked: bool) -> list[str]:
    return [
        *(_gain(gain) for gain in section.gains),
        *(f"{state} = {local or 0}" for state, local in section.stored),
        *_sums(program, section.sums, checked),
        *(f"{state} = {source}" for state, source in section.histories),
    ]


def _gain(gain: Gain) -> str:
    if gain.shift <= 0:
        return f"{gain.target} = {gain.mantissa << -gain.shift} * {gain.variable}"
    return f"{gain.target} = {gain.mantissa} * {gain.variable} + {1 << gain.shift - 1} >> {gain.shift}"
