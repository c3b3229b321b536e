"""What two records say of a schedule, place by place in words, for a review: figures with their units."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from fractions import Fraction
from functools import partial
from typing import Any

from realize.algebra.expression import read_exact
from realize.algebra.expression.tokens import printable
from realize.band import frequency_text
from realize.design.schedule import number_text
from realize.firmware.loop_text import FIGURES
from realize.quantity import format_engineering

Document = Mapping[str, Any]

#: Entries of a schedule and of a place that are told here; which check is worst follows from the others.
_TOLD = ("variable", "unit", "grid", "places_between", "says", "loop", "points", "middles")
_TOLD_OF_PLACE = ("at", "stored", "checks", "worst", "loop")

_NONE = "none"

#: Checks whose difference is one of percentages.
_IN_POINTS = ("step overshoot", "loop overshoot")


def _figure(unit: str, value: float) -> str:
    return f"{value:.5g}{unit}"


_LOOP: Mapping[str, tuple[str, Callable[[Any], str]]] = {
    "stable": ("loop stability", lambda stable: "stable" if stable else "not stable"),
    **{key: (name, partial(_figure, unit)) for key, name, unit in FIGURES},
    "delay_margin_s": ("delay margin", partial(format_engineering, unit="s")),
    "crossover_rad_s": ("crossover", frequency_text),
}


def schedule_changes(old: Document, new: Document) -> Iterator[tuple[str, str, str]]:
    """What differs, and both values: of the schedule, of its points and of the middles, but for what is stored.

    Parameters
    ----------
    old, new : mapping
        Whole records with a schedule.

    Raises
    ------
    KeyError, TypeError, ValueError, AttributeError
        When a schedule is not one of a record; others of ValueError too.
    """
    schedules = old["schedule"], new["schedule"]
    yield from _differing("", *map(_whole, schedules))
    units = [{check["check"]: _unit(check) for check in record["checks"]} for record in (old, new)]
    for kind, word in (("points", "point"), ("middles", "middle")):
        places = [schedule[kind] for schedule in schedules]
        for i in range(max(map(len, places))):
            known = [(s, each[i]) if i < len(each) else None for s, each in zip(schedules, places, strict=True)]
            schedule, place = known[1] or known[0] or ({}, {})
            at = f"{schedule['variable']} {_at(schedule, place)}"
            if None in known:
                texts = [_NONE if each is None else "there" for each in known]
                yield f"{word} {i + 1}, {at}", texts[0], texts[1]
                continue
            if kind == "points":
                # The middles follow from these.
                yield from _differing(f"{word} {i + 1}: ", *(_location(*each) for each in known if each is not None))
            found = [_place(each[1], unit) for each, unit in zip(known, units, strict=True) if each is not None]
            yield from _differing(f"{word} {i + 1}, {at}: ", *found)


def others(schedule: Document, counts: Mapping[str, int]) -> dict[str, Any]:
    """What is not told here, the stored numbers above all: of so many points and middles."""
    own = {key: value for key, value in schedule.items() if key not in _TOLD}
    return own | {
        kind: [{k: v for k, v in place.items() if k not in _TOLD_OF_PLACE} for place in schedule[kind][:count]]
        for kind, count in counts.items()
    }


def _differing(before: str, old: Mapping[str, str], new: Mapping[str, str]) -> Iterator[tuple[str, str, str]]:
    for what in dict.fromkeys((*old, *new)):
        texts = [found.get(what, _NONE) for found in (old, new)]
        if texts[0] != texts[1]:
            yield printable(before + what), printable(texts[0]), printable(texts[1])


def _whole(schedule: Document) -> dict[str, str]:
    found = {
        "variable": str(schedule["variable"]),
        "unit": str(schedule["unit"] or _NONE),
        "grid": f"{schedule['grid']} parts an interval",
        "places between points": str(schedule["places_between"]),
        "what is said of the places between": str(schedule["says"]),
    }
    loop = schedule.get("loop")
    if not loop:
        return found
    delay_s, samples = (_exact(loop[f"compute_delay_{unit}"]) for unit in ("s", "samples"))
    found["compute delay"] = f"{number_text(samples)} samples, {format_engineering(delay_s, 's')}"
    found["plant"] = "measured" if loop["measured"] else "a transfer function"
    for key, worst in loop["worst"].items():
        name, written = _LOOP[key]
        if worst is not None:
            found[f"worst {name}"] = f"{written(worst['value'])} at {_worst_at(schedule, worst)}"
    return found


def _worst_at(schedule: Document, worst: Document) -> str:
    return _at(schedule, worst) + (f", case {worst['case']}" if worst["case"] else "")


def _at(schedule: Document, place: Document) -> str:
    return f"{number_text(_exact(place['at']))} {schedule['unit'] or ''}".rstrip()


def _exact(text: str) -> Fraction:
    value = read_exact(text)
    if value is None:
        raise ValueError(text)
    return value


def _location(schedule: Document, point: Document) -> dict[str, str]:
    return {str(schedule["variable"]): _at(schedule, point), "as stored": str(point["stored"])}


def _place(place: Document, units: Mapping[str, str]) -> dict[str, str]:
    """Its checks and its loops; the worst check follows from these."""
    found = {name: _check(check, units.get(name, "")) for name, check in place["checks"].items()}
    for figures in place.get("loop", ()):
        case = f"case {figures['case']}, " if figures["case"] else ""
        known = {key: value for key, value in figures.items() if value is not None and key != "case"}
        found |= {f"in the loop, {case}{_LOOP[key][0]}": _LOOP[key][1](value) for key, value in known.items()}
    return found


def _check(check: Document, unit: str) -> str:
    difference = check["difference"]
    text = "" if difference is None else f"{difference:.5g} {unit}".rstrip() + " off"
    return text if text and check["verdict"] == "within" else f"{check['verdict']} {text}".rstrip()


def _unit(check: Document) -> str:
    return "points" if check["check"] in _IN_POINTS else str(check["unit"])
