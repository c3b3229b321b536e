"""The screen of `realize emit` for a gain schedule: each check where it is worst."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from realize.checks.agreement import agreed_text
from realize.design.schedule import number_text, place_text, variable_at
from realize.firmware.schedule.record import says
from realize.report.documents import check_document
from realize.report.paragraphs import bullets, heading, table, wrapped
from realize.report.terminal import CAUTION, counted, figure_text, pin_text, setting_text, tolerance_text
from realize.schedule import Scheduled
from realize.schedule.worst import Worst


def scheduled_text(found: Scheduled, paths: Sequence[str]) -> str:
    """The screen."""
    design, schedule, stored = found.comparison.design, found.schedule, found.points[0].realization
    ends = f"{number_text(schedule.points[0])} to {number_text(schedule.points[-1])} {schedule.unit}".rstrip()
    at_all = f"at {len(schedule.points)} points of {schedule.variable}, {ends}"
    kept = "but for what is agreed" if found.accepted else "every check passed"
    reason = found.because if design.method == "auto" else f"named in the design, {kept}"
    what = (
        f"{stored.structure} structure in {design.target.arithmetic}, "
        f"{counted(len(stored.integral), 'integral state')}, {counted(len(stored.sections), 'section')}"
    )
    blocks = [
        wrapped(f"yes: {design.name} is emitted by {found.method}, {at_all}: {reason}"),
        wrapped(f"at the first point, {place_text(schedule, found.points[0].place)}:", indent="  ")
        + setting_text(found.comparison),
        _checks(found),
        heading(f"Written ({what})") + "".join(f"  {path}\n" for path in paths),
    ]
    blocks += [pin_text(found.method)] if design.method == "auto" else []
    return "\n".join([*blocks, wrapped(CAUTION)])


def _checks(found: Scheduled) -> str:
    """A row for each check, with the place where it uses most of its tolerance."""
    agreed = {check.check for check, _ in found.accepted}
    rows = [_row(found, each, each.check.check in agreed) for each in found.worst]
    head = ["check", "difference", "tolerance", "verdict", f"worst at {found.schedule.variable}"]
    count = found.places_between
    notes = [
        f"{says(found.schedule.grid)} ({count} places); the other checks also in the middle of each interval, against "
        "the design whose scheduled values are interpolated there",
        f"all of it for a {found.schedule.variable} that stands still: let it change slowly against the closed loop",
    ]
    block = heading(f"Checks of {found.method} over {len(found.points)} points and between, each where it is worst")
    block += table([head, *rows]) + bullets(notes)
    accepted = [f"{agreed_text(c, a.limit)}: {a.because} ({a.by})" for c, a in found.accepted]
    block += ("\n" + heading("Accepted deviations") + bullets(accepted)) if accepted else ""
    return block + (("\n" + heading("Notes on the first point") + bullets(found.notes)) if found.notes else "")


def _row(found: Scheduled, worst: Worst, agreed: bool) -> list[str]:
    check = worst.check
    at = f"{number_text(variable_at(found.schedule, worst.place))} {found.schedule.unit}".rstrip()
    between = ", between" if worst.place.share else ""
    return [
        check.check,
        f"{figure_text(check.difference)} {check.unit if check.difference is not None else ''}".rstrip(),
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
