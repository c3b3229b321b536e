"""What the header of a schedule says about the loops that it was checked in."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from realize.design.schedule import number_text
from realize.firmware.loop_text import FIGURES, MEASURED


def scheduled_loop_entries(entry: Mapping[str, Any]) -> list[str]:
    """Each figure where it is worst, from the schedule's entry of the record; of a schedule with a plant."""
    loop = entry["loop"]
    named = [(name, loop["worst"][key], unit) for key, name, unit in FIGURES]
    return [
        MEASURED if loop["measured"] else _stability(entry),
        *(f"{name} {found['value']:.5g}{unit}, worst {_where(entry, found)}" for name, found, unit in named if found),
    ]


def _stability(entry: Mapping[str, Any]) -> str:
    cases = [case for place in (*entry["points"], *entry["middles"]) for case in place["loop"]]
    if all(case["stable"] for case in cases):
        return "stable at every point, and in the middle of every interval"
    return "NOT STABLE at one of the points, or in the middle of an interval"


def _where(entry: Mapping[str, Any], found: Mapping[str, Any]) -> str:
    case = f", case {found['case']}" if found["case"] else ""
    at = f"at {entry['variable']} = {number_text(Fraction(found['at']))} {entry['unit'] or ''}".rstrip()
    return at + (", between two points" if found["between_points"] else "") + case
