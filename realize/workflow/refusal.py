"""A refusal that says what failed, and what would help."""

from __future__ import annotations

from collections import Counter

from realize.arithmetic.realization import Realization
from realize.design import Design
from realize.errors import Refused
from realize.workflow.compare import compare
from realize.workflow.gate import failures, is_own_growth
from realize.workflow.results import OF_ARITHMETIC, Comparison, MethodResult

_ALLOWED = "every check within its tolerance"

#: What leaves more fraction bits beside the range of an integral, whose state has the same bits in every arithmetic.
_WIDER_INTEGRAL = (
    "a lower sample rate, a coarser per_count of [signals.input], a narrower range of [signals.output], "
    'or arithmetic = "float32"'
)


def refuse_unacceptable(comparison: Comparison) -> MethodResult:
    """The chosen method, or a refusal that says what failed and what would help.

    Raises
    ------
    Refused
        When nothing may be emitted.
    """
    chosen = comparison.chosen
    if chosen is None:
        raise _none_will_do(comparison)
    if chosen.refused is not None:
        advice = _either(_alternative(comparison.design), chosen.advice) or "choose another method"
        raise Refused("[method] name", f"{chosen.method} does not apply: {chosen.refused}", "", advice)
    if chosen.blocking:
        found = f"{chosen.method} is out of tolerance: {failures(chosen)}"
        raise Refused("checks", found + _rounded(chosen), _ALLOWED, _advice(comparison, chosen))
    return chosen


def _none_will_do(comparison: Comparison) -> Refused:
    closest = comparison.closest
    if closest is not None:
        others, advice = _others_refused(comparison)
        found = comparison.because + _rounded(closest) + others
        return Refused("checks", found, _ALLOWED, _either(advice, _advice(comparison, closest)))
    first = comparison.methods[0]
    where, colon, found = str(first.refused).partition(": ")
    if not first.advice or not colon:
        return Refused("checks", comparison.because, "", "`realize compare` shows why each method was refused")
    same = all(each.refused == first.refused for each in comparison.methods)
    others = "" if same else "; no other method applies either (`realize compare` shows why)"
    return Refused(where, found + others, "", first.advice)


def _others_refused(comparison: Comparison) -> tuple[str, str]:
    """Why most of the methods that the target cannot hold do not apply, and what would help; empty for none."""
    refused = [m for m in comparison.methods if m.refused is not None and m.refused.startswith("[target]")]
    if not refused:
        return "", ""
    reason, count = Counter(m.refused for m in refused).most_common(1)[0]
    advice = next(m.advice for m in refused if m.refused == reason)
    return f"; {count} of {len(comparison.methods)} methods do not apply: {reason}", advice


def _either(*advice: str) -> str:
    return "; or ".join(part for part in advice if part)


def _alternative(design: Design) -> str:
    """Another method that would do, in place of the one that the design names."""
    other = compare(design).recommended if design.method != "auto" else None
    return f'name = "{other}" under [method], which is within every tolerance' if other else ""


def _advice(comparison: Comparison, closest: MethodResult) -> str:
    """What would help, from what stands in the way."""
    if _is_by_rounding(closest):
        ways = _WIDER_INTEGRAL if _is_by_integral(closest) else _finer(comparison.design)
        return f"rounding is at fault, not the method: {ways}"
    if any(c.check == "stability" for c in closest.blocking):
        own = all(is_own_growth(c) for c in closest.blocking if c.check == "stability")
        if own:
            return 'where the growing mode is meant, [[accept]] with check = "stability", because and by'
        return _alternative(comparison.design) or "another method, or a higher sample rate"
    if any(c.check == "loop stability" and c.reference != "stable" for c in closest.blocking):
        return (
            "the sign and the gain of [plant]: the loop is not stable before sampling either, and no method mends that"
        )
    coarse = _coarse_count(comparison, closest)
    return (
        _alternative(comparison.design)
        or coarse
        or (
            "a higher sample rate, another method (`realize compare` shows them side by side), "
            "or [[accept]] with a limit and a reason"
        )
    )


def _is_by_rounding(result: MethodResult) -> bool:
    """Whether the unrounded numbers are within every tolerance that the stored ones are out of."""
    unspoilt = {c.check for c in result.checks if c.of == "exact" and c.verdict == "within"}
    return all(c.check in unspoilt or c.check in OF_ARITHMETIC for c in result.blocking)


def _rounded(result: MethodResult) -> str:
    """What rounding to integers changed most, where it is at fault."""
    if result.realization is None or isinstance(result.realization, Realization) or not _is_by_rounding(result):
        return ""
    # Here, because a design in floating point does not need it, and its start is short.
    from realize.arithmetic.integer.proving import worst_rounded

    worst = worst_rounded(result.realization.layout, result.realization.program)
    return f"; {worst}" if worst else ""


def _is_by_integral(result: MethodResult) -> bool:
    """Whether it is the gain of an integral of integers: the highest is the low-frequency gain."""
    if result.realization is None or isinstance(result.realization, Realization):
        return False
    return bool(result.realization.integral) and "low-frequency gain" in {c.check for c in result.blocking}


def _finer(design: Design) -> str:
    """What rounds less."""
    target = design.target
    named = {"auto": [], "delta": ['structure = "auto"']}
    structures = named.get(target.structure, ['structure = "delta" (or "auto")'])
    wider = {"float64": [], "float32": ["float64"], "int16": ["int32", "float32"], "int32": ["float32"]}
    formats = " or ".join(f'"{name}"' for name in wider[target.arithmetic])
    return ", ".join([*structures, *([f"arithmetic = {formats}"] if formats else []), "or a lower sample rate"])


def _coarse_count(comparison: Comparison, closest: MethodResult) -> str:
    """What makes a count of the input smaller beside the output, where it is too large whatever the method."""
    if comparison.causal.proposal is not None or "converter step" not in {c.check for c in closest.blocking}:
        return ""
    return (
        "a finer per_count of [signals.input], a wider range of [signals.output], a smaller gain, "
        "or [[accept]] with a limit and a reason"
    )
