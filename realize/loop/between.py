"""The plant's output between two changes of the held input: a grid that follows its poles, and its highest points."""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache
from math import ceil, log
from typing import Any, NamedTuple

import numpy as np

from realize.checks.modes import every
from realize.loop.figures import SETTLED, StepFigures, rise_and_settling
from realize.loop.held import HeldPlant
from realize.loop.plant import Plant
from realize.loop.response import Complex, Real, Whole
from realize.loop.states import States, held_change, in_series, product, states
from realize.transfer import TransferFunction

#: Points in a period for each radian its fastest pole turns in it; the cubic through values and slopes h apart misses
#: a mode p by (|p| h)^4/384, 1e-5 of its size, before it is refined.
_POINTS_PER_RADIAN = 4
_MOST_POINTS = 64

#: Parts a bracket is divided into; the cubic is then off by 1e-5/16^4 = 2e-10.
_PARTS = 16

#: Overshoot, of the final value, that counts as none: what is left of the slowest mode when it is no longer followed.
_REST = 1e-7

#: Highest points that are refined.
_REFINED = 8


class WithinPeriod(NamedTuple):
    """How the plant moves within a period, as maps of ``(states, input)``.

    Attributes
    ----------
    times : array
        Of the grid, as parts of a period, both ends included.
    moved : array, (times, order + 1, order + 1)
        ``(states, input)`` at the times of the grid.
    read : array, (2, order + 1)
        Output of the plant, and its slope per period, from ``(states, input)``.
    fine : array
        Change over one part of each step of the grid.
    to_end : array
        Change from the start to the end.
    at_sample : array, (order + 1,)
        Output at the sample.
    measured : array, (order + 1,)
        Behind the sensor, at the sample.
    """

    times: Real
    moved: Complex
    read: Complex
    fine: Complex
    to_end: Complex
    at_sample: Complex
    measured: Complex


@lru_cache(maxsize=16)
def _plant_states(plant: Plant) -> tuple[States, Complex, complex]:
    """Plant and sensor in series, and how the plant's output is read from them."""
    first, second = (_continuous_states(g) for g in (plant.transfer, plant.sensor))
    chain = in_series(first, second)
    return chain, np.concatenate([first.c, np.zeros(second.order, complex)]), first.d


def _continuous_states(g: TransferFunction) -> States:
    return states(float(g.low_frequency_gain), every(g.zeros), every(g.poles))


def within_period(held: HeldPlant) -> WithinPeriod:
    """Maps of one plant at one period."""
    return _within_period(held.plant, held.period_s, held.offset)


@lru_cache(maxsize=16)
def _within_period(plant: Plant, period_s: Fraction, offset: Fraction) -> WithinPeriod:
    chain, c, d = _plant_states(plant)
    period, n = float(period_s), chain.order
    times = _times([abs(p) * period for p in every(plant.transfer.poles)])
    whole = np.eye(n + 1, dtype=complex)
    moved = np.stack([whole + held_change(chain, t * period) for t in times])
    read = np.zeros((2, n + 1), complex)
    read[0, :n], read[0, n] = c, d
    read[1, :n], read[1, n] = period * (c @ chain.a), period * (c @ chain.b)
    at_sample = whole + held_change(chain, float(offset) * period)
    behind = np.append(chain.c, chain.d) @ at_sample
    fine = np.stack([held_change(chain, h * period / _PARTS) for h in np.diff(times)])
    to_end = held_change(chain, period)
    return WithinPeriod(times, moved, read, fine, to_end, read[0] @ at_sample, behind)


def _times(rates: list[float]) -> Real:
    """Parts of a period at which the output is looked at; they crowd after the change where a pole is very fast."""
    fastest = max(rates, default=0.0)
    count = min(_MOST_POINTS, max(1, ceil(_POINTS_PER_RADIAN * fastest)))
    times = np.arange(count + 1) / count
    if _POINTS_PER_RADIAN * fastest > _MOST_POINTS:
        halvings = 0.5 ** np.arange(1, ceil(log(_POINTS_PER_RADIAN * fastest) / log(2)) + 1)
        times = np.unique(np.concatenate([times, halvings, 0.75 * halvings]))
    return times


def times_between(held: HeldPlant, within: WithinPeriod, samples: Whole) -> Real:
    """Times in s since the step at which the output is looked at: a row for each change of the input."""
    times_s: Real = float(held.delay_s) + float(held.period_s) * (samples[:, None] + within.times)
    return times_s


def figures_between(
    held: HeldPlant, within: WithinPeriod, samples: Whole, moving: Complex, final: float
) -> StepFigures:
    """Read the figures of a step.

    Parameters
    ----------
    samples : array of int, (count,)
        Number of each change of the input that is looked at, ascending from 0.
    moving : array, (order + 1, count)
        Plant states and new input at these changes.
    final : float
        Final value of the output.
    """
    period = float(held.period_s)
    value, slope = (product(row @ within.moved, moving).real.T / final for row in within.read)
    times_s = times_between(held, within, samples)
    top, k, part = _highest(within, moving / final, value, slope)
    peak_s = float(held.delay_s) + period * (int(samples[k]) + part)
    shown = product(within.at_sample[None], moving)[0].real / final
    rise, settling = rise_and_settling(times_s.ravel(), value.ravel())
    beyond = top - 1 > _REST
    return StepFigures(
        final,
        100 * (top - 1) if beyond else 0.0,
        peak_s if beyond else None,
        rise,
        settling,
        100 * max(float(shown.max()) - 1, 0.0),
        _ripple(value, shown),
    )


def _ripple(value: Real, shown: Real) -> float | None:
    """How much farther from the final value the output goes than its samples, in %, once these have settled."""
    outside = np.flatnonzero(np.abs(shown - 1) > SETTLED)
    first = int(outside[-1]) + 1 if len(outside) else 0
    # The last period has no sample after it.
    if first + 1 >= len(shown):
        return None
    between, at = np.abs(value[first:-1] - 1).max(), np.abs(shown[first:] - 1).max()
    return 100 * max(float(between - at), 0.0)


def _highest(within: WithinPeriod, moving: Complex, value: Real, slope: Real) -> tuple[float, int, float]:
    """Highest value, the column of ``moving`` it follows, and by what part of a period.

    Parameters
    ----------
    value, slope : array, (periods, times)
    """
    k, i = (int(n) for n in np.unravel_index(np.argmax(value), value.shape))
    best = float(value[k, i]), k, float(within.times[i])
    row, column = np.nonzero((slope[:, :-1] > 0) & (slope[:, 1:] <= 0))
    step = np.diff(within.times)[column]
    height = _top(value[row, column], value[row, column + 1], slope[row, column], slope[row, column + 1], step)
    for c in np.argsort(-height, kind="stable")[:_REFINED]:
        k, i = int(row[c]), int(column[c])
        top, part = _refined(within, within.moved[i] @ moving[:, k], i)
        best = max(best, (top, k, part))
    return best


def _refined(within: WithinPeriod, start: Complex, i: int) -> tuple[float, float]:
    """Highest value in one step of the grid, which starts from ``start``, and where in the period it is."""
    points = [start]
    for _ in range(_PARTS):
        points.append(points[-1] + within.fine[i] @ points[-1])
    value, slope = (within.read @ np.array(points).T).real
    step = float(within.times[i + 1] - within.times[i]) / _PARTS
    j = int(np.argmax((slope[:-1] > 0) & (slope[1:] <= 0)))
    ends = value[j], value[j + 1], slope[j], slope[j + 1]
    top = max(float(_top(*ends, step)), float(value.max()))
    share = slope[j] / (slope[j] - slope[j + 1]) if slope[j] > slope[j + 1] else 0.0
    return top, float(within.times[i] + (j + share) * step)


def _top(left: Any, right: Any, left_slope: Any, right_slope: Any, step: Any) -> Any:
    """Height between points with slopes of opposite sign: mean of what the parabola gives from either side."""
    fall = np.maximum(left_slope - right_slope, 5e-324)
    return (left + right + step * (left_slope**2 + right_slope**2) / (2 * fall)) / 2
