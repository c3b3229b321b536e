"""``NAME.c`` in integers: the steps of a program in C99 that is C++11 as well.

Every line does what the Python model does. The code uses nothing but ``<stdint.h>``, allocates nothing, calls no
library, and holds no construct whose result the standards leave open.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.arithmetic.integer.interface import Port
from realize.arithmetic.integer.program import COMMAND, Integral, Sum
from realize.arithmetic.integer.settling import PRODUCT_BITS, Gain, Settled
from realize.firmware.c_preamble import signatures
from realize.firmware.c_text import WIDTH, comment, definition, reads, statement, wrapped
from realize.firmware.integer.spelling import (
    APPLIED_COUNT,
    INPUT_COUNT,
    NARROW,
    WIDE,
    Spelling,
    Stored,
    alone,
    cast,
    constant,
    count_bits,
    ctype,
    is_wide,
    port_type,
    times,
    width,
)


class Block(NamedTuple):
    """Lines that set a local, or that are needed whether or not one is read."""

    local: str | None
    lines: list[str]


class Kept(NamedTuple):
    """A field of the state between output and advance: its name, which is the local's, and the bits of both types."""

    name: str
    bits: int
    local_bits: int


#: Digits of a value in a comment.
_DIGITS = 12

#: The field of a state that has nothing to remember.
UNUSED = "unused"


def source_text(c: Spelling) -> str:
    """The whole source file."""
    body = _functions(c)
    lines = [
        *comment(wrapped(f"{c.name}.c - a difference equation in integers, emitted by realize; see {c.name}.h")),
        f'#include "{c.name}.h"',
        "",
        *_constants(c),
        *_helpers(c, "\n".join(body)),
        *body,
    ]
    return "\n".join(lines) + "\n"


def stored_text(stored: Stored) -> str:
    """What a stored number stands for: exactly where that is short."""
    decimal = f"{float(stored.value):.{_DIGITS}g}"
    about = "" if Fraction(decimal) == stored.value else "about "
    return f"{about}{decimal}; {stored.fraction_bits} fraction bits"


def kept(c: Spelling) -> tuple[Kept, ...]:
    """What output leaves in the state for advance: sums, what their rounding discards, the command before its limits.

    The upper half of a state is not kept: taking it again is as cheap as loading it.
    """
    rest = _text([*_updates(c), *_moves(c), *_integrals(c)])
    found = [
        Kept(each.target, c.word_bits(each.target), c.local_bits(each.target))
        for each in c.program.outputs
        if not _is_top(each) and reads(rest, each.target)
    ]
    found += [
        Kept(_discarded(each), c.field_bits(each.remainder), c.accumulator(each))
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


# ---------------------------------------------------------------- numbers and helpers


def _constants(c: Spelling) -> list[str]:
    if c.table:
        values = [f"    {alone(one.stored)}, /* {field}: {stored_text(one)} */" for field, one in c.fields.items()]
        return [f"const {c.name}_coefficients {c.name}_nominal = {{", *(values or ["    0"]), "};", ""]
    lines: list[str] = []
    for field, one in c.fields.items():
        if field not in c.looked_up:
            lines += _constant(c, field, one)
    return [*_looked_up(c), *lines, ""] if c.fields else []


def _constant(c: Spelling, field: str, one: Stored) -> list[str]:
    value, says = f"static const {ctype(one.bits)} {c.name}_{field} = {alone(one.stored)};", stored_text(one)
    line = f"{value} /* {says} */"
    return [line] if len(line) <= WIDTH else [f"/* {says} */", value]


#: Why there are two ways to add up products.
_COLUMNS = (
    "Processors that multiply to 32 bits only, where each product of 64 bits would be a call: there products are made "
    "of halves, added up in three columns, and the coefficients are known to the compiler."
)


def _columns_macro(c: Spelling) -> str:
    return f"{c.name}_SHORT_PRODUCTS"


#: Why long coefficients are loaded through a pointer.
_LOOKED_UP = (
    "Coefficients in a table. Processors load a long constant faster than they put it together from halves, but "
    "compilers that know a constant do put it together: reading the pointer to the table, which is volatile, hides it."
)


def _looked_up(c: Spelling) -> list[str]:
    """The table of coefficients, and a pointer to it that compilers do not see through."""
    stored = {field: one for field, one in c.fields.items() if field in c.looked_up}
    if not stored:
        return []
    return [
        *comment(wrapped(_COLUMNS)),
        "#if defined(__ARM_ARCH_6M__) || defined(__ARM_ARCH_8M_BASE__)",
        f"#define {_columns_macro(c)}",
        "#endif",
        "",
        *comment(wrapped(_LOOKED_UP)),
        "typedef struct {",
        *(f"    {ctype(one.bits)} {field};" for field, one in stored.items()),
        f"}} {c.name}_table;",
        "",
        f"static const {c.name}_table {c.name}_stored = {{",
        *(_entry_of_table(c, field, one) for field, one in stored.items()),
        "};",
        "",
        f"#ifdef {_columns_macro(c)}",
        f"static const {c.name}_table *const {c.name}_lookup = &{c.name}_stored;",
        "#else",
        f"static const {c.name}_table *const volatile {c.name}_lookup = &{c.name}_stored;",
        "#endif",
        "",
    ]


def _entry_of_table(c: Spelling, field: str, one: Stored) -> str:
    """With ``recursion_sign`` subtract the text stores ``a``, which the compiler negates."""
    if not (c.negates and "_minus_a" in field):
        return f"    {alone(one.stored)}, /* {field}: {stored_text(one)} */"
    subtracted = one._replace(stored=-one.stored)
    return f"    -{constant(-one.stored)}, /* {field.replace('_minus_a', '_a')}: {stored_text(subtracted)} */"


def _helpers(c: Spelling, body: str) -> list[str]:
    """The functions the steps call, as far as there are such steps."""
    interface, integral = c.program.interface, c.program.integral
    rounding = [(_rounding_name(c, key), _rounding(c, key)) for key in sorted(_roundings(c))]
    found = [(_ALWAYS, comment(wrapped(_ROUNDING))), *rounding] if rounding else []
    found.append((f"{c.name}_columns", _columns(c)))
    found.append((f"{c.name}_{INPUT_COUNT}", _entry(c, "INPUT", INPUT_COUNT, interface.input)))
    found.append((f"{c.name}_{APPLIED_COUNT}", _entry(c, "OUTPUT", APPLIED_COUNT, interface.output)))
    found.append((f"{c.name}_limited", _limited(c)))
    if integral:
        found.append((f"{c.name}_pushes", _pushes(c, integral)))
        for i, limits in enumerate(integral.limits, 1):
            found += [(f"{c.name}_held{i}", _held(c, integral, i, limits))] if limits else []
    return [line for name, lines in found if name == _ALWAYS or reads(body, name) for line in lines]


class _Division(NamedTuple):
    """Of a sum by a power of two: downward, to nearest where a half is added first."""

    bits: int
    shift: int
    half: bool


def _roundings(c: Spelling) -> set[_Division]:
    """Everything that is rounded."""
    keys = {_division(c, each) for each in (*c.program.sums, *_settled_sums(c)) if each.shift}
    gains = (gain for section in c.settling.sections for gain in section.gains)
    keys |= {_Division(PRODUCT_BITS, gain.shift, True) for gain in gains if gain.shift > 0}
    settled = _Division(width(c.program.command.bits), c.settling.shift, True)
    return keys | ({settled} if c.settling.shift else set())


def _settled_sums(c: Spelling) -> list[Sum]:
    return [each for section in c.settling.sections for each in section.sums]


def _division(c: Spelling, each: Sum) -> _Division:
    return _Division(c.accumulator(each), each.shift, not c.keeps_half(each))


def _rounding_name(c: Spelling, division: _Division) -> str:
    return f"{c.name}_{'rounded' if division.half else 'floor'}{division.bits}_{division.shift}"


#: In place of the name of a function: lines that stand in any case.
_ALWAYS = ""

#: Why the functions that round are written as they are.
_ROUNDING = (
    "Sums over powers of two: rounded to nearest, ties upward, or to the floor where a half is in the sum already. "
    "The C standard defines every step for every sum: it leaves open the right shift of a negative number, so the "
    "unsigned image is shifted and its sign put back. Compilers make one addition and one arithmetic shift of it."
)


def _rounding(c: Spelling, division: _Division) -> list[str]:
    bits, shift, half = division
    suffix = "u" if bits == NARROW else "ull"
    kind, sign = ctype(bits), 1 << bits - 1 - shift
    image = f"((u{kind})sum + {1 << shift - 1}{suffix})" if half else f"(u{kind})sum"
    return [
        f"static inline {kind} {_rounding_name(c, division)}({kind} sum)",
        "{",
        f"    const u{kind} image = {image} >> {shift};",
        f"    return ({kind})(image ^ {sign}{suffix}) - {constant(sign)};",
        "}",
        "",
    ]


def _columns(c: Spelling) -> list[str]:
    """Sums of products modulo ``2**64``: a value is ``high * 2**16 + low``, with its sign in ``high``."""
    name = c.name
    return [
        f"#ifdef {_columns_macro(c)}",
        *comment(wrapped("A sum is low + middle * 2^16 + high * 2^32, modulo 2^64.")),
        "typedef struct {",
        "    uint64_t low;",
        "    uint64_t middle;",
        "    uint32_t high;",
        f"}} {name}_columns;",
        "",
        *comment(wrapped("Adds a product as four products of halves, none of which exceeds 32 bits.")),
        f"static inline void {name}_add({name}_columns *sum, int32_t coefficient, int32_t value)",
        "{",
        "    const uint32_t image = (uint32_t)value;",
        "    const uint32_t low = image & 65535u;",
        "    const int32_t high = (int32_t)((image ^ 2147483648u) >> 16) - 32768;",
        "    const uint32_t size = coefficient < 0 ? 0u - (uint32_t)coefficient : (uint32_t)coefficient;",
        "    const uint32_t size_low = size & 65535u;",
        "    const uint32_t size_high = size >> 16;",
        "    if (coefficient < 0) {",
        *_four_products("-"),
        "    } else {",
        *_four_products("+"),
        "    }",
        "}",
        "",
        *comment(wrapped("The sum, which is proven to have room; compilers make the three columns one number.")),
        f"static inline int64_t {name}_total(const {name}_columns *sum)",
        "{",
        "    const uint64_t upper = sum->middle + (uint64_t)sum->high * 65536u;",
        "    const uint64_t image = sum->low + upper * 65536u;",
        "    return image <= 9223372036854775807ull ? (int64_t)image : -(int64_t)~image - 1;",
        "}",
        "#endif",
        "",
    ]


def _four_products(sign: str) -> list[str]:
    return [
        f"        sum->low {sign}= low * size_low;",
        f"        sum->middle {sign}= low * size_high;",
        f"        sum->middle {sign}= (uint64_t)(int64_t)(high * (int32_t)size_low);",
        f"        sum->high {sign}= (uint32_t)high * size_high;",
    ]


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
    kind, given = ctype(c.command_bits), ctype(c.limited_bits)
    # What is proven of the command holds for the coefficients of the record, not for any table.
    low, high = c.table or -largest - 1 < port.low, c.table or largest > port.high
    if not low and not high:
        says = f"The command is proven to lie from {-largest - 1} to {largest}, within its range."
        lines = [f"    return {cast('unclamped', given, kind)};"]
    elif power > 1:
        says = f"The command, {power} times what is given, held to its range."
        lines = _compared_late(port, power)
    else:
        says = "The command held to its range."
        lines = _compared(c, port, low, high)
    return [
        *comment(wrapped(says)),
        f"static inline {kind} {c.name}_limited({given} unclamped)",
        "{",
        *lines,
        "}",
        "",
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


# ---------------------------------------------------------------- functions


def _functions(c: Spelling) -> list[str]:
    interface = c.program.interface
    declared = signatures(c.name, port_type(interface.input), port_type(interface.output), table=c.table)
    clear, update, output, advance, preset = declared
    begin, answer = [*_start(c), *_outputs(c)], Block(None, [f"    return {_answer(c)};"])
    following = [*_updates(c), *_moves(c), *_given_back(c), *_integrals(c)]
    return [
        *definition(clear, [_clearing(c, name) for name in state_bits(c)]),
        *definition(update, _needed([*begin, *following, answer])),
        *definition(output, _needed([*begin, *_keeping(c), answer])),
        *definition(advance, _needed([*_resumed(c), *following])),
        *definition(preset, _preset(c)),
    ]


def _clearing(c: Spelling, field: str) -> str:
    value = _cleared(c, field)
    return f"    state->{field} = {value};{' /* the half that rounds */' if value != '0' else ''}"


def _cleared(c: Spelling, field: str) -> str:
    """A remainder at rest is nothing but the half, where it keeps one."""
    halves = {each.remainder: 1 << each.shift - 1 for each in c.program.sums if each.remainder and c.keeps_half(each)}
    return alone(halves.get(f"state.{field}", 0))


def _needed(blocks: Sequence[Block]) -> list[str]:
    """The lines of all blocks but those whose local nothing reads."""
    lines: list[str] = []
    for block in reversed(blocks):
        if block.local is None or reads("\n".join(lines), block.local):
            lines = [*block.lines, *lines]
    return lines


def _text(blocks: Sequence[Block]) -> str:
    return "\n".join(line for block in blocks for line in block.lines)


def _local(name: str, bits: int, value: str) -> Block:
    """A local that is set once."""
    return Block(name, _set(f"const {ctype(bits)} {name} = ", [value]))


def _set(start: str, pieces: Sequence[str]) -> list[str]:
    """A statement; what is to be set stands on a line of its own where the first piece has no room beside it."""
    lines = statement(start, pieces)
    if len(lines[0]) <= WIDTH:
        return lines
    return [f"    {start.rstrip()}", *(f"        {piece}" for piece in pieces[:-1]), f"        {pieces[-1]};"]


def _start(c: Spelling) -> list[Block]:
    lookup = f"    const {c.name}_table *const coefficients = {c.name}_lookup;"
    return [
        *([Block("coefficients", [lookup])] if c.looked_up else []),
        _local(INPUT_COUNT, NARROW, f"{c.name}_{INPUT_COUNT}(input)"),
    ]


def _outputs(c: Spelling) -> list[Block]:
    last = () if c.late_shift else (c.program.command,)
    blocks = [block for each in (*c.program.outputs, *last) for block in _sum(c, each)]
    limited = c.variable(c.program.command.terms[0].variable) if c.late_shift else COMMAND
    return [*blocks, _local("command", c.command_bits, f"{c.name}_limited({limited})")]


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
        *_start(c),
        _local("command", c.command_bits, f"{c.name}_{APPLIED_COUNT}(applied)"),
        *(_local(each.name, each.local_bits, f"state->{each.name}") for each in kept(c)),
        *(block for each in c.program.outputs if _is_top(each) for block in _sum(c, each)),
    ]


def _updates(c: Spelling) -> list[Block]:
    return [block for each in c.program.updates for block in _sum(c, each)]


def _moves(c: Spelling) -> list[Block]:
    return [_assigned(c, target, c.variable(source), c.variable_bits(source)) for target, source in c.program.moves]


def _given_back(c: Spelling) -> list[Block]:
    return [
        _assigned(c, each.remainder, _discarded(each), c.accumulator(each))
        for each in c.program.outputs
        if each.remainder
    ]


def _assigned(c: Spelling, state: str, value: str, bits: int) -> Block:
    """A state that becomes a value of a type of its own."""
    return Block(None, _set(f"{c.variable(state)} = ", [cast(value, ctype(bits), ctype(c.field_bits(state)))]))


# ---------------------------------------------------------------- sums


def _is_top(each: Sum) -> bool:
    """Whether a sum only takes the upper half of a state."""
    return len(each.terms) == 1 and each.terms[0].name is None and each.terms[0].variable.startswith("state.")


def _discarded(each: Sum) -> str:
    """Local of what rounding discards."""
    return f"{each.target}_discarded"


def _sum(c: Spelling, each: Sum) -> list[Block]:
    """A sum with its proven bound, rounded, and what it is for."""
    bits, name = c.accumulator(each), f"{each.target.removeprefix('state.')}_sum"
    pieces = c.pieces(each.terms, bits, each.remainder)
    blocks = []
    if len(each.terms) == 1 and each.terms[0].name is None and not each.remainder:
        name = pieces[0]
    else:
        lines = _set(f"const {ctype(bits)} {name} = ", pieces)
        if c.by_columns(each.terms, bits):
            lines = [f"#ifdef {_columns_macro(c)}", *_by_columns(c, each, name), "#else", *lines, "#endif"]
        half = [f"    /* {c.variable(str(each.remainder))} has the half that rounds */"] if c.keeps_half(each) else []
        blocks.append(Block(name, [*half, *_proven(c, f"{each.target} (sum)", bits), *lines]))
    rounded = f"{_rounding_name(c, _division(c, each))}({name})" if each.shift else name
    if each.remainder:
        rounded_name = f"{each.target}_rounded"
        blocks.append(_local(rounded_name, bits, rounded))
        blocks.append(_local(_discarded(each), bits, f"{name} - {rounded_name}{times(1 << each.shift)}"))
        rounded = rounded_name
    if each.base:
        both = max(bits, NARROW, c.variable_bits(each.base))
        rounded, bits = f"({c.cast(each.base, both)} + {cast(rounded, ctype(bits), ctype(both))})", both
    if each.target.startswith("state."):
        blocks.append(_assigned(c, each.target, _bare(rounded, bits, c.field_bits(each.target)), bits))
    else:
        own = c.local_bits(each.target)
        blocks.append(_local(each.target, own, cast(_bare(rounded, bits, own), ctype(bits), ctype(own))))
    return blocks


def _by_columns(c: Spelling, each: Sum, name: str) -> list[str]:
    """The same sum where long products are made of halves."""
    columns = f"{name.removesuffix('_sum')}_columns"
    first = f"(uint64_t){c.cast(each.remainder, WIDE)}" if each.remainder else "0u"
    lines = statement(f"{c.name}_columns {columns} = ", [f"{{{first},", "0u,", "0u}"])
    for term in each.terms:
        if c.in_columns(term):
            coefficient, variable = c.column(term)
            lines += statement(f"{c.name}_add(&{columns}, ", [f"{coefficient},", f"{variable})"])
        else:
            minus, text = c.piece(term, WIDE)
            lines += _set(f"{columns}.low {'-' if minus else '+'}= ", [f"(uint64_t)({text})"])
    return [*lines, f"    const int64_t {name} = {c.name}_total(&{columns});"]


def _bare(text: str, bits: int, wanted: int) -> str:
    """Without the parentheses that only a cast needs."""
    return text[1:-1] if bits == wanted and text.startswith("(") and text.endswith(")") else text


def _proven(c: Spelling, variable: str, bits: int) -> list[str]:
    """The bound of a sum as a comment, and how far it is from filling its type."""
    if variable not in c.bounds:
        return []
    bound = c.bounds[variable]
    room = bits - 1 - bound.largest.bit_length()
    spare = f"{room} bit{'' if room == 1 else 's'} to spare of {bits}"
    return [f"    /* proven: {-bound.largest - 1} <= sum <= {bound.largest}, {spare} */"]


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
    lines = _set(f"const {ctype(bits)} {increment} = ", pieces or ["0"])
    following = f"{state} + {increment}"
    limits = integral.limits[i - 1]
    moved = [f"    {state} = {f'{c.name}_held{i}({following})' if limits else following};"]
    if c.program.hold:
        held = f"    if (!{c.name}_pushes({increment}, {COMMAND}, command)) {{"
        moved = [held, *(f"    {line}" for line in moved), "    }"]
    return [Block(increment, lines), Block(None, [*_proven(c, f"state.integral{i} (sum)", bits), *moved])]


# ---------------------------------------------------------------- coming to rest


def _preset(c: Spelling) -> list[str]:
    """The state at rest, then the next output from it."""
    settling = c.settling
    blocks = [*_start(c), *(_assigned(c, name, INPUT_COUNT, NARROW) for name in settling.inputs)]
    for section in settling.sections:
        blocks += _settled(c, section)
    blocks += _settled_integral(c) if settling.integrating else []
    given = "state, coefficients, input" if c.table else "state, input"
    blocks.append(Block(None, [f"    return {c.name}_output({given}) == output{_at_rest(c)};"]))
    return _needed(blocks)


def _at_rest(c: Spelling) -> str:
    port = c.program.interface.input
    return f" && input == {alone(port.offset)}" if c.settling.integrating else ""


def _settled(c: Spelling, section: Settled) -> list[Block]:
    blocks = [_gained(c, gain) for gain in section.gains]
    for state, local in section.stored:
        bits = PRODUCT_BITS if local else c.field_bits(state)
        blocks.append(_assigned(c, state, local or _cleared(c, state.removeprefix("state.")), bits))
    blocks += [block for each in section.sums for block in _sum(c, each)]
    return [*blocks, *(_assigned(c, state, source, c.local_bits(source)) for state, source in section.histories)]


def _gained(c: Spelling, gain: Gain) -> Block:
    product = f"({ctype(PRODUCT_BITS)}){c.coefficient(gain.name)} * {c.variable(gain.variable)}"
    if gain.shift > 0:
        product = f"{_rounding_name(c, _Division(PRODUCT_BITS, gain.shift, True))}({product})"
    return _local(gain.target, PRODUCT_BITS, product + times(1 << max(0, -gain.shift)))


def _settled_integral(c: Spelling) -> list[Block]:
    """What the command lacks goes into the first state; those above keep it still, as far as their limits let them."""
    integral, settling, command = c.program.integral, c.settling, c.program.command
    assert integral is not None
    bits = width(command.bits)
    wanted = f"({cast('wanted', ctype(c.command_bits), ctype(bits))}{times(1 << command.shift)})"
    pieces = [] if not settling.rest else c.pieces(settling.rest, bits)
    blocks = [_local("wanted", c.command_bits, f"{c.name}_{APPLIED_COUNT}(output)")]
    if pieces:
        blocks.append(Block("rest", _set(f"const {ctype(bits)} rest = ", pieces)))
    missing = f"{wanted[1:-1]} - rest" if pieces else wanted[1:-1]
    blocks.append(_local("missing", bits, missing))
    division = _Division(bits, settling.shift, True)
    found = f"{_rounding_name(c, division)}(missing)" if settling.shift else "missing"
    blocks.append(_assigned(c, "state.integral1", found, bits))
    for i, gain in enumerate(integral.stored[:-1], 1):
        back = f"-({ctype(integral.word.bits)}){c.coefficient(f'integral{i}_gain')} * {INPUT_COUNT}" if gain else "0"
        limited = f"{c.name}_held{i + 1}({back})" if integral.limits[i] else back
        blocks.append(_assigned(c, f"state.integral{i + 1}", limited, integral.word.bits))
    return blocks
