"""The tables ``[plant]`` and ``[loop]``: what the controller is connected to, case by case, and what delays it."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction

from realize.algebra.expression import evaluate_delayed_transfer
from realize.algebra.expression.tokens import shown
from realize.design.controller import reduced
from realize.design.gate import Table, described, within_range
from realize.design.model import UNITY, LoopTable, PlantCase, PlantTable
from realize.design.values import (
    Written,
    checked_value_name,
    in_table,
    names_of,
    refuse_unused,
    resolve,
    used_names,
    useless,
    written_values,
)
from realize.errors import RealizeError, Refused
from realize.quantity import dimension_meant, format_engineering
from realize.transfer import TransferFunction

#: Most cases beside the nominal one: both ends of five values.
MAX_CASES = 32

#: Longest name of a case: a column of a table.
MAX_CASE_NAME = 48

#: Largest file of a measured response: two thousand lines of three numbers of 17 digits.
MAX_RESPONSE_BYTES = 2**17

#: Name of the case that has the values of the plant itself, where there are others.
NOMINAL = "nominal"

_VALUES_TABLE = "[plant.values]"

#: What is written as an expression, by its key: an example, and how it becomes proper.
_PARTS = {
    "transfer": ("1/(0.05*s^2 + s)", "add the poles that every real plant has, such as those of its actuator"),
    "sensor": ("1/(0.0002*s + 1)", "add the pole that every real sensor has, as in 1/(0.0002*s + 1)"),
}


def read_plant(table: Table, overrides: Mapping[str, str], read_file: Callable[[str, str], str]) -> PlantTable:
    """Read the table ``[plant]``.

    Parameters
    ----------
    table : Table
        The table.
    overrides : mapping of str to str
        Values from the command line, by name; those it does not use belong elsewhere.
    read_file : callable
        Gives the text of the file at a path; the second argument is its place, as the user knows it.

    Raises
    ------
    RealizeError
        When it cannot be understood.
    Refused
        When plant or sensor is improper, or a cancellation in it hides a growing mode.
    """
    table.only(("transfer", "response", "dead_time", "sensor", "values", "case"))
    _refuse_two_descriptions(table)
    cases = table.tables("case")
    values, roots = table.table("values"), {*_roots(table), *_names_in(cases)}
    written = written_values(values, overrides, roots)
    nominal = _case(table, NOMINAL if cases else "", written)
    corners = _corners(table, cases, written)
    refuse_unused(values, overrides, roots)
    path = table.text("response")
    return PlantTable(
        _one_line(table, "transfer"),
        (nominal, *corners),
        _one_line(table, "sensor"),
        path,
        None if path is None else checked_response(*_file(table, path, read_file)),
    )


def names_in_plant(table: Table, overrides: Mapping[str, str]) -> frozenset[str]:
    """Names that a value of the command line may be meant for in the table ``[plant]``."""
    in_file = in_table(table.table("values"))
    written = in_file | {name: Written(text, f"--value {name}") for name, text in overrides.items()}
    return used_names({*_roots(table), *_names_in(table.tables("case")), *in_file}, written)


def checked_response(text: str, where: str) -> str:
    """Check the text of a measured response, which the record keeps: not empty, bounded, nothing but plain lines.

    Raises
    ------
    RealizeError
        When it is not.
    """
    if not text.strip():
        raise RealizeError(where, "nothing but blanks", "a measured response", "export the measurement again")
    if len(text) > MAX_RESPONSE_BYTES:
        raise RealizeError(
            where, f"a text of {len(text)} characters", f"at most {MAX_RESPONSE_BYTES}", "keep fewer frequencies"
        )
    for number, line in enumerate(text.split("\n"), 1):
        stray = next((c for c in line if not (c.isprintable() or c == "\t")), None)
        if stray is not None:
            raise RealizeError(
                f"{where}, line {number}",
                f"the character U+{ord(stray):04X}, which cannot be printed",
                "lines of printable text",
                "export the measurement as plain text",
            )
    return text


def proper(transfer: TransferFunction, key: str, where: str) -> TransferFunction:
    """Return the transfer function of a plant or sensor, or refuse it.

    Raises
    ------
    Refused
        When it is improper.
    """
    if transfer.relative_degree < 0:
        degrees = f"degree {len(transfer.numerator) - 1} over degree {len(transfer.denominator) - 1}"
        raise Refused(where, f"it is improper, {degrees}", "as many poles as zeros, or more", _PARTS[key][1])
    return transfer


def read_loop(table: Table) -> LoopTable:
    """Read the table ``[loop]``."""
    table.only(("compute_delay", "jitter"))
    jitter_s = table.quantity("jitter", "time", zero=True)
    if "compute_delay" not in table:
        return LoopTable(jitter_s=jitter_s)
    dimension = dimension_meant(str(table.entries["compute_delay"]), ("time", "samples"))
    try:
        delay = table.quantity("compute_delay", dimension, zero=True)
    except RealizeError as error:
        allowed = 'a number of samples, or a time: "1 sample", "100 us"'
        raise RealizeError(error.where, error.found, allowed, error.advice) from None
    return LoopTable(delay, None, jitter_s) if dimension == "samples" else LoopTable(None, delay, jitter_s)


def _refuse_two_descriptions(table: Table) -> None:
    if ("transfer" in table) == ("response" in table):
        both = "transfer" in table
        raise RealizeError(
            f"{table.source}, {table.place}",
            "transfer and response at once" if both else "neither transfer nor response",
            "exactly one of them",
            "remove one" if both else 'add a line such as transfer = "1/(0.05*s^2 + s)"',
        )
    for key in ("values", "case"):
        if key in table and "response" in table:
            raise table.error(
                key,
                f"{key} with a measured response",
                "values and cases of a plant that is given by its transfer",
                "remove them; write a design file for each measured response",
            )


def _roots(table: Table) -> tuple[str, ...]:
    """Names in the expressions."""
    return tuple(name for key in _PARTS for name in names_of(table.entries.get(key), table.where(key)))


def _names_in(cases: Sequence[Table]) -> set[str]:
    """Names that the values of cases refer to."""
    values = (entry for case in cases for entry in in_table(case.table("values")).values())
    return {name for entry in values for name in names_of(*entry)}


def _one_line(table: Table, key: str) -> str | None:
    return " ".join(str(table.entries[key]).split()) if key in table else None


def _file(table: Table, path: str, read_file: Callable[[str, str], str]) -> tuple[str, str]:
    """Text of the file, and its place."""
    where = f"{table.where('response')}, {path}"
    return read_file(path, where).replace("\r\n", "\n").replace("\r", "\n"), where


def _case(table: Table, name: str, written: Mapping[str, Written]) -> PlantCase:
    values = resolve(written, _VALUES_TABLE)
    behind = "" if name in ("", NOMINAL) else f", case {shown(name)}"
    (transfer, own_s), (sensor, sensor_s) = (_part(table, key, values, table.where(key) + behind) for key in _PARTS)
    stated_s = table.quantity("dead_time", "time", zero=True) or Fraction(0)
    if own_s and "dead_time" in table:
        _refuse_dead_time_twice(table, own_s)
    dead_time_s = within_range(stated_s + own_s + sensor_s, table.where("dead_time") + behind)
    return PlantCase(name, transfer, dead_time_s, sensor, tuple(values.items()))


def _refuse_dead_time_twice(table: Table, own_s: Fraction) -> None:
    raise table.error(
        "dead_time",
        f"dead time stands twice: {described(table.entries['dead_time'])} here, and "
        f"{format_engineering(own_s, 's')} in transfer as a factor exp(-T*s)",
        "dead time of a plant in one place; that of the sensor stands in its own expression",
        "remove one of the two; where there are both, write their sum",
    )


def _part(table: Table, key: str, values: Mapping[str, Fraction], where: str) -> tuple[TransferFunction, Fraction]:
    """Transfer function and dead time of one expression."""
    if key not in table:
        return UNITY, Fraction(0)
    text = table.expression(key, _PARTS[key][0])
    numerator, denominator, dead_time_s = evaluate_delayed_transfer(text, values, where, _VALUES_TABLE)
    return proper(reduced(numerator, denominator, where), key, where), dead_time_s


def _corners(table: Table, cases: Sequence[Table], written: Mapping[str, Written]) -> list[PlantCase]:
    """The cases beside the nominal one."""
    if len(cases) > MAX_CASES:
        raise table.error("case", f"{len(cases)} cases", f"at most {MAX_CASES}", "keep the corners that matter")
    roots = _roots(table)
    corners: dict[str, PlantCase] = {}
    for case in cases:
        case.only(("name", "values"))
        name = _case_name(case, (NOMINAL, *corners))
        corners[name] = _case(table, name, {**written, **_case_values(case, written, roots)})
    return list(corners.values())


def _case_name(case: Table, taken: Sequence[str]) -> str:
    name = case.text("name", MAX_CASE_NAME)
    if name is None:
        raise case.error("name", "nothing", "a name for every case", 'add a line such as name = "light roller"')
    if name in taken:
        own = f", which the values of {_VALUES_TABLE} have" if name == NOMINAL else " for a second case"
        raise case.error("name", f"the name {shown(name)}{own}", "a name of its own for every case", "rename it")
    return name


def _case_values(case: Table, written: Mapping[str, Written], roots: Sequence[str]) -> dict[str, Written]:
    """Values of a case, each of them used."""
    values = in_table(case.table("values"))
    if not values:
        raise case.error(
            "values", "no values", "at least one that differs from the nominal case", "add values = { J = 0.02 }"
        )
    used = used_names(roots, {**written, **values})
    for name, entry in values.items():
        checked_value_name(name, entry.where)
        if name not in used:
            raise useless(name, entry.where, used)
    return values
