"""``NAME.c`` in integers: the steps of a program in C99 that is C++11 as well.

Every line does what the Python model does. The code uses nothing but ``<stdint.h>``, allocates nothing, calls no
library, and holds no construct whose result the standards leave open.
"""

from __future__ import annotations

from typing import NamedTuple

from realize.arithmetic.integer.program import COMMAND, Integral
from realize.firmware.c_preamble import signatures
from realize.firmware.c_text import comment, definition, reads, wrapped
from realize.firmware.integer.c_halves import halves_helpers
from realize.firmware.integer.c_limits import limit_helpers
from realize.firmware.integer.c_preset import preset_lines
from realize.firmware.integer.c_rounding import rounding_helpers
from realize.firmware.integer.c_statements import Block, assigned, local, needed, opening, setting, text_of
from realize.firmware.integer.c_sums import cleared, discarded, is_top, proven, sum_blocks
from realize.firmware.integer.c_tables import constants
from realize.firmware.integer.spelling import (
    APPLIED_COUNT,
    WIDE,
    Spelling,
    cast,
    constant,
    ctype,
    is_wide,
    port_type,
)


class Kept(NamedTuple):
    """A field of the state between output and advance: its name, which is the local's, and the bits of both types."""

    name: str
    bits: int
    local_bits: int


#: The field of a state that has nothing to remember.
UNUSED = "unused"


def source_text(c: Spelling) -> str:
    """The whole source file."""
    body = _functions(c)
    called = "\n".join(body)
    lines = [
        *comment(wrapped(f"{c.name}.c - a difference equation in integers, emitted by realize; see {c.name}.h")),
        f'#include "{c.name}.h"',
        "",
        *constants(c),
        *rounding_helpers(c, called),
        *(halves_helpers(c) if reads(called, f"{c.name}_total") else []),
        *limit_helpers(c, called),
        *body,
    ]
    return "\n".join(lines) + "\n"


def kept(c: Spelling) -> tuple[Kept, ...]:
    """What output leaves in the state for advance: sums, what their rounding discards, the command before its limits.

    The upper half of a state is not kept: taking it again is as cheap as loading it.
    """
    rest = text_of([*_updates(c), *_moves(c), *_integrals(c)])
    found = [
        Kept(each.target, c.word_bits(each.target), c.local_bits(each.target))
        for each in c.program.outputs
        if not is_top(each) and reads(rest, each.target)
    ]
    found += [
        Kept(discarded(each), c.field_bits(each.remainder), c.accumulator(each))
        for each in c.program.outputs
        if each.remainder
    ]
    bits = c.local_bits(COMMAND)
    return (*found, *([Kept(COMMAND, bits, bits)] if reads(rest, COMMAND) else []))


def state_bits(c: Spelling) -> dict[str, int]:
    """Fields of the state and the bits of their types, the wide ones first, so that no room is lost between them."""
    integral = c.program.integral
    names = [f"state.integral{i}" for i in range(1, len(integral.stored) + 1)] if integral else []
    fields = {name.removeprefix("state."): c.field_bits(name) for name in (*names, *c.program.states)}
    fields |= {each.name: each.bits for each in kept(c)}
    return dict(sorted(fields.items(), key=lambda item: -item[1])) or {UNUSED: 8}


# ---------------------------------------------------------------- functions


def _functions(c: Spelling) -> list[str]:
    interface = c.program.interface
    declared = signatures(c.name, port_type(interface.input), port_type(interface.output), table=c.table)
    clear, update, output, advance, preset = declared
    begin, answer = [*opening(c), *_outputs(c)], Block(None, [f"    return {_answer(c)};"])
    following = [*_updates(c), *_moves(c), *_given_back(c), *_integrals(c)]
    return [
        *definition(clear, [_clearing(c, name) for name in state_bits(c)]),
        *definition(update, needed([*begin, *following, answer])),
        *definition(output, needed([*begin, *_keeping(c), answer])),
        *definition(advance, needed([*_resumed(c), *following])),
        *definition(preset, preset_lines(c)),
    ]


def _clearing(c: Spelling, field: str) -> str:
    value = cleared(c, field)
    return f"    state->{field} = {value};{' /* the half that rounds */' if value != '0' else ''}"


def _outputs(c: Spelling) -> list[Block]:
    last = () if c.late_shift else (c.program.command,)
    blocks = [block for each in (*c.program.outputs, *last) for block in sum_blocks(c, each)]
    limited = c.variable(c.program.command.terms[0].variable) if c.late_shift else COMMAND
    return [*blocks, local("command", c.command_bits, f"{c.name}_limited({limited})")]


def _answer(c: Spelling) -> str:
    """The command as the actuator takes it, its offset restored."""
    port = c.program.interface.output
    if port.offset == 0:
        return cast("command", ctype(c.command_bits), port_type(port))
    bits = WIDE if is_wide(port) else c.command_bits
    total = f"{cast('command', ctype(c.command_bits), ctype(bits))} + {constant(port.offset)}"
    return total if port_type(port) == ctype(bits) else f"({port_type(port)})({total})"


def _keeping(c: Spelling) -> list[Block]:
    return [
        Block(None, [f"    state->{name} = {cast(name, ctype(local), ctype(bits))};"]) for name, bits, local in kept(c)
    ]


def _resumed(c: Spelling) -> list[Block]:
    """What advance begins with: the input, what was applied, what output kept, and what is cheap to make again."""
    return [
        *opening(c),
        local("command", c.command_bits, f"{c.name}_{APPLIED_COUNT}(applied)"),
        *(local(each.name, each.local_bits, f"state->{each.name}") for each in kept(c)),
        *(block for each in c.program.outputs if is_top(each) for block in sum_blocks(c, each)),
    ]


def _updates(c: Spelling) -> list[Block]:
    return [block for each in c.program.updates for block in sum_blocks(c, each)]


def _moves(c: Spelling) -> list[Block]:
    return [assigned(c, target, c.variable(source), c.variable_bits(source)) for target, source in c.program.moves]


def _given_back(c: Spelling) -> list[Block]:
    return [
        assigned(c, each.remainder, discarded(each), c.accumulator(each))
        for each in c.program.outputs
        if each.remainder
    ]


# ---------------------------------------------------------------- the integral


def _integrals(c: Spelling) -> list[Block]:
    """``I_i += R_i x + I_{i+1}``, with the state above as it was before this sample."""
    integral = c.program.integral
    return (
        [] if integral is None else [b for i in range(1, len(integral.stored) + 1) for b in _integral(c, integral, i)]
    )


def _integral(c: Spelling, integral: Integral, i: int) -> list[Block]:
    state, bits, increment = f"state->integral{i}", integral.word.bits, f"integral{i}_increment"
    gains = {term.name: term for term in c.integral_terms()}
    pieces = c.pieces([gains[name] for name in [f"integral{i}_gain"] if name in gains], bits)
    pieces = [] if pieces == ["0"] else pieces
    if i < len(integral.stored):
        pieces.append(f"{'+ ' if pieces else ''}state->integral{i + 1}")
    if i == 1 and "tracking_gain" in gains:
        difference = f"{cast('command', ctype(c.command_bits), ctype(bits))} - {COMMAND}"
        pieces.append(f"{'+ ' if pieces else ''}({ctype(bits)}){c.coefficient('tracking_gain')} * ({difference})")
    lines = setting(f"const {ctype(bits)} {increment} = ", pieces or ["0"])
    following = f"{state} + {increment}"
    limits = integral.limits[i - 1]
    moved = [f"    {state} = {f'{c.name}_held{i}({following})' if limits else following};"]
    if c.program.hold:
        held = f"    if (!{c.name}_pushes({increment}, {COMMAND}, command)) {{"
        moved = [held, *(f"    {line}" for line in moved), "    }"]
    return [Block(increment, lines), Block(None, [*proven(c, f"state.integral{i} (sum)", bits), *moved])]
