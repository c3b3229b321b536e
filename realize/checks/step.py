"""The checks ``step deviation`` and ``step overshoot``.

The design's response is :class:`realize.checks.response.StepResponse`; the counterpart's is looked at on the same
samples, and more closely around its own extremes. Both are figures measured to rounding at what is looked at.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cached_property
from math import floor, inf

import numpy as np

from realize.algebra.arrays import distinct
from realize.checks.chain import Chain, Motion, Real, Whole, read
from realize.checks.check import Asked, Check
from realize.checks.counterpart import Counterpart
from realize.checks.modes import logarithm
from realize.checks.response import MOST_GROWTH, StepResponse
from realize.checks.schur import STABLE, UNSTABLE
from realize.checks.tolerances import Tolerances
from realize.quantity import format_engineering

#: Parts into which the stretch around an extreme is divided until it is down to neighbouring samples.
_PARTS = 32


class SampledResponse:
    """The response of the counterpart to a unit step at sample 0.

    Parameters
    ----------
    counterpart : Counterpart
        ``Gd`` in factors.
    samples : array
        Where it is looked at first, ascending.

    Attributes
    ----------
    last : float
        Last sample at which a growing response still is a double; infinite for others.
    samples : array
        Those up to ``last``.
    final : float
        Limit of the response where the counterpart is stable.
    """

    def __init__(self, counterpart: Counterpart, samples: Whole) -> None:
        chain = Chain(counterpart.gain, counterpart.zeros, [*counterpart.poles, 0j])
        self._motion = Motion(chain.a, 0)
        self._start, self._read = chain.b[:, None], chain.c
        growth = max((logarithm(pole).real for pole in counterpart.poles), default=0.0)
        self.last = floor(MOST_GROWTH / growth) if growth > 0 else inf
        self.samples = samples[samples <= self.last]
        self.final = counterpart.gain if counterpart.k == 0 else 0.0

    @cached_property
    def values(self) -> Real:
        """Values at :attr:`samples`."""
        return self.at(self.samples)

    def at(self, samples: Whole) -> Real:
        """Values at some samples."""
        start = np.repeat(self._start, len(samples), axis=1)
        return read(self._read, self._motion.moved(start, samples))


def check_deviation(
    design: StepResponse, sampled: SampledResponse, period_s: float, of: str, tolerances: Tolerances
) -> Check:
    """Greatest distance of ``yd[k]`` from what the design passes through over the period after sample k.

    Notes
    -----
    A sampled system cannot know where in a period the step fell: ``yd[k]`` may be any value that ``y(t)`` takes over
    ``[kT, (k+1)T]``, from ``y(0+)`` on. In % of the greatest ``|y|`` over the horizon, which is 7 time constants of the
    slowest decaying pole, 10 periods where a pair is undamped, at most ``7/Re p`` where a pole grows, and at least
    20 samples.
    """
    asked = Asked("step deviation", of, "%", float(tolerances.exact("step_deviation")))
    if design.last < 0:
        return asked.undefined("the design grows too much within one sample for its response to be followed")
    count = len(sampled.samples)
    distances = _distance(sampled.values, tuple(bound[:count] for bound in design.bounds))

    def measure(at: Whole) -> Real:
        return _distance(sampled.at(at), design.bounds_after(at))

    k = _greatest(sampled.samples, distances, measure)
    at = np.array([k])
    value, (low, high) = float(sampled.at(at)[0]), (float(b[0]) for b in design.bounds_after(at))
    nearest = min(max(value, low), high)
    where = f"greatest at sample {k}, {format_engineering(k * period_s, 's')} after the step"
    if value == nearest:
        where = "no sample leaves what the design passes through over the period that follows"
    horizon = format_engineering(design.last * period_s, "s")
    reason = f"{where}; in % of {design.size:.5g}, the greatest value within {horizon}"
    if sampled.last < inf:
        reason += "; the response grows without bound"
    return asked.measured(nearest, value, 100 * abs(value - nearest) / design.size, reason)


def check_overshoot(
    design: StepResponse,
    sampled: SampledResponse,
    classes: tuple[str, str],
    k: int,
    period_s: float,
    of: str,
    tolerances: Tolerances,
) -> Check:
    """Peak of the counterpart against the peaks that sampling the design can show.

    Parameters
    ----------
    classes : pair of str
        Stability of the design and of its counterpart.
    k : int
        Zeros minus poles of the design at the origin.

    Notes
    -----
    With c the true peak over ``t >= 0+`` in the direction of the final value, and s the least that the samples on
    either side of it show over all phases of sampling, the difference is the distance of the counterpart's peak from
    ``[s, c]``; each in % of the design's final value. Shown are the peaks beyond 100 %.
    """
    asked = Asked("step overshoot", of, "%", float(tolerances.exact("step_overshoot")))
    if classes[0] != STABLE:
        kind = "grows" if classes[0] == UNSTABLE else "integrates, or rings without end"
        return asked.undefined(f"the design {kind}, so there is no final value")
    if k:
        return asked.undefined("the final value is 0")
    highest = 100 * design.peak.value
    asked = Asked("step overshoot", of, "%", tolerances.step_overshoot(highest))
    if classes[1] != STABLE:
        return asked.failed(highest - 100, None, f"the counterpart is {classes[1]} and does not settle")
    least = 100 * design.least_sampled_peak
    peak = 100 * _sampled_peak(design, sampled)
    reason = (
        f"samples of the design show {least - 100:.5g} to {highest - 100:.5g} % of overshoot, "
        f"by where in a period the step falls; {_when(design.peak.at_samples, period_s)}"
    )
    return asked.measured(highest - 100, peak - 100, max(peak - highest, least - peak, 0.0), reason)


def _sampled_peak(design: StepResponse, sampled: SampledResponse) -> float:
    """Highest sample in the direction of the design's final value, in units of it."""

    def measure(at: Whole) -> Real:
        return sampled.at(at) / design.final

    k = _greatest(sampled.samples, sampled.values / design.final, measure)
    near = np.append(design.samples_around_peak, k)
    return max(float(measure(near).max()), sampled.final / design.final)


def _greatest(samples: Whole, figures: Real, measure: Callable[[Whole], Real]) -> int:
    """Sample with the greatest figure, looked for between the neighbours of the greatest one known."""
    i = int(np.argmax(figures))
    best, figure = int(samples[i]), float(figures[i])
    first, last = int(samples[max(0, i - 1)]), int(samples[min(len(samples) - 1, i + 1)])
    while last - first > 2:
        between = distinct(np.linspace(first, last, _PARTS + 1).astype(np.int64))
        measured = measure(between)
        i = int(np.argmax(measured))
        if measured[i] > figure:
            best, figure = int(between[i]), float(measured[i])
        first, last = int(between[max(0, i - 1)]), int(between[min(len(between) - 1, i + 1)])
    return best


def _distance(values: Real, bounds: tuple[Real, ...]) -> Real:
    low, high = bounds
    return np.maximum(np.maximum(low - values, values - high), 0.0)


def _when(at_samples: float, period_s: float) -> str:
    if at_samples == inf:
        return "the design does not overshoot"
    return f"the design's peak comes {format_engineering(at_samples * period_s, 's')} after the step"
