"""``NAME_schedule.h``, the table of coefficients, and ``NAME_at`` in ``NAME.c``, which looks them up.

The C does what :class:`realize.schedule.lookup.Lookup` does, in the same order.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING

from realize.arithmetic.sample import is_recursive
from realize.design.schedule import number_text
from realize.firmware.c_text import WIDTH, Dialect, comment, hexadecimal, statement, wrapped
from realize.schedule.table import BOUND, NO_REST

if TYPE_CHECKING:
    from realize.firmware.emission import Emission
    from realize.schedule.table import Table


def schedule_header_text(c: Dialect, table: Table, stored: Mapping[str, float]) -> str:
    """The file with the table.

    Parameters
    ----------
    c : Dialect
        How the C is spelled.
    table : Table
        What stands in it.
    stored : mapping
        Name and value of every field of ``NAME_coefficients``.
    """
    says = (
        f"{c.name}_schedule.h - coefficients by {table.variable}, emitted by realize; it belongs to {c.name}.c. "
        f"Include {c.name}.h, which declares {c.name}_at, instead."
    )
    lines = [
        *comment(wrapped(says)),
        f"#ifndef {c.name}_SCHEDULE_H",
        f"#define {c.name}_SCHEDULE_H",
        "",
        f'#include "{c.name}.h"',
        "",
        f"enum {{ {c.name}_POINTS = {len(table.points)}, {c.name}_LAST = {c.name}_POINTS - 1 }};",
        "",
        *comment(wrapped(f"Where {table.variable} has the coefficients of the same number below, ascending.")),
        f"static const {c.real} {c.name}_points[{c.name}_POINTS] = {{",
        *(f"    {c.literal(x)}, /* {hexadecimal(x)} */" for x in table.breakpoints),
        "};",
        "",
        f"static const {c.name}_coefficients {c.name}_sets[{c.name}_POINTS] = {{",
        *(
            line
            for number, values in enumerate(field_sets(c, table, stored), 1)
            for line in _set(c, f"point {number}: {at_text(table, table.points[number - 1])}", values)
        ),
        "};",
        "",
        f"#endif /* {c.name}_SCHEDULE_H */",
    ]
    return "\n".join(lines) + "\n"


def field_sets(c: Dialect, table: Table, stored: Mapping[str, float]) -> list[dict[str, float]]:
    """Every field of ``NAME_coefficients`` for each point; what no set names is the same at all."""
    return [
        {
            **stored,
            **{c.field(name): _signed(c, name, value) for name, value in each.items() if c.field(name) in stored},
        }
        for each in table.sets
    ]


def _signed(c: Dialect, name: str, value: float) -> float:
    return 0.0 - value if c.adds and is_recursive(name) else value


def _set(c: Dialect, says: str, values: Mapping[str, float]) -> list[str]:
    first, *others = wrapped(says)
    heading = f"    {{ /* {first} */" if not others else "    {"
    fields = [f"        {c.literal(value)}, /* {hexadecimal(value)} {name} */" for name, value in values.items()]
    return [heading, *fields, "    },"]


def at_text(table: Table, point: Fraction) -> str:
    """A value of the variable, with its unit."""
    return f"{table.variable} = {number_text(point)} {table.unit}".rstrip()


def range_text(table: Table) -> str:
    """From the first point to the last."""
    return f"{number_text(table.points[0])} to {number_text(table.points[-1])} {table.unit}".rstrip()


def lookup_signature(c: Dialect, table: Table) -> str:
    """As declared and defined."""
    return f"void {c.name}_at({c.real} {table.variable}, {c.name}_coefficients *coefficients)"


def lookup_prototype(c: Dialect, table: Table, count: int) -> list[str]:
    """The declaration, with what the function does, and what that costs for so many coefficients."""
    comparisons = 2 + search_steps(len(table.points))
    says = (
        f"The coefficients for {table.variable}, for every function below: those of the points on both sides, "
        f"interpolated. Below the first point, and where {table.variable} is NaN, those of the first; from the last "
        f"on, those of the last. It reads nothing but its argument and the table. It takes {comparisons} comparisons "
        f"at most, a division and two subtractions; and for each of {count} coefficients a multiplication and two "
        f"additions. It need not be called every sample: call it when {table.variable} has moved enough to matter."
    )
    return [*comment(wrapped(says)), lookup_signature(c, table) + ";", ""]


def search_steps(points: int) -> int:
    """Comparisons that halve the intervals between so many points to one: the logarithm of their number, rounded up."""
    return (points - 2).bit_length()


def lookup_definitions(c: Dialect, table: Table, fields: Sequence[str]) -> list[str]:
    """The lookup and its two helpers.

    Notes
    -----
    Each step of the search halves ``high - low``, so as many as it takes to halve the intervals to one suffice; one
    more changes nothing. Of two points there is one interval, and nothing to search. Where the two points are the same,
    what is added is 0 times 0.
    """
    variable, points, last = table.variable, f"{c.name}_points", f"{c.name}_LAST"
    quotient = [f"({variable} - {points}[lower])", f"/ ({points}[upper] - {points}[lower])"]
    searched = len(table.points) > 2
    return [
        *(_search(c, search_steps(len(table.points))) if searched else []),
        f"static inline {c.real} {c.name}_between({c.real} first, {c.real} second, {c.real} share)",
        "{",
        f"    const {c.real} difference = second - first;",
        f"    const {c.real} part = share * difference;",
        "    return first + part;",
        "}",
        "",
        lookup_signature(c, table),
        "{",
        "    int lower = 0;",
        "    int upper = 0;",
        f"    {c.real} share = {c.literal(0.0)};",
        f"    if ({variable} >= {points}[{last}]) {{",
        f"        lower = {last};",
        f"        upper = {last};",
        f"    }} else if ({variable} > {points}[0]) {{",
        *([f"        lower = {c.name}_point_below({variable});"] if searched else []),
        "        upper = lower + 1;",
        *statement("share = ", quotient, " " * 8),
        "    }",
        *(f"    const {c.name}_coefficients *const {which} = &{c.name}_sets[{end}];" for which, end in _ENDS.items()),
        *(line for field in fields for line in _assigned(c, field)),
        "}",
        "",
    ]


def _search(c: Dialect, steps: int) -> list[str]:
    return [
        "/* The point at or below a value that lies from the first point to below the last. */",
        f"static int {c.name}_point_below({c.real} value)",
        "{",
        "    int low = 0;",
        f"    int high = {c.name}_LAST;",
        f"    for (int k = 0; k < {steps}; k++) {{",
        "        const int middle = low + (high - low) / 2;",
        f"        if (value < {c.name}_points[middle]) {{",
        "            high = middle;",
        "        } else {",
        "            low = middle;",
        "        }",
        "    }",
        "    return low;",
        "}",
        "",
    ]


#: The two sets between which the lookup interpolates, by their places.
_ENDS = {"first": "lower", "second": "upper"}


def _assigned(c: Dialect, field: str) -> list[str]:
    if field == BOUND:
        # Where gains at rest are not those of the coefficients, the preset keeps no bound but at input 0.
        share = f"share > {c.literal(0.0)}"
        return [f"    coefficients->{field} = {share} ? {c.literal(NO_REST)} : first->{field};"]
    line = f"    coefficients->{field} = {c.name}_between(first->{field}, second->{field}, share);"
    if len(line) <= WIDTH:
        return [line]
    return [f"    coefficients->{field} =", f"        {c.name}_between(first->{field}, second->{field}, share);"]


def schedule_says(emission: Emission, table: Table) -> str:
    """The paragraph of the header."""
    name, variable = emission.name, table.variable
    in_loop = any(check["check"].startswith("loop") for check in emission.checks)
    where = ", and in the loop with the plant that it has there" if in_loop else ""
    return (
        f"the coefficients follow {variable}, at {len(table.points)} points from {range_text(table)}. Whenever "
        f"{variable} is known anew, {name}_at looks them up into a {name}_coefficients of the caller's; its address "
        f"goes to every function of a sample. {name}_first_point is the set of the first point. At each point every "
        f"check was run on what is stored{where}. Between two points stability was decided on a grid of "
        f"{table.grid} parts, and the other checks were run in the middle: a grid, not a proof. All of it holds for a "
        f"variable that stands still. Stability at every fixed {variable} does not prove stability while it moves: let "
        "it change slowly against the closed loop, and filter it where it is noisy. Between two points only "
        "input 0 has a state at rest that is known: the preset answers 0 at any other, and takes one between those of "
        "the points."
    )
