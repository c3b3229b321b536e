"""What is read from a step of the reference: the plant's output, before the sensor, in units of its final value."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from realize.loop.plant import Plant
from realize.loop.response import Real, Whole
from realize.transfer import PulseTransferFunction, TransferFunction

#: The band that counts as settled, of the final value.
SETTLED = 0.02

#: Start and end of the rise, of the final value.
RISE = (0.1, 0.9)


class StepFigures(NamedTuple):
    """The plant's output, before the sensor, after a unit step of the reference.

    Attributes
    ----------
    final : float
        Its final value.
    overshoot_percent : float
        Highest point beyond the final value, in % of it; 0 when there is none.
    peak_s : float or None
        When.
    rise_time_s : float or None
        From 10 to 90 % of the final value.
    settling_time_s : float or None
        Last time outside 2 % of the final value.
    sampled_overshoot_percent : float or None
        As the samples show it; None for a loop without samples.
    ripple_percent : float or None
        How much farther the output goes between the samples than at them, once these have settled within 2 %.
    """

    final: float
    overshoot_percent: float
    peak_s: float | None
    rise_time_s: float | None
    settling_time_s: float | None
    sampled_overshoot_percent: float | None = None
    ripple_percent: float | None = None


def final_value(controller: TransferFunction | PulseTransferFunction, plant: Plant) -> float | None:
    """Limit of the plant's output for a unit step of the reference in a stable loop; None where it is 0 or none.

    Notes
    -----
    With ``C P -> a s^i`` and ``C P H -> b s^j`` for s to 0 the output tends to the limit of
    ``a s^i/(1 + b s^j)``.
    """
    k = (
        controller.zeros_minus_poles_at_one
        if isinstance(controller, PulseTransferFunction)
        else controller.zeros_minus_poles_at_origin
    )
    a = controller.low_frequency_gain * plant.transfer.low_frequency_gain
    i = k + plant.transfer.zeros_minus_poles_at_origin
    b = a * plant.sensor.low_frequency_gain
    j = i + plant.sensor.zeros_minus_poles_at_origin
    order = i - min(j, 0)
    below = b if j < 0 else 1 + (b if j == 0 else 0)
    return float(a / below) if order == 0 and below else None


def rise_and_settling(times_s: Real, values: Real) -> tuple[float | None, float | None]:
    """Rise time from 10 to 90 %, and the last time outside 2 %, of a response that ends at 1.

    Parameters
    ----------
    times_s, values : array
        Ascending times since the step, starting at rest.
    """
    crossed = [_first_above(times_s, values, level) for level in RISE]
    rise = None if None in crossed else crossed[1] - crossed[0]  # type: ignore[operator]
    outside = np.flatnonzero(np.abs(values - 1) > SETTLED)
    if not len(outside):
        return rise, 0.0
    last = int(outside[-1])
    if last + 1 == len(values):
        return rise, None
    edge = 1 + np.copysign(SETTLED, values[last] - 1)
    return rise, _between(times_s, values, last, edge)


def _first_above(times_s: Real, values: Real, level: float) -> float | None:
    above = np.flatnonzero(values >= level)
    if not len(above):
        return None
    first = int(above[0])
    return _between(times_s, values, first - 1, level) if first else float(times_s[0])


def _between(times_s: Real, values: Real, i: int, level: float) -> float:
    """Time at which the straight line from point i to the next passes a level."""
    rise = values[i + 1] - values[i]
    part = (level - values[i]) / rise if rise else 0.0
    return float(times_s[i] + min(max(part, 0.0), 1.0) * (times_s[i + 1] - times_s[i]))


def highest_peaks(values: Real, count: int) -> Whole:
    """Indices of the highest local maxima, each taken for as high as the parabola through its neighbours."""
    i = 1 + np.flatnonzero((values[1:-1] >= values[:-2]) & (values[1:-1] >= values[2:]))
    rise, fall = values[i] - values[i - 1], values[i] - values[i + 1]
    top = values[i] + (rise - fall) ** 2 / (8 * np.maximum(rise + fall, 5e-324))
    highest: Whole = i[np.argsort(-top, kind="stable")[:count]]
    return highest
