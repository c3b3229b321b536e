"""The JSON documents: SI numbers with the unit in the key, exact numbers as strings, never NaN or infinity."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import isfinite
from typing import TYPE_CHECKING, Any

from realize.algebra.expression import exact_text
from realize.algebra.irrational import pi
from realize.algebra.roots import Root
from realize.algebra.rounding import FLOAT64
from realize.arithmetic.realization import Realization
from realize.checks import Check
from realize.design import Design
from realize.design.schedule import nominal_note
from realize.errors import RealizeError
from realize.firmware.job import Emitted
from realize.realizability import Assessment
from realize.rolloff import Proposal
from realize.workflow import Comparison, MethodResult

if TYPE_CHECKING:
    from realize.arithmetic.integer import IntegerRealization
    from realize.loop_design import LoopResult

SCHEMA = "realize/1"

Document = dict[str, Any]


def heading(command: str, design: Design) -> Document:
    """What every document starts with."""
    document: Document = {
        "schema": SCHEMA,
        "command": command,
        "design": {"name": design.name, "transfer": design.transfer_text},
    }
    note = nominal_note(design)
    return document | ({"nominal": note[0]} if note else {})


def error_document(command: str, error: RealizeError) -> Document:
    """An error for scripts."""
    return {
        "schema": SCHEMA,
        "command": command,
        "error": {"where": error.where, "found": error.found, "allowed": error.allowed, "try": error.advice},
    }


def assess_document(design: Design, assessment: Assessment) -> Document:
    """The answer of `realize assess`."""
    transfer = assessment.transfer
    return heading("assess", design) | {
        "numerator": _exact(transfer.numerator),
        "denominator": _exact(transfer.denominator),
        "relative_degree": transfer.relative_degree,
        "realizable": assessment.realizable,
        "poles": _roots(transfer.poles),
        "zeros": _roots(transfer.zeros),
        "cancelled": _exact(transfer.cancelled) if len(transfer.cancelled) > 1 else [],
        "improper_terms": [{"power": t.power, "coefficient": exact_text(t.coefficient)} for t in assessment.terms],
        "proposals": [
            proposal_document(p) | margins
            for p, margins in zip(assessment.proposals, _margins(assessment), strict=True)
        ],
        "notes": list(assessment.notes),
    }


def _margins(assessment: Assessment) -> list[Document]:
    """Phase margin before and after each proposal, where there is a plant."""
    if not assessment.phase_margins_deg:
        return [{} for _ in assessment.proposals]
    return [
        {"phase_margin_before_deg": _number(before), "phase_margin_after_deg": _number(after)}
        for before, after in assessment.phase_margins_deg
    ]


def proposal_document(proposal: Proposal) -> Document:
    """One roll-off proposal with its price."""
    return {
        "placement": proposal.placement,
        "order": proposal.order,
        "damping": float(proposal.damping),
        "pole_rad_s": exact_text(proposal.pole_rad_s),
        "numerator": _exact(proposal.transfer.numerator),
        "denominator": _exact(proposal.transfer.denominator),
        "relative_degree": proposal.relative_degree,
        "phase_lost_deg": _number(proposal.phase_lost_deg),
        "high_frequency_gain": _number(proposal.high_frequency_gain),
        "converter_step_percent": _number(proposal.converter_step_percent),
        "window_rad_s": list(proposal.window_rad_s) if proposal.window_rad_s else None,
        "within_window": proposal.within_window,
    }


def compare_document(comparison: Comparison) -> Document:
    """The answer of `realize compare`."""
    causal = comparison.causal
    return heading("compare", comparison.design) | {
        "period_s": exact_text(comparison.period_s),
        "band_hz": float(comparison.band_rad_s / (2 * pi())),
        "band_rests_on": comparison.band_rests_on,
        "rolloff": proposal_document(causal.proposal) if causal.proposal else None,
        "rolloff_assumed": causal.assumed,
        "methods": [
            ({"loop": []} if comparison.design.plant else {}) | method_document(result) for result in comparison.methods
        ],
        "recommended": comparison.recommended,
        "because": comparison.because,
    }


def method_document(result: MethodResult) -> Document:
    """One method: coefficients, stored sections, checks."""
    document: Document = {"method": result.method, "refused": result.refused, "acceptable": result.acceptable}
    document |= _coefficients(result)
    return (
        document
        | {
            "stability": result.stability,
            "checks": [check_document(check) for check in result.checks],
            "accepted": [
                {
                    "check": c.check,
                    "limit": None if a.limit is None else exact_text(a.limit),
                    "because": a.because,
                    "by": a.by,
                }
                for c, a in result.accepted
            ],
            "notes": list(result.notes),
        }
        | (_loop(result.loop) if result.loop else {})
    )


def _loop(loop: LoopResult) -> Document:
    """The loops around a method's controller."""
    ledger = loop.ledger
    return {
        "loop": list(loop.entries),
        "phase_ledger_deg": None if ledger is None else dict(ledger.items) | {"total": ledger.total_deg},
        "phase_ledger_at_rad_s": None if ledger is None else ledger.w_rad_s,
        "jitter_margin_s": None if loop.jitter is None else loop.jitter.jitter_s,
    }


def _coefficients(result: MethodResult) -> Document:
    if result.discretization is None or result.realization is None:
        return dict.fromkeys(("numerator", "denominator", "integral", "sections", "structure"))
    numerator, denominator = result.discretization.rounded(FLOAT64)
    return {
        "numerator": list(numerator),
        "denominator": list(denominator),
        "integral": [float(gain) for gain in result.realization.integral],
        "sections": _sections(result.realization),
        "structure": result.realization.structure,
    }


def _sections(realization: Realization | IntegerRealization) -> list[Document]:
    """In ascending powers of 1/z; those in delta as the nearest doubles."""
    if realization.structure == "delta" and isinstance(realization, Realization):
        in_z = [section.in_z() for section in realization.sections]
        return [{"b": [float(c) for c in b], "a": [float(c) for c in a], "operator": "delta"} for b, a in in_z]
    return [{"b": [float(b) for b in s.b], "a": [float(a) for a in s.a]} for s in realization.sections]


def emit_document(emitted: Emitted, paths: Sequence[str]) -> Document:
    """The answer of `realize emit`."""
    document = heading("emit", emitted.comparison.design) | {"written": list(paths), "record": emitted.record}
    if emitted.schedule is None:
        return document
    # Here, because a design without a schedule does not need it, and its start is short.
    from realize.report.scheduled import scheduled_entry

    return document | {"schedule": scheduled_entry(emitted.schedule)}


def check_document(check: Check) -> Document:
    """One check, figures included."""
    return {
        "check": check.check,
        "of": check.of,
        "reference": _value(check.reference),
        "obtained": _value(check.obtained),
        "difference": _number(check.difference),
        "tolerance": _number(check.tolerance),
        "unit": check.unit,
        "verdict": check.verdict,
        "reason": check.reason,
    }


def _roots(roots: Sequence[Root]) -> list[Document]:
    """Every root, both members of a pair."""
    return [_root(value, root) for root in roots for value in _members(root)]


def _members(root: Root) -> list[complex]:
    return [root.value, root.value.conjugate()] if root.is_pair else [root.value]


def _root(value: complex, root: Root) -> Document:
    frequency, damping = natural_frequency_and_damping(root.value)
    return {
        "re": value.real,
        "im": value.imag,
        "multiplicity": root.multiplicity,
        "natural_frequency_rad_s": frequency,
        "damping_ratio": damping,
    }


def natural_frequency_and_damping(root: complex) -> tuple[float, float | None]:
    """``|p|`` in rad/s and ``-Re p/|p|``; a root at 0 has no damping ratio."""
    frequency = abs(root)
    return frequency, -root.real / frequency + 0.0 if frequency else None


def _exact(coefficients: Sequence[int | Fraction]) -> list[str]:
    return [exact_text(c) for c in coefficients]


def _value(value: float | complex | str | None) -> float | str | Document | None:
    if isinstance(value, complex):
        return {"re": _number(value.real), "im": _number(value.imag)}
    return value if isinstance(value, str) else _number(value)


def _number(value: float | None) -> float | None:
    return float(value) if value is not None and isfinite(value) else None
