"""Where each check is worst: which of two figures counts as worse, and the words for the place."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from math import inf
from typing import Any, NamedTuple

from realize.checks import Check
from realize.design import Schedule
from realize.design.schedule import Place, number_text, variable_at


class Worst(NamedTuple):
    """A check, and where in the schedule it is so."""

    check: Check
    place: Place


def worst_of(found: Sequence[Worst]) -> tuple[Worst, ...]:
    """Of each check the one that uses most of its tolerance; the first of equals."""
    names = dict.fromkeys(each.check.check for each in found)
    return tuple(
        max((each for each in found if each.check.check == name), key=lambda each: severity(each.check))
        for name in names
    )


class WorstFigure(NamedTuple):
    """A figure of the loop where it is worst: its value, the case of the plant, and where in the schedule."""

    value: float
    case: str
    place: Place


#: Figures of a loop, and which of two is the worse.
FIGURES = {
    "phase_margin_deg": min,
    "gain_margin_db": min,
    "gain_reduction_margin_db": min,
    "maximum_sensitivity": max,
    "step_overshoot_percent": max,
}


def worst_figure(key: str, loops: Sequence[tuple[Place, Sequence[Mapping[str, Any]]]]) -> WorstFigure | None:
    """Over all places and cases; the first of equals, None where none has the figure."""
    known = [WorstFigure(case[key], case["case"], place) for place, cases in loops for case in cases]
    known = [each for each in known if each.value is not None]
    return FIGURES[key](known, key=lambda each: each.value) if known else None


def severity(check: Check) -> tuple[bool, bool, float]:
    """What is out before what is not, what has no figure to be out with first; then by the share of the tolerance."""
    if check.difference is None:
        return check.verdict == "out", check.verdict == "out", -inf
    share = check.difference / check.tolerance if check.tolerance else check.difference
    return check.verdict == "out", False, share


def at_place(schedule: Schedule, each: Worst) -> Check:
    """A check whose reason says where it is so."""
    check = each.check
    at = f"at {schedule.variable} = {number_text(variable_at(schedule, each.place))} {schedule.unit}".rstrip()
    return replace(check, reason=f"{at}: {check.reason}" if check.reason else at)
