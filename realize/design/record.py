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
from realize.algebra.expression.tokens import MAX_LENGTH
from realize.design.controller import LONGEST_PLAIN, Controller, checked_value_name, reduced
from realize.design.gate import Table, checked_number, described
from realize.design.load import assemble
from realize.design.model import TOLERANCE_KEYS, Design, Overrides, Signal
from realize.errors import RealizeError

_TEXTS = ("about", "revision", "requirement", "author")

_TWIN = "_decimal"

_KEYS = (
    *("name", *_TEXTS, "transfer", "numerator", "denominator", "cancelled", "values"),
    *("sampling", "rolloff", "method", "signals", "target", "tolerance", "accept"),
)

#: Keys of the record whose value is an exact number in a unit: the key of the design file, and the unit.
_QUANTITIES: dict[str, dict[str, tuple[str, str]]] = {
    "sampling": {"period_s": ("period", "s"), "band_rad_s": ("band", "rad/s")},
    "rolloff": {"pole_rad_s": ("pole", "rad/s"), "phase_budget_deg": ("phase_budget", "deg")},
    "method": {"exact_at_rad_s": ("exact_at", "rad/s")},
    "target": {"tracking_time_s": ("tracking_time", "s")},
    "tolerance": {key: (key, unit) for key, unit in TOLERANCE_KEYS.items()},
}


def resolved(design: Design) -> dict[str, Any]:
    """Write a design, defaults filled in, as a document that JSON can hold.

    Returns
    -------
    dict
        ``name``, ``about``, ``revision``, ``requirement``, ``author``; ``transfer`` (as written), ``numerator``,
        ``denominator``, ``cancelled`` (exact, descending powers of s); ``values`` (a list of name and value);
        ``sampling``, ``rolloff`` (or null), ``method``, ``signals``, ``target``, ``tolerance`` (those that
        differ from their defaults) and ``accept``.
    """
    transfer = design.transfer
    return {
        "name": design.name,
        **{key: getattr(design, key) for key in _TEXTS},
        "transfer": design.transfer_text,
        **_exact_list("numerator", transfer.numerator),
        **_exact_list("denominator", transfer.denominator),
        **_exact_list("cancelled", transfer.cancelled),
        "values": [{"name": name, **_exact("value", value)} for name, value in design.values],
        "sampling": {**_exact("period_s", design.period_s), **_exact("band_rad_s", design.band_rad_s)},
        "rolloff": None if design.rolloff is None else _with_exact_numbers(design.rolloff._asdict()),
        "method": {"name": design.method, **_exact("exact_at_rad_s", design.exact_at_rad_s)},
        "signals": {"input": _signal(design.input), "output": _signal(design.output)},
        "target": _with_exact_numbers(design.target._asdict()),
        "tolerance": _with_exact_numbers(dict(design.tolerance)),
        "accept": [_with_exact_numbers(entry._asdict()) for entry in design.accept],
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
    return assemble(root, _controller(record), Overrides())


def _file_document(record: Table) -> dict[str, object]:
    """Write the record's tables as those of a design file."""
    tables: dict[str, object] = {
        key: _with_units(_without_twins(record.table(key)), names)
        for key, names in _QUANTITIES.items()
        if key in record
    }
    signals = record.table("signals")
    signals.only(("input", "output"))
    return {
        **tables,
        "design": {key: record.entries[key] for key in ("name", *_TEXTS) if key in record},
        "signals": {key: _without_twins(signals.table(key)).entries for key in signals.entries},
        "accept": [_accept(_without_twins(entry)) for entry in record.tables("accept")],
    }


def _controller(record: Table) -> Controller:
    table = Table(record.entries, record.source, "[design]")
    cancelled = _coefficients(table, "cancelled")
    numerator, denominator = (
        poly.multiply(_coefficients(table, key), cancelled) for key in ("numerator", "denominator")
    )
    text = table.text("transfer", MAX_LENGTH)
    if text is None:
        raise table.error("transfer", "nothing", "the transfer function as text", "emit the design again")
    return Controller(reduced(numerator, denominator, table.where("numerator")), text, _values(record))


def _coefficients(table: Table, key: str) -> poly.Rationals:
    entries = table.numbers(key)
    if not 0 < len(entries) <= MAX_DEGREE + 1:
        allowed = f"a list of 1 to {MAX_DEGREE + 1} exact numbers"
        raise table.error(key, f"a list of {len(entries)}", allowed, "emit the design again")
    return poly.trimmed(checked_number(entry, {}, table.where(key)) for entry in entries)


def _values(record: Table) -> tuple[tuple[str, Fraction], ...]:
    values = {}
    for entry in map(_without_twins, record.tables("values")):
        name, value = entry.text("name"), entry.number("value")
        if name is None or value is None:
            missing = "name" if name is None else "value"
            raise entry.error(missing, "an entry without name or value", "both in each", "emit the design again")
        values[checked_value_name(name, entry.where("name"))] = value
    return tuple(values.items())


def _with_units(table: Table, quantities: Mapping[str, tuple[str, str]]) -> dict[str, object]:
    """Turn exact numbers into quantities, under the keys of the design file."""
    entries: dict[str, object] = {}
    for key, value in table.entries.items():
        file_key, unit = quantities.get(key, (key, ""))
        entries[file_key] = _quantity(value, unit, table.where(key))
    return entries


def _quantity(value: object, unit: str, where: str) -> object:
    if not unit:
        return value
    if not isinstance(value, str):
        raise RealizeError(where, described(value), "an exact number in quotes", "emit the design again")
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


def _signal(signal: Signal) -> dict[str, Any]:
    ends = {"range": None} if signal.range is None else _exact_list("range", signal.range)
    return {
        **ends,
        "unit": signal.unit or None,
        **_exact("per_count", signal.per_count),
        "offset": signal.offset,
        "type": signal.type,
    }


def _with_exact_numbers(entries: Mapping[str, Any]) -> dict[str, Any]:
    """Write the exact numbers among the entries as text."""
    written: dict[str, Any] = {}
    for key, value in entries.items():
        written |= _exact(key, value) if isinstance(value, Fraction) else {key: value}
    return written


def _exact(key: str, value: Fraction | None) -> dict[str, str | None]:
    """An exact number, and its twin where it is long."""
    if value is None:
        return {key: None}
    text = exact_text(value)
    return {key: text} if len(text) <= LONGEST_PLAIN else {key: text, key + _TWIN: decimal_text(value)}


def _exact_list(key: str, numbers: Sequence[Fraction | int]) -> dict[str, list[str]]:
    """Exact numbers, and their twins where one is long."""
    texts = [exact_text(c) for c in numbers]
    if all(len(text) <= LONGEST_PLAIN for text in texts):
        return {key: texts}
    return {key: texts, key + _TWIN: [decimal_text(c) for c in numbers]}
