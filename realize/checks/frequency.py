"""The checks ``magnitude in band`` and ``phase in band``.

``Gd(exp(jwT))`` is compared with what ``G(jv)`` passes through for v within 2 % of w. Both are evaluated from their
factors, and ``exp(jwT) - 1`` by its sine form, so that nothing is lost near z = 1.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from itertools import zip_longest
from math import inf, log, pi
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from realize.algebra.arrays import distinct
from realize.band import frequency_text
from realize.checks.chain import Complex, Real
from realize.checks.check import Asked, Check
from realize.checks.counterpart import Counterpart
from realize.checks.modes import damping, logarithm
from realize.checks.tolerances import Tolerances

#: Frequency may be off by this share: the tolerance of a corner (pole shift) seen from the frequency axis.
WINDOW = 0.02

#: Ratio of neighbouring frequencies that are looked at; details are added where a root is lightly damped.
_RATIO = 1.02

#: Ratio of those that a window is searched on: a bend of a well-damped corner is flat over one percent.
_SEARCH_RATIO = 1.01

#: The lowest frequency is this far below the lowest corner, where the response follows its asymptote to 0.01 %.
_BELOW_LOWEST = 100.0

#: The lowest frequency, below the band edge, where there is no corner at all.
_BELOW_BAND = 1000.0

#: Roots with a damping ratio below this have a bend that is narrower than a window.
_NARROW = 0.5

#: Where a bend is looked at: the natural frequency, and offsets in units of its damping ratio, up to eight half-widths
#: away, where a resonance is down to an eighth.
_OFFSETS = (-8, -4, -2, -1, -0.5, 0, 0.5, 1, 2, 4, 8)


class Ranges(NamedTuple):
    """Frequencies in rad/s, and what the design passes through within 2 % of each; infinite where unbounded."""

    frequency_rad_s: Real
    low_db: Real
    high_db: Real
    low_deg: Real
    high_deg: Real


class FrequencyResponse:
    """The frequency response of the design up to its band edge.

    Parameters
    ----------
    gain : float
        Limit of ``s^-k G`` for s to 0.
    zeros, poles : sequence of complex
        Every one by itself, in rad/s.
    edge_rad_s : float
        The highest frequency that is looked at.
    """

    def __init__(self, gain: float, zeros: Sequence[complex], poles: Sequence[complex], edge_rad_s: float) -> None:
        self._factors = gain, zeros, poles
        self.edge_rad_s = edge_rad_s
        corners = [abs(r) for r in (*zeros, *poles) if r]
        lowest = min(min(corners) / _BELOW_LOWEST, edge_rad_s / _BELOW_LOWEST) if corners else edge_rad_s / _BELOW_BAND
        details = bends((*zeros, *poles), edge_rad_s)
        self._axis = [[r.imag for r in roots if r.real == 0 and r.imag > 0] for roots in (zeros, poles)]
        self._points = self._searched(lowest, details)
        self._values = self._evaluated(self._points)
        grid = np.append(_geometric(lowest, edge_rad_s, _RATIO), details[details <= edge_rad_s])
        self.ranges = self.ranges_at(distinct(grid))

    def ranges_at(self, frequencies: Real) -> Ranges:
        """Least and greatest magnitude and phase within 2 % of some frequencies."""
        low, high = frequencies * (1 - WINDOW), frequencies * (1 + WINDOW)
        first, last = np.searchsorted(self._points, low), np.searchsorted(self._points, high)
        own = [self._evaluated(w) for w in (low, frequencies, high)]
        found = []
        for i in range(2):
            parts = [values[i] for values in own]
            found.append(np.fmin.reduce([*parts, _reduced(np.fmin, self._values[i], first, last, inf)]))
            found.append(np.fmax.reduce([*parts, _reduced(np.fmax, self._values[i], first, last, -inf)]))
        low_db, high_db, low_deg, high_deg = found
        for bound, axis, beyond in ((low_db, self._axis[0], -inf), (high_db, self._axis[1], inf)):
            for w in axis:
                inside = (low <= w) & (w <= high)
                # The phase turns by 180 deg at a root on the axis, and either way is right.
                bound[inside], low_deg[inside], high_deg[inside] = beyond, -inf, inf
        return Ranges(frequencies, low_db, high_db, low_deg, high_deg)

    def _evaluated(self, frequencies: Real) -> tuple[Real, Real]:
        """Magnitude in dB and continuous phase in deg; NaN or infinite on a root."""
        gain, zeros, poles = self._factors
        s: Complex = np.zeros(len(frequencies), complex)
        s.imag = frequencies
        with np.errstate(divide="ignore", invalid="ignore"):
            magnitude = _decibels(factored(gain, zeros, poles, s))
        # A factor turns by less than 180 deg from s = 0 on, so its principal angle is continuous; only roots on
        # the axis jump.
        phase = np.full(len(s), 0.0 if gain > 0 else pi)
        for roots, sign in ((zeros, 1), (poles, -1)):
            for root in roots:
                phase += sign * np.angle(_factor(root, s))
        return magnitude, np.degrees(phase)

    def _searched(self, lowest: float, details: Real) -> Real:
        """Frequencies that windows are searched on: none lies on a root."""
        points = distinct(np.append(_geometric(lowest, self.edge_rad_s * (1 + WINDOW), _SEARCH_RATIO), details))
        return points[~np.isin(points, [w for axis in self._axis for w in axis])]


def check_frequency_response(
    design: FrequencyResponse, counterpart: Counterpart, of: str, tolerances: Tolerances
) -> tuple[Check, Check]:
    """Greatest distance, in dB and in degrees, of ``Gd(exp(jwT))`` from the design's range around w.

    Notes
    -----
    A side on which the range is unbounded, because a root on the imaginary axis lies in it, does not count; nor does
    the phase there. The phase is compared on the nearest branch.
    """
    period_s = float(counterpart.discrete.period_s)
    zeros, poles = counterpart.zeros, counterpart.poles
    own = bends([logarithm(r) / period_s for r in (*zeros, *poles)], design.edge_rad_s)
    more = design.ranges_at(own[own <= design.edge_rad_s])
    ranges = Ranges(*(np.append(a, b) for a, b in zip(design.ranges, more, strict=True)))
    half = ranges.frequency_rad_s * period_s / 2
    at: Complex = 2j * np.sin(half) * np.exp(1j * half)
    with np.errstate(divide="ignore", invalid="ignore"):
        value = factored(counterpart.gain, zeros, poles, at)
    usable = np.isfinite(value) & (value != 0)
    ranges, value = Ranges(*(a[usable] for a in ranges)), value[usable]
    return (
        _worst(
            Asked("magnitude in band", of, "dB", float(tolerances.exact("magnitude_in_band"))),
            ranges.frequency_rad_s,
            _decibels(value),
            (ranges.low_db, ranges.high_db),
        ),
        _phase_check(ranges, value, Asked("phase in band", of, "deg", float(tolerances.exact("phase_in_band")))),
    )


def bends(roots: Iterable[complex], edge_rad_s: float) -> Real:
    """Frequencies around lightly damped roots, up to where a window at the band edge reaches."""
    narrow = [(abs(r), abs(damping(r))) for r in roots if r.imag > 0 and abs(damping(r)) < _NARROW]
    found = np.array([w * (1 + offset * d) for w, d in narrow for offset in _OFFSETS])
    return distinct(found[(found > 0) & (found <= edge_rad_s * (1 + WINDOW))])


def factored(gain: float, zeros: Sequence[complex], poles: Sequence[complex], at: Complex) -> Complex:
    """``gain v^k prod(1 - v/zero) / prod(1 - v/pole)``, zeros and poles taken in turn so that nothing overflows."""
    value = np.full(len(at), gain, complex)
    for zero, pole in zip_longest(sorted(zeros, key=abs), sorted(poles, key=abs)):
        if zero is not None:
            value = value * _factor(zero, at)
        if pole is not None:
            value = value / _factor(pole, at)
    return value


def _factor(root: complex, at: Complex) -> Complex:
    return 1 - at / root if root else at


def _phase_check(ranges: Ranges, value: Complex, asked: Asked) -> Check:
    bounded = np.isfinite(ranges.low_deg)
    low, high = ranges.low_deg[bounded], ranges.high_deg[bounded]
    phase, middle = np.degrees(np.angle(value[bounded])), (low + high) / 2
    phase -= 360 * np.round((phase - middle) / 360)
    return _worst(asked, ranges.frequency_rad_s[bounded], phase, (low, high))


def _worst(asked: Asked, frequencies: Real, values: Real, bounds: tuple[Real, Real]) -> Check:
    """The check at the frequency where a value lies farthest outside its bounds."""
    if not len(frequencies):
        return asked.undefined("at no frequency of the band are both responses finite and other than 0")
    low, high = bounds
    distances = np.maximum(np.maximum(low - values, values - high), 0.0)
    i = int(np.argmax(distances)) if distances.any() else int(np.argmax(frequencies))
    nearest = min(max(float(values[i]), float(low[i])), float(high[i]))
    if not distances[i]:
        reason = f"within what the design does within 2 % of every frequency; shown at {_hz(frequencies[i])}"
    else:
        reason = f"greatest at {_hz(frequencies[i])}"
    return asked.measured(nearest, float(values[i]), float(distances[i]), reason)


def _hz(frequency_rad_s: float) -> str:
    return frequency_text(float(frequency_rad_s))


def _decibels(value: Complex) -> Real:
    return 20 * np.log10(np.abs(value))


def _geometric(first: float, last: float, ratio: float) -> Real:
    """Both ends, and frequencies between in equal ratios of at most ``ratio``."""
    count = max(1, int(np.ceil(log(last / first) / log(ratio))))
    return np.append(first * (last / first) ** (np.arange(count) / count), last)


def _reduced(
    pick: np.ufunc, values: Real, first: npt.NDArray[np.int64], last: npt.NDArray[np.int64], neutral: float
) -> Real:
    """Reduce each stretch of values; the neutral value for an empty one."""
    if not len(first):
        return np.empty(0)
    ends = np.stack([first, last], axis=1).ravel()
    reduced: Real = pick.reduceat(np.append(values, neutral), ends)[::2]
    return np.where(first < last, reduced, neutral)
