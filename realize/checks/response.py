"""The step response of the design, looked at through sample periods.

Time is counted in samples. What is looked at, and how densely: every sample up to 1500; beyond, the first 256, then
times in steps of 2 %, and for every oscillating mode, while it lives, one whole cycle of 16 points again and again,
25 % later each time; both in wider steps where that would be more than 500 times and 2000 points; and the samples
next to every extreme that lies between those. Within a sample, four points per radian of the fastest live mode, as
far as the bounds below allow; between points that close, extremes come from the cubic through values and slopes.

Poles are right to a double's precision, so after x radians of an oscillation its phase is right to 1e-16 x.
"""

from __future__ import annotations

from functools import cached_property
from math import ceil, floor, inf, log, log2, pi
from typing import NamedTuple

import numpy as np

from realize.algebra.arrays import distinct
from realize.checks.chain import Chain, Motion, Real, Whole, read

#: Time constants of the slowest decaying pole that are followed: exp(-7) is a thousandth, a tenth of the tolerance.
TIME_CONSTANTS = 7

#: Periods of an undamped pair that are followed.
UNDAMPED_PERIODS = 10

#: Samples that are followed at the least.
LEAST_SAMPLES = 20

#: Growth up to which a response is followed, as an exponent: squares of ``exp(300)`` still are doubles.
MOST_GROWTH = 300

#: A mode is over when it has decayed by exp(-36), the resolution of a double.
_LIFETIME = 36

#: Up to here every sample is looked at.
_ALL_SAMPLES = 1500

#: Beyond: first samples, ratio of successive times, and most times.
_FIRST_SAMPLES = 256
_TIME_RATIO = 1.02
_MOST_TIMES = 500

#: Points in a cycle of an oscillating mode (a peak between two of them is missed by at most 1 - cos(pi/16) = 2 %
#: of the mode before it is refined), ratio of the times at which cycles are looked at, and most points in all.
_CYCLE_POINTS = 16
_CYCLE_RATIO = 1.25
_MOST_CYCLE_POINTS = 2000

#: Most parts a sample is divided into, and most points within samples altogether.
_MOST_DIVISIONS = 64
_MOST_POINTS = 16384

#: A cubic through values and slopes h apart misses a mode p by (|p| h)^4/384 of its size: 1e-5 at a quarter, the usual
#: case; where points are farther apart than 1 the ends alone count.
_RESOLVED = 1.0
_POINTS_PER_RADIAN = 4

#: |p| h at which that error, 3e-15, is down to rounding.
_FINE = 1e-3

#: Parts into which a bracket is divided on the way there.
_PARTS = 16

#: The finest step of time is at most ``2**-_LEAST_DEPTH`` samples.
_LEAST_DEPTH = 24

#: Peaks that are refined: the highest as far as the cubics tell.
_REFINED_PEAKS = 8


class Peak(NamedTuple):
    """The highest value of a response in the direction of its final value, in units of it."""

    value: float
    at_samples: float


class StepResponse:
    """The response of the design to a unit step at time 0, from 0+ on.

    Parameters
    ----------
    gain : float
        Low-frequency gain: limit of ``s^-k G``; the final value where k = 0 and G is stable.
    zeros, poles : sequence of complex
        Every one by itself, in rad/s.
    period_s : float
        Sample period.

    Attributes
    ----------
    last : int
        Last sample of the horizon; -1 when growth within one sample leaves none.
    """

    def __init__(self, gain: float, zeros: list[complex], poles: list[complex], period_s: float) -> None:
        chain = Chain(gain, zeros, [*poles, 0j])
        self._motion = Motion.continuous(chain.a, period_s, _LEAST_DEPTH)
        self._start = chain.b[:, None]
        self._read = chain.c, period_s * (chain.c @ chain.a)
        modes = sorted({complex(p.real, abs(p.imag)) for p in poles if p}, key=abs)
        self._rates = [abs(p) * period_s for p in modes]
        self._decays = [-p.real * period_s for p in modes]
        self._cycles = [2 * pi / (p.imag * period_s) if p.imag else inf for p in modes]
        self.final = gain
        self.last = _horizon(modes, period_s)

    def at(self, times: Real) -> tuple[Real, Real]:
        """Value, and slope per sample, at times in samples."""
        whole = np.floor(times)
        start = np.repeat(self._start, len(times), axis=1)
        states = self._motion.moved(start, whole.astype(np.int64), times - whole)
        value, slope = (read(row, states) for row in self._read)
        return value, slope

    @cached_property
    def samples(self) -> Whole:
        """The samples that are looked at, ascending."""
        if self.last <= _ALL_SAMPLES:
            return np.arange(self.last + 1)
        spread = _spread(self.last, _TIME_RATIO, _MOST_TIMES)
        samples = self._known(np.arange(_FIRST_SAMPLES), spread, spread + 1, *self._cycle_samples())
        extremes = np.floor(_Grid(self, samples).extremes).astype(np.int64)
        return self._known(samples, extremes - 1, extremes, extremes + 1)

    @cached_property
    def bounds(self) -> tuple[Real, Real]:
        """Least and greatest value over the period that follows each of :attr:`samples`."""
        return self._grid.bounds_after(self.samples)

    @cached_property
    def size(self) -> float:
        """Greatest ``|y|`` over the horizon."""
        low, high = self.bounds
        return float(max(high.max(), -low.min()))

    def bounds_after(self, samples: Whole) -> tuple[Real, Real]:
        """Least and greatest value over the period that follows each of some samples, ends included."""
        return _Grid(self, samples).bounds_after(samples)

    @cached_property
    def peak(self) -> Peak:
        """Where the response is highest over ``t >= 0+``; the final value counts, at an infinite time.

        Only for a stable design with a final value other than 0.
        """
        start = float(self.at(np.zeros(1))[0][0]) / self.final
        best = max(Peak(1.0, inf), Peak(start, 0.0), self._highest(*self._grid.peaks(self.final)))
        return self._among_cycles(best) if self.last > _ALL_SAMPLES and best.at_samples < inf else best

    @cached_property
    def least_sampled_peak(self) -> float:
        """The least, over all phases of sampling, of the greater of the two samples on either side of the peak.

        In units of the final value, which counts too.
        """
        if self.peak.at_samples == inf:
            return 1.0
        first, last = 0.0, 1.0
        for parts in (4 * _PARTS, *(_PARTS,) * 4):
            ahead = first + (last - first) * np.arange(parts + 1) / parts
            before = self.peak.at_samples - ahead
            times = np.append(np.maximum(before, 0.0), before + 1)
            value = (self.at(times)[0] / self.final).reshape(2, -1)
            # Before the step there is no sample.
            seen = np.where(before >= 0, np.maximum(*value), value[1])
            i = int(np.argmin(seen))
            first, last = ahead[max(0, i - 1)], ahead[min(parts, i + 1)]
        return max(1.0, float(seen.min()))

    @cached_property
    def samples_around_peak(self) -> Whole:
        """Samples next to the peak, and within a cycle of the fastest oscillation that is live there."""
        at = self.peak.at_samples
        if at == inf:
            return np.arange(0)
        cycle = self._live_cycle(at)
        times = at + np.append(np.arange(-1, 3), cycle * (np.arange(33) / 32 - 0.5) if cycle < inf else [])
        return distinct(np.maximum(np.floor(times), 0).astype(np.int64))

    def rate(self, times: Real) -> Real:
        """Rate of the fastest live mode, in radians per sample."""
        rate = np.zeros(len(times))
        for fast, decay in zip(self._rates, self._decays, strict=True):
            rate[times * decay < _LIFETIME] = fast
        return rate

    @cached_property
    def _grid(self) -> _Grid:
        return _Grid(self, self.samples)

    def _known(self, *parts: Whole) -> Whole:
        """Samples of the horizon among some, ascending."""
        samples = distinct(np.concatenate(parts))
        return samples[(samples >= 0) & (samples <= self.last)]

    def _cycle_samples(self) -> list[Whole]:
        """One cycle of each oscillating mode, again and again while it lives."""
        cycles = [(c, d) for c, d in zip(self._cycles, self._decays, strict=True) if c < self.last]
        chosen = []
        for cycle, decay in cycles:
            end = min(self.last, _LIFETIME / decay if decay > 0 else inf)
            starts = _spread(end, _CYCLE_RATIO, _MOST_CYCLE_POINTS // (_CYCLE_POINTS * len(cycles)))
            within = np.arange(_CYCLE_POINTS + 1) * max(1, round(cycle / _CYCLE_POINTS))
            chosen.append((starts[:, None] + within).ravel())
        return chosen

    def _highest(self, first: Real, last: Real) -> Peak:
        """The highest of some peaks, each between two times at which the slope has the right signs."""
        if not len(first):
            return Peak(-inf, 0.0)
        rows = np.arange(len(first))
        sign = np.sign(self.final)
        while True:
            times = first[:, None] + (last - first)[:, None] * np.arange(_PARTS + 1) / _PARTS
            value, slope = (v.reshape(times.shape) for v in self.at(times.ravel()))
            i = np.argmax(sign * slope[:, 1:] <= 0, axis=1)
            first, last = times[rows, i], times[rows, i + 1]
            if np.all(self.rate(first) * (last - first) <= _FINE) or np.max(last - first) <= 2.0 ** (4 - _LEAST_DEPTH):
                break
        left, right = (rows, i), (rows, i + 1)
        top, at = _cubic_extreme(value[left], value[right], slope[left], slope[right], last - first)
        best = int(np.argmax(top / self.final))
        return Peak(float(top[best]) / self.final, float(first[best] + at[best]))

    def _among_cycles(self, best: Peak) -> Peak:
        """Climb from cycle to cycle of the fastest live oscillation, in ever smaller strides."""
        cycle = self._live_cycle(best.at_samples)
        if cycle == inf:
            return best
        stride = best.at_samples / cycle
        while stride > 1:
            stride = max(1.0, stride / _PARTS * 2)
            starts = best.at_samples + cycle * (np.round(stride * np.arange(-_PARTS, _PARTS + 1)) - 0.5)
            times = np.maximum(0.0, starts[:, None] + cycle * np.arange(_PARTS + 1) / _PARTS)
            value, slope = (v.reshape(times.shape) for v in self.at(times.ravel()))
            rising = np.sign(self.final) * slope
            row, i = np.nonzero((rising[:, :-1] > 0) & (rising[:, 1:] <= 0))
            height = np.maximum(value[row, i] / self.final, value[row, i + 1] / self.final)
            highest = np.argsort(-height, kind="stable")[:_REFINED_PEAKS]
            row, i = row[highest], i[highest]
            best = max(best, self._highest(times[row, i], times[row, i + 1]))
            if stride == 1:
                break
        return best

    def _live_cycle(self, at_samples: float) -> float:
        """Samples per cycle of the fastest oscillation that is live; infinite where none is."""
        live = [c for c, d in zip(self._cycles, self._decays, strict=True) if d * at_samples < _LIFETIME]
        return min(live, default=inf)


class _Grid:
    """Values of a response on times that divide the periods after some samples finely enough."""

    def __init__(self, response: StepResponse, samples: Whole) -> None:
        self.times = _times(response, samples)
        value, slope = response.at(self.times)
        step = np.diff(self.times)
        resolved = response.rate(self.times[:-1]) * step <= _RESOLVED
        left, right = value[:-1], value[1:]
        self._slopes = slope[:-1], slope[1:]
        turns = resolved & (np.sign(slope[:-1]) * np.sign(slope[1:]) < 0)
        extreme = left.copy()
        extreme[turns], after = _cubic_extreme(
            left[turns], right[turns], slope[:-1][turns], slope[1:][turns], step[turns]
        )
        self.extremes = self.times[:-1][turns] + after
        self.low = np.minimum(np.minimum(left, right), extreme)
        self.high = np.maximum(np.maximum(left, right), extreme)

    def bounds_after(self, samples: Whole) -> tuple[Real, Real]:
        """Least and greatest value between each sample and the next, both on the grid."""
        first, last = (np.searchsorted(self.times, t) for t in (samples, samples + 1))
        ends = np.stack([first, last], axis=1).ravel()
        low = np.minimum.reduceat(np.append(self.low, inf), ends)[::2]
        high = np.maximum.reduceat(np.append(self.high, -inf), ends)[::2]
        return low, high

    def peaks(self, final: float) -> tuple[Real, Real]:
        """Times around the highest peaks in the direction of the final value."""
        sign = np.sign(final)
        turns = np.flatnonzero((sign * self._slopes[0] > 0) & (sign * self._slopes[1] <= 0))
        height = (self.high if final > 0 else self.low)[turns] / final
        chosen = turns[np.argsort(-height, kind="stable")[:_REFINED_PEAKS]]
        return self.times[chosen], self.times[chosen + 1]


def _spread(end: float, ratio: float, most: int) -> Whole:
    """Samples from the first looked at to the last, in steps of a ratio, or of a greater one where they are many."""
    if end <= _FIRST_SAMPLES:
        return np.arange(0)
    count = max(1, min(ceil(log(end / _FIRST_SAMPLES) / log(ratio)), most))
    return np.floor(_FIRST_SAMPLES * (end / _FIRST_SAMPLES) ** (np.arange(count + 1) / count)).astype(np.int64)


def _times(response: StepResponse, samples: Whole) -> Real:
    """Both ends of each period, and points within it; in the first one also points that crowd towards its start."""
    wanted = _POINTS_PER_RADIAN * response.rate(samples.astype(float))
    needed = 2.0 ** np.ceil(np.log2(np.maximum(wanted, 1.0)))
    finest = _MOST_DIVISIONS
    while np.minimum(needed, finest).sum() > _MOST_POINTS and finest > 1:
        finest //= 2
    divisions = np.minimum(needed, finest)
    times = [samples.astype(float), samples + 1.0]
    for parts in distinct(divisions[divisions > 1]):
        chosen = samples[divisions == parts].astype(float)
        times.append((chosen[:, None] + np.arange(1, parts) / parts).ravel())
    if samples[0] == 0 and wanted[0] > finest:
        halvings = 0.5 ** np.arange(1, ceil(log2(wanted[0])) + 2)
        times += [halvings, 0.75 * halvings]
    return distinct(np.concatenate(times))


def _cubic_extreme(left: Real, right: Real, left_slope: Real, right_slope: Real, step: Real) -> tuple[Real, Real]:
    """Extreme of the cubic through two values and slopes of opposite sign, and its distance from the left end."""
    a, b = left_slope * step, right_slope * step
    rise = right - left
    # Slope of the cubic on [0, 1]: a + 2 q s + 3 r s^2, with one sign change.
    q, r = 3 * rise - 2 * a - b, a + b - 2 * rise
    root = np.sqrt(np.maximum(q * q - 3 * a * r, 0.0))
    # The root of a + 2 q s + 3 r s^2 whose formula does not cancel; the other one is a/(3 r) divided by it.
    w = -(q + np.where(q >= 0, root, -root))
    with np.errstate(divide="ignore", invalid="ignore"):
        one, other = w / (3 * r), a / w
    s = np.where((other >= 0) & (other <= 1), other, one)
    s = np.clip(np.nan_to_num(s, nan=0.5, posinf=0.5, neginf=0.5), 0.0, 1.0)
    return left + s * (a + s * (q + s * r)), s * step


def _horizon(modes: list[complex], period_s: float) -> int:
    """Last sample that is followed."""
    decaying = [-p.real for p in modes if p.real < 0]
    undamped = [p.imag for p in modes if p.real == 0]
    growing = max((p.real for p in modes if p.real > 0), default=0.0)
    lengths = [TIME_CONSTANTS / min(decaying)] if decaying else []
    lengths += [UNDAMPED_PERIODS * 2 * pi / min(undamped)] if undamped else []
    length = max(lengths, default=inf if growing else 0.0)
    if not growing:
        return max(LEAST_SAMPLES, ceil(length / period_s))
    last = max(LEAST_SAMPLES, floor(min(length, TIME_CONSTANTS / growing) / period_s))
    return min(last, floor(MOST_GROWTH / (growing * period_s)) - 1)
