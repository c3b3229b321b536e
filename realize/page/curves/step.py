"""Step responses: of the controller itself, and of the loop around it."""

from __future__ import annotations

from math import ceil
from typing import NamedTuple

import numpy as np

from realize.algebra.arrays import distinct
from realize.checks import ContinuousReference
from realize.checks.counterpart import Counterpart
from realize.checks.step import SampledResponse
from realize.loop import LoopFigures, LoopReference
from realize.loop.response import Real, Whole
from realize.transfer import PulseTransferFunction

#: Points of a curve: twice what a figure of 600 pixels shows.
_POINTS = 1200

#: Samples up to which each one is drawn; beyond, a held sample is narrower than half a pixel.
_MOST_SAMPLES = 1200

#: What is shown of a loop beyond its settling, so that its rest can be seen.
_BEYOND_SETTLING = 1.5


class StepCurves(NamedTuple):
    """Response of a controller to a unit step.

    Attributes
    ----------
    times_s, design : array
        Of ``G(s)``, from 0+ on.
    sample_times_s, samples : array
        Of the stored ``Gd(z)``; each is held until the next.
    period_s : float
    """

    times_s: Real
    design: Real
    sample_times_s: Real
    samples: Real
    period_s: float


def step_curves(reference: ContinuousReference, stored: PulseTransferFunction) -> StepCurves | None:
    """Over the horizon of the check of step deviation; None where growth within one sample leaves none."""
    response, period_s = reference.step, float(reference.period_s)
    if response.last < 1:
        return None
    looked_at = _thinned(response.last)
    sampled = SampledResponse(Counterpart(stored), looked_at)
    last = float(min(response.last, sampled.last))
    at = sampled.samples.astype(float)
    times = distinct(np.append(np.linspace(0.0, last, _POINTS), at))
    return StepCurves(times * period_s, response.at(times)[0], at * period_s, sampled.values, period_s)


def _thinned(last: int) -> Whole:
    return np.arange(0, last + 1, ceil((last + 1) / _MOST_SAMPLES))


class LoopCurves(NamedTuple):
    """The plant's output after a unit step of the reference.

    Attributes
    ----------
    continuous : pair of array
        Times in s and values without hold and compute delay.
    sampled : pair of array
        Of the loop with the stored numbers, between the samples too.
    settled_s : float
        When both are at rest for a reader: the end of the axis.
    """

    continuous: tuple[Real, Real]
    sampled: tuple[Real, Real]
    settled_s: float


def loop_curves(reference: LoopReference, stored: PulseTransferFunction) -> LoopCurves | None:
    """Of one case of the plant; None where one of the loops has no step that settles."""
    loops = reference.continuous, reference.sampled(stored)
    curves = [loop.curve for loop in loops]
    if curves[0] is None or curves[1] is None:
        return None
    end = _BEYOND_SETTLING * max(_settled_s(loop, curve[0]) for loop, curve in zip(loops, curves, strict=True) if curve)
    return LoopCurves(_until(end, *curves[0]), _until(end, *curves[1]), end)


def _settled_s(loop: LoopFigures, times_s: Real) -> float:
    settling = None if loop.step is None else loop.step.settling_time_s
    return float(times_s[-1]) if settling is None else settling


def _until(end_s: float, times_s: Real, values: Real) -> tuple[Real, Real]:
    """Up to a time, with no more points than can be seen; before the first the output is 0."""
    shown = int(np.searchsorted(times_s, end_s, side="right"))
    chosen = distinct(np.append(np.arange(0, shown, ceil(max(shown, 1) / _POINTS)), max(shown - 1, 0)))
    return np.concatenate([[0.0, times_s[0]], times_s[chosen]]), np.concatenate([[0.0, 0.0], values[chosen]])
