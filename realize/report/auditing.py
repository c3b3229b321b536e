"""The answer of `realize audit`, for people and for scripts: one line where nothing differs."""

from __future__ import annotations

from realize.algebra.expression.tokens import printable
from realize.firmware.audit import Audit, Finding, Opinion
from realize.firmware.audit.second_opinion import Part
from realize.report.documents import SCHEMA, Document
from realize.report.paragraphs import bullets, heading, wrapped
from realize.version import VERSION

#: Kinds of difference, in the order in which they are told, with what heads them.
_KINDS = (
    ("design", "The design file"),
    ("emission", "Emission"),
    ("file", "Files"),
    ("coefficient", "Coefficients"),
    ("check", "Checks"),
    ("record", "The record"),
    ("second opinion", "Second opinion"),
)


def audit_text(found: Audit) -> str:
    """The screen of `realize audit`."""
    name = printable(found.record["design"]["name"])
    counted = len(found.findings)
    if not counted:
        verdict = f"yes: {name}: {_compared(found)} as designed{_agreement(found.opinion)}"
        return wrapped(verdict) + bullets(found.notes)
    verdict = f"no: {name}: {counted} {'difference' if counted == 1 else 'differences'} from what the design calls for."
    blocks = [wrapped(verdict)]
    for kind, title in _KINDS:
        told = [finding.text for finding in found.findings if finding.kind == kind]
        blocks += [heading(title) + bullets(told)] if told else []
    blocks += [heading("Notes") + bullets(found.notes)] if found.notes else []
    return "\n".join(blocks)


def _compared(found: Audit) -> str:
    files = len(found.record["files"]) + 1
    return f"{files} files, {found.coefficients} coefficients and {len(found.record['checks'])} checks"


def _agreement(opinion: Opinion | None) -> str:
    if opinion is None or not opinion.parts:
        return ""
    alone = f" on the {opinion.parts[0].what}" if len(opinion.parts) == 1 else ""
    return f"; scipy agrees{alone}"


def audit_document(found: Audit) -> Document:
    """The answer of `realize audit` for scripts."""
    design = found.record["design"]
    return {
        "schema": SCHEMA,
        "command": "audit",
        "design": {"name": design["name"], "transfer": design["transfer"]},
        "record": found.path,
        "equal": not found.findings,
        "differences": [_finding_document(finding) for finding in found.findings],
        "compared": {
            "files": len(found.record["files"]) + 1,
            "coefficients": found.coefficients,
            "checks": len(found.record["checks"]),
        },
        "second_opinion": None if found.opinion is None else [_part_document(part) for part in found.opinion.parts],
        "tool": {"recorded": found.record["tool"].get("version"), "now": VERSION},
        "notes": list(found.notes),
    }


def _finding_document(finding: Finding) -> Document:
    return finding._asdict()


def _part_document(part: Part) -> Document:
    """Relative figures; those of the step are relative to its largest sample."""
    return {
        "of": part.what,
        "points": part.points,
        "judged": part.judged,
        "largest_difference": float(f"{part.difference:.3g}"),
        "scipy_accuracy_measured": float(f"{part.accuracy:.3g}"),
        "rounding_of_stored_numbers": float(f"{part.rounding:.3g}"),
        "agrees": not part.worst,
    }
