"""Ways to make a transfer function proper, each with its price: those worth considering, and the one asked for."""

from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple

from realize.errors import RealizeError
from realize.rolloff.case import Case, cases, check_asked, shapes
from realize.rolloff.converter import step_percent
from realize.rolloff.criteria import PHASE_BUDGET_DEG, Circumstances
from realize.rolloff.figures import decimal_or_quotient, finite_figure
from realize.rolloff.filters import apply_rolloff
from realize.rolloff.gain import highest_gain
from realize.rolloff.phase import phase_lost_deg
from realize.rolloff.ways_out import ways_out
from realize.rolloff.window import automatic_pole, reasons, window_of
from realize.transfer import TransferFunction


class Proposal(NamedTuple):
    """One way to make a transfer function proper, and its price.

    Attributes
    ----------
    placement : str
        "derivative": the filter acts on the improper part alone; "whole": on everything.
    order : int
        Number of roll-off poles.
    damping : Fraction
        Damping ratio of a pair; 1 for equal real poles.
    pole_rad_s : Fraction
        Natural frequency of the roll-off poles.
    phase_budget_deg : Fraction
        The budget the window was drawn with.
    transfer : TransferFunction
        The proper result, exactly.
    phase_lost_deg : float or None
        Phase of ``C`` minus phase of the result at the band edge, positive where the roll-off lags; ``None``
        where ``C`` is zero there and has no phase.
    high_frequency_gain : float or None
        Supremum of the result's gain from the band edge up, which is its limit at infinity where the gain
        rises towards it; ``None`` where an undamped pair makes it infinite.
    converter_step_percent : float or None
        What one input count does to the output at once, in % of the output span. With just enough poles to
        be proper: the limit of the gain at infinity. With more: the gain at s = 2/T, which is what bilinear
        feeds through. ``None`` without the signals, or without the rate it needs.
    window_rad_s : tuple or None
        Slowest and fastest pole (``None`` for no limit); ``None`` when the window is empty.
    within_window : bool
        Whether the pole lies in the window.
    reasons : tuple of str
        What sets either end of the window; the ways out when it is empty.
    """

    placement: str
    order: int
    damping: Fraction
    pole_rad_s: Fraction
    phase_budget_deg: Fraction
    transfer: TransferFunction
    phase_lost_deg: float | None
    high_frequency_gain: float | None
    converter_step_percent: float | None
    window_rad_s: tuple[float, float | None] | None
    within_window: bool
    reasons: tuple[str, ...]

    @property
    def relative_degree(self) -> int:
        """Degree of the result's denominator minus that of its numerator."""
        return self.transfer.relative_degree


def proposals(transfer: TransferFunction, around: Circumstances) -> tuple[Proposal, ...]:
    """Every roll-off worth considering, best first.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)`` as the user wrote it.
    around : Circumstances
        What the proposals are judged by.

    Returns
    -------
    tuple of Proposal
        Empty for a proper transfer function. Else both placements, with as many poles as make it proper and
        one more, and every two poles also as a pair of damping ratio 0.7071. First those within their window;
        then fewer poles, the derivative alone, equal poles.
    """
    excess = -transfer.relative_degree
    if excess <= 0:
        return ()
    found = [
        _proposal(case, None)
        for placement in ("derivative", "whole")
        for case in cases(transfer, around, placement, shapes(excess))
    ]
    return tuple(sorted(found, key=_rank))


def proposal_for(
    transfer: TransferFunction,
    around: Circumstances,
    *,
    placement: str = "derivative",
    order: int | None = None,
    damping: Fraction = Fraction(1),
    pole_rad_s: Fraction | None = None,
) -> Proposal:
    """Price the roll-off a design asks for.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)`` as the user wrote it.
    around : Circumstances
        What it is judged by.
    placement : str
        "derivative" or "whole".
    order : int or None
        Number of poles; ``None`` for as many as make it proper.
    damping : Fraction
        Damping ratio of two poles, above 0 and at most 1.
    pole_rad_s : Fraction or None
        Natural frequency of the poles; ``None`` for the low end of the window, rounded up to three digits.
        Outside the window it is priced all the same.

    Raises
    ------
    RealizeError
        When the transfer function is proper already, or a key of ``[rolloff]`` does not fit it.
    """
    excess = -transfer.relative_degree
    if excess <= 0:
        raise RealizeError(
            "[rolloff]",
            f"the transfer function is proper already (relative degree {-excess})",
            "a [rolloff] table for an improper transfer function only",
            "remove the table, or write the extra poles into the transfer itself",
        )
    order = excess if order is None else order
    check_asked(transfer, placement, order, damping, pole_rad_s)
    (case,) = cases(transfer, around, placement, ((order, damping),))
    return _proposal(case, pole_rad_s)


def rolloff_toml(proposal: Proposal) -> str:
    """Lines for the design file that reproduce a proposal.

    Parameters
    ----------
    proposal : Proposal
        Its pole is written exactly.
    """
    lines = ["[rolloff]", f'placement = "{proposal.placement}"', f"order = {proposal.order}"]
    lines += [f"damping = {decimal_or_quotient(proposal.damping)}"] if proposal.order == 2 else []
    lines += [f'pole = "{decimal_or_quotient(proposal.pole_rad_s)} rad/s"']
    if proposal.phase_budget_deg != PHASE_BUDGET_DEG:
        lines += [f'phase_budget = "{decimal_or_quotient(proposal.phase_budget_deg)} deg"']
    return "\n".join(lines) + "\n"


def _proposal(case: Case, pole_rad_s: Fraction | None) -> Proposal:
    """Price a case with its pole as asked, or else as slow as its window allows."""
    window = window_of(case)
    pole = automatic_pole(window.low.pole_rad_s, window.high.pole_rad_s) if pole_rad_s is None else pole_rad_s
    transfer = apply_rolloff(case.transfer, case.placement, case.order, case.damping, pole)
    step = step_percent(case, pole)
    return Proposal(
        case.placement,
        case.order,
        case.damping,
        pole,
        case.around.phase_budget_deg,
        transfer,
        phase_lost_deg(case, float(case.around.band_rad_s / pole)),
        highest_gain(transfer, case, pole),
        None if step is None else finite_figure(step),
        window.ends_rad_s,
        window.holds(pole),
        reasons(case, window, pole) + (() if window.is_open else ways_out(case, window)),
    )


def _rank(proposal: Proposal) -> tuple[bool, int, bool, bool]:
    return (
        not proposal.within_window,
        proposal.order,
        proposal.placement != "derivative",
        proposal.damping != 1,
    )
