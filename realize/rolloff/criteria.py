"""What a roll-off is judged by: band edge, phase budget, converter step, and the method to come."""

from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple, TypedDict, Unpack

from realize.band import band_edge
from realize.errors import RealizeError
from realize.rolloff.figures import decimal_or_quotient
from realize.transfer import TransferFunction

#: Phase a roll-off may take at the band edge, in degrees: of the 30 deg margin a loop must keep at the least,
#: a fifth. Common practice, no source.
PHASE_BUDGET_DEG = Fraction(6)

#: A roll-off that may take a quarter turn at the band edge is no budget: the derivative it filters is gone.
LARGEST_BUDGET_DEG = 90

#: What one input count may do to the output at once, in % of the output span: twenty counts of noise then
#: already drive it from end to end. Common practice, no source.
CONVERTER_STEP_PERCENT = Fraction(5)


class Circumstances(NamedTuple):
    """What a roll-off is judged by; build it with :func:`circumstances`.

    Attributes
    ----------
    band_rad_s : Fraction
        Band edge.
    band_rests_on : str
        The sentence that says where the band edge comes from.
    period_s : Fraction or None
        Sample period.
    phase_budget_deg : Fraction
        Phase the roll-off may take at the band edge.
    converter_step_tolerance_percent : Fraction
        What one input count may do to the output at once, in % of ``output_span``.
    input_per_count, output_span : Fraction or None
        Physical size of one input count, and of the whole output range.
    method : str
        Name of the method the design asks for, or "auto".
    """

    band_rad_s: Fraction
    band_rests_on: str
    period_s: Fraction | None = None
    phase_budget_deg: Fraction = PHASE_BUDGET_DEG
    converter_step_tolerance_percent: Fraction = CONVERTER_STEP_PERCENT
    input_per_count: Fraction | None = None
    output_span: Fraction | None = None
    method: str = "auto"

    @property
    def count_percent(self) -> Fraction | None:
        """What one input count is behind a gain of 1, in % of the output span; ``None`` without the signals."""
        if self.input_per_count is None or self.output_span is None:
            return None
        return 100 * self.input_per_count / self.output_span


class Known(TypedDict, total=False):
    """What a design may say besides its band; each entry as in :class:`Circumstances`, with its default there."""

    period_s: Fraction | None
    phase_budget_deg: Fraction
    converter_step_tolerance_percent: Fraction
    input_per_count: Fraction | None
    output_span: Fraction | None
    method: str


def circumstances(
    transfer: TransferFunction,
    *,
    band_rad_s: Fraction | None = None,
    band_rests_on: str | None = None,
    **known: Unpack[Known],
) -> Circumstances:
    """Collect what a roll-off of ``transfer`` is judged by; the band edge is assumed where none is given.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)`` as the user wrote it.
    band_rad_s : Fraction or None
        Band edge, where the design names one.
    band_rests_on : str or None
        Where that figure comes from, if not from the design itself.
    **known
        ``period_s``, ``phase_budget_deg``, ``converter_step_tolerance_percent``, ``input_per_count``,
        ``output_span`` and ``method`` as in :class:`Circumstances`, as far as the design says.

    Raises
    ------
    RealizeError
        When the phase budget is not above 0 and below 90 deg.
    """
    edge, rests_on = band_edge(transfer, known.get("period_s"), band_rad_s)
    around = Circumstances(edge, band_rests_on or rests_on, **known)
    if not 0 < around.phase_budget_deg < LARGEST_BUDGET_DEG:
        raise RealizeError(
            "[rolloff] phase_budget",
            f"{decimal_or_quotient(around.phase_budget_deg)} deg",
            f"more than 0 deg and less than {LARGEST_BUDGET_DEG} deg",
            f'phase_budget = "{PHASE_BUDGET_DEG} deg", the default',
        )
    return around
