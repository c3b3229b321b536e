"""Statements of a function in C: locals that are set once, states that are set, and leaving out what nothing reads."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

from realize.firmware.c_text import WIDTH, reads, statement
from realize.firmware.integer.spelling import INPUT_COUNT, NARROW, Spelling, cast, ctype


class Block(NamedTuple):
    """Lines that set a local, or that are needed whether or not one is read."""

    local: str | None
    lines: list[str]


def opening(c: Spelling) -> list[Block]:
    """What every function that reads the input begins with."""
    lookup = f"    const {c.name}_table *const coefficients = {c.name}_lookup;"
    return [
        *([Block("coefficients", [lookup])] if c.looked_up else []),
        local(INPUT_COUNT, NARROW, f"{c.name}_{INPUT_COUNT}(input)"),
    ]


def needed(blocks: Sequence[Block]) -> list[str]:
    """The lines of all blocks but those whose local nothing reads."""
    lines: list[str] = []
    for block in reversed(blocks):
        if block.local is None or reads("\n".join(lines), block.local):
            lines = [*block.lines, *lines]
    return lines


def text_of(blocks: Sequence[Block]) -> str:
    """The lines of all blocks."""
    return "\n".join(line for block in blocks for line in block.lines)


def local(name: str, bits: int, value: str) -> Block:
    """A local that is set once."""
    return Block(name, setting(f"const {ctype(bits)} {name} = ", [value]))


def setting(start: str, pieces: Sequence[str]) -> list[str]:
    """A statement; what is to be set stands on a line of its own where the first piece has no room beside it."""
    lines = statement(start, pieces)
    if len(lines[0]) <= WIDTH:
        return lines
    return [f"    {start.rstrip()}", *(f"        {piece}" for piece in pieces[:-1]), f"        {pieces[-1]};"]


def assigned(c: Spelling, state: str, value: str, bits: int) -> Block:
    """A state that becomes a value of a type of its own."""
    return Block(None, setting(f"{c.variable(state)} = ", [cast(value, ctype(bits), ctype(c.field_bits(state)))]))
