"""The screen of `realize emit` for a gain schedule: each check where it is worst."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from realize.checks.agreement import agreed_text
from realize.design.schedule import number_text, place_text, variable_at
from realize.firmware.schedule.record import says
from realize.report.documents import check_document
from realize.report.paragraphs import bullets, heading, table, wrapped
from realize.report.sentences import CAUTION, stored_words
from realize.report.tables import Rows, tolerance_text
from realize.report.terminal import pin_text, setting_text
from realize.report.values import figure
from realize.schedule import Scheduled
from realize.schedule.worst import Worst


def scheduled_text(found: Scheduled, paths: Sequence[str]) -> str:
    """The screen."""
    design, chosen = found.comparison.design, found.chosen
    blocks = [
        wrapped(schedule_verdict(found)),
        wrapped(f"at the first point, {place_text(found.schedule, found.points[0].place)}:", indent="  ")
        + setting_text(found.comparison),
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


def _checks(found: Scheduled) -> str:
    block = heading(schedule_title(found)) + table(schedule_rows(found).lines) + bullets(schedule_sentences(found))
    accepted = [f"{agreed_text(c, a.limit)}: {a.because} ({a.by})" for c, a in found.accepted]
    block += ("\n" + heading("Accepted deviations") + bullets(accepted)) if accepted else ""
    return block + (("\n" + heading("Notes on the first point") + bullets(found.notes)) if found.notes else "")


def _row(found: Scheduled, worst: Worst, agreed: bool) -> list[str]:
    check = worst.check
    at = f"{number_text(variable_at(found.schedule, worst.place))} {found.schedule.unit}".rstrip()
    between = ", between" if worst.place.share else ""
    return [
        check.check,
        f"{figure(check.difference)} {check.unit if check.difference is not None else ''}".rstrip(),
        tolerance_text(check, found.comparison.design),
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
    }
