"""Frequencies on which a response is looked at before its crossings are refined.

A rational function is as smooth around ``jw`` as the distance to its nearest root: the grid divides the axis, around
every root, in steps in proportion to that distance. Between neighbours each factor turns by at most a quarter
radian, so a crossing shows as a change of sign and a touch as an extreme of three neighbours.
"""

from __future__ import annotations

from math import asinh, log, pi

import numpy as np

from realize.loop.response import Complex, Real

#: Step in units of the distance to the root.
STEP = 0.25

#: Half-width given to a root on the axis, relative to its frequency: far below what 1e-6 of a figure needs.
_LEAST_WIDTH = 1e-7

#: Points to a turn of a dead time: steps of less than 0.4 radian.
_POINTS_PER_TURN = 16

#: Points of a dead time altogether; beyond, a response that turns this often has no margin worth a figure.
_MOST_POINTS = 200_000

#: Neighbours closer than this, relative to their frequency, are one: their difference is rounding.
_SAME = 1e-12


def graded(features_rad_s: Complex, low_rad_s: float, high_rad_s: float) -> Real:
    """Frequencies from ``low`` to ``high``, ascending, in steps in proportion to the distance to the nearest root.

    Parameters
    ----------
    features_rad_s : array of complex
        Roots in the s-plane, off the origin.
    """
    upper = features_rad_s[features_rad_s.imag >= 0]
    shapes = {(float(r.imag), max(abs(float(r.real)), _LEAST_WIDTH * abs(r))) for r in upper}
    count = max(2, int(log(high_rad_s / low_rad_s) / STEP) + 2)
    points = [np.geomspace(low_rad_s, high_rad_s, count)]
    # A root whose distance is more than four times the whole stretch leaves no trace in it.
    points += [_around(*shape, high_rad_s) for shape in shapes if abs(complex(*shape)) < high_rad_s / STEP]
    return _distinct(np.concatenate(points), low_rad_s, high_rad_s)


def with_turns(grid: Real, delay_s: float, low_rad_s: float, high_rad_s: float) -> Real:
    """Add what a dead time needs between two frequencies."""
    if delay_s <= 0 or high_rad_s <= low_rad_s:
        return grid
    step = 2 * pi / (_POINTS_PER_TURN * delay_s)
    count = min(int((high_rad_s - low_rad_s) / step) + 1, _MOST_POINTS)
    added = np.linspace(low_rad_s, high_rad_s, count + 1)
    return _distinct(np.concatenate([grid, added]), min(grid[0], low_rad_s), max(grid[-1], high_rad_s))


def with_jumps(grid: Real, every_rad_s: float) -> Real:
    """Add both sides of all multiples of a frequency, at which the phase jumps."""
    count = int(min(grid[-1] / every_rad_s, _MOST_POINTS))
    jumps = every_rad_s * np.arange(1, count + 1)
    both = np.concatenate([jumps * (1 - _LEAST_WIDTH), jumps * (1 + _LEAST_WIDTH)])
    return _distinct(np.concatenate([grid, both]), float(grid[0]), float(grid[-1]))


def _around(centre: float, width: float, high_rad_s: float) -> Real:
    reach = asinh((high_rad_s + centre) / width) + STEP
    offsets = width * np.sinh(np.arange(0.0, reach, STEP))
    return np.concatenate([centre - offsets, centre + offsets])


def _distinct(points: Real, low: float, high: float) -> Real:
    """Within bounds, ascending, neighbours apart; both bounds among them."""
    inside = np.sort(points[(points > low) & (points < high)])
    bounded = np.concatenate([[low], inside, [high]])
    apart = np.diff(bounded) > _SAME * bounded[1:]
    distinct: Real = bounded[np.concatenate([[True], apart[:-1], [True]])]
    return distinct
