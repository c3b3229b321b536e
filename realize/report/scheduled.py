"""The screen of `realize emit` for a gain schedule: each check where it is worst."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from typing import Any

from realize.checks.agreement import agreed_text
from realize.design.schedule import Place, number_text, place_text, values_at, variable_at
from realize.firmware.schedule.record import says
from realize.report.documents import check_document
from realize.report.paragraphs import bullets, heading, table, wrapped
from realize.report.sentences import CAUTION, stored_words
from realize.report.tables import Rows, difference_text, room_text
from realize.report.terminal import pin_text, setting_text
from realize.report.values import decimals, figure
from realize.schedule import Scheduled
from realize.schedule.points import Judged
from realize.schedule.worst import Worst, severity, worst_figure

#: Most points that have a row each.
MOST_POINTS = 12

#: Columns of the screen for variable and values: what the loop's, the longest name of a check and its share leave.
_ROOM = 38

#: What heads the figures of the loop, and the decimals of each.
_LOOP_HEAD = (("phase", "margin", "deg"), ("maximum", "sensitivity", ""), ("step", "overshoot", "%"))
_LOOP_DECIMALS = {"phase_margin_deg": 1, "maximum_sensitivity": 2, "step_overshoot_percent": 1}


def scheduled_text(found: Scheduled, paths: Sequence[str]) -> str:
    """The screen."""
    design, chosen = found.comparison.design, found.chosen
    blocks = [
        wrapped(schedule_verdict(found)),
        wrapped(f"at the first point, {place_text(found.schedule, found.points[0].place)}:", indent="  ")
        + setting_text(found.comparison),
        heading(points_title(found)) + table(points_rows(found).lines) + wrapped(points_key(found), indent="  "),
        _checks(found),
        heading(f"Written ({stored_words(chosen, design)})") + "".join(f"  {path}\n" for path in paths),
    ]
    blocks += [pin_text(found.method)] if design.method == "auto" else []
    return "\n".join([*blocks, wrapped(CAUTION)])


def schedule_verdict(found: Scheduled) -> str:
    """By which method a scheduled design is emitted, over which points, and why."""
    design, schedule = found.comparison.design, found.schedule
    ends = f"{number_text(schedule.points[0])} to {number_text(schedule.points[-1])} {schedule.unit}".rstrip()
    kept = "but for what is agreed" if found.accepted else "every check passed"
    reason = found.because if design.method == "auto" else f"named in the design, {kept}"
    at_all = f"at {len(schedule.points)} points of {schedule.variable}, {ends}"
    return f"yes: {design.name} is emitted by {found.method}, {at_all}: {reason}"


def schedule_sentences(found: Scheduled) -> list[str]:
    """What was looked at between the points, and what that does not say."""
    return [
        f"{says(found.schedule.grid)} ({found.places_between} places); the other checks also in the middle of each "
        "interval, against the design whose scheduled values are interpolated there",
        f"all of it for a {found.schedule.variable} that stands still: let it change slowly against the closed loop",
    ]


def schedule_title(found: Scheduled) -> str:
    """What stands above the table of checks."""
    return f"Checks of {found.method} over {len(found.points)} points and between, each where it is worst"


def schedule_rows(found: Scheduled) -> Rows:
    """A row for each check, with the place where it uses most of its tolerance."""
    agreed = {check.check for check, _ in found.accepted}
    head = ("check", "difference", "tolerance", "verdict", f"worst at {found.schedule.variable}")
    return Rows(
        tuple((words,) for words in head), [_row(found, each, each.check.check in agreed) for each in found.worst]
    )


def points_title(found: Scheduled) -> str:
    """What stands above the table of points."""
    shown, count = len(points_shown(found)), len(found.points)
    return "The points" if shown == count else f"{shown} of the {count} points"


def points_key(found: Scheduled) -> str:
    """What the rows of the points do not say themselves."""
    left_out, loops = len(found.points) - len(points_shown(found)), len(found.points[0].loop)
    unnamed = [name for name, _ in found.schedule.values if name not in _names_shown(found)]
    parts = [
        (left_out, f"{left_out} points are left out; shown are the ends, those where a check is worst, and others."),
        (unnamed, f"There was no room for {', '.join(unnamed)}."),
        (loops, "The loop is that of the stored numbers, with hold and delays in it."),
        (loops > 1, "Each of its figures is that of the plant's worst case."),
        (True, "The share is that of the tolerance."),
    ]
    return " ".join(text for says, text in parts if says)


def points_rows(found: Scheduled) -> Rows:
    """A row for each point that is shown: its values, what is left in the loop, and the check nearest its tolerance."""
    names, unit = _names_shown(found), found.schedule.unit
    values = ((name, "", "") for name in names)
    loop = _LOOP_HEAD if found.points[0].loop else ()
    head = ((found.schedule.variable, "", unit), *values, *loop, ("worst", "check", ""), ("share", "", "%"))
    return Rows(head, [_point(found, found.points[i], names) for i in points_shown(found)])


def points_shown(found: Scheduled) -> list[int]:
    """Of many points the ends, those where a check is worst, and between them others that are evenly spread."""
    count = len(found.points)
    if count <= MOST_POINTS:
        return list(range(count))
    worst = [each for each in found.worst if each.check.difference and not each.place.share]
    worst.sort(key=lambda each: severity(each.check), reverse=True)
    shown = dict.fromkeys([0, count - 1, *(each.place.point for each in worst)])
    chosen = set(list(shown)[:MOST_POINTS])
    while len(chosen) < MOST_POINTS:
        # Into the middle of the widest gap.
        before, after = max(pairwise(sorted(chosen)), key=lambda pair: pair[1] - pair[0])
        chosen.add((before + after) // 2)
    return sorted(chosen)


def _point(found: Scheduled, each: Judged, names: Sequence[str]) -> list[str]:
    figures = _loop_figures(each)
    share = severity(each.worst)[-1]
    return [
        number_text(variable_at(found.schedule, each.place)),
        *(f"{_values(found, each)[name]:.5g}" for name in names),
        *(decimals(figures[key], count) for key, count in _LOOP_DECIMALS.items() if each.loop),
        each.worst.check,
        figure(100 * share),
    ]


def _values(found: Scheduled, each: Judged) -> dict[str, float]:
    """Of the controller's scheduled values those at a point."""
    return {name: float(value) for name, value in values_at(found.schedule, each.place)[0].items()}


def _names_shown(found: Scheduled) -> list[str]:
    """Scheduled values for which the screen has room."""
    schedule = found.schedule
    first = max(map(len, (schedule.variable, schedule.unit, *map(number_text, schedule.points))))
    names, room = [], _ROOM - first
    for name, numbers in schedule.values:
        room -= 2 + max(len(name), *(len(f"{float(number):.5g}") for number in numbers))
        if room < 0:
            break
        names.append(name)
    return names


def _loop_figures(each: Judged) -> dict[str, float | None]:
    """What is left in the loop at a point, each figure the worst over the cases of the plant."""
    worst = {key: worst_figure(key, [(each.place, each.loop)]) for key in _LOOP_DECIMALS}
    return {key: figure and figure.value for key, figure in worst.items()}


def _at(found: Scheduled, place: Place) -> str:
    return f"{number_text(variable_at(found.schedule, place))} {found.schedule.unit}".rstrip()


def _checks(found: Scheduled) -> str:
    block = heading(schedule_title(found)) + table(schedule_rows(found).lines) + bullets(schedule_sentences(found))
    accepted = [f"{agreed_text(c, a.limit)}: {a.because} ({a.by})" for c, a in found.accepted]
    block += ("\n" + heading("Accepted deviations") + bullets(accepted)) if accepted else ""
    return block + (("\n" + heading("Notes on the first point") + bullets(found.notes)) if found.notes else "")


def _row(found: Scheduled, worst: Worst, agreed: bool) -> list[str]:
    check = worst.check
    at = _at(found, worst.place)
    between = ", between" if worst.place.share else ""
    return [
        check.check,
        difference_text(check, check.difference),
        room_text(check, found.comparison.design),
        "accepted" if check.verdict == "out" and agreed else check.verdict,
        f"{at}{between}" if check.difference else "-",
    ]


def scheduled_entry(found: Scheduled) -> dict[str, Any]:
    """For scripts: what was looked at, and each check where it is worst."""
    schedule = found.schedule
    return {
        "variable": schedule.variable,
        "unit": schedule.unit or None,
        "points": len(schedule.points),
        "grid": schedule.grid,
        "places_between": found.places_between,
        "says": says(schedule.grid),
        "method": found.method,
        "worst": [
            check_document(each.check)
            | {"at": float(variable_at(schedule, each.place)), "between_points": bool(each.place.share)}
            for each in found.worst
        ],
        "at_points": [
            {
                "at": float(variable_at(schedule, each.place)),
                "values": _values(found, each),
                **_loop_figures(each),
                "worst": {"check": each.worst.check, "share_of_tolerance": severity(each.worst)[-1]},
            }
            for each in found.points
        ],
    }
