"""A refusal that says what failed, and what would help."""

from __future__ import annotations

from realize.design import Design
from realize.errors import Refused
from realize.workflow.compare import compare
from realize.workflow.gate import failures, is_own_growth
from realize.workflow.results import Comparison, MethodResult


def refuse_unacceptable(comparison: Comparison) -> MethodResult:
    """The chosen method, or a refusal that says what failed and what would help.

    Raises
    ------
    Refused
        When nothing may be emitted.
    """
    chosen, allowed = comparison.chosen, "every check within its tolerance"
    if chosen is None:
        raise Refused("checks", comparison.because, allowed, _advice(comparison))
    if chosen.refused is not None:
        advice = _alternative(comparison.design) or "choose another method"
        raise Refused("[method] name", f"{chosen.method} does not apply: {chosen.refused}", "", advice)
    if chosen.blocking:
        found = f"{chosen.method} is out of tolerance: {failures(chosen)}"
        raise Refused("checks", found, allowed, _advice(comparison))
    return chosen


def _alternative(design: Design) -> str:
    """Another method that would do, in place of the one that the design names."""
    other = compare(design).recommended if design.method != "auto" else None
    return f'name = "{other}" under [method], which is within every tolerance' if other else ""


def _advice(comparison: Comparison) -> str:
    """What would help, from what stands in the way."""
    closest = comparison.closest
    if closest is None:
        return "`realize compare` shows why each method was refused"
    if any(c.check == "stability" for c in closest.blocking):
        own = all(is_own_growth(c) for c in closest.blocking if c.check == "stability")
        if own:
            return 'where the growing mode is meant, [[accept]] with check = "stability", because and by'
        return _alternative(comparison.design) or "another method, or a higher sample rate"
    if any(c.check == "loop stability" and c.reference != "stable" for c in closest.blocking):
        return (
            "the sign and the gain of [plant]: the loop is not stable before sampling either, and no method mends that"
        )
    unspoilt = {c.check for c in closest.checks if c.of == "exact" and c.verdict == "within"}
    if all(c.check in unspoilt for c in closest.blocking):
        wider = 'arithmetic = "float64", or ' if comparison.design.target.arithmetic == "float32" else ""
        return f"rounding is at fault, not the method: {wider}a lower sample rate"
    return _alternative(comparison.design) or (
        "a higher sample rate, another method (`realize compare` shows them side by side), "
        "or [[accept]] with a limit and a reason"
    )
