"""Stored numbers in C: constants, and tables of them."""

from __future__ import annotations

from fractions import Fraction

from realize.firmware.c_text import WIDTH, comment, wrapped
from realize.firmware.integer.c_halves import halves_macro
from realize.firmware.integer.spelling import Spelling, Stored, alone, constant, ctype

#: Digits of a value in a comment.
_DIGITS = 12


def stored_text(stored: Stored) -> str:
    """What a stored number stands for: exactly where that is short."""
    decimal = f"{float(stored.value):.{_DIGITS}g}"
    about = "" if Fraction(decimal) == stored.value else "about "
    return f"{about}{decimal}; {stored.fraction_bits} fraction bits"


def constants(c: Spelling) -> list[str]:
    """Every stored number: in a table, or as a constant of its own."""
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
_HALVES = (
    "Processors that multiply to 32 bits only, where each product of 64 bits would be a call: there products are made "
    "of halves, and the coefficients are known to the compiler."
)


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
        *comment(wrapped(_HALVES)),
        "#if defined(__ARM_ARCH_6M__) || defined(__ARM_ARCH_8M_BASE__)",
        f"#define {halves_macro(c)}",
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
        f"#ifdef {halves_macro(c)}",
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
