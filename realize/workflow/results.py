"""What the methods made of a design, side by side."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from typing import TYPE_CHECKING

from realize.arithmetic.realization import Realization
from realize.checks import Check
from realize.design import Accept, Design
from realize.methods import Discretization
from realize.workflow.causal import Causal

if TYPE_CHECKING:
    from realize.arithmetic.integer import IntegerRealization
    from realize.loop_design import LoopResult


#: Checks that judge how numbers are stored: they may block a method, but recommend none.
OF_ARITHMETIC = ("round-off",)


@dataclass(frozen=True)
class MethodResult:
    """What one method made of a design.

    Attributes
    ----------
    method : str
        Its name.
    refused : str or None
        Why it does not apply; then everything below is empty.
    discretization, realization : Discretization, Realization or IntegerRealization; or None
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
    advice : str
        What to try where it does not apply; may be empty.
    """

    method: str
    refused: str | None
    discretization: Discretization | None = None
    realization: Realization | IntegerRealization | None = None
    checks: tuple[Check, ...] = ()
    blocking: tuple[Check, ...] = ()
    accepted: tuple[tuple[Check, Accept], ...] = ()
    notes: tuple[str, ...] = ()
    loop: LoopResult | None = None
    judged_unrounded: bool = False
    advice: str = ""

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
            if c.difference is not None and c.tolerance and c.verdict != "undefined" and c.check not in OF_ARITHMETIC
        ]
        return max(ratios, key=lambda pair: pair[0], default=None)

    @property
    def distance(self) -> tuple[int, float, int]:
        """How far from acceptable: failures without a figure (lost stability), then the worst ratio, then how many."""
        without_figure = sum(1 for c in self.blocking if not c.tolerance or c.difference is None)
        return without_figure, self.worst[0] if self.worst else 0.0, len(self.blocking)


def closest_of(results: Sequence[MethodResult]) -> MethodResult | None:
    """The one that came closest to being acceptable; None where every method was refused."""
    return min((r for r in results if r.refused is None), key=lambda r: r.distance, default=None)


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
        return self.chosen or closest_of(self.methods)

    @property
    def acceptable(self) -> bool:
        """Whether the chosen method may be emitted."""
        return self.chosen is not None and self.chosen.acceptable
