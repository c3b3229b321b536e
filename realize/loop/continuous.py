"""The loop without sampling: ``L = C P H exp(-s dead_time)``, or the same with hold and compute delay in it.

Gain crossovers are roots of ``|N|^2 - |D|^2``, a polynomial in the square of the frequency whatever the dead time, and
without dead time so are phase crossovers: found exactly. With a dead time phase crossovers, and with a hold gain
crossovers too, are bracketed on a grid and refined to rounding. Without dead time stability is read from the roots of
``D + N``; with one, encirclements are counted.
"""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property
from math import exp, inf, log, pi, sqrt
from typing import NamedTuple

import numpy as np

from realize.algebra import polynomial as poly
from realize.algebra.roots import Root, isolate
from realize.checks.modes import in_words
from realize.checks.schur import MARGINAL, STABLE, UNSTABLE
from realize.checks.stability import continuous_stability
from realize.errors import Refused
from realize.loop.grid import graded, with_jumps, with_turns
from realize.loop.margins import (
    Ends,
    GainCrossover,
    Margins,
    PhaseCrossover,
    Scan,
    encirclements,
    margins,
)
from realize.loop.plant import Plant, Ratio, checked_plant, series
from realize.loop.response import Continuous, Delay, Hold, Part, Real, combined, log_size
from realize.transfer import TransferFunction

#: The grid reaches this far beyond the lowest and highest frequency at which anything happens: a root has turned to
#: within 1e-4 of its asymptote there.
BEYOND = 1e4

#: Gain below which a dead time need not be resolved: with ``|L|`` this small ``|1/(1 + L)|`` is within 2 % of 1, and a
#: gain margin above 34 dB.
_QUIET = 0.02

#: Turns of the dead time that are resolved beyond that point: the next phase crossover lies within one.
_TURNS_BEYOND = 2


#: Ratio of the next frequencies where there was no phase crossover yet.
_FURTHER = 8

#: Multiple of the highest corner above which a gain that does not fall to 0 only approaches its limit.
_SETTLED = 30


class Verdict(NamedTuple):
    """Stability of a closed loop.

    Attributes
    ----------
    stability : str
        ``stable``, ``marginal`` or ``unstable``.
    by : str
        How that was decided.
    """

    stability: str
    by: str

    @property
    def is_stable(self) -> bool:
        """Whether every mode decays."""
        return self.stability == STABLE


class ContinuousLoop:
    """A continuous controller around a plant.

    Parameters
    ----------
    controller : TransferFunction
        Proper.
    plant : Plant
    hold_s : Fraction, optional
        Period of a hold in the loop, ``(1 - exp(-sT))/(sT)``.
    compute_delay_s : Fraction
        From sampling to output.

    Raises
    ------
    Refused
        When the controller or a part of the plant is improper.
    """

    def __init__(
        self,
        controller: TransferFunction,
        plant: Plant,
        *,
        hold_s: Fraction | None = None,
        compute_delay_s: Fraction = Fraction(0),
    ) -> None:
        if controller.relative_degree < 0:
            raise Refused(
                "transfer",
                "the controller is improper, so the loop has no margins yet",
                "as many poles as zeros, or more",
                "add a roll-off pole first; the crossover alone is known without it",
            )
        self.controller = controller
        self.plant = checked_plant(plant)
        self.hold_s = hold_s
        self.delay_s = plant.dead_time_s + compute_delay_s
        self.ratio = series(controller, plant.transfer, plant.sensor)
        self._rational = Continuous(self.ratio.lowest)

    @cached_property
    def parts(self) -> tuple[Part, ...]:
        """Factors of the open loop."""
        delay: tuple[Part, ...] = (Delay(float(self.delay_s)),) if self.delay_s else ()
        hold: tuple[Part, ...] = (Hold(float(self.hold_s)),) if self.hold_s else ()
        return (self._rational, *delay, *hold)

    def response(self, w_rad_s: Real) -> tuple[Real, Real]:
        """``ln |L|`` and unwrapped phase in rad."""
        return combined(self.parts, w_rad_s)

    @cached_property
    def crossovers(self) -> tuple[GainCrossover, ...]:
        """All gain crossovers, ascending."""
        if self.hold_s:
            return self._scan.gain_crossovers()
        found = gain_crossovers_rad_s(self.ratio)
        return _with_directions(found, self)

    @cached_property
    def verdict(self) -> Verdict:
        """Stability of the closed loop."""
        hidden = _hidden(self.ratio.common)
        if hidden:
            return hidden
        if not self.delay_s and not self.hold_s:
            return _by_roots(self.ratio)
        if not self.hold_s and self._high_gain >= 0:
            return Verdict(UNSTABLE, "the gain at high frequency is 1 or more, which no dead time leaves stable")
        turns = encirclements(self.crossovers, self._ends)
        if turns is None:
            return Verdict(MARGINAL, "the Nyquist curve passes through the critical point")
        growing = self._rational.growing - turns
        by = f"encirclements counted: {growing} growing modes" if growing else "encirclements counted"
        return Verdict(UNSTABLE if growing else STABLE, by)

    @cached_property
    def margins(self) -> Margins:
        """Gain, phase and delay margins, and the sensitivity peak."""
        exact = not (self.delay_s or self.hold_s)
        points = self._exact_phase_crossovers() if exact else self._phase_crossovers()
        found = margins(self._scan, self.crossovers, points, self._ends, self.verdict.stability)
        if exact and self._high_gain >= 0 and self.verdict.is_stable:
            # A gain that stays at 1 or more meets the critical point at some high frequency, however short the delay.
            return found._replace(delay_margin_s=0.0)
        return found

    @property
    def grid(self) -> Real:
        """Frequencies in rad/s that follow every feature of the response."""
        return self._scan.w

    @property
    def _high_gain(self) -> float:
        """``ln`` of the gain at infinity of the rational part."""
        n, d = self.ratio
        return log_size(Fraction(n[0], d[0])) if len(n) == len(d) else -inf

    @cached_property
    def _ends(self) -> Ends:
        order, log_gain, phase = self._rational.start
        start = log_gain if order == 0 else (inf if order < 0 else -inf)
        if self.hold_s or self._high_gain == -inf:
            return Ends((start, phase), (-inf, None))
        if self.delay_s:
            return Ends((start, phase), (self._high_gain, None))
        n, d = self.ratio
        return Ends((start, phase), (self._high_gain, 0.0 if n[0] * d[0] > 0 else pi))

    @cached_property
    def _scan(self) -> Scan:
        low, high = self._span()
        grid = graded(self._rational.features, low, high)
        if self._turning_s:
            # Beyond, the phase turns ever on while nothing depends on it any more.
            last = self._last_turn(grid, self._turning_s)
            grid = self._turned(grid[grid < last], low, last)
        return Scan(self.response, grid)

    @property
    def _turning_s(self) -> float:
        """Delay, and period of the hold."""
        return float(self.delay_s + (self.hold_s or 0))

    def _turned(self, grid: Real, first: float, last: float) -> Real:
        """Add what delay and hold need between two frequencies."""
        grid = with_turns(grid, self._turning_s, first, last)
        return with_jumps(grid, 2 * pi / float(self.hold_s)) if self.hold_s else grid

    def _last_turn(self, grid: Real, delay_s: float) -> float:
        """Frequency up to which the turns of the delays are resolved."""
        log_gain, _ = self.response(grid)
        loud = grid[log_gain > log(_QUIET)]
        last = float(loud[-1]) if len(loud) else 0.0
        if self._high_gain > log(_QUIET) and not self.hold_s:
            last = _SETTLED * float(np.abs(self._rational.features).max(initial=0.0))
        return min(last + _TURNS_BEYOND * 2 * pi / delay_s, float(grid[-1]))

    def _span(self) -> tuple[float, float]:
        """Lowest and highest frequency of interest."""
        sizes = np.abs(self._rational.features)
        order, log_gain, _ = self._rational.start
        n, d = self.ratio
        marks = [float(s) for s in (sizes.min(initial=inf), sizes.max(initial=0)) if 0 < s < inf]
        marks += [exp(-log_gain / order)] if order else []
        excess = len(d) - len(n)
        marks += [exp(log_size(Fraction(n[0], d[0])) / excess)] if excess else []
        marks += [1 / float(self.delay_s)] if self.delay_s else []
        marks += [1 / float(self.hold_s)] if self.hold_s else []
        marks = marks or [1.0]
        return min(marks) / BEYOND, max(marks) * BEYOND

    def _phase_crossovers(self) -> tuple[PhaseCrossover, ...]:
        """Phase crossovers up to the first that the falling gain passes, for which the grid may have to go on."""
        found = self._scan.phase_crossovers()
        _, high = self._span()
        last = float(self.grid[-1])
        while last < high and not any(point.log_gain < 0 for point in found):
            first, last = last, min(_FURTHER * last, high)
            grid = graded(self._rational.features, first, last)
            found += Scan(self.response, self._turned(grid, first, last)).phase_crossovers()
        return found

    def _exact_phase_crossovers(self) -> tuple[PhaseCrossover, ...]:
        """Roots of the imaginary part of ``N(jw) conj(D(jw))`` at which the real part is negative."""
        lowest = self.ratio.lowest
        product = poly.multiply(lowest.numerator, poly.reflect(lowest.denominator))
        odd = poly.trimmed(product[len(product) % 2 :: 2])
        w = np.array(_positive_frequencies(odd))
        if not len(w):
            return ()
        log_gain, phase = self.response(w)
        real = (np.cos(phase) < 0) & np.isfinite(log_gain)
        return tuple(PhaseCrossover(*map(float, pair)) for pair in zip(w[real], log_gain[real], strict=True))


def gain_crossovers_rad_s(ratio: Ratio) -> tuple[tuple[float, int], ...]:
    """Frequencies with ``|N/D| = 1``, ascending, with their multiplicity: an even one is a touch.

    Notes
    -----
    Roots of ``N(s) N(-s) - D(s) D(-s)``, a polynomial in ``s^2 = -w^2``, isolated exactly.
    """
    squares = (poly.multiply(p, poly.reflect(p)) for p in ratio)
    difference = poly.subtract(*squares)
    return tuple((sqrt(-r.value.real), r.multiplicity) for r in _negative_roots(difference[::2]))


def _with_directions(found: tuple[tuple[float, int], ...], loop: ContinuousLoop) -> tuple[GainCrossover, ...]:
    """Give each crossover its phase and the direction in which the gain passes 1."""
    if not found:
        return ()
    w = np.array([frequency for frequency, _ in found])
    order, log_gain, _ = loop._rational.start
    above = order < 0 or (order == 0 and log_gain > 0)
    directions = []
    for _, multiplicity in found:
        directions.append(0 if multiplicity % 2 == 0 else (-1 if above else 1))
        above ^= multiplicity % 2 == 1
    _, phase = loop.response(w)
    crossings = zip(w, phase, directions, strict=True)
    return tuple(GainCrossover(float(at), float(turn), way) for at, turn, way in crossings)


def _positive_frequencies(odd: poly.Integers) -> list[float]:
    """Frequencies at which a polynomial in ``s^2`` vanishes, ascending."""
    return [sqrt(-r.value.real) for r in _negative_roots(odd)] if odd else []


def _negative_roots(p: poly.Integers) -> list[Root]:
    kept = poly.trimmed(p)
    negative = [r for r in isolate(kept) if r.value.imag == 0 and r.value.real < 0] if len(kept) > 1 else []
    return sorted(negative, key=lambda r: -r.value.real)


def _hidden(common: poly.Integers) -> Verdict | None:
    """The verdict where a mode that does not decay is cancelled inside the loop."""
    kept = [r for r in isolate(common) if r.value.real >= 0] if len(common) > 1 else []
    if not kept:
        return None
    worst = max(kept, key=lambda r: (r.value.real, r.multiplicity))
    return Verdict(
        continuous_stability(kept), f"a cancellation inside the loop hides the mode at {in_words(worst.value)}"
    )


def _by_roots(ratio: Ratio) -> Verdict:
    closed = poly.add(ratio.denominator, ratio.numerator)
    if len(closed) < len(ratio.denominator):
        return Verdict(UNSTABLE, "the loop gain at high frequency is -1: the loop has no solution")
    return Verdict(continuous_stability(isolate(closed)), "exact roots of the closed loop")
