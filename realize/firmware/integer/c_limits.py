"""Holding numbers to their limits in C: what comes in, what goes out, and the integral states."""

from __future__ import annotations

from realize.arithmetic.integer.interface import Port
from realize.arithmetic.integer.program import COMMAND, Integral
from realize.firmware.c_text import comment, reads, wrapped
from realize.firmware.integer.spelling import (
    APPLIED_COUNT,
    INPUT_COUNT,
    NARROW,
    WIDE,
    Spelling,
    alone,
    cast,
    constant,
    count_bits,
    ctype,
    is_wide,
    port_type,
    times,
)

#: Limits that fill a type of 32 bits.
_FULL = (-(1 << NARROW - 1), (1 << NARROW - 1) - 1)


def limit_helpers(c: Spelling, body: str) -> list[str]:
    """The functions that hold numbers to their limits, as far as a text reads them."""
    interface, integral = c.program.interface, c.program.integral
    found = {
        f"{c.name}_{INPUT_COUNT}": _entry(c, "INPUT", INPUT_COUNT, interface.input),
        f"{c.name}_{APPLIED_COUNT}": _entry(c, "OUTPUT", APPLIED_COUNT, interface.output),
        f"{c.name}_limited": _limited(c),
    }
    if integral:
        found[f"{c.name}_pushes"] = _pushes(c, integral)
        found |= {f"{c.name}_held{i}": _held(c, integral, i, at) for i, at in enumerate(integral.limits, 1) if at}
    return [line for name, lines in found.items() if reads(body, name) for line in lines]


def _entry(c: Spelling, macro: str, what: str, port: Port) -> list[str]:
    """What comes in, within its limits, less its offset."""
    kind, (low, high) = ctype(count_bits(port)), port.limits_type
    within = "held to its range, " if low or high else ""
    return [
        f"/* The {macro.lower()} {within}in counts from physical zero. */",
        f"static inline {kind} {c.name}_{what}({port_type(port)} value)",
        "{",
        *(_limit(f"value < {c.name}_{macro}_LOW", port.low) if low else []),
        *(_limit(f"value > {c.name}_{macro}_HIGH", port.high) if high else []),
        f"    return {_less_offset(port, kind)};",
        "}",
        "",
    ]


def _limit(condition: str, value: int) -> list[str]:
    return [f"    if ({condition}) {{", f"        return {alone(value)};", "    }"]


def _less_offset(port: Port, kind: str) -> str:
    if port.offset == 0:
        return cast("value", port_type(port), kind)
    wide = is_wide(port) and kind != ctype(WIDE)
    difference = f"({ctype(WIDE) if wide else kind})value - {constant(port.offset)}"
    return f"({kind})({difference})" if wide else difference


def _limited(c: Spelling) -> list[str]:
    """The command within its range; what is proven not to leave it is not compared."""
    port, largest, power = c.program.interface.output, c.command_largest, 1 << c.late_shift
    given = ctype(c.limited_bits)
    # What is proven of the command holds for the coefficients of the record, not for any table.
    low, high = c.table or -largest - 1 < port.low, c.table or largest > port.high
    if not low and not high:
        says = f"The command is proven to lie from {-largest - 1} to {largest}, within its range."
        return _limiting(c, says, [f"    return {cast('unclamped', given, ctype(c.command_bits))};"])
    if power == 1:
        return _limiting(c, "The command held to its range.", _compared(c, port, low, high))
    says = f"The command, {power} times what is given, held to its range."
    if (port.low, port.high) == _FULL and power == 2:
        return [*_saturating(c), *_limiting(c, says, [f"    return {c.name}_saturated(unclamped, unclamped);"])]
    if _fills_late(c, port, power):
        return [*_within(c, power), *_limiting(c, says, _filled_late(c, power))]
    return _limiting(c, says, _compared_late(port, power))


def _limiting(c: Spelling, says: str, lines: list[str]) -> list[str]:
    signature = f"static inline {ctype(c.command_bits)} {c.name}_limited({ctype(c.limited_bits)} unclamped)"
    return [*comment(wrapped(says)), signature, "{", *lines, "}", ""]


def _saturating(c: Spelling) -> list[str]:
    says = "A sum held to 32 bits: one instruction where a processor has it, and the compiler recognizes it."
    return [
        *comment(wrapped(says)),
        f"static inline int32_t {c.name}_saturated(int32_t left, int32_t right)",
        "{",
        "    const int64_t sum = (int64_t)left + right;",
        *_limit(f"sum < {alone(_FULL[0])}", _FULL[0]),
        *_limit(f"sum > {alone(_FULL[1])}", _FULL[1]),
        "    return (int32_t)sum;",
        "}",
        "",
    ]


def _fills_late(c: Spelling, port: Port, power: int) -> bool:
    """Whether the first bits of the distance from the limits tell what is above them, as :func:`_filled_late` asks.

    Of ``power = 2**k`` the limits of what is given are ``-2**(31 - k)`` and ``2**(31 - k) - 1``. A distance ``d`` above
    them, subtracted modulo ``2**32``, has all its first ``k`` bits set while ``d <= 2**(32 - k)``; a distance below
    them, added, has none of them set while ``d < 2**(32 - k)``.
    """
    largest = c.bounds[c.program.command.terms[0].variable].largest
    return not c.table and (port.low, port.high) == _FULL and largest + 1 < 3 * (1 << NARROW - 1) // power


def _within(c: Spelling, power: int) -> list[str]:
    low, high = (_FULL[0] // power, _FULL[1] // power)
    return [
        f"/* Held to what {power} times has room for. */",
        f"static inline int32_t {c.name}_within(int32_t value)",
        "{",
        *_limit(f"value < {alone(low)}", low),
        *_limit(f"value > {alone(high)}", high),
        "    return value;",
        "}",
        "",
    ]


def _filled_late(c: Spelling, power: int) -> list[str]:
    shift = NARROW - c.late_shift
    return [
        f"    const int32_t held = {c.name}_within(unclamped);",
        f"    /* {power - 1} where unclamped is above the limits, else 0: it is proven not to be far beyond them */",
        f"    const uint32_t more = ((uint32_t)held - (uint32_t)unclamped) >> {shift};",
        f"    return held{times(power)} + (int32_t)more;",
    ]


def _compared(c: Spelling, port: Port, low: bool, high: bool) -> list[str]:
    return [
        *(_limit(f"unclamped < {alone(port.low)}", port.low) if low else []),
        *(_limit(f"unclamped > {alone(port.high)}", port.high) if high else []),
        f"    return {cast('unclamped', ctype(c.local_bits(COMMAND)), ctype(c.command_bits))};",
    ]


def _compared_late(port: Port, power: int) -> list[str]:
    """Compared before the multiplication by a power of two, which then has room; zero is within every range."""
    low, high = -(-port.low // power), port.high // power
    return [
        f"    if (unclamped >= {alone(low)} && unclamped <= {alone(high)}) {{",
        f"        return unclamped{times(power)};",
        "    }",
        f"    return unclamped < 0 ? {alone(port.low)} : {alone(port.high)};",
    ]


def _pushes(c: Spelling, integral: Integral) -> list[str]:
    increment, unclamped, command = map(ctype, (integral.word.bits, c.local_bits(COMMAND), c.command_bits))
    return [
        "/* Whether the increment would drive the command further out of what was applied. */",
        f"static inline int {c.name}_pushes({increment} increment, {unclamped} unclamped, {command} command)",
        "{",
        "    return (unclamped > command && increment > 0) || (unclamped < command && increment < 0);",
        "}",
        "",
    ]


def _held(c: Spelling, integral: Integral, i: int, limits: tuple[int, int]) -> list[str]:
    kind = ctype(integral.word.bits)
    return [
        f"/* Integral state {i} held to what the output's range can use. */",
        f"static inline {kind} {c.name}_held{i}({kind} value)",
        "{",
        *_limit(f"value < {alone(limits[0])}", limits[0]),
        *_limit(f"value > {alone(limits[1])}", limits[1]),
        "    return value;",
        "}",
        "",
    ]
