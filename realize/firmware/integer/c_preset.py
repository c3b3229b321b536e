"""The preset in C: the state at rest, then the next output from it."""

from __future__ import annotations

from realize.arithmetic.integer.settling import PRODUCT_BITS, Gain, Settled
from realize.firmware.integer.c_rounding import Division, rounding_name
from realize.firmware.integer.c_statements import Block, assigned, local, needed, opening, setting
from realize.firmware.integer.c_sums import cleared, sum_blocks
from realize.firmware.integer.spelling import (
    APPLIED_COUNT,
    INPUT_COUNT,
    NARROW,
    Spelling,
    alone,
    cast,
    ctype,
    times,
    width,
)


def preset_lines(c: Spelling) -> list[str]:
    """The state at rest, then the next output from it."""
    settling = c.settling
    blocks = [*opening(c), *(assigned(c, name, INPUT_COUNT, NARROW) for name in settling.inputs)]
    for section in settling.sections:
        blocks += _settled(c, section)
    blocks += _settled_integral(c) if settling.integrating else []
    given = "state, coefficients, input" if c.table else "state, input"
    blocks.append(Block(None, [f"    return {c.name}_output({given}) == output{_at_rest(c)};"]))
    return needed(blocks)


def _at_rest(c: Spelling) -> str:
    port = c.program.interface.input
    return f" && input == {alone(port.offset)}" if c.settling.integrating else ""


def _settled(c: Spelling, section: Settled) -> list[Block]:
    blocks = [_gained(c, gain) for gain in section.gains]
    for state, source in section.stored:
        bits = PRODUCT_BITS if source else c.field_bits(state)
        blocks.append(assigned(c, state, source or cleared(c, state.removeprefix("state.")), bits))
    blocks += [block for each in section.sums for block in sum_blocks(c, each)]
    return [*blocks, *(assigned(c, state, source, c.local_bits(source)) for state, source in section.histories)]


def _gained(c: Spelling, gain: Gain) -> Block:
    product = f"({ctype(PRODUCT_BITS)}){c.coefficient(gain.name)} * {c.variable(gain.variable)}"
    if gain.shift > 0:
        product = f"{rounding_name(c, Division(PRODUCT_BITS, gain.shift, True))}({product})"
    return local(gain.target, PRODUCT_BITS, product + times(1 << max(0, -gain.shift)))


def _settled_integral(c: Spelling) -> list[Block]:
    """What the command lacks goes into the first state; those above keep it still, as far as their limits let them."""
    integral, settling, command = c.program.integral, c.settling, c.program.command
    assert integral is not None
    bits = width(command.bits)
    wanted = f"({cast('wanted', ctype(c.command_bits), ctype(bits))}{times(1 << command.shift)})"
    pieces = [] if not settling.rest else c.pieces(settling.rest, bits)
    blocks = [local("wanted", c.command_bits, f"{c.name}_{APPLIED_COUNT}(output)")]
    if pieces:
        blocks.append(Block("rest", setting(f"const {ctype(bits)} rest = ", pieces)))
    missing = f"{wanted[1:-1]} - rest" if pieces else wanted[1:-1]
    blocks.append(local("missing", bits, missing))
    division = Division(bits, settling.shift, True)
    found = f"{rounding_name(c, division)}(missing)" if settling.shift else "missing"
    blocks.append(assigned(c, "state.integral1", found, bits))
    for i, gain in enumerate(integral.stored[:-1], 1):
        back = f"-({ctype(integral.word.bits)}){c.coefficient(f'integral{i}_gain')} * {INPUT_COUNT}" if gain else "0"
        limited = f"{c.name}_held{i + 1}({back})" if integral.limits[i] else back
        blocks.append(assigned(c, f"state.integral{i + 1}", limited, integral.word.bits))
    return blocks
