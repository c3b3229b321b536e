"""Causal first: whether a design is realizable, and with which roll-off it becomes so; the band it is judged in."""

from __future__ import annotations

from fractions import Fraction
from typing import Any, NamedTuple

from realize.band import band_edge
from realize.checks import Signals, Tolerances
from realize.design import Design, Rolloff
from realize.errors import Refused
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
from realize.transfer import TransferFunction


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
    signals, tolerances = signals_of(design), Tolerances.of(design.tolerance)
    edge, rests_on = band_of(design, design.transfer) if _follows_crossover(design) else (design.band_rad_s, None)
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


def band_of(design: Design, controller: TransferFunction) -> tuple[Fraction, str]:
    """Band edge: as the design says, else the crossover of its loop, else as it is assumed."""
    if design.plant is not None and design.band_rad_s is None:
        from realize.loop_design import loop_band

        found = loop_band(design, controller)
        if found is not None:
            return found
    return band_edge(design.transfer, design.period_s, design.band_rad_s)


def signals_of(design: Design) -> Signals:
    """What the checks need to know of the signals."""
    return Signals(design.input.range, design.input.per_count, design.output.range, design.target.tracking_time_s)
