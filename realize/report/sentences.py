"""The sentences that screens and pages share."""

from __future__ import annotations

from collections.abc import Sequence

from realize.checks import Check
from realize.checks.agreement import agreed_text
from realize.design import Design
from realize.design.schedule import nominal_note
from realize.quantity import format_engineering
from realize.realizability import Assessment
from realize.report.values import count, hz, value_text
from realize.rolloff import Proposal
from realize.workflow import Comparison, MethodResult

#: Checks without a column, named in words where they are out.
_UNSHOWN = (
    "stability",
    "saturation recovery",
    "loop stability",
)

CAUTION = (
    "Controllers move machines: check on the bench with the actuator limited before closing the loop. This is no "
    "functional-safety process (IEC 61508 and its sector standards), and replaces neither local codes nor the "
    "judgement of a licensed engineer where one is required."
)


def accepted_words(result: MethodResult) -> str:
    """For the first line: what is out but agreed to."""
    if not result.accepted:
        return ""
    names = dict.fromkeys(check.check for check, _ in result.accepted)
    return f"; with {count(len(names), 'accepted deviation')}: {', '.join(names)}"


def assessment_verdict(design: Design, assessment: Assessment) -> str:
    """Whether a design is realizable, and what to do next."""
    if assessment.realizable:
        return (
            f"yes: {design.name} is realizable: at least as many poles as zeros. "
            "Next: `realize compare` shows what each method makes of it."
        )
    if design.rolloff is not None:
        return (
            f"yes: {design.name} is realizable with the roll-off that it asks for; as it is written it is not: "
            f"{assessment.terms[0].text}. Next: `realize compare`."
        )
    best = assessment.proposals[0]
    lost = "" if best.phase_lost_deg is None else f" and costs {best.phase_lost_deg:.3g} deg at the band edge"
    fits = "" if best.within_window else " It lies outside its window: see below."
    return (
        f"no: {design.name} is not realizable: {assessment.terms[0].text}. Add a roll-off pole: the first proposal "
        f"below is at {hz(float(best.pole_rad_s))}{lost}.{fits}"
    )


def window_text(window: tuple[float, float | None] | None) -> str:
    """The poles that a roll-off may have, in rad/s."""
    if window is None:
        return "empty"
    low, high = window
    return f"from {low:.5g}" if high is None else f"{low:.5g} to {high:.5g}"


def comparison_verdict(comparison: Comparison) -> str:
    """Whether anything can be emitted, by which method, and why."""
    chosen, name = comparison.chosen, comparison.design.name
    if chosen is None:
        return f"no: nothing can be emitted for {name}: {comparison.because}."
    if chosen.refused:
        return f"no: {chosen.method} does not apply to {name}: {chosen.refused}."
    if comparison.design.method == "auto":
        agreed = accepted_words(chosen)
        return f"yes: {chosen.method} is recommended for {name}: {comparison.because}{agreed}."
    if chosen.acceptable:
        agreed = accepted_words(chosen)
        return f"yes: {chosen.method}, which the design names, is within every tolerance{agreed}."
    names = ", ".join(dict.fromkeys(check.check for check in chosen.blocking))
    also = f" Recommended instead: {comparison.recommended}." if comparison.recommended else ""
    return f"no: {chosen.method}, which the design names, is out of tolerance on {names}.{also}"


def setting(comparison: Comparison) -> list[str]:
    """Rate, band and roll-off: what every figure below rests on."""
    period = float(comparison.period_s)
    lines = [f"rate {format_engineering(1 / period, 'Hz')}, period {format_engineering(period, 's')}"]
    lines += [*nominal_note(comparison.design), comparison.band_rests_on]
    causal = comparison.causal
    if causal.proposal is not None:
        origin = "assumed, since the design has no [rolloff]" if causal.assumed else "as the design asks"
        p = causal.proposal
        lines.append(
            f"roll-off ({origin}): {p.placement}, order {p.order}, pole at {hz(float(p.pole_rad_s))}"
            + ("" if p.phase_lost_deg is None else f", {p.phase_lost_deg:.3g} deg lost at the band edge")
        )
        lines += [causal.note] if causal.note else []
        if not p.within_window:
            outside = (
                f"lies outside its window, {window_text(p.window_rad_s)} rad/s" if p.window_rad_s else "has no window"
            )
            lines.append(f"the roll-off pole {outside}: {p.reasons[0]}")
    return lines


def emission_verdict(comparison: Comparison, chosen: MethodResult) -> str:
    """By which method a design is emitted, and why."""
    design = comparison.design
    kept = "but for what is agreed" if chosen.accepted else "every check passed"
    reason = comparison.because if design.method == "auto" else f"named in the design, {kept}"
    return f"yes: {design.name} is emitted by {chosen.method}: {reason}" + accepted_words(chosen)


def stored_words(chosen: MethodResult, design: Design) -> str:
    """What is stored: structure, arithmetic, how many states and sections."""
    stored = chosen.realization
    assert stored is not None
    return (
        f"{stored.structure} structure in {design.target.arithmetic}, "
        f"{count(len(stored.integral), 'integral state')}, {count(len(stored.sections), 'section')}"
    )


def margins_sentences(assessment: Assessment) -> list[str]:
    """What each proposal leaves of the phase margin."""
    return [
        f"{shape_words(p)}: phase margin of the loop {before:.3g} deg before, "
        + ("none" if after is None else f"{after:.3g} deg")
        + " after"
        for p, (before, after) in zip(assessment.proposals, assessment.phase_margins_deg, strict=False)
    ]


def shape_words(p: Proposal) -> str:
    """What kind of roll-off a proposal is."""
    damping = "" if p.damping == 1 else f", damping {float(p.damping):.4g}"
    return f"{p.placement}, order {p.order}{damping}"


def unshown(methods: Sequence[MethodResult]) -> list[str]:
    """What is out but has no column, methods with the same reason together."""
    names: dict[str, list[str]] = {}
    for method in methods:
        for check in method.blocking:
            if check.check in _UNSHOWN:
                names.setdefault(f"out on {check.check}: {check.reason}", []).append(method.method)
    return [f"{', '.join(who)}: {what}" for what, who in names.items()]


def reasons(result: MethodResult) -> list[str]:
    """Words on the checks that a figure alone would leave in doubt."""
    return [f"{c.check}: {c.reason}" for c in result.stored_checks if c.reason and _wants_words(c)]


def _wants_words(check: Check) -> bool:
    """Whether a figure alone would puzzle: not within, or two values that differ by nothing."""
    differ = value_text(check.reference) != value_text(check.obtained)
    return check.verdict != "within" or (check.difference == 0 and differ)


def accepted_sentences(result: MethodResult) -> list[str]:
    """What is out but agreed to, why, and by whom."""
    return [f"{agreed_text(c, a.limit)}: {a.because} ({a.by})" for c, a in result.accepted]
