"""What is said of a schedule that no method carries: where it is out, by what, and what to try."""

from __future__ import annotations

from collections.abc import Sequence

from realize.design import Schedule
from realize.design.schedule import place_text
from realize.errors import Refused
from realize.schedule.attempt import Attempt
from realize.schedule.worst import Worst, severity
from realize.workflow.gate import failures_text

#: Of all that is out of tolerance, as many are named.
_MOST_NAMED = 3

_LOOP_STABILITY = "loop stability"


def refusal_of(schedule: Schedule, attempts: Sequence[Attempt], candidates: Sequence[str]) -> Refused:
    """Of the first attempt the worst few, and how many others there were.

    Parameters
    ----------
    schedule : Schedule
        Its points.
    attempts : sequence of Attempt
        That came to figures.
    candidates : sequence of str
        Every method that was tried.
    """
    first = attempts[0]
    blocking = sorted(_told(first.blocking), key=_rank, reverse=True)
    texts = [_text(each) for each in blocking[:_MOST_NAMED]]
    named = [
        f"at {place_text(schedule, each.place)} {'likewise' if text in texts[:i] else text}"
        for i, (each, text) in enumerate(zip(blocking, texts, strict=False))
    ]
    more = f"; and {len(blocking) - _MOST_NAMED} more" if len(blocking) > _MOST_NAMED else ""
    count = len(candidates) - 1
    others = f"; so {'is another method' if count == 1 else f'are {count} other methods'}" if count else ""
    return Refused(
        "checks",
        f"{first.method} ({first.structure}) is out of tolerance: {'; '.join(named)}{more}{others}",
        "every check within its tolerance at every point, and between them on the grid",
        _advice(blocking),
    )


def _told(blocking: Sequence[Worst]) -> list[Worst]:
    """Without what only says once more that the loop is not stable at a place."""
    lost = {each.place for each in blocking if each.check.check == _LOOP_STABILITY}
    return [
        each
        for each in blocking
        if each.place not in lost or not each.check.check.startswith("loop") or each.check.check == _LOOP_STABILITY
    ]


def _rank(each: Worst) -> tuple[bool, tuple[bool, bool, float]]:
    return each.check.check in ("stability", _LOOP_STABILITY), severity(each.check)


def _text(each: Worst) -> str:
    if each.check.check == _LOOP_STABILITY:
        return f"{_LOOP_STABILITY}: the sampled loop is not stable; {each.check.reason}"
    return failures_text([each.check])


def _advice(blocking: Sequence[Worst]) -> str:
    """Another point helps where all that is out lies between two; a lost loop cannot be agreed to."""
    between = "another point between the two where it is out; or " if all(each.place.share for each in blocking) else ""
    if any(each.check.check == _LOOP_STABILITY for each in blocking):
        return f"{between}other values where the loop is not stable, less delay, or a higher sample rate"
    return f"{between}another method, a higher sample rate, or [[accept]] with a limit and a reason"
