"""The open loop: its gain and phase, continuous and sampled, with the crossover and what is left there."""

from __future__ import annotations

from math import log, log10, pi
from typing import NamedTuple

import numpy as np

from realize.loop import LoopReference
from realize.loop.response import Real
from realize.transfer import PulseTransferFunction

#: Frequencies in equal ratios, and how far from the crossover they begin.
_POINTS, _BELOW = 500, 100.0

#: The last frequency is short of half the sample rate by this share: there a zero at z = -1 has no logarithm.
_SHORT = 1e-6

_DB = 20 / log(10)


class LoopGain(NamedTuple):
    """Open loop of one case of the plant, from controller's input to measurement.

    Attributes
    ----------
    frequency_hz : array
        Up to half the rate.
    continuous_db, continuous_deg : array
        Without hold and compute delay; phases unwrapped.
    sampled_db, sampled_deg : array
        With everything in it, the stored numbers.
    crossover_hz, phase_margin_deg : float
        Of the sampled loop.
    """

    frequency_hz: Real
    continuous_db: Real
    continuous_deg: Real
    sampled_db: Real
    sampled_deg: Real
    crossover_hz: float
    phase_margin_deg: float


def loop_gain(reference: LoopReference, stored: PulseTransferFunction) -> LoopGain | None:
    """Around one controller; None where the sampled loop has no crossover, or is not stable."""
    sampled = reference.sampled(stored)
    crossover, margin = sampled.margins.crossover_rad_s, sampled.margins.phase_margin_deg
    if not crossover or margin is None or sampled.verdict is None or not sampled.verdict.is_stable:
        return None
    nyquist = pi / float(reference.period_s) * (1 - _SHORT)
    w = np.logspace(log10(crossover / _BELOW), log10(nyquist), _POINTS)
    before, after = reference.continuous.loop.response(w), sampled.loop.response(w)
    finite = np.isfinite(before[0]) & np.isfinite(after[0])
    degrees = [np.degrees(phase[finite]) for _, phase in (before, after)]
    first = degrees[0][0]
    degrees = [each - 360 * np.round((each[0] - first) / 360) for each in degrees]
    return LoopGain(
        w[finite] / (2 * pi),
        _DB * before[0][finite],
        degrees[0],
        _DB * after[0][finite],
        degrees[1],
        crossover / (2 * pi),
        margin,
    )
