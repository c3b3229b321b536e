"""Crossings of a loop's frequency response, and the figures read from them.

The open loop is ``ln |L|`` and an unwrapped phase. A gain crossover is a frequency with ``|L| = 1``, a phase crossover
one at which the phase is an odd multiple of half a turn. Crossings are bracketed on a grid that follows the roots of
the response and refined to rounding; a touch between two grid points is found from the extreme of three neighbours.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from math import cos, degrees, exp, floor, inf, log10, pi
from typing import NamedTuple

import numpy as np

from realize.checks.schur import MARGINAL, STABLE
from realize.loop.response import Real

#: Logarithm of the gain, and phase in rad, within which a crossing counts as lying on the critical point: rounding of
#: a sum of some dozen factors.
ON_POINT = 1e-11

#: Steps of the search in a bracket; every fourth halves the bracket.
_MOST_STEPS = 160

#: A bracket is closed when it is this narrow relative to its frequency.
_CLOSED = 4e-16

#: A function of the size of a logarithm or a phase this small is 0: a few roundings of its terms.
_ZERO = 4e-15

#: Residual of the phase, in rad, above which a bracket held a jump (a root on the axis) and no crossing.
_JUMP = 1e-3

#: How far from a level an extreme may lie, in units of what its neighbours differ from it, to be looked at: the
#: vertex of the parabola through three neighbours is nearer to the middle one than they are.
_NEAR = 2.0

#: Rounds in which the extreme of a touch is closed in on; the third changes nothing that shows in a double.
_TOUCH_ROUNDS = 3

#: Smallest ``|1 + L|`` are looked for in brackets divided in so many parts, so many times: 16^5 = 1e6.
_PARTS = 32
_PEAK_ROUNDS = 5
_PEAKS = 4

#: Larger exponents would overflow where only ``1/|1 + L| = 0`` is wanted.
_MOST_LOG = 300.0

Evaluate = Callable[[Real], tuple[Real, Real]]


class GainCrossover(NamedTuple):
    """A frequency at which the gain is 1.

    Attributes
    ----------
    w_rad_s : float
    phase : float
        Unwrapped, in rad.
    direction : int
        Of the gain with rising frequency: 1, -1, or 0 for a touch.
    """

    w_rad_s: float
    phase: float
    direction: int

    @property
    def lag_left(self) -> float:
        """Additional lag, in rad from 0 to one turn, that takes this crossover to the critical point."""
        return (self.phase + pi) % (2 * pi)

    @property
    def rotation(self) -> float:
        """Smallest rotation to the critical point, positive for a lag, within half a turn."""
        lag = self.lag_left
        return lag - 2 * pi if lag > pi else lag


class PhaseCrossover(NamedTuple):
    """A frequency (0 and infinity included) at which the response is real and negative."""

    w_rad_s: float
    log_gain: float


class Ends(NamedTuple):
    """What the response does at the two ends of the frequency axis.

    Attributes
    ----------
    start : pair of float
        ``(ln |L|, phase)`` at w = 0; ``inf`` with a pole there, the phase then being that of its residue.
    end : pair of float or None
        ``(ln |L|, phase or None)`` at half the sample rate or at infinity; None where the phase has no limit.
    end_rad_s : float
        Half the sample rate, or infinity.
    """

    start: tuple[float, float]
    end: tuple[float, float | None]
    end_rad_s: float = inf


class Margins(NamedTuple):
    """How far a loop is from its stability limit. ``None`` where there is no such limit.

    Attributes
    ----------
    gain_margin, gain_reduction_margin : float or None
        Smallest factor above 1, and largest below 1, on the gain that reach the limit.
    phase_crossover_rad_s, phase_crossover_below_rad_s : float or None
        Where these are taken; 0 and infinity are possible.
    phase_margin_deg : float or None
        Smallest rotation to the critical point over all gain crossovers. For a stable loop it is positive and may
        be a lag or a lead; otherwise crossovers beyond the critical point count as negative.
    crossover_rad_s : float or None
        Where it is taken.
    delay_margin_s : float or None
        Smallest additional delay that reaches the limit, over all gain crossovers of a stable loop.
    maximum_sensitivity : float or None
        Greatest ``|1/(1 + L)|``; None on the stability limit, where it has no bound.
    peak_rad_s : float or None
        Where; None when it is approached at infinity.
    crossovers_rad_s : tuple of float
        All gain crossovers, ascending.
    """

    gain_margin: float | None
    phase_crossover_rad_s: float | None
    gain_reduction_margin: float | None
    phase_crossover_below_rad_s: float | None
    phase_margin_deg: float | None
    crossover_rad_s: float | None
    delay_margin_s: float | None
    maximum_sensitivity: float | None
    peak_rad_s: float | None
    crossovers_rad_s: tuple[float, ...]

    @property
    def gain_margin_db(self) -> float | None:
        """Smallest raise that reaches the limit."""
        return None if self.gain_margin is None else 20 * log10(self.gain_margin)

    @property
    def gain_reduction_margin_db(self) -> float | None:
        """Smallest cut that reaches the limit; never negative."""
        return None if self.gain_reduction_margin is None else -20 * log10(self.gain_reduction_margin)


class Scan:
    """A response on a grid, with its touches resolved.

    Parameters
    ----------
    evaluate : callable
        Frequencies to ``(ln |L|, phase)``.
    grid : array
        Ascending, in rad/s.
    """

    def __init__(self, evaluate: Evaluate, grid: Real) -> None:
        self.evaluate = evaluate
        self.w = grid
        self.log, self.phase = evaluate(grid)
        for _ in range(_TOUCH_ROUNDS):
            added = np.concatenate([_touches(self.w, self.log, 0.0), _touches(self.w, self.phase, None)])
            if not len(added):
                break
            self._insert(added)

    def _insert(self, added: Real) -> None:
        log_gain, phase = self.evaluate(added)
        w = np.concatenate([self.w, added])
        order = np.argsort(w, kind="stable")
        self.w = w[order]
        self.log = np.concatenate([self.log, log_gain])[order]
        self.phase = np.concatenate([self.phase, phase])[order]

    def gain_crossovers(self) -> tuple[GainCrossover, ...]:
        """All frequencies with ``|L| = 1``."""
        above = self.log > 0
        i = np.flatnonzero(above[:-1] != above[1:])
        w = _solved(lambda at: self.evaluate(at)[0], self.w[i], self.w[i + 1], self.log[i], self.log[i + 1])
        phase = self.evaluate(w)[1] if len(w) else w
        direction = np.where(above[i], -1, 1)
        # A root on the axis takes the gain through 1 on both sides of it, never at a jump: every bracket is one.
        found = zip(w, phase, direction, strict=True)
        return tuple(GainCrossover(float(at), float(turn), int(way)) for at, turn, way in found)

    def phase_crossovers(self) -> tuple[PhaseCrossover, ...]:
        """All frequencies with a phase of an odd multiple of half a turn."""
        turn = np.floor((self.phase + pi) / (2 * pi))
        i = np.flatnonzero(turn[:-1] != turn[1:])
        first, last, levels = [], [], []
        for k in i:
            low, high = sorted((int(turn[k]), int(turn[k + 1])))
            for level in range(low + 1, high + 1):
                first.append(k)
                last.append(k + 1)
                levels.append(2 * pi * level - pi)
        if not first:
            return ()
        target = np.array(levels)
        w = _solved(
            lambda at: self.evaluate(at)[1] - target,
            self.w[first],
            self.w[last],
            self.phase[first] - target,
            self.phase[last] - target,
        )
        log_gain, phase = self.evaluate(w)
        real = np.abs(phase - target) < _JUMP
        return tuple(PhaseCrossover(*map(float, pair)) for pair in zip(w[real], log_gain[real], strict=True))

    def sensitivity_peak(self) -> tuple[float, float]:
        """Greatest ``|1/(1 + L)|`` on and between the grid points, and its frequency."""
        least, at = lowest(lambda w: _distance(*self.evaluate(w)), self.w, _distance(self.log, self.phase))
        return 1 / least if least else inf, at


def lowest(function: Callable[[Real], Real], w: Real, values: Real) -> tuple[float, float]:
    """Least value of a function, and where, from its values on a grid that resolves it.

    Notes
    -----
    The stretches around the lowest local minima are divided again and again.
    """
    inner = values[1:-1]
    i = 1 + np.flatnonzero((inner <= values[:-2]) & (inner <= values[2:]))
    i = i[np.argsort(values[i], kind="stable")[:_PEAKS]]
    best = min((float(values[k]), float(w[k])) for k in (0, -1))
    if not len(i):
        return best
    first, last, rows = w[i - 1], w[i + 1], np.arange(len(i))
    for _ in range(_PEAK_ROUNDS):
        points = first[:, None] + (last - first)[:, None] * (np.arange(_PARTS + 1) / _PARTS)
        found = function(points.ravel()).reshape(points.shape)
        k = np.argmin(found, axis=1)
        first, last = points[rows, np.maximum(k - 1, 0)], points[rows, np.minimum(k + 1, _PARTS)]
    row = int(np.argmin(found[rows, k]))
    return min((float(found[row, k[row]]), float(points[row, k[row]])), best)


def encirclements(crossovers: Sequence[GainCrossover], ends: Ends) -> int | None:
    """How often the Nyquist curve turns about the critical point, counter-clockwise, over both halves of the axis.

    Returns
    -------
    int or None
        None when the curve passes through the point.

    Notes
    -----
    Where ``|L| > 1`` the curve can only pass the point on its far side, and does so when the phase crosses an odd
    multiple of pi: the net number of such crossings follows from the phase at both ends of the stretch. Nyquist
    (1932); roots on the axis are passed on the side that leaves them outside, which is how their phase is defined.
    An end on the real axis belongs to both halves and counts one half to each.
    """
    if any(abs(c.rotation) < ON_POINT * max(1.0, abs(c.phase)) for c in crossovers):
        return None
    if any(abs(size) < ON_POINT and phase is not None and _is_odd(phase) for size, phase in ends[:2]):
        return None
    twice = sum(-2 * c.direction * _odd_levels_passed(c.phase) for c in crossovers)
    (start, start_phase), (end, end_phase) = ends[:2]
    # At a multiple m of pi, m levels are passed in both halves together, be m odd or even.
    twice -= round(start_phase / pi) if start > 0 else 0
    twice += round(end_phase / pi) if end > 0 and end_phase is not None else 0
    return twice


def margins(
    scan: Scan,
    crossovers: Sequence[GainCrossover],
    phase_crossovers: Sequence[PhaseCrossover],
    ends: Ends | None,
    stability: str | None,
) -> Margins:
    """Read all figures.

    Parameters
    ----------
    ends : Ends or None
        None where the response is known on a band only; the figures then are those of the band.
    stability : str or None
        Class of the closed loop: decides the sign of the phase margin, and whether there is a delay margin. None where
        it is not known: signs are then those of a loop without growing modes of its own.
    """
    stable = stability == STABLE
    points = [*phase_crossovers, *(_real_ends(ends) if ends else ())]
    below = max((p for p in points if p.log_gain <= ON_POINT), key=lambda p: p.log_gain, default=None)
    above = min((p for p in points if p.log_gain >= -ON_POINT), key=lambda p: p.log_gain, default=None)
    nearest = _nearest_crossover(crossovers, stable=stable)
    margin = None if nearest is None else _signed(nearest, stable=stable)
    has_delay = stable or (stability is None and margin is not None and margin > 0)
    peak, at = scan.sensitivity_peak()
    bounded = stability != MARGINAL
    return Margins(
        exp(-min(below.log_gain, 0.0)) if below else None,
        below.w_rad_s if below else None,
        exp(-max(above.log_gain, 0.0)) if above else None,
        above.w_rad_s if above else None,
        None if margin is None else degrees(margin),
        None if nearest is None else nearest.w_rad_s,
        min((c.lag_left / c.w_rad_s for c in crossovers), default=None) if has_delay else None,
        *(_with_ends(peak if bounded else inf, at, ends) if ends else (peak, at)),
        tuple(c.w_rad_s for c in crossovers),
    )


def _real_ends(ends: Ends) -> list[PhaseCrossover]:
    """Ends at which the response is negative, or approaches every phase, with a finite gain."""
    return [
        PhaseCrossover(w, size)
        for w, (size, phase) in ((0.0, ends.start), (ends.end_rad_s, ends.end))
        if abs(size) < inf and (phase is None or _is_odd(phase))
    ]


def _signed(crossover: GainCrossover, *, stable: bool) -> float:
    return abs(crossover.rotation) if stable else crossover.rotation


def _nearest_crossover(crossovers: Sequence[GainCrossover], *, stable: bool) -> GainCrossover | None:
    """The crossover with the smallest margin; among equals the highest."""
    ordered = sorted(crossovers, key=lambda c: -c.w_rad_s)
    return min(ordered, key=lambda c: round(_signed(c, stable=stable) / ON_POINT), default=None)


def _with_ends(peak: float, at: float, ends: Ends) -> tuple[float | None, float | None]:
    """The peak, or the sensitivity at an end of the axis where that is larger."""
    best: tuple[float, float | None] = (peak, at)
    last = ends.end_rad_s if ends.end_rad_s < inf else None
    for w, (size, phase) in ((0.0, ends.start), (last, ends.end)):
        if size < _MOST_LOG:
            # Without a limit of the phase every phase is approached, the worst one too.
            value = exp(size) * (cos(phase) if phase is not None else -1.0)
            there = 1 / abs(1 + value) if value != -1 else inf
            # Between equals the end is where the peak is approached.
            best = (there, w) if there >= best[0] * (1 - ON_POINT) else best
    return best if best[0] < inf else (None, best[1])


def _is_odd(phase: float) -> bool:
    """Whether a multiple of pi is an odd one."""
    return round(phase / pi) % 2 == 1


def _odd_levels_passed(phase: float) -> int:
    return floor((phase + pi) / (2 * pi))


def _distance(log_gain: Real, phase: Real) -> Real:
    """``|1 + L|``."""
    size = np.exp(np.minimum(log_gain, _MOST_LOG))
    distance: Real = np.abs(1 + size * np.exp(1j * phase))
    return distance


def _touches(w: Real, value: Real, level: float | None) -> Real:
    """Vertices of parabolas through three neighbours that may reach a level (odd multiples of pi for ``None``)."""
    before, here, after = value[:-2], value[1:-1], value[2:]
    left, right = here - before, after - here
    target = level if level is not None else 2 * pi * np.floor(here / (2 * pi)) + pi
    gap = here - target
    with np.errstate(invalid="ignore"):
        span = np.maximum(np.abs(left), np.abs(right))
        turning = (left * right < 0) & (left * gap < 0) & (np.abs(gap) <= _NEAR * span) & np.isfinite(span)
    i = np.flatnonzero(turning)
    a, b = w[i + 1] - w[i], w[i + 2] - w[i + 1]
    slope = (left[i] / a * b + right[i] / b * a) / (a + b)
    curve = (right[i] / b - left[i] / a) / (a + b)
    vertex = w[i + 1] - slope / (2 * curve)
    return vertex[np.abs(vertex - w[i + 1]) > _CLOSED * 1e4 * w[i + 1]]


def _solved(function: Callable[[Real], Real], first: Real, last: Real, at_first: Real, at_last: Real) -> Real:
    """A zero in every bracket: false position, its end values halved where one end stays (the Illinois rule)."""
    a, b = np.array(first, float), np.array(last, float)
    fa, fb = (np.clip(f, -_MOST_LOG, _MOST_LOG) for f in (at_first, at_last))
    for step in range(_MOST_STEPS):
        wide = (np.abs(b - a) > _CLOSED * np.abs(b)) & (np.abs(fb) > _ZERO)
        if not wide.any():
            break
        with np.errstate(invalid="ignore", divide="ignore"):
            c = (a + b) / 2 if step % 4 == 3 else b - fb * (b - a) / (fb - fa)
        c = np.where(wide & np.isfinite(c), c, b)
        fc = np.clip(function(c), -_MOST_LOG, _MOST_LOG)
        crossed = fc * fb <= 0
        a, fa = np.where(wide & crossed, b, a), np.where(crossed, fb, fa / 2)
        b, fb = c, fc
    return b
