"""Named values of a table: as they stand in the file or on the command line, and what they come to.

The controller and the plant each have values of their own. A value on the command line belongs to every table that has
or uses its name.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from graphlib import CycleError, TopologicalSorter
from typing import NamedTuple

from realize.algebra.expression import RESERVED_NAMES, names_in, read_exact
from realize.algebra.expression.ratio import UnfitError
from realize.algebra.expression.tokens import VALUES_TABLE, listed, nearest, shown
from realize.design.gate import Table, WrittenNumber, checked_number
from realize.errors import RealizeError

#: Most named values: three for each of the 33 coefficients of a polynomial.
MAX_VALUES = 100

#: Longest name of a value: twice that of a design, so that a description fits.
MAX_VALUE_NAME = 48

#: Largest value, and largest ratio of leading or of trailing coefficients (and one over the smallest ratio): they
#: must fit float64, which ends at 1.8e308.
LARGEST_GAIN = 10**300

Values = tuple[tuple[str, Fraction], ...]


class Written(NamedTuple):
    """A value as it stands somewhere: in the file or on the command line."""

    value: object
    where: str


def written_values(table: Table, overrides: Mapping[str, str], roots: Iterable[str]) -> dict[str, Written]:
    """Values by name, those of the command line in place of the file's.

    Parameters
    ----------
    table : Table
        The values of the file.
    overrides : mapping of str to str
        Those of the command line; one that is neither in the file nor used belongs to another table and is left out.
    roots : iterable of str
        Names that are used where the values are for.
    """
    in_file = in_table(table)
    written = in_file | {name: Written(text, f"--value {name}") for name, text in overrides.items()}
    if len(written) > MAX_VALUES:
        raise RealizeError(
            f"{table.source}, {table.place}",
            f"{len(written)} values",
            f"at most {MAX_VALUES} values",
            "write the numbers into the transfer",
        )
    for name, entry in written.items():
        checked_value_name(name, entry.where)
    known = used_names({*roots, *in_file}, written)
    return {name: entry for name, entry in written.items() if name in known}


def refuse_unused(table: Table, overrides: Mapping[str, str], roots: Iterable[str]) -> None:
    """Refuse a value of the file that is in no use, neither as the file stands nor with the command line.

    Parameters
    ----------
    table, overrides, roots
        As for :func:`written_values`.

    Raises
    ------
    RealizeError
        When nothing uses one, or only another one that nothing uses.
    """
    in_file, needed = in_table(table), set(roots)
    written = in_file | {name: Written(text, f"--value {name}") for name, text in overrides.items()}
    used = used_names(needed, in_file) | used_names(needed, written)
    for name, entry in in_file.items():
        if name not in used:
            raise useless(name, entry.where, used)


def in_table(table: Table) -> dict[str, Written]:
    """Values of the file, as they stand there."""
    return {name: Written(value, table.where(name)) for name, value in table.entries.items()}


def used_names(roots: Iterable[str], written: Mapping[str, Written]) -> frozenset[str]:
    """Names that are used by themselves, or by the values of names that are; the unknown ones too."""
    used: set[str] = set()
    waiting = list(roots)
    while waiting:
        name = waiting.pop()
        if name not in used:
            used.add(name)
            waiting += names_of(*written[name]) if name in written else ()
    return frozenset(used)


def names_of(value: object, where: str) -> tuple[str, ...]:
    """Names that an entry refers to, or a list of entries and pairs."""
    entries = value if isinstance(value, list) else [value]
    parts = [part for entry in entries for part in (entry if isinstance(entry, list) else [entry])]
    return tuple(name for part in parts for name in _names_in_number(part, where))


def resolve(written: Mapping[str, Written], values_table: str = VALUES_TABLE) -> dict[str, Fraction]:
    """Evaluate each value after those it refers to; the result keeps the order they were written in.

    Parameters
    ----------
    written : mapping of str to Written
        Values by name.
    values_table : str
        Where the user may name another one.

    Raises
    ------
    RealizeError
        When one is no number, too large, or refers to itself in the end.
    """
    values: dict[str, Fraction] = {}
    for name in _in_order(written):
        where = written[name].where
        values[name] = checked_number(written[name].value, values, where, values_table)
        if abs(values[name]) > LARGEST_GAIN:
            raise RealizeError(
                where,
                "a value that is too large",
                f"values from -{LARGEST_GAIN:.0e} to {LARGEST_GAIN:.0e}",
                "check the powers of ten",
            )
    return {name: values[name] for name in written}


def checked_value_name(name: str, where: str) -> str:
    """Check the name of a value.

    Raises
    ------
    RealizeError
        When an expression could not refer to it.
    """
    if name in RESERVED_NAMES:
        raise RealizeError(
            where,
            f"a value named {name}, which has a meaning of its own",
            f"any name but {listed(RESERVED_NAMES)}",
            f"call it {name}_value",
        )
    if not (name.isascii() and name.isidentifier()) or len(name) > MAX_VALUE_NAME:
        raise RealizeError(
            where,
            f"a value named {shown(name)}",
            f"names of ASCII letters, digits and _, at most {MAX_VALUE_NAME} characters, no digit first",
            "rename it",
        )
    return name


def useless(name: str, where: str, used: Iterable[str]) -> RealizeError:
    """Compose the refusal of a value that nothing uses: a slip of the pen."""
    known = sorted(used)
    like = nearest(name, known)
    return RealizeError(
        where,
        "a value that nothing uses",
        listed(known) or "no values: the transfer has no names",
        f"did you mean {like}?" if like else "remove it",
    )


def _names_in_number(value: object, where: str) -> tuple[str, ...]:
    if not isinstance(value, str) or isinstance(value, WrittenNumber):
        return ()
    try:
        return names_in(value, where) if read_exact(value.strip()) is None else ()
    except UnfitError:
        return ()  # refused where it is read


def _in_order(written: Mapping[str, Written]) -> list[str]:
    """Names, each after those its value refers to."""
    graph = {name: [other for other in names_of(*entry) if other in written] for name, entry in written.items()}
    try:
        return list(TopologicalSorter(graph).static_order())
    except CycleError as error:
        # The list runs from what is referred to, to what refers to it.
        cycle = list(reversed(error.args[1]))
        raise RealizeError(
            written[cycle[0]].where,
            f"values that refer to each other: {' -> '.join(cycle)}",
            "values that refer to numbers in the end",
            f"give one of {listed(cycle[1:])} a number",
        ) from None
