"""Step responses: of the controller itself, and of the loop around it."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from realize.algebra.arrays import distinct
from realize.checks import ContinuousReference
from realize.checks.counterpart import Counterpart
from realize.checks.step import SampledResponse
from realize.loop import LoopReference, StepFigures
from realize.loop.response import Real, Whole
from realize.transfer import PulseTransferFunction

#: Points of a curve: twice what a figure of 600 pixels shows.
_POINTS = 1200

#: Points up to which each one is drawn; beyond, they are closer than half a pixel.
_MOST_SAMPLES = 2400

#: Samples up to which all are looked at.
_ALL_SAMPLES = 100_000

#: Multiples of it, less whole numbers, fill an interval evenly and never in step with an oscillation (Weyl 1916).
_GOLDEN = 0.6180339887498949

#: Samples that are listed.
LISTED = 13

#: Samples that are shown by themselves where the whole response has too many to be told apart.
FIRST_SAMPLES = 16

#: What is shown of a loop beyond its settling, so that its rest can be seen.
_BEYOND_SETTLING = 1.5


class Stretch(NamedTuple):
    """A response over some time.

    Attributes
    ----------
    times_s, design : array
        Of ``G(s)``, from 0+ on.
    sample_times_s, samples : array
        Of the stored ``Gd(z)``; each is held until the next.
    """

    times_s: Real
    design: Real
    sample_times_s: Real
    samples: Real


class StepCurves(NamedTuple):
    """Response of a controller to a unit step.

    Attributes
    ----------
    whole : Stretch
        Over the whole horizon; of a long response the least and the greatest of each part too narrow to be seen.
    first : Stretch
        The first samples.
    listed : Stretch
        Some samples from the first to the last, ever further apart, and the design there.
    """

    whole: Stretch
    first: Stretch
    listed: Stretch


def step_curves(reference: ContinuousReference, stored: PulseTransferFunction) -> StepCurves | None:
    """Over the horizon of the check of step deviation; None where growth within one sample leaves none."""
    response, period_s = reference.step, float(reference.period_s)
    if response.last < 1:
        return None
    # Those that the checks look at hold the extremes.
    looked_at = distinct(np.concatenate([_looked_at(response.last), response.samples]))
    sampled = SampledResponse(Counterpart(stored), looked_at)
    last = int(sampled.samples[-1])

    def stretch(samples: Whole, times: Real) -> Stretch:
        shown = _outline(times, response.at(times)[0])
        held = _outline(samples.astype(np.float64), sampled.at(samples))
        return Stretch(shown[0] * period_s, shown[1], held[0] * period_s, held[1])

    first = np.arange(min(FIRST_SAMPLES, last) + 1)
    listed = distinct(np.round(np.geomspace(1, last + 1, LISTED)).astype(np.int64)) - 1
    return StepCurves(
        stretch(sampled.samples, _with_between(sampled.samples)),
        stretch(first, _with_between(first)),
        stretch(listed, listed.astype(np.float64)),
    )


def _with_between(samples: Whole) -> Real:
    """Samples, and times between them as dense as can be seen."""
    return distinct(np.append(np.linspace(0.0, float(samples[-1]), _POINTS), samples.astype(np.float64)))


def _looked_at(last: int) -> Whole:
    """All samples, or of very many some in every stretch that can be seen, at no fixed distance."""
    if last <= _ALL_SAMPLES:
        return np.arange(last + 1)
    within = (np.arange(_ALL_SAMPLES) + np.modf(np.arange(_ALL_SAMPLES) * _GOLDEN)[0]) / _ALL_SAMPLES
    return distinct(np.floor(within * last).astype(np.int64))


def _outline(times: Real, values: Real) -> tuple[Real, Real]:
    """A curve of many points by the least and the greatest of each stretch, in the order in which they come."""
    if len(times) <= _MOST_SAMPLES:
        return times, values
    stretch = np.floor(times / times[-1] * (_MOST_SAMPLES // 2)).astype(np.int64)
    order = np.lexsort((values, stretch))
    ends = np.flatnonzero(np.diff(stretch[order], prepend=-1))
    lowest, highest = order[ends], order[np.append(ends[1:], len(order)) - 1]
    chosen = distinct(np.concatenate([lowest, highest, [0, len(times) - 1]]))
    return times[chosen], values[chosen]


class LoopCurves(NamedTuple):
    """The plant's output after a unit step of the reference.

    Attributes
    ----------
    continuous : pair of array
        Times in s and values without hold and compute delay.
    sampled : pair of array
        Of the loop with the stored numbers, between the samples too.
    continuous_figures, sampled_figures : StepFigures
        Their peaks and final values, which no curve of some points has to the last digit.
    end_s : float
        End of the axis: both are at rest for a reader, or so many samples are drawn as can be.
    """

    continuous: tuple[Real, Real]
    sampled: tuple[Real, Real]
    continuous_figures: StepFigures
    sampled_figures: StepFigures
    end_s: float


def loop_curves(reference: LoopReference, stored: PulseTransferFunction) -> LoopCurves | None:
    """Of one case of the plant; None where one of the loops has no step that settles."""
    before, after = reference.continuous, reference.sampled(stored)
    figures = before.step, after.step
    if figures[0] is None or figures[1] is None:
        return None
    settled = [f.settling_time_s for f in figures if f is not None and f.settling_time_s is not None]
    if not settled:
        return None
    sampled = after.curve(_BEYOND_SETTLING * max(*settled, float(reference.period_s)))
    if sampled is None:
        return None
    end_s = float(sampled[0][-1])
    continuous = before.curve(end_s)
    assert continuous is not None
    return LoopCurves(_from_start(*continuous), _from_start(*sampled), figures[0], figures[1], end_s)


def _from_start(times_s: Real, values: Real) -> tuple[Real, Real]:
    """With no more points than can be seen; before the first the output is 0."""
    shown = _outline(times_s, values)
    return np.concatenate([[0.0, times_s[0]], shown[0]]), np.concatenate([[0.0, 0.0], shown[1]])
