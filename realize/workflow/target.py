"""The numbers that a design's target stores."""

from __future__ import annotations

from realize.arithmetic.formats import FORMATS
from realize.checks import ContinuousReference
from realize.design import Design
from realize.transfer import PulseTransferFunction
from realize.workflow.floats import float_numbers, suiting_floats
from realize.workflow.stored import Stored


def stored_numbers(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction) -> Stored:
    """Round a pulse transfer function to the design's target, and check what is stored.

    Parameters
    ----------
    design : Design
        With its target, signals, tolerances and agreed deviations.
    reference : ContinuousReference
        What the checks compare with.
    pulse : PulseTransferFunction
        ``Gd(z)``, unrounded.

    Raises
    ------
    Refused
        When the target cannot hold it.
    RealizeError
        When an integer target lacks the ranges or sizes of its signals.
    """
    if design.target.arithmetic not in FORMATS:
        # Here, because a design in floating point does not need it, and its start is short.
        from realize.workflow.integers import cheapest_integers

        return cheapest_integers(design, reference, pulse)
    if design.target.structure != "auto":
        return float_numbers(design, reference, pulse, design.target.structure)
    return suiting_floats(design, reference, pulse)
