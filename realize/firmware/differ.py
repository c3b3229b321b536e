"""What changed between two records, in engineering terms, for a review.

Nothing is left out: what has no words of its own is told by its place. The version of the tool is a note.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from fractions import Fraction
from typing import Any, NamedTuple

from realize.algebra.expression.printing import read_exact
from realize.algebra.expression.ratio import UnfitError
from realize.algebra.expression.tokens import printable
from realize.algebra.roots import Root
from realize.band import frequency_text
from realize.checks.modes import in_disc_words, in_words, logarithm
from realize.firmware.changes import (
    MISSING,
    Change,
    Place,
    changes,
    checks_by_name,
    named_place_text,
    place_text,
    telling,
    value_text,
    value_texts,
)
from realize.firmware.recorded import Recorded, read_record, recorded_numbers, recorded_pulse
from realize.firmware.schedule.changes import others, schedule_changes
from realize.quantity import format_engineering
from realize.transfer import PulseTransferFunction

#: Entries of a record by the group they are told in; all others are told last.
_GROUPS: Mapping[str, tuple[str, ...]] = {
    "Design": ("design", "causal"),
    "Realization": ("method", "structure", "arithmetic"),
    "Coefficients": ("integral", "sections", "direct_gain", "numerators_anew"),
    "Words": ("signals", "output_error_counts", "quiet"),
    "Loop": ("loop",),
    "Accepted deviations": ("accepted",),
    "Files": ("files",),
}

#: Entries that are compared in their own way.
_APART = ("schema", "checks", "tool", "schedule")

#: Units as keys end in them; the longest first.
_UNITS = {"_rad_s": "rad/s", "_percent": "%", "_deg": "deg", "_db": "dB", "_s": "s"}

#: Of a hash as much as tells two apart.
_HASH_DIGITS = 12

_LEDGER = "phase_ledger_deg"

_NONE = "none"


class Row(NamedTuple):
    """One change: the group it belongs to, what changed, and both values in words."""

    group: str
    what: str
    old: str
    new: str


class Difference(NamedTuple):
    """What changed: the new record, the rows, and what is no change of the design."""

    record: Mapping[str, Any]
    rows: tuple[Row, ...]
    notes: tuple[str, ...]


def differ(old_path: str, new_path: str) -> Difference:
    """Compare two records.

    Raises
    ------
    RealizeError
        When one cannot be read or understood.
    """
    old, new = read_record(old_path), read_record(new_path)
    numbers = [recorded_numbers(record, path) for record, path in ((old, old_path), (new, new_path))]
    parts = [_prepared(record) for record in (old, new)]
    told = {group: list(_told(group, keys, *parts)) for group, keys in _GROUPS.items()}
    known = {*_APART, *(key for keys in _GROUPS.values() for key in keys)}
    others = [key for key in dict.fromkeys((*old, *new)) if key not in known]
    rows = [
        *told["Design"],
        *told["Realization"],
        *_behaviour(*numbers),
        *told["Loop"],
        *_checks(old["checks"], new["checks"]),
        *told["Accepted deviations"],
        *_schedule(*parts),
        *told["Words"],
        *told["Coefficients"],
        *told["Files"],
        *_told("Other", others, *parts),
    ]
    versions = [value_text(record["tool"].get("version")) for record in (old, new)]
    notes = [f"written by realize {versions[0]} before, {versions[1]} now"] if versions[0] != versions[1] else []
    return Difference(new, tuple(rows), tuple(notes))


def _told(group: str, keys: Iterable[str], old: Mapping[str, Any], new: Mapping[str, Any]) -> Iterator[Row]:
    """Rows for some entries of the record."""
    parts = [{key: record[key] for key in keys if key in record} for record in (old, new)]
    for change in telling(changes(parts[0], parts[1])):
        if not _is_nothing(change.old) or not _is_nothing(change.new):
            yield Row(group, *_words(change, *parts))


def _schedule(old: Mapping[str, Any], new: Mapping[str, Any]) -> Iterator[Row]:
    """Every place of a schedule in words; by keys where one record has none, or one that cannot be understood."""
    records = [old, new]
    if all("schedule" in record for record in records):
        try:
            yield from [Row("Schedule", *texts) for texts in schedule_changes(old, new)]
            counts = {kind: min(len(record["schedule"][kind]) for record in records) for kind in ("points", "middles")}
            records = [{"schedule": others(record["schedule"], counts)} for record in records]
        except (AttributeError, KeyError, TypeError, ValueError, UnfitError):
            records = [old, new]
    yield from _told("Schedule", ("schedule",), *records)


def _is_nothing(value: object) -> bool:
    """Whether there is no entry, or one that says so: what has no integral need not say what it is."""
    return value is None or value is MISSING


def _words(change: Change, *parts: Mapping[str, Any]) -> tuple[str, str, str]:
    """What changed, and both values."""
    match change.place:
        case ("design", "sampling", "period_s"):
            return "rate", *_in_unit(change, lambda period_s: format_engineering(1 / period_s, "Hz"))
        case ("design" | "causal", *_, str(key)) if key.endswith("_rad_s"):
            return _plain(change.place, *parts).removesuffix("_rad_s"), *_in_unit(change, frequency_text)
        case ("loop", *_, str(key)) if any(key.endswith(ending) for ending in _UNITS):
            ending = next(ending for ending in _UNITS if key.endswith(ending))
            texts = value_texts(change.old, change.new)
            name = _plain(change.place, *parts).removesuffix(ending.replace("_", " "))
            return name, _with_unit(texts[0], _UNITS[ending]), _with_unit(texts[1], _UNITS[ending])
        case ("files", str(name)):
            return printable(name), value_text(change.old)[:_HASH_DIGITS], value_text(change.new)[:_HASH_DIGITS]
        case ("sections" | "integral" | "direct_gain", *_) | (
            "schedule",
            "points",
            int(),
            ("sections" | "integral"),
            *_,
        ):
            return place_text(change.place), *value_texts(change.old, change.new)
        case _:
            return _plain(change.place, *parts), *value_texts(change.old, change.new)


def _plain(place: Place, *parts: Mapping[str, Any]) -> str:
    """A place without what the heading of its group says already."""
    text = named_place_text(place, *parts)
    if place[0] == "design":
        return text.removeprefix("design.")
    if place[0] == "loop":
        text = text.removeprefix("loop.").removeprefix("cases.").replace("_", " ")
    return text.removeprefix("accepted.").removeprefix("signals.").replace("causal.", "applied ")


def _with_unit(text: str, unit: str) -> str:
    return text if text == "nothing" else f"{text} {unit}"


def _in_unit(change: Change, written: Callable[[Fraction], str]) -> tuple[str, str]:
    """Exact numbers as quantities, unless these look alike."""
    texts = [_quantity(value, written) for value in (change.old, change.new)]
    return (texts[0], texts[1]) if texts[0] != texts[1] else value_texts(change.old, change.new)


def _quantity(value: object, written: Callable[[Fraction], str]) -> str:
    try:
        number = read_exact(value) if isinstance(value, str) else None
    except UnfitError:
        number = None
    return written(number) if number else value_text(value)


def _prepared(record: Mapping[str, Any]) -> dict[str, Any]:
    """A record whose loops, agreements and words are found by the names they have."""
    prepared = dict(record)
    loop = record.get("loop")
    if isinstance(loop, dict):
        prepared["loop"] = dict(loop)
        if isinstance(loop.get("cases"), list):
            prepared["loop"]["cases"] = _by(loop["cases"], "case")
        if isinstance(loop.get(_LEDGER), dict):
            phases = {f"{name}_deg": value for name, value in prepared["loop"].pop(_LEDGER).items()}
            prepared["loop"]["phase_ledger"] = phases
    signals = record.get("signals")
    if isinstance(signals, dict):
        prepared["signals"] = {k: _by(v, "name") if isinstance(v, list) else v for k, v in signals.items()}
    return prepared | {"accepted": _by(record["accepted"], "check")}


def _by(entries: Sequence[Any], key: str) -> dict[str, Any]:
    named: dict[str, Any] = {}
    for i, entry in enumerate(entries, 1):
        name = entry.get(key) if isinstance(entry, dict) else None
        name = name if isinstance(name, str) and name else f"{key} {i}"
        named[name if name not in named else f"{name}, number {i}"] = entry
    return named


# ---------------------------------------------------------------- behaviour


def _behaviour(old: Recorded, new: Recorded) -> Iterator[Row]:
    """Gains, poles and zeros of the stored numbers, where they differ in the digits that people read."""
    pulses = [recorded_pulse(recorded) for recorded in (old, new)]
    texts = [_behaviour_texts(pulse) for pulse in pulses]
    for what in dict.fromkeys((*texts[0], *texts[1])):
        before, now = (each.get(what, _NONE) for each in texts)
        if before != now:
            yield Row("Behaviour", what, before, now)


def _behaviour_texts(pulse: PulseTransferFunction) -> dict[str, str]:
    found = {"answer at once": f"{float(pulse.feed_through):.5g}"}
    if pulse.gain:
        k = pulse.zeros_minus_poles_at_one
        found["gain at rest" if k == 0 else f"low-frequency gain, lim G s^{-k}"] = (
            f"{float(pulse.low_frequency_gain):.5g}"
        )
    period_s = float(pulse.period_s)
    for kind, roots in (("pole", pulse.poles), ("zero", pulse.zeros)):
        ordered = sorted(roots, key=lambda root: (abs(logarithm(root.value)), root.value.real))
        found |= {f"{kind} {i}": _root_text(root, period_s) for i, root in enumerate(ordered, 1)}
    return found


def _root_text(root: Root, period_s: float) -> str:
    """Natural frequency and damping where the sampled root has them; else where it lies in z."""
    inside = root.value.imag != 0 or root.value.real > -1
    text = in_words(logarithm(root.value) / period_s) if inside else in_disc_words(root.value)
    return text if root.multiplicity == 1 else f"{text}, {root.multiplicity} times"


# ---------------------------------------------------------------- checks


def _checks(old: Sequence[Any], new: Sequence[Any]) -> Iterator[Row]:
    """Verdict and figure of every check that differs; where these are the same, what else does."""
    named = [checks_by_name(checks) for checks in (old, new)]
    for name in dict.fromkeys((*named[0], *named[1])):
        found = [each.get(name, MISSING) for each in named]
        before, now = map(_check_text, found)
        if before != now:
            yield Row("Checks", name, before, now)
            continue
        for change in changes(*found):
            yield Row("Checks", f"{name}, {place_text(change.place)}", *value_texts(change.old, change.new))


def _check_text(check: Any) -> str:
    """Verdict, figure of the stored or exact numbers, and how far that is from the design's."""
    if not isinstance(check, dict):
        return _NONE
    verdict, unit = (printable(str(check.get(key) or "")) for key in ("verdict", "unit"))
    obtained, difference = check.get("obtained"), check.get("difference")
    text = verdict if obtained is None else f"{verdict}: {value_text(obtained)}"
    if not isinstance(difference, float):
        return text
    return f"{text}, {f'{difference:.3g} {unit}'.rstrip()} off"
