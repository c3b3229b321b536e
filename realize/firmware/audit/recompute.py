"""A record held against what its own design comes to today, and against the files beside it.

The design in the record is emitted once more, to memory. Then every file, coefficient, check and other entry is
compared; the version of the tool is told, but is no difference.
"""

from __future__ import annotations

import json
import os.path
from collections.abc import Iterator, Mapping
from fractions import Fraction
from hashlib import sha256
from pathlib import Path
from typing import Any, NamedTuple

from realize.algebra.expression.tokens import printable
from realize.design import load_design
from realize.design.record import design_from_resolved
from realize.errors import RealizeError, Refused
from realize.firmware.audit.lines import first_difference
from realize.firmware.audit.second_opinion import INSTALL, Opinion, is_available, second_opinion
from realize.firmware.changes import (
    changes,
    checks_by_name,
    is_coefficient,
    named_place_text,
    place_text,
    telling,
    value_texts,
)
from realize.firmware.job import Emitted, emit
from realize.firmware.record import document_text
from realize.firmware.recorded import ENDING, described, read_record, recorded_numbers
from realize.version import VERSION

#: Entries that are compared in their own words, or not at all.
_APART = ("schema", "files", "checks", "tool")


class Finding(NamedTuple):
    """One difference.

    Attributes
    ----------
    kind : str
        ``file``, ``coefficient``, ``check``, ``record`` (any other entry), ``emission``, ``design``, or
        ``second opinion``.
    what : str
        Which one.
    recorded, found : str or None
        What the record says, or its files hold; what it is today, or elsewhere.
    text : str
        The sentence.
    """

    kind: str
    what: str
    recorded: str | None
    found: str | None
    text: str


class Audit(NamedTuple):
    """The answer.

    Attributes
    ----------
    path : str
        Of the record.
    record : mapping
        Its content.
    findings : tuple of Finding
        Empty where nothing differs.
    notes : tuple of str
        What is no difference, but is good to know.
    opinion : Opinion or None
        The second one, where there is one.
    coefficients : int
        How many stored numbers were compared.
    """

    path: str
    record: Mapping[str, Any]
    findings: tuple[Finding, ...]
    notes: tuple[str, ...]
    opinion: Opinion | None
    coefficients: int


def audit(path: str, design_path: str | None = None) -> Audit:
    """Compare a record and its files with what the record's design comes to today.

    Parameters
    ----------
    path : str
        Of the record; the files lie beside it.
    design_path : str, optional
        A design file to hold against the design in the record.

    Raises
    ------
    RealizeError
        When the record or the design file cannot be read or understood.
    """
    record = read_record(path)
    design = design_from_resolved(record["design"])
    findings: list[Finding] = []
    if design_path is not None:
        findings += _design_findings(record["design"], design_path)
    emitted: Emitted | None = None
    try:
        emitted = emit(design)
    except Refused as refusal:
        text = f"emission of the record's design is refused today: {refusal.where}: {refusal.found}"
        findings.append(Finding("emission", "the design", "emitted", "refused", text))
    findings += _file_findings(path, record, emitted)
    findings += _record_findings(path, record, emitted) if emitted else []
    opinion, left_out = _opinion(path, record, emitted)
    if opinion is not None and opinion.finding:
        findings.append(Finding("second opinion", "scipy", None, None, opinion.finding))
    notes = [*_version_note(record), *([left_out] if left_out else []), *(opinion.notes if opinion else ())]
    return Audit(path, record, tuple(findings), tuple(notes), opinion, _count(record))


def _count(record: object) -> int:
    """How many stored numbers are in a part of the record."""
    if is_coefficient(record):
        return 1
    parts = record.values() if isinstance(record, dict) else record if isinstance(record, list) else ()
    return sum(map(_count, parts))


def _version_note(record: Mapping[str, Any]) -> list[str]:
    written = record["tool"].get("version")
    if written == VERSION:
        return []
    return [f"written by realize {printable(str(written))}; this is realize {VERSION}"]


# ---------------------------------------------------------------- design file


def _design_findings(recorded: Mapping[str, Any], path: str) -> Iterator[Finding]:
    """What a design file says otherwise."""
    document = json.loads(json.dumps(load_design(path).resolved()))
    for change in telling(changes(recorded, document)):
        old, new = value_texts(change.old, change.new)
        what = named_place_text(change.place, recorded, document)
        yield Finding("design", what, old, new, f"{what}: {old} in the record, {new} in {printable(path)}")


# ---------------------------------------------------------------- files


def _file_findings(path: str, record: Mapping[str, Any], emitted: Emitted | None) -> Iterator[Finding]:
    today = {name: text for name, text in emitted.files.items() if not name.endswith(ENDING)} if emitted else {}
    for name, digest in record["files"].items():
        yield from _file_finding(path, name, digest, today.get(name), emitted is not None)
    for name in (name for name in today if name not in record["files"]):
        yield Finding("file", name, None, "emitted", f"{name}: emitted today, but not in the record")


def _file_finding(path: str, name: str, digest: object, today: str | None, is_emitted: bool) -> Iterator[Finding]:
    content = _content(path, name)
    if content is None:
        yield Finding("file", name, "written", None, f"{name}: is missing beside the record")
        return
    changed = sha256(content).hexdigest() != digest
    if today is None:
        if changed:
            yield Finding("file", name, None, None, f"{name}: has changed since it was written (SHA-256)")
        if is_emitted:
            yield Finding("file", name, "written", None, f"{name}: in the record, but not emitted today")
        return
    line = first_difference(content, today)
    if line is not None:
        # Whose doing it is, the record tells.
        whose = "has changed since it was written" if changed else "would be written otherwise today"
        yield Finding("file", name, line.found, line.wanted, f"{name}: {whose}: {line.text}")
    elif changed:
        text = f"{name}: is what is emitted today, but the record gives another SHA-256 for it"
        yield Finding("file", name, described(digest), sha256(content).hexdigest(), text)


def _content(path: str, name: str) -> bytes | None:
    """Content of a file beside the record."""
    if not name or os.path.basename(name) != name:
        raise RealizeError(
            f"{printable(path)}, files", printable(name), "names of files beside it", "emit the design again"
        )
    try:
        return Path(path).with_name(name).read_bytes()
    except FileNotFoundError:
        return None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "its name is not possible"
        raise RealizeError(
            printable(name), f"cannot be read: {reason}", "a file beside the record", "look at its rights"
        ) from None


# ---------------------------------------------------------------- the record itself


def _record_findings(path: str, record: Mapping[str, Any], emitted: Emitted) -> Iterator[Finding]:
    today = emitted.record
    for change in telling(changes(_without_apart(record), _without_apart(today))):
        old, new = value_texts(change.old, change.new)
        what = place_text(change.place)
        kind = "coefficient" if is_coefficient(change.old) or is_coefficient(change.new) else "record"
        yield Finding(kind, what, old, new, f"{what}: {old} in the record, {new} today")
    yield from _check_findings(record["checks"], today["checks"])
    wanted = document_text({**today, "tool": record["tool"]})
    if record == json.loads(wanted):
        line = first_difference(Path(path).read_bytes(), wanted)
        if line is not None:
            what = os.path.basename(path)
            text = f"{printable(what)}: the same content, otherwise written: {line.text}"
            yield Finding("file", what, line.found, line.wanted, text)


def _without_apart(document: Mapping[str, Any]) -> dict[str, Any]:
    return {key: value for key, value in document.items() if key not in _APART}


def _check_findings(recorded: list[Any], today: list[Any]) -> Iterator[Finding]:
    old, new = (checks_by_name(checks) for checks in (recorded, today))
    for name in dict.fromkeys((*old, *new)):
        for change in changes(old.get(name), new.get(name)):
            texts = value_texts(change.old, change.new)
            what = f"check {name}"
            field = f", {place_text(change.place)}" if change.place else ""
            yield Finding("check", what + field, *texts, f"{what}{field}: {texts[0]} in the record, {texts[1]} today")


# ---------------------------------------------------------------- second opinion


def _opinion(path: str, record: Mapping[str, Any], emitted: Emitted | None) -> tuple[Opinion | None, str]:
    """The second opinion, and what it leaves out: itself, where there is none."""
    if not is_available():
        return None, f"no second opinion: scipy is not installed; {INSTALL}"
    if emitted is None:
        return None, "no second opinion: nothing was computed to hold against it"
    try:
        numbers = recorded_numbers(record, path)
    except RealizeError as error:
        return None, f"no second opinion: {error.where}: {error.found}"
    comparison = emitted.comparison
    given = comparison.design.exact_at_rad_s
    return (
        second_opinion(
            comparison.causal.transfer,
            emitted.chosen.method,
            Fraction(comparison.band_rad_s),
            comparison.band_rad_s if given is None else given,
            numbers,
            record,
        ),
        "" if emitted.schedule is None else "the second opinion is about the first point of the schedule alone",
    )
