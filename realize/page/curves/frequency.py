"""Frequency responses of design and stored numbers, and what lies between them."""

from __future__ import annotations

from math import ceil, log, log10, pi
from typing import NamedTuple

import numpy as np

from realize.algebra.arrays import distinct
from realize.checks import ContinuousReference
from realize.checks.frequency import bends
from realize.checks.modes import logarithm
from realize.loop.response import Continuous, Real, Sampled
from realize.transfer import PulseTransferFunction

#: Frequencies to a decade, in equal ratios; those around lightly damped roots come in addition.
_POINTS = 80

#: The axis starts this far below the lowest corner and the band edge, whichever is lower.
_BELOW = 10.0

#: Decades that are shown at the most, the highest ones; more where the band lies lower still.
_MOST_DECADES = 7

#: The last frequency is short of half the sample rate by this share: there a zero at z = -1 has no logarithm.
_SHORT = 1e-6

_DB = 20 / log(10)


class FrequencyCurves(NamedTuple):
    """Magnitude in dB and phase in deg up to half the sample rate.

    Attributes
    ----------
    frequency_hz : array
    design_db, design_deg, stored_db, stored_deg : array
        Phases unwrapped, that of the stored numbers on the branch nearest to the design's at every frequency: which way
        round a zero on the axis it turns depends on the last bit.
    error_db, error_deg : array
        Stored less design.
    band_hz, nyquist_hz : float
    """

    frequency_hz: Real
    design_db: Real
    design_deg: Real
    stored_db: Real
    stored_deg: Real
    error_db: Real
    error_deg: Real
    band_hz: float
    nyquist_hz: float


def frequency_curves(reference: ContinuousReference, stored: PulseTransferFunction) -> FrequencyCurves:
    """Evaluate both from their factors."""
    nyquist = pi / float(reference.period_s)
    band = float(reference.band_rad_s)
    w = _frequencies(reference, stored, nyquist)
    design_size, design_phase = Continuous(reference.transfer).at(w)
    stored_size, stored_phase = Sampled(stored).at(w)
    finite = np.isfinite(design_size) & np.isfinite(stored_size)
    design_deg = np.degrees(design_phase)
    error_deg = np.remainder(np.degrees(stored_phase) - design_deg + 180, 360) - 180
    return FrequencyCurves(
        w[finite] / (2 * pi),
        _DB * design_size[finite],
        design_deg[finite],
        _DB * stored_size[finite],
        (design_deg + error_deg)[finite],
        _DB * (stored_size - design_size)[finite],
        error_deg[finite],
        band / (2 * pi),
        nyquist / (2 * pi),
    )


def _frequencies(reference: ContinuousReference, stored: PulseTransferFunction, nyquist: float) -> Real:
    """In rad/s: equal ratios, and the bends of design and stored numbers."""
    roots = [*reference.zeros, *reference.poles]
    marks = [abs(root) for root in roots if 0 < abs(root) < nyquist]
    low = min([*marks, min(float(reference.band_rad_s), nyquist)]) / _BELOW
    low = min(max(low, nyquist / 10**_MOST_DECADES), float(reference.band_rad_s) / _BELOW)
    high = nyquist * (1 - _SHORT)
    grid = np.geomspace(low, high, ceil(_POINTS * log10(high / low)))
    images = [logarithm(r.value) / float(reference.period_s) for r in (*stored.zeros, *stored.poles)]
    details = np.concatenate([bends(roots, high), bends(images, high)])
    return distinct(np.append(grid, details[(details > low) & (details < high)]))
