"""Tables that are understood, checked, and answered with "not supported yet": never ignored.

A mistake in them is reported as such, so that a design file can be prepared ahead.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from realize.algebra.expression import evaluate_transfer
from realize.design.gate import Table, WrittenNumber, checked_number, described, not_yet
from realize.errors import RealizeError
from realize.quantity import parse_quantity


def refuse_later_tables(root: Table) -> None:
    """Check and answer the tables of a loop and of gains that change while running."""
    if "plant" in root:
        _check_plant(root.table("plant"))
        raise _answer(root, "plant", "a plant")
    if "loop" in root:
        _check_loop(root.table("loop"))
        raise _answer(root, "loop", "a loop")
    if "schedule" in root:
        raise _answer(root, "schedule", "a schedule of gains")


def _answer(root: Table, key: str, subject: str) -> RealizeError:
    return not_yet(f"{root.source}, [{key}]", subject, "a controller by itself: [design] and its signals")


def _check_plant(table: Table) -> None:
    table.only(("transfer", "response", "dead_time", "sensor", "values", "case"))
    if ("transfer" in table) == ("response" in table):
        found = "transfer and response at once" if "transfer" in table else "neither transfer nor response"
        raise RealizeError(
            f"{table.source}, {table.place}", found, "exactly one of them", "give the plant one description"
        )
    values = _plant_values(table.table("values"), {})
    for case in table.tables("case"):
        case.only(("name", "values"))
        case.text("name")
        _plant_values(case.table("values"), values)
    for key in ("transfer", "sensor"):
        if key in table:
            evaluate_transfer(_quoted(table, key), values, table.where(key))
    table.text("response")
    table.quantity("dead_time", "time", zero=True)


def _plant_values(table: Table, base: Mapping[str, Fraction]) -> dict[str, Fraction]:
    values = dict(base)
    for name, value in table.entries.items():
        values[name] = checked_number(value, values, table.where(name))
    return values


def _check_loop(table: Table) -> None:
    table.only(("compute_delay", "jitter"))
    if "compute_delay" in table:
        text = _quoted(table, "compute_delay")
        dimension = "samples" if "sample" in text else "time"
        parse_quantity(text, "samples" if dimension == "samples" else "time", table.where("compute_delay"))
    table.quantity("jitter", "time", zero=True)


def _quoted(table: Table, key: str) -> str:
    value = table.entries[key]
    if not isinstance(value, str) or isinstance(value, WrittenNumber):
        raise table.error(key, described(value), "a text in quotes", "put it in quotes")
    return value
