"""One controller, one case of the plant, one rate: the loops to compare and the figures scripts read.

What depends on the design, the case and the period alone is computed once; every method adds its sampled loop.
"""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property

from realize.loop.continuous import ContinuousLoop, Verdict
from realize.loop.figures import StepFigures
from realize.loop.held import HeldPlant, held_plant
from realize.loop.inversion import continuous_step
from realize.loop.inversion import step_curve as continuous_curve
from realize.loop.jitter import JitterMargin, jitter_margin
from realize.loop.margins import Margins
from realize.loop.measured import MeasuredLoop
from realize.loop.plant import Plant
from realize.loop.response import Real
from realize.loop.sampled import SampledLoop
from realize.loop.simulation import step_curve, step_figures
from realize.transfer import PulseTransferFunction, TransferFunction

#: Ripple between the samples, in % of the final value, from which on it is called hidden: half the band that counts as
#: settled.
HIDDEN_RIPPLE_PERCENT = 1.0

Figures = dict[str, bool | float | None]


class LoopFigures:
    """A loop with its step.

    Attributes
    ----------
    verdict : Verdict or None
        None where stability is not known.
    margins : Margins
    step : StepFigures or None
    """

    def __init__(self, loop: ContinuousLoop | SampledLoop | MeasuredLoop) -> None:
        self.loop = loop

    @cached_property
    def verdict(self) -> Verdict | None:
        """Stability, and how it was decided."""
        return None if isinstance(self.loop, MeasuredLoop) else self.loop.verdict

    @cached_property
    def margins(self) -> Margins:
        """Margins and sensitivity."""
        return self.loop.margins

    @cached_property
    def step(self) -> StepFigures | None:
        """The plant's output after a unit step of the reference."""
        if isinstance(self.loop, SampledLoop):
            return step_figures(self.loop)
        return continuous_step(self.loop) if isinstance(self.loop, ContinuousLoop) else None

    def curve(self, end_s: float) -> tuple[Real, Real] | None:
        """Times in s and values of the plant's output after a unit step of the reference; None where there is no step.

        Between the samples too; see :func:`realize.loop.simulation.step_curve`.
        """
        if isinstance(self.loop, SampledLoop):
            return step_curve(self.loop, end_s)
        return continuous_curve(self.loop, end_s) if isinstance(self.loop, ContinuousLoop) else None

    def document(self) -> Figures:
        """The figures of a loop as JSON documents hold them; None where there is none."""
        margins, step = self.margins, self.step
        return {
            "stable": None if self.verdict is None else self.verdict.is_stable,
            "phase_margin_deg": margins.phase_margin_deg,
            "gain_margin_db": margins.gain_margin_db,
            "gain_reduction_margin_db": margins.gain_reduction_margin_db,
            "delay_margin_s": margins.delay_margin_s,
            "crossover_rad_s": margins.crossover_rad_s,
            "maximum_sensitivity": margins.maximum_sensitivity,
            "step_overshoot_percent": None if step is None else step.overshoot_percent,
        }


class LoopReference:
    """What the sampled loops of one case are compared with.

    Parameters
    ----------
    controller : TransferFunction
        Proper.
    plant : Plant
    period_s : Fraction
    compute_delay_s : Fraction
        From sampling to output.
    """

    def __init__(
        self, controller: TransferFunction, plant: Plant, period_s: Fraction, compute_delay_s: Fraction
    ) -> None:
        self.controller = controller
        self.plant = plant
        self.period_s = period_s
        self.compute_delay_s = compute_delay_s

    @cached_property
    def continuous(self) -> LoopFigures:
        """``C P H`` with the dead time, without hold or compute delay."""
        return LoopFigures(ContinuousLoop(self.controller, self.plant))

    @cached_property
    def delayed(self) -> LoopFigures:
        """The continuous loop with hold and compute delay in it."""
        loop = ContinuousLoop(self.controller, self.plant, hold_s=self.period_s, compute_delay_s=self.compute_delay_s)
        return LoopFigures(loop)

    @cached_property
    def held(self) -> HeldPlant:
        """The plant as the sampled controller sees it."""
        return held_plant(self.plant, self.period_s, self.compute_delay_s)

    def sampled(self, pulse: PulseTransferFunction) -> SampledCase:
        """The loop around one sampled controller."""
        return SampledCase(SampledLoop(pulse, self.held))


class SampledCase(LoopFigures):
    """The sampled loop of one case with one controller."""

    loop: SampledLoop

    def __init__(self, loop: SampledLoop) -> None:
        super().__init__(loop)

    @cached_property
    def jitter(self) -> JitterMargin | None:
        """Sufficient margin of a delay that varies."""
        return jitter_margin(self.loop)

    @property
    def notes(self) -> tuple[str, ...]:
        """What the user should know: modes that sampling loses, ripple that samples do not show."""
        notes = list(self.loop.held.notes)
        ripple = self.step.ripple_percent if self.step else None
        if ripple is not None and ripple > HIDDEN_RIPPLE_PERCENT:
            notes.append(
                f"hidden oscillation: between the samples the output swings {ripple:.3g} % of its final value farther "
                "than the settled samples show"
            )
        return tuple(notes)


def loop_entry(reference: LoopReference, sampled: SampledCase) -> dict[str, str | Figures]:
    """One entry of a method's ``loop``: ``case``, ``continuous``, ``discrete``."""
    return {
        "case": reference.plant.case,
        "continuous": reference.continuous.document(),
        "discrete": sampled.document(),
    }
