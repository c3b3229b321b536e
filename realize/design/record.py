"""The design as a document for the record, and back.

Exact numbers are strings, ``p/q`` or an integer. One that is longer than anybody can read comes from ``pi`` or
``sqrt`` (or was written with as many digits); it has a twin, ``..._decimal``. Keys are those of the design file,
with the unit added.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import Any

from realize.algebra import polynomial as poly
from realize.algebra.expression import decimal_text, exact_text
from realize.algebra.expression.ratio import MAX_DEGREE
from realize.algebra.expression.tokens import MAX_LENGTH, listed
from realize.design.controller import LONGEST_PLAIN, Controller, reduced
from realize.design.gate import Table, checked_number, checked_quantity, described
from realize.design.load import assemble
from realize.design.model import TOLERANCE_KEYS, Design, Overrides, PlantCase, PlantTable, Schedule, Signal
from realize.design.plant import MAX_CASE_NAME, checked_response, proper
from realize.design.values import Values, checked_value_name
from realize.errors import RealizeError
from realize.transfer import TransferFunction

_TEXTS = ("about", "revision", "requirement", "author")

_TWIN = "_decimal"

_AGAIN = "emit the design again"

_KEYS = (
    *("name", *_TEXTS, "transfer", "numerator", "denominator", "cancelled", "values"),
    *("sampling", "rolloff", "method", "plant", "loop", "signals", "target", "tolerance", "accept", "schedule"),
)
_PLANT_KEYS = ("transfer", "sensor", "response", "response_text", "cases")
_SCHEDULE_KEYS = ("variable", "unit", "points", "grid", "values", "plant_values", "written")
_TRANSFER_KEYS = ("numerator", "denominator", "cancelled")
_CASE_KEYS = ("name", "values", *_TRANSFER_KEYS, "dead_time_s", "sensor")

#: Keys of the record whose value is an exact number in a unit: the key of the design file, and the unit.
_QUANTITIES: dict[str, dict[str, tuple[str, str]]] = {
    "sampling": {"period_s": ("period", "s"), "band_rad_s": ("band", "rad/s")},
    "rolloff": {"pole_rad_s": ("pole", "rad/s"), "phase_budget_deg": ("phase_budget", "deg")},
    "method": {"exact_at_rad_s": ("exact_at", "rad/s")},
    "loop": {
        "compute_delay_samples": ("compute_delay", "samples"),
        "compute_delay_s": ("compute_delay", "s"),
        "jitter_s": ("jitter", "s"),
    },
    "target": {"tracking_time_s": ("tracking_time", "s")},
    "tolerance": {key: (key, unit) for key, unit in TOLERANCE_KEYS.items()},
}


def resolved(design: Design) -> dict[str, Any]:
    """Write a design, defaults filled in, as a document that JSON can hold.

    Returns
    -------
    dict
        ``name``, ``about``, ``revision``, ``requirement``, ``author``; ``transfer`` (as written), ``numerator``,
        ``denominator``, ``cancelled`` (exact, descending powers of s; ``cancelled`` is empty where nothing was);
        ``values`` (a list of name and value); ``sampling``, ``rolloff`` (or null), ``method``, ``plant`` and ``loop``
        (or null), ``signals``, ``target``, ``tolerance`` (those that differ from their defaults) and ``accept``; where
        there is one, ``schedule``, whose lists are by the names of the values.
    """
    document = {
        "name": design.name,
        **{key: getattr(design, key) for key in _TEXTS},
        "transfer": design.transfer_text,
        **_written_transfer(design.transfer),
        "values": _written_values(design.values),
        "sampling": {**exact_entry("period_s", design.period_s), **exact_entry("band_rad_s", design.band_rad_s)},
        "rolloff": None if design.rolloff is None else _with_exact_numbers(design.rolloff._asdict()),
        "method": {
            "name": design.method,
            **exact_entry("exact_at_rad_s", design.exact_at_rad_s),
            "compensate_delay": design.compensate_delay,
        },
        "plant": None if design.plant is None else _written_plant(design.plant),
        "loop": None if design.plant is None else _with_exact_numbers(design.loop._asdict()),
        "signals": {"input": _signal(design.input), "output": _signal(design.output)},
        "target": _with_exact_numbers(design.target._asdict()),
        "tolerance": _with_exact_numbers(dict(design.tolerance)),
        "accept": [_with_exact_numbers(entry._asdict()) for entry in design.accept],
    }
    return document if design.schedule is None else document | {"schedule": _written_schedule(design.schedule)}


def _written_schedule(schedule: Schedule) -> dict[str, Any]:
    return schedule._asdict() | {
        "unit": schedule.unit or None,
        "points": [exact_text(point) for point in schedule.points],
        "values": {name: [exact_text(value) for value in values] for name, values in schedule.values},
        "plant_values": {name: [exact_text(value) for value in values] for name, values in schedule.plant_values},
    }


def design_from_resolved(document: Mapping[str, object]) -> Design:
    """Read back what :func:`resolved` wrote, through the same gate as a design file.

    Parameters
    ----------
    document : mapping
        As :func:`resolved` returns it, or as JSON returns it.

    Raises
    ------
    RealizeError
        When it is no such document.
    """
    record = _without_twins(Table(document, "record"))
    record.only(_KEYS)
    root = Table(_file_document(record), record.source)
    plant = _plant(_without_twins(record.table("plant"))) if "plant" in record else None
    written = record.table("schedule").entries.get("written")
    return assemble(root, _controller(record), plant, Overrides(), written)


def _file_document(record: Table) -> dict[str, object]:
    """Write the record's tables as those of a design file."""
    tables: dict[str, object] = {
        key: _with_units(_without_twins(record.table(key)), names)
        for key, names in _QUANTITIES.items()
        if key in record
    }
    signals = record.table("signals")
    signals.only(("input", "output"))
    if "schedule" in record:
        schedule = record.table("schedule")
        schedule.only(_SCHEDULE_KEYS)
        kept = {key: value for key, value in schedule.entries.items() if key != "written" and value is not None}
        tables["schedule"] = kept
    return {
        **tables,
        "design": {key: record.entries[key] for key in ("name", *_TEXTS) if key in record},
        "signals": {key: _without_twins(signals.table(key)).entries for key in signals.entries},
        "accept": [_accept(_without_twins(entry)) for entry in record.tables("accept")],
    }


def _controller(record: Table) -> Controller:
    table = Table(record.entries, record.source, "[design]")
    text = table.text("transfer", MAX_LENGTH)
    if text is None:
        raise table.error("transfer", "nothing", "the transfer function as text", _AGAIN)
    return Controller(_transfer(table), text, _values(record))


def _plant(table: Table) -> PlantTable:
    table.only(_PLANT_KEYS)
    cases = tuple(_case(_without_twins(case)) for case in table.tables("cases"))
    measured = "response" in table
    if not cases or (measured and len(cases) > 1) or len({case.name for case in cases}) < len(cases):
        found = f"{len(cases)} cases named {listed(case.name for case in cases)}"
        raise table.error("cases", found, "one case; of a plant with a transfer more, each with its name", _AGAIN)
    for key, present in (("transfer", not measured), ("response_text", measured)):
        if (key in table) != present:
            raise table.error(key, described(table.entries.get(key)), "transfer, or response and response_text", _AGAIN)
    return PlantTable(
        table.text("transfer", MAX_LENGTH),
        cases,
        table.text("sensor", MAX_LENGTH),
        table.text("response"),
        _response_text(table) if measured else None,
    )


def _response_text(table: Table) -> str:
    text = table.entries["response_text"]
    if not isinstance(text, str):
        raise table.error("response_text", described(text), "the text of a measured response", _AGAIN)
    return checked_response(text, table.where("response_text"))


def _case(case: Table) -> PlantCase:
    case.only(_CASE_KEYS)
    sensor = _without_twins(case.table("sensor"))
    sensor.only(_TRANSFER_KEYS)
    dead_time = _quantity(case.entries.get("dead_time_s"), "s", case.where("dead_time_s"))
    return PlantCase(
        case.text("name", MAX_CASE_NAME) or "",
        proper(_transfer(case), "transfer", case.where("numerator")),
        checked_quantity(dead_time, "time", case.where("dead_time_s"), zero=True),
        proper(_transfer(sensor), "sensor", sensor.where("numerator")),
        _values(case),
    )


def _transfer(table: Table) -> TransferFunction:
    cancelled = _coefficients(table, "cancelled") if table.numbers("cancelled") else (Fraction(1),)
    numerator, denominator = (
        poly.multiply(_coefficients(table, key), cancelled) for key in ("numerator", "denominator")
    )
    return reduced(numerator, denominator, table.where("numerator"), table.where("denominator"))


def _coefficients(table: Table, key: str) -> poly.Rationals:
    entries = table.numbers(key)
    if not 0 < len(entries) <= MAX_DEGREE + 1:
        allowed = f"a list of 1 to {MAX_DEGREE + 1} exact numbers"
        raise table.error(key, f"a list of {len(entries)}", allowed, _AGAIN)
    return poly.trimmed(checked_number(entry, {}, table.where(key)) for entry in entries)


def _values(table: Table) -> Values:
    values = {}
    for entry in map(_without_twins, table.tables("values")):
        name, value = entry.text("name"), entry.number("value")
        if name is None or value is None:
            missing = "name" if name is None else "value"
            raise entry.error(missing, "an entry without name or value", "both in each", _AGAIN)
        values[checked_value_name(name, entry.where("name"))] = value
    return tuple(values.items())


def _with_units(table: Table, quantities: Mapping[str, tuple[str, str]]) -> dict[str, object]:
    """Turn exact numbers into quantities, under the keys of the design file."""
    entries: dict[str, object] = {}
    for key, value in table.entries.items():
        file_key, unit = quantities.get(key, (key, ""))
        if file_key in entries:
            raise table.error(key, f"a second {file_key}", "one of them", _AGAIN)
        entries[file_key] = _quantity(value, unit, table.where(key))
    return entries


def _quantity(value: object, unit: str, where: str) -> object:
    if not unit:
        return value
    if not isinstance(value, str):
        raise RealizeError(where, described(value), "an exact number in quotes", _AGAIN)
    return f"{value} {unit}"


def _accept(table: Table) -> dict[str, object]:
    entries = dict(table.entries)
    unit = entries.pop("unit", "")
    if "limit" in entries:
        entries["limit"] = _quantity(entries["limit"], str(unit), table.where("limit"))
    return entries


def _without_twins(table: Table) -> Table:
    """Drop what stands in the record for people only, and what it says is not there."""
    kept = {k: v for k, v in table.entries.items() if not k.endswith(_TWIN) and v is not None}
    return Table(kept, table.source, table.place)


def _written_transfer(transfer: TransferFunction) -> dict[str, list[str]]:
    return {
        **exact_entries("numerator", transfer.numerator),
        **exact_entries("denominator", transfer.denominator),
        **exact_entries("cancelled", transfer.cancelled if len(transfer.cancelled) > 1 else ()),
    }


def _written_values(values: Values) -> list[dict[str, Any]]:
    return [{"name": name, **exact_entry("value", value)} for name, value in values]


def _written_plant(plant: PlantTable) -> dict[str, Any]:
    return {
        "transfer": plant.transfer_text,
        "sensor": plant.sensor_text,
        "response": plant.response,
        "response_text": plant.response_text,
        "cases": [
            {
                "name": case.name or None,
                "values": _written_values(case.values),
                **_written_transfer(case.transfer),
                **exact_entry("dead_time_s", case.dead_time_s),
                "sensor": _written_transfer(case.sensor),
            }
            for case in plant.cases
        ],
    }


def _signal(signal: Signal) -> dict[str, Any]:
    ends = {"range": None} if signal.range is None else exact_entries("range", signal.range)
    return {
        **ends,
        "unit": signal.unit or None,
        **exact_entry("per_count", signal.per_count),
        "offset": signal.offset,
        "type": signal.type,
    }


def _with_exact_numbers(entries: Mapping[str, Any]) -> dict[str, Any]:
    """Write the exact numbers among the entries as text."""
    written: dict[str, Any] = {}
    for key, value in entries.items():
        written |= exact_entry(key, value) if isinstance(value, Fraction) else {key: value}
    return written


def exact_entry(key: str, value: Fraction | None) -> dict[str, str | None]:
    """Write an exact number, and its twin where it is long.

    Returns
    -------
    dict
        ``key``, with null where there is no number, and perhaps ``key_decimal``.
    """
    if value is None:
        return {key: None}
    text = exact_text(value)
    return {key: text} if len(text) <= LONGEST_PLAIN else {key: text, key + _TWIN: decimal_text(value)}


def exact_entries(key: str, numbers: Sequence[Fraction | int]) -> dict[str, list[str]]:
    """Write exact numbers, and their twins where one is long, as :func:`exact_entry` does."""
    texts = [exact_text(c) for c in numbers]
    if all(len(text) <= LONGEST_PLAIN for text in texts):
        return {key: texts}
    return {key: texts, key + _TWIN: [decimal_text(c) for c in numbers]}
