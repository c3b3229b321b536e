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
from realize.schedule.worst import FIGURES, severity, worst_figure


def schedule_entry(found: Scheduled, breakpoints: Sequence[float]) -> dict[str, Any]:
    """What the record says.

    Returns
    -------
    dict
        ``variable``, ``unit``, ``grid``, ``places_between`` and ``says``; ``loop``, the delay that the loops were
        checked with and where each of their figures is worst, None without a plant; ``points``, each with ``at``
        (exact), ``stored`` (as the code has it), ``integral``, ``sections``, ``checks``, ``worst`` and ``loop``;
        ``middles`` between them, without what is stored. ``checks`` are the verdict and the difference of each check
        of stored numbers, by name, in the units of the checks at the root of the record; ``worst`` is the one that
        uses most of its tolerance; ``loop`` has the figures of the sampled loop for each case of the plant.
    """
    schedule = found.schedule
    return {
        "variable": schedule.variable,
        "unit": schedule.unit or None,
        "grid": schedule.grid,
        "places_between": found.places_between,
        "says": says(schedule.grid),
        "loop": _loop(found),
        "points": [
            {
                "at": exact_text(variable_at(schedule, each.place)),
                "stored": hexadecimal(stored),
                **stored_entries(each.realization),
                **_checks(each),
                "loop": each.loop,
            }
            for each, stored in zip(found.points, breakpoints, strict=True)
        ],
        "middles": [
            {"at": exact_text(variable_at(schedule, each.place)), **_checks(each), "loop": each.loop}
            for each in found.middles
        ],
    }


def says(grid: int) -> str:
    """What was looked at between the points."""
    return f"between the points stability is decided on a grid of {grid} parts an interval, not a proof"


def _checks(each: Judged) -> dict[str, Any]:
    stored = [check for check in each.checks if check.of == "stored"]
    return {
        "checks": {check.check: {"verdict": check.verdict, "difference": check.difference} for check in stored},
        "worst": {"check": each.worst.check, "share_of_tolerance": severity(each.worst)[-1]},
    }


def _loop(found: Scheduled) -> dict[str, Any] | None:
    """With which delay the loops were checked, and where each of their figures is worst; None without a plant."""
    if found.design.plant is None:
        return None
    # Here, because what analyses loops is loaded only where there is a plant.
    from realize.loop_design import compute_delay_s

    period_s = found.comparison.period_s
    delay_s = compute_delay_s(found.design, period_s)
    return {
        "compute_delay_s": delay_s,
        "compute_delay_samples": delay_s / period_s,
        "measured": found.design.plant.response_text is not None,
        "worst": {key: _worst_figure(found, key) for key in FIGURES},
    }


def _worst_figure(found: Scheduled, key: str) -> dict[str, Any] | None:
    worst = worst_figure(key, [(each.place, each.loop) for each in (*found.points, *found.middles)])
    if worst is None:
        return None
    at = exact_text(variable_at(found.schedule, worst.place))
    return {"value": worst.value, "at": at, "between_points": bool(worst.place.share), "case": worst.case}
