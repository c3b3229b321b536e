"""The sampled loop: a pulse transfer function around a held, delayed, sampled plant.

``L = C(z) Gd(z)`` on ``z = exp(jwT)`` up to half the sample rate, from factors. Stability is decided on the closed-loop
polynomial ``z^d A_c A_p + B_c B_p``, whose coefficients are enclosed, so that the answer is proven for it; only where a
long dead time makes its degree too high are encirclements counted instead.
"""

from __future__ import annotations

from functools import cached_property
from math import exp, inf, pi

import numpy as np

from realize.checks.schur import MARGINAL, STABLE, UNSTABLE
from realize.loop import circle
from realize.loop.continuous import BEYOND, Verdict
from realize.loop.grid import graded, with_turns
from realize.loop.held import HeldPlant
from realize.loop.margins import Ends, GainCrossover, Margins, Scan, encirclements, margins
from realize.loop.response import Delay, Part, Real, Sampled, combined
from realize.methods.conversion import CARRIED_BITS
from realize.transfer import PulseTransferFunction

#: Degree of the closed-loop polynomial up to which it is decided by recursion: 64^2/2 steps take some 10 ms.
_MOST_DEGREE = 64


class SampledLoop:
    """A sampled controller around a plant.

    Parameters
    ----------
    controller : PulseTransferFunction
        As stored, or exact.
    held : HeldPlant
        At the same period.
    """

    def __init__(self, controller: PulseTransferFunction, held: HeldPlant) -> None:
        assert controller.period_s == held.period_s
        self.controller = controller
        self.held = held
        self.period_s = held.period_s
        self._rational = Sampled(controller, held.pulse)

    @cached_property
    def parts(self) -> tuple[Part, ...]:
        """Factors of the open loop: controller and plant, whole samples of delay."""
        return (self._rational, Delay(float(self.held.whole * self.period_s)))

    def response(self, w_rad_s: Real) -> tuple[Real, Real]:
        """``ln |L|`` and unwrapped phase in rad, up to half the sample rate."""
        return combined(self.parts, w_rad_s)

    def controller_response(self, w_rad_s: Real) -> tuple[Real, Real]:
        """``ln |C|`` and unwrapped phase in rad."""
        return Sampled(self.controller).at(w_rad_s)

    @property
    def grid(self) -> Real:
        """Frequencies in rad/s, up to half the sample rate, that follow every feature of the response."""
        return self._scan.w

    @cached_property
    def crossovers(self) -> tuple[GainCrossover, ...]:
        """All gain crossovers, ascending."""
        return self._scan.gain_crossovers()

    @cached_property
    def verdict(self) -> Verdict:
        """Stability of the closed loop."""
        held, controller = self.held, self.controller
        if held.whole == 0 and controller.feed_through * held.pulse.feed_through == -1:
            return Verdict(UNSTABLE, "controller and plant both answer at once, with a gain of -1: no solution")
        if self._degree > _MOST_DEGREE:
            return self._by_encirclements()
        hidden = min(_at_one(controller.zeros, held.pulse.zeros), _at_one(controller.poles, held.pulse.poles))
        decision = circle.decide(lambda bits: self._closed(bits, hidden))
        return _with_hidden(decision, hidden)

    @cached_property
    def margins(self) -> Margins:
        """Gain, phase and delay margins, and the sensitivity peak."""
        scan = self._scan
        return margins(scan, self.crossovers, scan.phase_crossovers(), self._ends, self.verdict.stability)

    @property
    def _degree(self) -> int:
        return self.held.whole + len(self.controller.denominator) + len(self.held.pulse.denominator) - 2

    def _closed(self, bits: int, hidden: int) -> list[circle.Ball]:
        """``z^d A_c A_p + B_c B_p`` less a known factor ``(z - 1)^hidden``."""
        conversion, carried = self.held.conversion, max(bits, CARRIED_BITS)
        below = circle.product(
            circle.rational_balls(self.controller.denominator, bits),
            circle.balls(conversion.denominator(carried), bits),
            bits,
        )
        above = circle.product(
            circle.rational_balls(self.controller.numerator, bits),
            circle.balls(conversion.numerator(carried), bits),
            bits,
        )
        return circle.without_ones(circle.total(below + [(0, 0)] * self.held.whole, above), hidden)

    def _by_encirclements(self) -> Verdict:
        turns = encirclements(self.crossovers, self._ends)
        if turns is None:
            return Verdict(MARGINAL, "the Nyquist curve passes through the critical point")
        growing = self._rational.growing - turns
        return Verdict(UNSTABLE if growing else STABLE, f"encirclements counted: {growing} growing modes")

    @cached_property
    def _ends(self) -> Ends:
        order, size, start_phase = self._rational.start
        start = size if order == 0 else (inf if order < 0 else -inf)
        nyquist = pi / float(self.period_s)
        end = float(self.response(np.array([nyquist]))[0][0])
        end_phase = self._rational.end_phase - pi * self.held.whole
        return Ends((start, start_phase), (end, end_phase), nyquist)

    @cached_property
    def _scan(self) -> Scan:
        nyquist = pi / float(self.period_s)
        features = self._rational.features
        low = min(self._lowest(), nyquist) / BEYOND
        grid = graded(features, low, nyquist)
        return Scan(self.response, with_turns(grid, float(self.held.whole * self.period_s), low, nyquist))

    def _lowest(self) -> float:
        """Lowest frequency at which anything happens."""
        sizes = np.abs(self._rational.features)
        order, size, _ = self._rational.start
        marks = [float(sizes.min(initial=inf))] + ([exp(-size / order)] if order else [])
        return min(marks)


def _at_one(*groups: tuple[object, ...]) -> int:
    """Roots at z = 1, multiplicities counted."""
    return sum(root.multiplicity for roots in groups for root in roots if root.value == 0)  # type: ignore[attr-defined]


def _with_hidden(decision: circle.Decision, hidden: int) -> Verdict:
    bits = f"decided on the closed-loop polynomial, enclosed to {decision.bits} bits"
    if hidden > 1 or decision.stability == UNSTABLE:
        return Verdict(UNSTABLE, bits)
    if hidden:
        return Verdict(MARGINAL, "a zero at z = 1 cancels a pole at z = 1 inside the loop")
    if decision.stability == MARGINAL:
        return Verdict(MARGINAL, f"not told from a mode on the unit circle by {decision.bits} bits")
    return Verdict(STABLE, bits)
