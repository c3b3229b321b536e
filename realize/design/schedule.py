"""The table ``[schedule]``: operating points, the values that change with them, and the design at any of them.

Between two points the scheduled values are interpolated, exactly; everything that depends on them follows. The tables
of controller and plant are kept as they were written: a transfer function at other values is made from them anew.
"""

from __future__ import annotations

import re
from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise
from typing import NamedTuple

from realize.algebra.expression import exact_text
from realize.algebra.expression.tokens import listed, nearest, shown
from realize.design.controller import read_controller
from realize.design.gate import Table, WrittenNumber, checked_number, described, within_range
from realize.design.model import Design, PlantTable, Schedule
from realize.design.plant import read_plant
from realize.design.tables import MAX_UNIT, checked_name
from realize.design.values import Values
from realize.errors import RealizeError, Refused

#: Most operating points: a table that a person could still look over, and some minutes of checks.
MAX_POINTS = 4096

#: Parts that each interval is divided into for the checks between, where the design does not say; and the most.
DEFAULT_GRID, MAX_GRID = 8, 1000

#: Names that the lookup uses for itself; and what follows the name of the design in names of the code.
LOOKUP_NAMES = ("coefficients", "first", "lower", "second", "share", "upper")
CODE_NAMES = (
    *(
        "advance",
        "at",
        "between",
        "clear",
        "coefficients",
        "first_point",
        "high",
        "integrate",
        "is_finite",
        "last",
        "limit",
        "low",
    ),
    *("output", "output_high", "output_low", "period_denominator", "period_numerator", "point_below"),
    *("points", "preset", "pushes", "selftest", "sets", "state", "update"),
)

#: Macros that the argument of the lookup would be replaced by: those of ``<float.h>``, decimal and extended formats and
#: C23 among them, and what compilers define without an underscore for their system or processor.
_LIMITS_OF_FLOATS = re.compile(r"(?:FLT|DBL|LDBL|DEC)[0-9]*X?_[A-Z0-9_]+|DECIMAL_DIG|INFINITY|NAN")
_PLATFORMS = (
    *("AVR", "MIPSEB", "MIPSEL", "WIN32", "WIN64", "WINNT", "hpux", "i386", "linux", "m68k", "mips", "pdp11", "sparc"),
    *("sun", "unix", "vax"),
)

Lists = tuple[tuple[str, tuple[Fraction, ...]], ...]

_KEYS = ("variable", "unit", "points", "grid", "values", "plant_values")


class Place(NamedTuple):
    """Where in a schedule: a point, or a share (from 0 to below 1) of the way from it to the next."""

    point: int
    share: Fraction = Fraction(0)


def read_schedule(
    root: Table, design_name: str, controller: Values, plant: PlantTable | None, written: object
) -> Schedule | None:
    """Read the operating points.

    Parameters
    ----------
    root : Table
        The file.
    design_name : str
        Prefix of the names of the code, which the variable must not take.
    controller : tuple of (str, Fraction)
        Values of the controller.
    plant : PlantTable or None
        What it is connected to.
    written : mapping
        The tables of both as they were written; see :func:`written_tables`.

    Raises
    ------
    RealizeError
        When it cannot be understood.
    """
    if "schedule" not in root:
        return None
    table = root.table("schedule")
    table.only(_KEYS)
    points = _points(table)
    values = _changing(table, "values", [name for name, _ in controller], len(points))
    plant_names = [] if plant is None else [name for name, _ in plant.cases[0].values]
    if not values:
        raise table.error(
            "values",
            "no value that changes",
            f"a list for each value of [design.values] that changes: of {listed(n for n, _ in controller) or 'none'}",
            "write [schedule.values] on a line, and below it a list with a number for each point",
        )
    return Schedule(
        _variable(table, design_name),
        table.text("unit", MAX_UNIT) or "",
        points,
        table.integer("grid", 2, MAX_GRID) or DEFAULT_GRID,
        values,
        _changing(table, "plant_values", plant_names, len(points)),
        _tables(written, table),
    )


def refuse_inline(target: Table) -> None:
    """Refuse coefficients that are part of the code, where a schedule looks them up.

    Raises
    ------
    RealizeError
        When the table ``[target]`` says so.
    """
    if target.entries.get("coefficients") == "inline":
        found = 'coefficients = "inline" beside [schedule], whose coefficients change and so cannot be part of the code'
        raise target.error("coefficients", found, '"table", or nothing', "remove it: with [schedule] it is a table")


def _variable(table: Table, design_name: str) -> str:
    name = table.text("variable")
    if name is None:
        found, allowed = "nothing", "the name of the variable that the lookup is given, a C identifier"
        raise table.error("variable", found, allowed, 'write variable = "speed"')
    checked_name(name, table.where("variable"))
    if _LIMITS_OF_FLOATS.fullmatch(name) or name in _PLATFORMS:
        found = f"the name {shown(name)}, a macro of <float.h> or of a compiler for its platform"
        raise table.error("variable", found, "a name that no macro has", f"write {name.lower()}_measured")
    if name in LOOKUP_NAMES or name.lower() in [f"{design_name}_{own}".lower() for own in CODE_NAMES]:
        allowed = f"any name but {listed(LOOKUP_NAMES)}, and those of the functions of the design"
        found = f"the name {shown(name)}, which the code uses itself"
        raise table.error("variable", found, allowed, "say what it measures, as in web_speed")
    return name


def _points(table: Table) -> tuple[Fraction, ...]:
    entries = table.numbers("points")
    if not 2 <= len(entries) <= MAX_POINTS:
        allowed = f"a list of 2 to {MAX_POINTS} numbers, each larger than the one before"
        found = f"a list of {len(entries)}" if "points" in table else "nothing"
        raise table.error("points", found, allowed, "write points = [0.2, 0.5, 1.0]")
    points = _numbers(entries, table.where("points"))
    for i, (before, after) in enumerate(pairwise(points), 1):
        if after <= before:
            found = f"{number_text(after)} after {number_text(before)}, at entry {i + 1}"
            raise table.error("points", found, "each larger than the one before", "sort them, and drop what is double")
    return points


def _changing(table: Table, key: str, known: Collection[str], count: int) -> Lists:
    """Values that change, each with a number for every point."""
    lists = table.table(key)
    home = "[design.values]" if key == "values" else "[plant.values]"
    for name in lists.entries:
        if name not in known:
            like = nearest(name, known)
            raise lists.error(
                name,
                f"a value that is not in {home}",
                listed(known) or f"none: {home} has no values that are used",
                f"did you mean {like}?" if like else f"write it into {home} too, where its nominal number stands",
            )
        entries = lists.numbers(name)
        if len(entries) != count:
            allowed = f"a list of {count}: a number for each point"
            raise lists.error(name, f"a list of {len(entries)}", allowed, "give one for each entry of points")
    return tuple((name, _numbers(lists.numbers(name), lists.where(name))) for name in lists.entries)


def _numbers(entries: Sequence[object], where: str) -> tuple[Fraction, ...]:
    places = [f"{where}, entry {i}" for i in range(1, len(entries) + 1)]
    return tuple(
        within_range(checked_number(entry, {}, place), place) for entry, place in zip(entries, places, strict=True)
    )


def written_tables(root: Table, controller: Values, plant: PlantTable | None, overrides: Mapping[str, str]) -> object:
    """The tables that a design at other values is made from: as written, with the values of the command line."""
    parts = {"design": _written(root.table("design"), controller, overrides)}
    if plant is not None:
        parts["plant"] = _written(root.table("plant"), plant.cases[0].values, overrides)
    return parts


def _written(table: Table, values: Values, overrides: Mapping[str, str]) -> dict[str, object]:
    in_file = table.table("values").entries
    entries = {key: value for key, value in table.entries.items() if key not in ("values", *_NOT_TRANSFER)}
    chosen = {name: overrides.get(name, in_file.get(name)) for name, _ in values}
    return {key: _plain(value) for key, value in (entries | ({"values": chosen} if chosen else {})).items()}


#: Keys of the table ``[design]`` that say nothing about the transfer function.
_NOT_TRANSFER = ("name", "about", "revision", "requirement", "author")


def _plain(value: object) -> object:
    """As JSON can hold it: a decimal as the exact number that it is."""
    if isinstance(value, WrittenNumber):
        return exact_text(checked_number(value, {}, ""))
    if isinstance(value, list):
        return [_plain(each) for each in value]
    return {key: _plain(each) for key, each in value.items()} if isinstance(value, Mapping) else value


def _tables(written: object, table: Table) -> Mapping[str, Mapping[str, object]]:
    """The kept tables, which in a record could be anything."""
    parts = written if isinstance(written, Mapping) else {}
    for key in ("design", "plant"):
        if not isinstance(parts.get(key, {}), Mapping):
            raise table.error("written", described(parts[key]), "tables as they were written", "emit the design again")
    return parts


def values_at(schedule: Schedule, place: Place) -> tuple[dict[str, Fraction], dict[str, Fraction]]:
    """Scheduled values of controller and plant, interpolated exactly."""

    def at(numbers: Sequence[Fraction]) -> Fraction:
        first = numbers[place.point]
        return first + place.share * (numbers[place.point + 1] - first) if place.share else first

    controller, plant = (
        {name: at(numbers) for name, numbers in lists} for lists in (schedule.values, schedule.plant_values)
    )
    return controller, plant


def variable_at(schedule: Schedule, place: Place) -> Fraction:
    """The scheduling variable, exactly."""
    first = schedule.points[place.point]
    return first + place.share * (schedule.points[place.point + 1] - first) if place.share else first


def place_text(schedule: Schedule, place: Place) -> str:
    """A place in words."""
    at = f"{schedule.variable} = {number_text(variable_at(schedule, place))} {schedule.unit}".rstrip()
    number = place.point + 1
    return f"{at} (between points {number} and {number + 1})" if place.share else f"{at} (point {number})"


def design_at(design: Design, place: Place) -> Design:
    """The design with the values that it has there; itself without a schedule.

    Raises
    ------
    RealizeError
        When there is no such transfer function; the message names the place.
    Refused
        When a cancellation in it hides a growing mode, or a plant is improper.
    """
    schedule = design.schedule
    assert schedule is not None
    own, of_plant = values_at(schedule, place)
    try:
        controller = read_controller(_replaced(schedule.written.get("design", {}), own, design.source, "design"), {})
        plant = design.plant
        if plant is not None:
            response = plant.response_text or ""
            table = _replaced(schedule.written.get("plant", {}), of_plant, design.source, "plant")
            plant = read_plant(table, {}, lambda path, where: response)
    except RealizeError as error:
        raise placed(error, schedule, place) from None
    return replace(design, transfer=controller.transfer, values=controller.values, plant=plant, schedule=None)


def refuse_vanishing(design: Design, place: Place) -> None:
    """Refuse a place that is improper because a scheduled value is 0 there: a roll-off for all places is no remedy.

    Raises
    ------
    Refused
        When with another of its values the transfer function has as many poles as zeros.
    """
    schedule = design.schedule
    assert schedule is not None
    own, _ = values_at(schedule, place)
    written = schedule.written.get("design", {})

    def is_proper(values: Mapping[str, Fraction]) -> bool:
        table = _replaced(written, values, design.source, "design")
        return read_controller(table, {}).transfer.relative_degree >= 0

    others = {name: next((n for n in numbers if n), None) for name, numbers in schedule.values if own[name] == 0}
    if design.rolloff is not None or not others or is_proper(own):
        return
    causes = [name for name, other in others.items() if other is not None and is_proper({**own, name: other})]
    if causes:
        raise Refused(
            f"[schedule.values] {causes[0]}",
            f"0 at {place_text(schedule, place)}, where the transfer function then has more zeros than poles, which "
            "nothing can realize",
            "values with which it has as many poles as zeros, or more, at every point",
            f"another number than 0 for point {place.point + 1}",
        )


def placed(error: RealizeError, schedule: Schedule, place: Place) -> RealizeError:
    """The same refusal, with the place in the schedule in front."""
    where = f"[schedule] {place_text(schedule, place)}, {error.where}"
    return type(error)(where, error.found, error.allowed, error.advice, error.excerpt)


def _replaced(entries: Mapping[str, object], values: Mapping[str, Fraction], source: str, key: str) -> Table:
    in_file = entries.get("values", {})
    changed = {**(in_file if isinstance(in_file, Mapping) else {}), **{n: exact_text(v) for n, v in values.items()}}
    return Table({**entries, "values": changed} if changed else entries, source, f"[{key}]")


def refuse_overridden(design: Design, overrides: Mapping[str, str]) -> None:
    """Refuse values of the command line that would change nothing.

    Raises
    ------
    RealizeError
        When the schedule has a list for one of them.
    """
    schedule = design.schedule
    changing = {name for lists in (schedule.values, schedule.plant_values) for name, _ in lists} if schedule else ()
    for name in overrides:
        if name in changing:
            raise RealizeError(
                f"--value {name}",
                "a value that the schedule changes, so that its nominal number is not emitted",
                "values that are the same at every point",
                "change its list in the design file; `realize compare` looks at a nominal value",
            )


def nominal_note(design: Design) -> tuple[str, ...]:
    """One line for what looks at the nominal values alone; nothing without a schedule."""
    schedule = design.schedule
    if schedule is None:
        return ()
    nominal = dict(design.values)
    looked_at = ", ".join(f"{name} = {number_text(nominal[name])}" for name, _ in schedule.values)
    return (
        f"there is a [schedule] of {len(schedule.points)} points by {schedule.variable}: this is about the nominal "
        f"values alone, {looked_at}",
    )


def number_text(value: Fraction) -> str:
    """A number of the schedule, for messages: as many digits as anybody sets by hand."""
    return f"{float(value):.10g}"
