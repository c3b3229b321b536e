"""The gate: which failures block, what is recommended, and a refusal that says what would help."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from realize.checks import Check
from realize.design import Accept
from realize.design.model import LOOP_METHODS
from realize.methods import METHODS
from realize.workflow.results import MethodResult, closest_of

#: Near-ties are recommended in this order: the methods people know best first, then the table's order.
TIE_ORDER = (
    "bilinear",
    "ramp-invariant",
    "pole-zero-mapped",
    *(name for name in METHODS if name not in ("bilinear", "ramp-invariant", "pole-zero-mapped")),
    *LOOP_METHODS,
)

#: Worst ratios within 5 % of each other are a tie: the figures behind them are read from grids that fine.
TIE_RATIO = 1.05


def gate(
    checks: Sequence[Check], acceptances: Sequence[Accept]
) -> tuple[tuple[Check, ...], tuple[tuple[Check, Accept], ...]]:
    """Split the checks that are out into those that block and those that an acceptance covers.

    A method that is out by itself blocks even where rounding happens to bring its stored numbers back. Lost stability
    is never covered: only a growing mode that the design itself has may be accepted.
    """
    blocking, accepted = [], []
    for check in checks:
        if check.verdict == "out":
            agreement = next((a for a in acceptances if _covers(a, check)), None)
            if agreement is None:
                blocking.append(check)
            else:
                accepted.append((check, agreement))
    return tuple(blocking), tuple(accepted)


def _covers(agreement: Accept, check: Check) -> bool:
    if agreement.check != check.check:
        return False
    if check.check == "stability":
        return is_own_growth(check)
    if agreement.limit is None:
        return check.difference is None or check.check == "saturation recovery"
    return check.difference is not None and Fraction(check.difference) <= agreement.limit


def is_own_growth(check: Check) -> bool:
    """Whether a failed stability check is about a growing mode of the design, and nothing beyond it."""
    return check.reference == check.obtained and check.difference == 1


def recommendation(results: Sequence[MethodResult]) -> tuple[str | None, str]:
    """The acceptable method with the smallest worst ratio; near-ties by :data:`TIE_ORDER`."""
    acceptable = [r for r in results if r.acceptable]
    if not acceptable:
        return None, _nothing_acceptable(results)
    least = min(_ratio(r) for r in acceptable)
    near = [r for r in acceptable if _ratio(r) <= TIE_RATIO * least]
    best = min(near, key=lambda r: TIE_ORDER.index(r.method))
    if best.worst is None:
        return best.method, "no check has a figure; first in the order of preference"
    ratio, check = best.worst
    reason = f"its worst figure, {check.check}, uses {100 * ratio:.3g} % of its tolerance"
    if len(near) > 1:
        return best.method, f"{reason}; preferred among {len(near)} methods within 5 % of each other"
    if len(acceptable) == 1:
        return best.method, f"{reason}; it is the only acceptable method"
    return best.method, f"{reason}, the least of {len(acceptable)} acceptable methods"


def _ratio(result: MethodResult) -> float:
    return result.worst[0] if result.worst else 0.0


def _nothing_acceptable(results: Sequence[MethodResult]) -> str:
    closest = closest_of(results)
    if closest is None:
        return f"no method applies: {results[0].refused}"
    return f"no method is within tolerance; {closest.method} comes closest: {failures(closest)}"


def failures(result: MethodResult) -> str:
    """What is out, in words; a figure once, as stored where that is out too."""
    return failures_text(result.blocking)


def failures_text(blocking: Sequence[Check]) -> str:
    """What some checks are out by, in words."""
    said: dict[str, str] = {}
    for check in blocking:
        text = _failure(check)
        by_name = check.difference is not None and check.tolerance and not check.check.startswith("loop")
        said.setdefault(check.check if by_name else text, text)
    return "; ".join(said.values())


def _failure(check: Check) -> str:
    if check.difference is None or not check.tolerance:
        return f"{check.check}: {check.reason}"
    unit = f" {check.unit}" if check.unit else ""
    where = f"; {check.reason}" if check.check.startswith("loop") else ""
    return f"{check.check} differs by {check.difference:.5g}{unit} (tolerance {check.tolerance:.5g}{unit}){where}"
