"""What a target stores, with its checks, whatever its numbers are."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

from realize.arithmetic.realization import Realization
from realize.checks import Check, ContinuousReference, Tolerances, run_checks
from realize.design import Design
from realize.transfer import PulseTransferFunction, TransferFunction
from realize.workflow.causal import signals_of

if TYPE_CHECKING:
    from realize.arithmetic.integer import IntegerRealization

Simulation = Callable[[Sequence[float]], list[float]]


class Stored(NamedTuple):
    """What a target stores.

    Attributes
    ----------
    realization : Realization or IntegerRealization
        The numbers.
    pulse : PulseTransferFunction
        What they are, exactly, in physical units.
    checks : tuple of Check
        Of them, those of the loop apart.
    note : str
        Why this structure; empty where there is no choice.
    """

    realization: Realization | IntegerRealization
    pulse: PulseTransferFunction
    checks: tuple[Check, ...]
    note: str = ""


def checks_of_stored(
    design: Design,
    reference: ContinuousReference,
    as_stored: PulseTransferFunction,
    simulation: Callable[[], Simulation] | None = None,
) -> tuple[Check, ...]:
    """Checks of the stored numbers; without a simulation those of their coefficients."""
    signals, tolerances = signals_of(design), Tolerances.of(design.tolerance)
    simulate = simulation() if simulation and signals.output_range else None
    checks = run_checks(reference, as_stored, "stored", tolerances, signals, simulate=simulate)
    return _with_added_growth(checks, reference.transfer, as_stored)


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
