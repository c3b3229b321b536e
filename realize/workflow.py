"""The whole job in the order a person would do it: causal first, then the methods, the checks, the gate.

Every step is a function from values to values; nothing here prints, and nothing touches the disk.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from fractions import Fraction
from functools import cached_property
from typing import TYPE_CHECKING, Any, NamedTuple

from realize.algebra.enclosure import Unresolved
from realize.arithmetic.formats import FORMATS
from realize.arithmetic.realization import Realization, realization, stored_pulse
from realize.arithmetic.recursion import Recursion
from realize.band import band_edge
from realize.checks import Check, ContinuousReference, Signals, Tolerances, root_notes, run_checks
from realize.design import Accept, Design, Rolloff, require_period
from realize.design.model import LOOP_METHODS
from realize.errors import Refused
from realize.methods import METHODS, Discretization, discretize
from realize.realizability import Assessment, assess
from realize.rolloff import (
    Circumstances,
    Proposal,
    apply_rolloff,
    circumstances,
    proposal_for,
    proposals,
    rolloff_toml,
)
from realize.transfer import PulseTransferFunction, TransferFunction

if TYPE_CHECKING:
    from realize.loop_design import LoopResult, LoopSetting

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


class Causal(NamedTuple):
    """A design with a transfer function that can be discretized.

    Attributes
    ----------
    transfer : TransferFunction
        Proper.
    proposal : Proposal or None
        The roll-off that made it so.
    assumed : bool
        Whether that roll-off is a proposal the design did not ask for.
    note : str
        What is odd about it; may be empty.
    """

    transfer: TransferFunction
    proposal: Proposal | None
    assumed: bool
    note: str = ""


@dataclass(frozen=True)
class MethodResult:
    """What one method made of a design.

    Attributes
    ----------
    method : str
        Its name.
    refused : str or None
        Why it does not apply; then everything below is empty.
    discretization, realization : Discretization, Realization or None
        ``Gd(z)``, and its stored numbers.
    checks : tuple of Check
        On the stored numbers, and on the exact ones where these differ.
    blocking : tuple of Check
        Checks that are out and not covered by an acceptance.
    accepted : tuple of (Check, Accept)
        Checks that are out, and the agreement that covers them.
    notes : tuple of str
        What the user should know.
    loop : LoopResult or None
        The loops around it, where the design has a plant.
    judged_unrounded : bool
        Whether the unrounded numbers were checked too.
    """

    method: str
    refused: str | None
    discretization: Discretization | None = None
    realization: Realization | None = None
    checks: tuple[Check, ...] = ()
    blocking: tuple[Check, ...] = ()
    accepted: tuple[tuple[Check, Accept], ...] = ()
    notes: tuple[str, ...] = ()
    loop: LoopResult | None = None
    judged_unrounded: bool = False

    @property
    def acceptable(self) -> bool:
        """Whether code may be emitted from it."""
        return self.refused is None and not self.blocking

    @property
    def stability(self) -> str | None:
        """``stable``, ``marginal`` or ``unstable``, of the stored numbers."""
        found = next((c for c in self.stored_checks if c.check == "stability"), None)
        return str(found.obtained) if found else None

    @property
    def stored_checks(self) -> tuple[Check, ...]:
        """The checks that decide."""
        return tuple(c for c in self.checks if c.of == "stored")

    @cached_property
    def worst(self) -> tuple[float, Check] | None:
        """Largest ratio of difference to tolerance over the stored checks, and the check it belongs to."""
        ratios = [
            (c.difference / c.tolerance, c)
            for c in self.stored_checks
            if c.difference is not None and c.tolerance and c.verdict != "undefined"
        ]
        return max(ratios, key=lambda pair: pair[0], default=None)


@dataclass(frozen=True)
class Comparison:
    """Every method side by side.

    Attributes
    ----------
    design : Design
        As the user wrote it.
    causal : Causal
        With the roll-off that was needed, if any.
    period_s : Fraction
        Sample period.
    band_rad_s, band_rests_on : Fraction, str
        Band edge, and the sentence that says where it comes from.
    methods : tuple of MethodResult
        In the order of :data:`realize.methods.METHODS`.
    recommended : str or None
        Name of the recommended method.
    because : str
        The reason, or what stands in the way.
    """

    design: Design
    causal: Causal
    period_s: Fraction
    band_rad_s: Fraction
    band_rests_on: str
    methods: tuple[MethodResult, ...]
    recommended: str | None
    because: str

    @property
    def chosen(self) -> MethodResult | None:
        """The method the design names, or the recommended one."""
        name = self.recommended if self.design.method == "auto" else self.design.method
        return next((m for m in self.methods if m.method == name), None)

    @property
    def closest(self) -> MethodResult | None:
        """The chosen method, else the one that came closest to being acceptable."""
        tried = [m for m in self.methods if m.refused is None]
        return self.chosen or min(tried, key=_distance, default=None)

    @property
    def acceptable(self) -> bool:
        """Whether the chosen method may be emitted."""
        return self.chosen is not None and self.chosen.acceptable


def assess_design(design: Design) -> Assessment:
    """Say whether a design is realizable, and what would make it so; with a plant, every pole settled in its loop."""
    assessment = assess(design.transfer, **_circumstances(design))
    if assessment.realizable or design.plant is None:
        return assessment
    from realize.loop_design import phase_margins_deg

    assessment = assessment._replace(proposals=_settled_proposals(design, assessment))
    margins = phase_margins_deg(design, [p.transfer for p in assessment.proposals])
    return assessment._replace(phase_margins_deg=margins)


def _settled_proposals(design: Design, assessment: Assessment) -> tuple[Proposal, ...]:
    """The proposals, each with the pole that its own crossover calls for."""
    if not _follows_crossover(design):
        return assessment.proposals
    settled = [
        _with_rolloff(
            design, Rolloff(p.placement, p.order, p.damping, None, p.phase_budget_deg), assessment.around, assumed=True
        ).proposal
        for p in assessment.proposals
    ]
    return tuple(p for p in settled if p is not None)


def _circumstances(design: Design) -> dict[str, Any]:
    """What roll-off poles are judged by, as far as the design says."""
    signals, tolerances = _signals(design), Tolerances.of(design.tolerance)
    edge, rests_on = _band(design, design.transfer) if _follows_crossover(design) else (design.band_rad_s, None)
    given = {
        "period_s": design.period_s,
        "band_rad_s": edge,
        "band_rests_on": rests_on,
        "converter_step_tolerance_percent": tolerances.exact("converter_step"),
        "input_per_count": signals.input_per_count,
        "output_span": signals.output_span,
        "method": design.method,
    }
    return given | ({"phase_budget_deg": design.rolloff.phase_budget_deg} if design.rolloff else {})


def make_causal(design: Design, *, assume: bool) -> Causal:
    """Apply the roll-off a design asks for, or the best proposal.

    Parameters
    ----------
    assume : bool
        Whether the best proposal may stand in for a missing ``[rolloff]``; else an improper design is refused.

    Raises
    ------
    Refused
        When the design is improper and has no ``[rolloff]``; the message holds the lines to paste.
    RealizeError
        When ``[rolloff]`` does not fit the transfer function.
    """
    transfer, asked = design.transfer, design.rolloff
    if asked is None and transfer.relative_degree >= 0:
        return Causal(transfer, None, assumed=False)
    around = circumstances(transfer, **_circumstances(design))
    if asked is None:
        if not assume:
            raise _improper(assess_design(design))
        best = proposals(transfer, around)[0]
        asked = Rolloff(best.placement, best.order, best.damping, None, best.phase_budget_deg)
        return _with_rolloff(design, asked, around, assumed=True)
    return _with_rolloff(design, asked, around, assumed=False)


def _with_rolloff(design: Design, asked: Rolloff, around: Circumstances, *, assumed: bool) -> Causal:
    """Apply a roll-off; with a plant, an automatic pole follows the crossover that it moves."""

    def proposed(at: Circumstances) -> Proposal:
        return proposal_for(
            design.transfer,
            at,
            placement=asked.placement,
            order=asked.order,
            damping=asked.damping,
            pole_rad_s=asked.pole_rad_s,
        )

    if not _follows_crossover(design) or asked.pole_rad_s is not None:
        proposal = proposed(around)
        return Causal(proposal.transfer, proposal, assumed)
    from realize.loop import settled_pole
    from realize.loop_design import crossover_sentence, plants_of

    def at_crossover(crossover_rad_s: float) -> Circumstances:
        edge = Fraction(crossover_rad_s)
        return around._replace(band_rad_s=edge, band_rests_on=crossover_sentence(edge))

    settled = settled_pole(
        float(around.band_rad_s),
        lambda crossover: proposed(at_crossover(crossover)).pole_rad_s,
        lambda pole: apply_rolloff(
            design.transfer, asked.placement, asked.order or -design.transfer.relative_degree, asked.damping, pole
        ),
        plants_of(design),
    )
    proposal = proposed(at_crossover(settled.crossover_rad_s))
    note = (
        ""
        if settled.converged
        else (
            "the roll-off pole did not settle: each pole moves the crossover to where another is called for; name one "
            "with pole under [rolloff]"
        )
    )
    return Causal(proposal.transfer, proposal, assumed, note)


def _follows_crossover(design: Design) -> bool:
    """Whether the crossover of the loop is the band edge."""
    if design.plant is None or design.band_rad_s is not None:
        return False
    from realize.loop_design import loop_band

    return loop_band(design, design.transfer) is not None


def _improper(assessment: Assessment) -> Refused:
    return Refused(
        "transfer",
        f"not realizable: {assessment.terms[0].text}",
        "as many poles as zeros, or more",
        "add these lines to the design file, or choose another proposal of `realize assess`:\n\n"
        + rolloff_toml(assessment.proposals[0]),
    )


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
    band_rad_s, rests_on = _band(design, causal.transfer)
    reference = ContinuousReference(causal.transfer, period_s, band_rad_s)
    setting = _setting(design, causal.transfer, period_s)
    results = [_result(design, reference, setting, name) for name in names]
    if unrounded_too:
        results = [_with_unrounded(design, reference, result) for result in results]
    while True:
        recommended, because = _recommendation(results)
        place = next((i for i, result in enumerate(results) if result.method == recommended), None)
        if unrounded_too or place is None or results[place].judged_unrounded:
            return Comparison(design, causal, period_s, band_rad_s, rests_on, tuple(results), recommended, because)
        results[place] = _with_unrounded(design, reference, results[place])


def _band(design: Design, controller: TransferFunction) -> tuple[Fraction, str]:
    """Band edge: as the design says, else the crossover of its loop, else as it is assumed."""
    if design.plant is not None and design.band_rad_s is None:
        from realize.loop_design import loop_band

        found = loop_band(design, controller)
        if found is not None:
            return found
    return band_edge(design.transfer, design.period_s, design.band_rad_s)


def _setting(design: Design, controller: TransferFunction, period_s: Fraction) -> LoopSetting | None:
    """The loops; what analyses them is loaded only where there is a plant, which keeps the start short."""
    if design.plant is None:
        return None
    from realize.loop_design import loop_setting

    return loop_setting(design, controller, period_s)


def _result(design: Design, reference: ContinuousReference, setting: LoopSetting | None, name: str) -> MethodResult:
    exact_at, notes = _exact_at(design, reference, name)
    try:
        made = _discretized(design, reference, setting, name, exact_at)
        stored = realization(made.pulse, FORMATS[design.target.arithmetic], design.target.structure)
    except Refused as refusal:
        return MethodResult(name, f"{refusal.where}: {refusal.found}")
    except Unresolved:
        return MethodResult(name, "a coefficient cannot be told from a neighbour at any permitted precision")
    as_stored = stored_pulse(stored)
    checks = _with_added_growth(_checks(design, reference, stored, as_stored), reference.transfer, as_stored)
    loop = setting.result(made.pulse, as_stored) if setting else None
    checks += loop.checks if loop else ()
    blocking, accepted = gate(checks, design.accept)
    notes += made.conversion.notes + root_notes(made.pulse, reference.transfer) + (loop.notes if loop else ())
    return MethodResult(name, None, made, stored, checks, blocking, accepted, notes, loop)


def _with_added_growth(
    checks: tuple[Check, ...], transfer: TransferFunction, stored: PulseTransferFunction
) -> tuple[Check, ...]:
    """Mark the stability check where the stored numbers have more growing poles than the design."""
    own = sum(root.count for root in transfer.poles if root.value.real > 0)
    # |z|^2 - 1 from z - 1, which keeps its digits next to the circle.
    growing = [r for r in stored.poles if 2 * r.value.real + abs(r.value) ** 2 > 0]
    if sum(root.count for root in growing) <= own:
        return checks
    farthest = max(growing, key=lambda root: abs(1 + root.value))
    at = 1 + farthest.value
    reason = f"the stored numbers have a growing pole that the design does not have; the farthest is z = {at:.5g}"
    return tuple(
        replace(c, difference=2.0, reason=reason, verdict="out") if c.check == "stability" and c.of == "stored" else c
        for c in checks
    )


def _discretized(
    design: Design,
    reference: ContinuousReference,
    setting: LoopSetting | None,
    name: str,
    exact_at: Fraction | None,
) -> Discretization:
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


def _checks(
    design: Design,
    reference: ContinuousReference,
    stored: Realization,
    as_stored: PulseTransferFunction,
) -> tuple[Check, ...]:
    """Checks of the stored numbers."""
    signals, tolerances = _signals(design), Tolerances.of(design.tolerance)
    simulate = _simulate(design, stored) if signals.output_range else None
    return run_checks(reference, as_stored, "stored", tolerances, signals, simulate=simulate)


def _with_unrounded(design: Design, reference: ContinuousReference, result: MethodResult) -> MethodResult:
    """Add the checks of the exact numbers that differ in their figure from those of the stored ones."""
    made = result.discretization
    if made is None:
        return result
    tolerances, known = Tolerances.of(design.tolerance), _image_stability(reference, made)
    of_exact = run_checks(reference, made.pulse, "exact", tolerances, _signals(design), known_stability=known)
    by_name = {check.check: check for check in result.checks}
    checks = result.checks + tuple(check for check in of_exact if _differs(check, by_name[check.check]))
    blocking, accepted = gate(checks, design.accept)
    return replace(result, checks=checks, blocking=blocking, accepted=accepted, judged_unrounded=True)


def _simulate(design: Design, stored: Realization) -> Callable[[Sequence[float]], list[float]]:
    """The emitted recursion, cleared before each run."""
    target = design.target
    model = Recursion(stored, design.output.range, target.anti_windup, target.tracking_time_s, target.guard_nonfinite)

    def run(inputs: Sequence[float]) -> list[float]:
        model.clear()
        return model.run(inputs)

    return run


def _image_stability(reference: ContinuousReference, made: Discretization) -> str | None:
    """Stability where the denominator is not rational: those methods map the half plane onto the disc."""
    return None if made.has_exact_denominator else reference.stability


def _differs(exact: Check, stored: Check) -> bool:
    """Whether rounding changed a verdict or the figure people read (five significant digits)."""
    shown = [None if c.difference is None else f"{c.difference:.5g}" for c in (exact, stored)]
    return exact.verdict != stored.verdict or shown[0] != shown[1]


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
        return _is_own_growth(check)
    if agreement.limit is None:
        return check.difference is None or check.check == "saturation recovery"
    return check.difference is not None and Fraction(check.difference) <= agreement.limit


def _is_own_growth(check: Check) -> bool:
    """Whether a failed stability check is about a growing mode of the design, and nothing beyond it."""
    return check.reference == check.obtained and check.difference == 1


def _recommendation(results: Sequence[MethodResult]) -> tuple[str | None, str]:
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


def _distance(result: MethodResult) -> tuple[int, float]:
    """How far from acceptable: lost stability and failures without a figure count before any ratio."""
    return sum(1 for c in result.blocking if not c.tolerance or c.difference is None), _ratio(result)


def _nothing_acceptable(results: Sequence[MethodResult]) -> str:
    tried = [r for r in results if r.refused is None]
    if not tried:
        return f"no method applies: {results[0].refused}"
    closest = min(tried, key=_distance)
    return f"no method is within tolerance; {closest.method} comes closest: {_failures(closest)}"


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
        found = f"{chosen.method} is out of tolerance: {_failures(chosen)}"
        raise Refused("checks", found, allowed, _advice(comparison))
    return chosen


def _failures(result: MethodResult) -> str:
    return "; ".join(dict.fromkeys(_failure(check) for check in result.blocking))


def _failure(check: Check) -> str:
    if check.difference is None or not check.tolerance:
        return f"{check.check}: {check.reason}"
    unit = f" {check.unit}" if check.unit else ""
    where = f"; {check.reason}" if check.check.startswith("loop") else ""
    return f"{check.check} differs by {check.difference:.5g}{unit} (tolerance {check.tolerance:.5g}{unit}){where}"


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
        own = all(_is_own_growth(c) for c in closest.blocking if c.check == "stability")
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


def _signals(design: Design) -> Signals:
    return Signals(design.input.range, design.input.per_count, design.output.range, design.target.tracking_time_s)
