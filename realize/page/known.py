"""Everything the page is made from, computed once."""

from __future__ import annotations

from functools import cached_property
from typing import TYPE_CHECKING

from realize.arithmetic.realization import Realization, stored_pulse
from realize.checks import ContinuousReference
from realize.design import Design
from realize.errors import Refused
from realize.firmware.job import Emitted, emit, emitted_from
from realize.realizability import Assessment
from realize.transfer import PulseTransferFunction
from realize.workflow import Comparison, MethodResult, assess_design, compare

if TYPE_CHECKING:
    from realize.loop import LoopReference


class Known:
    """A design with all that was found out about it.

    Parameters
    ----------
    design : Design
        With a sample rate.

    Attributes
    ----------
    assessment : Assessment
    comparison : Comparison
    """

    def __init__(self, design: Design) -> None:
        self.design = design
        self.assessment: Assessment = assess_design(design)
        self.comparison: Comparison = compare(design)

    @cached_property
    def shown(self) -> MethodResult | None:
        """The method whose figures are drawn: the one that is emitted, else the closest; None where all were refused.

        Of a schedule that is the method of all points, here at the nominal values.
        """
        found, methods = self.comparison.closest, self.comparison.methods
        if isinstance(self.emitted, Emitted) and self.emitted.schedule is not None:
            found = next((m for m in methods if m.method == self.emitted.chosen.method), None)
        return found if found is not None and found.realization is not None else None

    @cached_property
    def emitted(self) -> Emitted | Refused:
        """The files, or why there are none."""
        causal = self.comparison.causal
        if causal.proposal is not None and causal.assumed:
            return Refused(
                "transfer",
                "it is improper, and the design has no [rolloff]; the figures are those with the first proposal",
                "a [rolloff] in the design file",
                "add the lines that `realize assess` prints",
            )
        try:
            return emitted_from(self.comparison) if self.design.schedule is None else emit(self.design)
        except Refused as refusal:
            return refusal

    @cached_property
    def reference(self) -> ContinuousReference:
        """What was discretized."""
        comparison = self.comparison
        return ContinuousReference(comparison.causal.transfer, comparison.period_s, comparison.band_rad_s)

    @cached_property
    def stored(self) -> PulseTransferFunction:
        """The pulse transfer function of the stored numbers."""
        assert self.shown is not None
        assert self.shown.realization is not None
        realization = self.shown.realization
        if isinstance(realization, Realization):
            return stored_pulse(realization)
        from realize.arithmetic.integer import stored_integer_pulse

        return stored_integer_pulse(realization)

    @cached_property
    def loops(self) -> tuple[LoopReference, ...]:
        """The loops, one a case of the plant; empty without a plant, or with a measured one."""
        if self.design.plant is None:
            return ()
        from realize.loop_design import loop_setting

        setting = loop_setting(self.design, self.comparison.causal.transfer, self.comparison.period_s)
        return () if setting is None else setting.references
