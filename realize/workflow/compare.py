"""The whole job in the order a person would do it: causal first, then the methods, the checks, the gate."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from typing import TYPE_CHECKING

from realize.algebra.enclosure import Unresolved
from realize.checks import Check, ContinuousReference, Tolerances, root_notes, run_checks
from realize.design import Design, require_period
from realize.design.model import LOOP_METHODS
from realize.errors import Refused
from realize.methods import METHODS, Discretization, discretize
from realize.transfer import TransferFunction
from realize.workflow.causal import Causal, band_of, make_causal, signals_of
from realize.workflow.gate import gate, recommendation
from realize.workflow.results import Comparison, MethodResult, closest_of
from realize.workflow.target import stored_numbers

if TYPE_CHECKING:
    from realize.loop_design import LoopSetting


def compare(design: Design) -> Comparison:
    """Run every method and every check.

    Raises
    ------
    RealizeError
        When the design has no sample rate, or its ``[rolloff]`` does not fit.
    """
    return _comparison(design, make_causal(design, assume=True), methods_for(design))


def choose(design: Design) -> Comparison:
    """Run what emission needs: the named method alone, or every method where the design leaves it open.

    Raises
    ------
    RealizeError
        As :func:`compare`, and :class:`Refused` when the design is improper and has no ``[rolloff]``.
    """
    names = methods_for(design) if design.method == "auto" else (design.method,)
    return _comparison(design, make_causal(design, assume=False), names, unrounded_too=len(names) == 1)


def methods_for(design: Design) -> tuple[str, ...]:
    """The methods to put side by side: those that know the loop too, where there is one or they are named."""
    named = design.method if design.method in LOOP_METHODS else None
    return tuple(METHODS) + (LOOP_METHODS if design.plant is not None else (named,) if named else ())


def _comparison(design: Design, causal: Causal, names: Sequence[str], *, unrounded_too: bool = True) -> Comparison:
    """Run methods and checks; the unrounded numbers of all of them, or only of those that would be recommended."""
    period_s = require_period(design)
    band_rad_s, rests_on = band_of(design, causal.transfer)
    reference = ContinuousReference(causal.transfer, period_s, band_rad_s)
    setting = loop_setting_of(design, causal.transfer, period_s)
    results = [_result(design, reference, setting, name) for name in names]
    if unrounded_too:
        results = [with_unrounded(design, reference, result) for result in results]
    while True:
        recommended, because = recommendation(results)
        # Where none is acceptable, whether method or rounding is at fault shows in the closest.
        judged = next((r for r in results if r.method == recommended), None) or closest_of(results)
        place = None if judged is None else results.index(judged)
        if unrounded_too or place is None or results[place].judged_unrounded:
            return Comparison(design, causal, period_s, band_rad_s, rests_on, tuple(results), recommended, because)
        results[place] = with_unrounded(design, reference, results[place])


def loop_setting_of(design: Design, controller: TransferFunction, period_s: Fraction) -> LoopSetting | None:
    """The loops; what analyses them is loaded only where there is a plant, which keeps the start short."""
    if design.plant is None:
        return None
    from realize.loop_design import loop_setting

    return loop_setting(design, controller, period_s)


def _result(design: Design, reference: ContinuousReference, setting: LoopSetting | None, name: str) -> MethodResult:
    try:
        made = discretized(design, reference, setting, name)
        stored = stored_numbers(design, reference, made.pulse)
    except Refused as refusal:
        return MethodResult(name, f"{refusal.where}: {refusal.found}", advice=refusal.advice)
    except Unresolved:
        return MethodResult(name, "a coefficient cannot be told from a neighbour at any permitted precision")
    loop = setting.result(made.pulse, stored.pulse) if setting else None
    checks = stored.checks + (loop.checks if loop else ())
    blocking, accepted = gate(checks, design.accept)
    notes = _exact_at(design, reference, name)[1]
    notes += made.conversion.notes + root_notes(made.pulse, reference.transfer) + (loop.notes if loop else ())
    notes += (stored.note,) if stored.note else ()
    return MethodResult(name, None, made, stored.realization, checks, blocking, accepted, notes, loop)


def discretized(
    design: Design, reference: ContinuousReference, setting: LoopSetting | None, name: str
) -> Discretization:
    """``Gd(z)`` by one method.

    Raises
    ------
    Refused
        When the method does not apply.
    """
    exact_at, _ = _exact_at(design, reference, name)
    if name not in LOOP_METHODS:
        return discretize(reference.transfer, reference.period_s, name, exact_at)
    from realize.loop_design import Band, loop_method

    band = Band(reference.transfer, reference.period_s, reference.band_rad_s)
    return loop_method(name, setting, band, design)


def _exact_at(design: Design, reference: ContinuousReference, name: str) -> tuple[Fraction | None, tuple[str, ...]]:
    """Where prewarping is exact: as the design says, else at the band edge."""
    if name != "bilinear-prewarped":
        return None, ()
    if design.exact_at_rad_s is not None:
        return design.exact_at_rad_s, ()
    return reference.band_rad_s, ("exact at the band edge, since the design names no exact_at",)


def with_unrounded(design: Design, reference: ContinuousReference, result: MethodResult) -> MethodResult:
    """Add the checks of the exact numbers that differ in their figure from those of the stored ones."""
    made = result.discretization
    if made is None:
        return result
    tolerances, known = Tolerances.of(design.tolerance), _image_stability(reference, made)
    of_exact = run_checks(reference, made.pulse, "exact", tolerances, signals_of(design), known_stability=known)
    by_name = {check.check: check for check in result.checks}
    checks = result.checks + tuple(check for check in of_exact if _differs(check, by_name[check.check]))
    blocking, accepted = gate(checks, design.accept)
    return replace(result, checks=checks, blocking=blocking, accepted=accepted, judged_unrounded=True)


def _image_stability(reference: ContinuousReference, made: Discretization) -> str | None:
    """Stability where the denominator is not rational: those methods map the half plane onto the disc."""
    return None if made.has_exact_denominator else reference.stability


def _differs(exact: Check, stored: Check) -> bool:
    """Whether rounding changed a verdict or the figure people read (five significant digits)."""
    shown = [None if c.difference is None else f"{c.difference:.5g}" for c in (exact, stored)]
    return exact.verdict != stored.verdict or shown[0] != shown[1]
