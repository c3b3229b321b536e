"""Sums over powers of two in C, rounded as the program says, with every step defined by the standards."""

from __future__ import annotations

from typing import NamedTuple

from realize.arithmetic.integer.program import Sum
from realize.arithmetic.integer.settling import PRODUCT_BITS
from realize.firmware.c_text import comment, reads, wrapped
from realize.firmware.integer.spelling import NARROW, Spelling, constant, ctype, width

#: Why the functions that round are written as they are.
_ROUNDING = (
    "Sums over powers of two: rounded to nearest, ties upward, or to the floor where a half is in the sum already. "
    "The C standard defines every step for every sum: it leaves open the right shift of a negative number, so the "
    "unsigned image is shifted and its sign put back. Compilers make one addition and one arithmetic shift of it."
)


class Division(NamedTuple):
    """Of a sum by a power of two: downward, to nearest where a half is added first."""

    bits: int
    shift: int
    half: bool


def rounding_helpers(c: Spelling, body: str) -> list[str]:
    """The functions that round, as far as a text reads them."""
    names = {rounding_name(c, division): division for division in sorted(_divisions(c))}
    found = [line for name, division in names.items() if reads(body, name) for line in _rounding(c, division)]
    return [*comment(wrapped(_ROUNDING)), *found] if found else []


def _divisions(c: Spelling) -> set[Division]:
    """Everything that is rounded."""
    keys = {division_of(c, each) for each in (*c.program.sums, *_settled_sums(c)) if each.shift}
    gains = (gain for section in c.settling.sections for gain in section.gains)
    keys |= {Division(PRODUCT_BITS, gain.shift, True) for gain in gains if gain.shift > 0}
    settled = Division(width(c.program.command.bits), c.settling.shift, True)
    return keys | ({settled} if c.settling.shift else set())


def _settled_sums(c: Spelling) -> list[Sum]:
    return [each for section in c.settling.sections for each in section.sums]


def division_of(c: Spelling, each: Sum) -> Division:
    """How a sum is rounded."""
    return Division(c.accumulator(each), each.shift, not c.keeps_half(each))


def rounding_name(c: Spelling, division: Division) -> str:
    """Of the function that rounds so."""
    return f"{c.name}_{'rounded' if division.half else 'floor'}{division.bits}_{division.shift}"


def _rounding(c: Spelling, division: Division) -> list[str]:
    bits, shift, half = division
    suffix = "u" if bits == NARROW else "ull"
    kind, sign = ctype(bits), 1 << bits - 1 - shift
    image = f"((u{kind})sum + {1 << shift - 1}{suffix})" if half else f"(u{kind})sum"
    return [
        f"static inline {kind} {rounding_name(c, division)}({kind} sum)",
        "{",
        f"    const u{kind} image = {image} >> {shift};",
        f"    return ({kind})(image ^ {sign}{suffix}) - {constant(sign)};",
        "}",
        "",
    ]
