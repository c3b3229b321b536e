"""Sums of a program in C, each with the bound that is proven of it, rounded once."""

from __future__ import annotations

from realize.arithmetic.integer.program import Sum
from realize.firmware.integer.c_halves import halves_macro, sum_by_halves
from realize.firmware.integer.c_rounding import division_of, rounding_name
from realize.firmware.integer.c_statements import Block, assigned, local, setting
from realize.firmware.integer.spelling import NARROW, Spelling, alone, cast, ctype, times


def is_top(each: Sum) -> bool:
    """Whether a sum only takes the upper half of a state."""
    return len(each.terms) == 1 and each.terms[0].name is None and each.terms[0].variable.startswith("state.")


def discarded(each: Sum) -> str:
    """Local of what rounding discards."""
    return f"{each.target}_discarded"


def cleared(c: Spelling, field: str) -> str:
    """A remainder at rest is nothing but the half, where it keeps one."""
    halves = {each.remainder: 1 << each.shift - 1 for each in c.program.sums if each.remainder and c.keeps_half(each)}
    return alone(halves.get(f"state.{field}", 0))


def sum_blocks(c: Spelling, each: Sum) -> list[Block]:
    """A sum with its proven bound, rounded, and what it is for."""
    bits, name = c.accumulator(each), f"{each.target.removeprefix('state.')}_sum"
    pieces = c.pieces(each.terms, bits, each.remainder)
    blocks = []
    if len(each.terms) == 1 and each.terms[0].name is None and not each.remainder:
        name = pieces[0]
    else:
        lines = setting(f"const {ctype(bits)} {name} = ", pieces)
        if c.by_halves(each.terms, bits):
            lines = [f"#ifdef {halves_macro(c)}", *sum_by_halves(c, each, name), "#else", *lines, "#endif"]
        half = [f"    /* {c.variable(str(each.remainder))} has the half that rounds */"] if c.keeps_half(each) else []
        blocks.append(Block(name, [*half, *proven(c, f"{each.target} (sum)", bits), *lines]))
    rounded = f"{rounding_name(c, division_of(c, each))}({name})" if each.shift else name
    if each.remainder:
        rounded_name = f"{each.target}_rounded"
        blocks.append(local(rounded_name, bits, rounded))
        blocks.append(local(discarded(each), bits, f"{name} - {rounded_name}{times(1 << each.shift)}"))
        rounded = rounded_name
    if each.base:
        both = max(bits, NARROW, c.variable_bits(each.base))
        rounded, bits = f"({c.cast(each.base, both)} + {cast(rounded, ctype(bits), ctype(both))})", both
    if each.target.startswith("state."):
        blocks.append(assigned(c, each.target, _bare(rounded, bits, c.field_bits(each.target)), bits))
    else:
        own = c.local_bits(each.target)
        blocks.append(local(each.target, own, cast(_bare(rounded, bits, own), ctype(bits), ctype(own))))
    return blocks


def _bare(text: str, bits: int, wanted: int) -> str:
    """Without the parentheses that only a cast needs."""
    return text[1:-1] if bits == wanted and text.startswith("(") and text.endswith(")") else text


def proven(c: Spelling, variable: str, bits: int) -> list[str]:
    """The bound of a sum as a comment, and how far it is from filling its type."""
    if variable not in c.bounds:
        return []
    bound = c.bounds[variable]
    room = bits - 1 - bound.largest.bit_length()
    spare = f"{room} bit{'' if room == 1 else 's'} to spare of {bits}"
    return [f"    /* proven: {-bound.largest - 1} <= sum <= {bound.largest}, {spare} */"]
