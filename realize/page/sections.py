"""What the page says, in the order in which a reviewer asks."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from hashlib import sha256
from typing import TYPE_CHECKING, Any

from realize.algebra.expression import decimal_text, exact_text
from realize.design import Design, Signal
from realize.errors import Refused
from realize.firmware.c_text import number_text
from realize.firmware.job import Emitted
from realize.page.blocks import Page, Section, Table, pairs
from realize.page.drawings import drawings, window_drawing
from realize.page.known import Known
from realize.quantity import format_engineering
from realize.report.scheduled import (
    points_key,
    points_rows,
    points_title,
    schedule_rows,
    schedule_sentences,
    schedule_title,
    schedule_verdict,
)
from realize.report.sentences import (
    CAUTION,
    accepted_sentences,
    assessment_verdict,
    comparison_verdict,
    emission_verdict,
    reasons,
    setting,
    stored_words,
    unshown,
)
from realize.report.tables import (
    LOOPS_KEY,
    METHODS_KEY,
    Rows,
    checks_rows,
    loop_rows,
    loops_rows,
    loops_title,
    methods_rows,
    roots_rows,
)
from realize.rolloff import rolloff_toml
from realize.version import VERSION
from realize.workflow import MethodResult

if TYPE_CHECKING:
    from realize.loop_design import LoopResult

#: Numbers of a list that are shown one by one.
_MOST_LISTED = 16

#: Points of a schedule whose coefficients stand beside each other.
_MOST_SETS = 8

#: Digits of a number of the design.
_DIGITS = 17


def page(known: Known) -> Page:
    """Everything about one design."""
    answer, verdict = _verdict(known).split(": ", 1)
    sections = [_asked(known), _realizability(known), _methods(known)]
    if known.shown is not None:
        found = drawings(known)
        sections.append(Section("figures", f"What {known.shown.method} makes of it{_where(known)}", drawings=found))
        sections.append(Section("numbers", "The numbers behind the figures", tables=tuple(d.table for d in found)))
    sections += _emission(known)
    return Page(known.design.name, known.design.about or "", answer, verdict, tuple(sections), CAUTION)


def _verdict(known: Known) -> str:
    if isinstance(known.emitted, Emitted) and known.emitted.schedule is not None:
        return schedule_verdict(known.emitted.schedule) + "."
    if isinstance(known.emitted, Emitted):
        return emission_verdict(known.emitted.comparison, known.emitted.chosen) + "."
    said = comparison_verdict(known.comparison)
    if said.startswith("no: ") and not known.comparison.causal.assumed:
        return said
    return f"no: {known.design.name} cannot be emitted as it is: {known.emitted.found}."


def _asked(known: Known) -> Section:
    design = known.design
    given = [("transfer function", design.transfer_text)]
    given += [("values", _named(design.values))]
    given += [(name, text or "") for name, text in _provenance(design)]
    given += [("input", _signal(design.input)), ("output", _signal(design.output)), *_plant(known)]
    given += _scheduled(design)
    given += [("target", f"{design.target.arithmetic}, structure {design.target.structure}")]
    given += [("tolerances of its own", ", ".join(f"{k} {number_text(v)}" for k, v in design.tolerance))]
    rows = pairs("The design", [(name, text) for name, text in given if text])
    return Section("asked", "What was asked", items=tuple(setting(known.comparison)), tables=(rows,))


def _provenance(design: Design) -> tuple[tuple[str, str | None], ...]:
    return (("revision", design.revision), ("requirement", design.requirement), ("author", design.author))


def _signal(signal: Signal) -> str:
    unit = f" {signal.unit}" if signal.unit else ""
    ends = "" if signal.range is None else " to ".join(number_text(end) for end in signal.range) + unit
    step = "" if signal.per_count is None else f"{exact_text(signal.per_count)}{unit} per count"
    return ", ".join(part for part in (ends, step) if part)


def _plant(known: Known) -> list[tuple[str, str]]:
    """What the controller is connected to: all that the loop's figures rest on."""
    plant = known.design.plant
    if plant is None:
        return []
    from realize.loop_design import compute_delay_s

    parts = [plant.transfer_text or f"measured, {plant.response}"]
    dead = plant.cases[0].dead_time_s
    parts += [f"dead time {format_engineering(float(dead), 's')}"] if dead else []
    parts += [f"sensor {plant.sensor_text}"] if plant.sensor_text else []
    named = [(case.name or "plant values", _named(case.values)) for case in plant.cases]
    delay = format_engineering(float(compute_delay_s(known.design, known.comparison.period_s)), "s")
    return [
        ("plant", "; ".join(parts)),
        *((f"plant, {name}" if len(named) > 1 else name, values) for name, values in named),
        ("compute delay", f"{delay}, from sampling to output"),
    ]


def _scheduled(design: Design) -> list[tuple[str, str]]:
    """The operating points, and what changes with them."""
    schedule = design.schedule
    if schedule is None:
        return []
    unit = f" in {schedule.unit}" if schedule.unit else ""
    lists = [(f"scheduled by {schedule.variable}{unit}", schedule.points)]
    lists += [(f"scheduled {name}", values) for name, values in (*schedule.values, *schedule.plant_values)]
    return [(name, _listed(values)) for name, values in lists]


def _listed(values: Sequence[Fraction]) -> str:
    """All of a short list; of a long one both ends."""
    if len(values) <= _MOST_LISTED:
        return ", ".join(map(number_text, values))
    return f"{number_text(values[0])} to {number_text(values[-1])}, {len(values)} points"


def _named(values: Iterable[tuple[str, Fraction]]) -> str:
    return ", ".join(f"{name} = {number_text(value)}" for name, value in values)


def _realizability(known: Known) -> Section:
    design, found = known.design, known.assessment
    tables = [Table("Poles", roots_rows(found.transfer.poles))] if found.transfer.poles else []
    tables += [Table("Zeros", roots_rows(found.transfer.zeros))] if found.transfer.zeros else []
    sentence = assessment_verdict(design, found).split(" Next: ")[0]
    items = [term.text for term in found.terms[1:]]
    if not found.proposals:
        return Section("realizable", "Can it run at all", (sentence,), (*items, *found.notes), tables=tuple(tables))
    why = [f"first proposal: {reason}" for reason in found.proposals[0].reasons]
    window = window_drawing(known)
    tables.insert(0, window.table)
    return Section(
        "realizable",
        "Can it run at all",
        (sentence,),
        (*items, *why, *found.notes),
        (window,),
        tuple(tables),
        "" if design.rolloff is not None else rolloff_toml(found.proposals[0]),
    )


def _loop(loop: LoopResult) -> Rows:
    """The loops, with the case of the plant in front where there are several."""
    rows = loop_rows(loop)
    if len(loop.entries) == 1:
        return rows
    cases = [str(entry["case"]) for entry in loop.entries for _ in range(len(rows.cells) // len(loop.entries))]
    return Rows((("case", ""), *rows.head), [[case, *row] for case, row in zip(cases, rows.cells, strict=True)])


def _methods(known: Known) -> Section:
    comparison, shown = known.comparison, known.shown
    items = [*unshown(comparison.methods)]
    items += [f"{m.method}: {m.refused}" for m in comparison.methods if m.refused]
    tables = [Table("Every method at this rate", methods_rows(comparison.methods), METHODS_KEY)]
    loops = loops_rows(comparison) if known.design.plant else None
    tables += [Table(loops_title(comparison), loops, LOOPS_KEY)] if loops else []
    if shown is not None:
        words = [*reasons(shown), *(f"accepted: {text}" for text in accepted_sentences(shown)), *shown.notes]
        tables.append(
            Table(
                f"Checks of {shown.method}{_where(known)}", _checks(shown, known.design), " ".join(map(_stopped, words))
            )
        )
        tables += [Table(f"The loop with {shown.method}{_where(known)}", _loop(shown.loop))] if shown.loop else []
    return Section(
        "methods",
        "The methods side by side",
        (_stopped(comparison_verdict(comparison).split(": ", 1)[1]),),
        tuple(items),
        tables=tuple(tables),
    )


def _where(known: Known) -> str:
    """What the figures of one method are about, where that is not what is emitted."""
    return " at the nominal values, which are not emitted" if known.design.schedule is not None else ""


def _checks(shown: MethodResult, design: Design) -> Rows:
    """The checks, the verdict beside the name: on a narrow screen the rest is scrolled."""
    rows = checks_rows(shown, design)
    return Rows((rows.head[0], rows.head[-1], *rows.head[1:-1]), [[row[0], row[-1], *row[1:-1]] for row in rows.cells])


def _stopped(text: str) -> str:
    """A sentence, its first letter as a sentence has it."""
    return text[:1].upper() + text[1:].rstrip(".") + "."


def _emission(known: Known) -> list[Section]:
    emitted = known.emitted
    if isinstance(emitted, Refused):
        advice = f"Try: {emitted.advice}." if emitted.advice else ""
        return [Section("emitted", "Nothing is emitted", tuple(filter(None, (_stopped(emitted.found), advice))))]
    text = next(text for name, text in emitted.files.items() if name.endswith(".record.json"))
    record, hashes = emitted.record, sorted(emitted.record["files"].items())
    files = pairs("SHA-256 of each file", [(name, digest) for name, digest in hashes])
    digest = sha256(text.encode()).hexdigest()
    sentence = f"The record, {known.design.name}.record.json, has the SHA-256 {digest}; written by realize {VERSION}."
    what = stored_words(emitted.chosen, known.design)
    return [
        *_schedule(emitted),
        Section("coefficients", "What is emitted", (_stopped(what),), tables=_tables_of(record)),
        Section("record", "The record", (sentence,), tables=(files,)),
    ]


def _schedule(emitted: Emitted) -> list[Section]:
    """What was found at the points of a schedule and between them."""
    found = emitted.schedule
    if found is None:
        return []
    tables = (
        Table(schedule_title(found), schedule_rows(found)),
        Table(points_title(found), points_rows(found), points_key(found)),
    )
    return [Section("schedule", "Over the schedule", items=tuple(schedule_sentences(found)), tables=tables)]


def _tables_of(record: dict[str, Any]) -> tuple[Table, ...]:
    """What is stored, of a schedule at its points too."""
    return (_coefficients(record), *([_sets(record["schedule"])] if record.get("schedule") else []))


def _coefficients(record: dict[str, Any]) -> Table:
    head = (("coefficient",), ("as stored",), ("fraction bits",), ("value",))
    cells = [_row(name, entry) for name, entry in _stored_at(record)]
    note = "Recursion: y[k] = sum b x - sum a y, in ascending powers of 1/z. Values to 17 digits."
    caption = "Coefficients of the first point" if record.get("schedule") else "Coefficients"
    return Table(caption, Rows(head, cells), note)


def _sets(schedule: dict[str, Any]) -> Table:
    """Coefficients of the points, a column each, as far as a page is wide."""
    points = schedule["points"]
    shown = points[:_MOST_SETS]
    unit = schedule["unit"] or ""
    head = (("coefficient", ""), *((f"{number_text(Fraction(p['at']))} {unit}".strip(), "") for p in shown))
    rows = zip(*(_stored_at(p) for p in shown), strict=True)
    cells = [[row[0][0], *(f"{float(Fraction(entry['value'])):.9g}" for _, entry in row)] for row in rows]
    left = f" The record holds those of {len(points) - len(shown)} more." if len(points) > len(shown) else ""
    return Table(f"Coefficients by {schedule['variable']}", Rows(head, cells), f"To 9 digits.{left}")


def _stored_at(point: dict[str, Any]) -> list[tuple[str, dict[str, Any]]]:
    """What is stored, by name."""
    found = [(f"integral R{i}", entry) for i, entry in enumerate(point["integral"], 1)]
    for i, section in enumerate(point["sections"], 1):
        found += [(f"section {i}, {name}", entry) for name, entry in _stored_of(section)]
    return found


def _stored_of(section: dict[str, Any]) -> list[tuple[str, dict[str, Any]]]:
    """What is stored of a section, by name: its coefficients in z, or those of its own form."""
    stored = section.get("coefficients", section)
    if "b" not in stored:
        return list(stored.items())
    kinds = (("b", 0), ("a", 1))
    return [(f"{kind}{i}", entry) for kind, first in kinds for i, entry in enumerate(stored[kind], first)]


def _row(name: str, entry: dict[str, Any]) -> list[str]:
    bits = entry["fraction_bits"]
    value = decimal_text(Fraction(entry["value"]), _DIGITS)
    return [name, str(entry["stored"]), "-" if bits is None else str(bits), value]
