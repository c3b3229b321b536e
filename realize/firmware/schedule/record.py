"""The entry ``schedule`` of the record: every point with what is stored, and its checks."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from realize.algebra.expression import exact_text
from realize.design.schedule import variable_at
from realize.firmware.c_text import hexadecimal
from realize.firmware.record import stored_entries
from realize.schedule import Scheduled
from realize.schedule.points import Judged
from realize.schedule.worst import severity


def schedule_entry(found: Scheduled, breakpoints: Sequence[float]) -> dict[str, Any]:
    """What the record says.

    Returns
    -------
    dict
        ``variable``, ``unit``, ``grid``, ``places_between`` and ``says``; ``points``, each with ``at`` (exact),
        ``stored`` (as the code has it), ``integral``, ``sections``, ``checks`` and ``worst``; ``middles`` between them,
        with ``at``, ``checks`` and ``worst``. ``checks`` are the verdict and the difference of each check of stored
        numbers, by name, in the units of the checks at the root of the record; ``worst`` is the one that uses most of
        its tolerance.
    """
    schedule = found.schedule
    return {
        "variable": schedule.variable,
        "unit": schedule.unit or None,
        "grid": schedule.grid,
        "places_between": found.places_between,
        "says": says(schedule.grid),
        "points": [
            {
                "at": exact_text(variable_at(schedule, each.place)),
                "stored": hexadecimal(stored),
                **stored_entries(each.realization),
                **_checks(each),
            }
            for each, stored in zip(found.points, breakpoints, strict=True)
        ],
        "middles": [{"at": exact_text(variable_at(schedule, each.place)), **_checks(each)} for each in found.middles],
    }


def says(grid: int) -> str:
    """What was looked at between the points."""
    return f"between the points stability is decided on a grid of {grid} parts an interval, not a proof"


def _checks(each: Judged) -> dict[str, Any]:
    stored = [check for check in each.checks if check.of == "stored"]
    worst = max((check for check in stored if check.tolerance and check.difference is not None), key=severity)
    return {
        "checks": {check.check: {"verdict": check.verdict, "difference": check.difference} for check in stored},
        "worst": {"check": worst.check, "share_of_tolerance": severity(worst)[-1]},
    }
