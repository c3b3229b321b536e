"""The check ``saturation recovery``: what the output does when an error takes it to its limits.

The error steps from rest to one extreme, is held, reverses to the other, is held, and returns to 0; then the same with
the extremes exchanged. Extremes are those of the input range, and, inside it, those that take the output some way
beyond its limits. The answer of the recursion with its clamp is compared with laws that know neither its arithmetic
nor its structure:

- the linear law, clamped: what the design asks when nothing is ever lost at a limit;
- the held law, clamped: the same with its integrals standing still while they would push further out of the limit;
- with back-calculation, that law as well.

At every sample the output must lie between what these ask, to within 5 % of the output range and a sample. What a law
asks by itself (a lead that kicks back, a non-minimum phase, the derivative of the falling edge) is thereby never held
against the output; a history that lost what the limit cut off is, for it leaves the limit too early, jumps to the
other one when the error returns, or stays when it should leave. (The clamped history of a pure integrator is the held
law itself, and passes.)

Back-calculation may pull its integral further than the others; but it is at a limit while the error is held only where
one of the first two laws asks for that half of the range, so that a tracking time that is too short is found out.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from itertools import pairwise
from typing import NamedTuple

import numpy as np

from realize.algebra import polynomial as poly
from realize.algebra.arrays import middle
from realize.checks.chain import Real, Whole
from realize.checks.check import Asked, Check
from realize.checks.step import SampledResponse
from realize.checks.tolerances import RECOVERY
from realize.transfer import PulseTransferFunction

Simulate = Callable[[Sequence[float]], Sequence[float]]

#: Samples for which each error is held: three of them, both ways, of two sizes, are 1920 samples at the most.
_MOST_HELD = 160

#: How far beyond its limits the typical answer to a moderate error asks: a proportional action that the limit cuts
#: to a quarter is missed when the error returns, if it is lost.
_BEYOND = 4.0

#: How far beyond the greatest answer may ask then: an answer that dies out has no typical size.
_FAR_BEYOND = 1000.0


class Signals(NamedTuple):
    """What is known of the signals, in their physical units.

    ``tracking_time_s`` is for back-calculation alone.
    """

    input_range: tuple[Fraction, Fraction] | None = None
    input_per_count: Fraction | None = None
    output_range: tuple[Fraction, Fraction] | None = None
    tracking_time_s: Fraction | None = None

    @property
    def output_span(self) -> Fraction | None:
        """Width of the output range."""
        return self.output_range[1] - self.output_range[0] if self.output_range else None


def check_recovery(
    discrete: PulseTransferFunction,
    sampled: SampledResponse,
    last: int,
    of: str,
    signals: Signals,
    simulate: Simulate | None,
) -> Check:
    """Greatest distance of the output from what the laws ask, in % of the output range.

    Parameters
    ----------
    sampled : SampledResponse
        Of ``discrete``.
    last : int
        Horizon of the design's step response in samples: each error is held that long, 200 samples at most.
    simulate : callable or None
        Inputs to outputs, from rest, with the clamp.
    """
    asked = Asked("saturation recovery", of, "%", float(RECOVERY))
    if signals.output_range is None:
        return asked.undefined("it needs the output range")
    if simulate is None:
        return asked.undefined("it is judged on the stored numbers")
    held = int(min(last + 1, _MOST_HELD, sampled.last / 3))
    if held < 1:
        return asked.undefined("the response grows too much within one sample to be followed")
    laws = _Laws(discrete, sampled, held, signals)
    tried = [(a, b, 0.0) for pair in _extremes(laws, signals) for a, b in (pair, pair[::-1])]
    compared = [_compared(laws, errors, simulate) for errors in tried if laws.saturates(errors)]
    if not compared:
        return asked.undefined(f"no allowed error takes the output to its limits within {held} samples")
    worst = max(compared, key=lambda found: found.distance)
    return asked.measured(worst.wanted, worst.output, 100 * worst.distance / laws.span, worst.reason)


class _Worst(NamedTuple):
    """The sample at which the output lies farthest from the laws."""

    distance: float
    wanted: float
    output: float
    reason: str


class _Laws:
    """What the laws ask for a sequence of three held errors."""

    def __init__(self, discrete: PulseTransferFunction, sampled: SampledResponse, held: int, signals: Signals) -> None:
        assert signals.output_range is not None
        self.low, self.high = (float(limit) for limit in signals.output_range)
        self.span = self.high - self.low
        self.held = held
        samples: Whole = np.arange(3 * held)
        self._unit = sampled.at(samples)
        self._integrals = [float(r) for r in integral_gains(discrete)]
        self._unit_integral = _integral_response(self._integrals, samples)
        tracking = signals.tracking_time_s
        self.tracking_gain = float(discrete.period_s / tracking) if tracking else 0.0

    @property
    def unit(self) -> Real:
        """Answer of the linear law to an error of 1 that is held."""
        return self._unit[: self.held]

    def saturates(self, errors: Sequence[float]) -> bool:
        """Whether the linear law goes beyond a limit while an error is held."""
        asked = self._superposed(self._unit, errors)[: 2 * self.held]
        return bool(asked.min() < self.low or asked.max() > self.high)

    def asked(self, errors: Sequence[float]) -> list[Real]:
        """Clamped answers: of the linear law, of the held law, and of back-calculation where it is in use."""
        linear = self._superposed(self._unit, errors)
        answers = [linear]
        if self._integrals:
            rest = linear - self._superposed(self._unit_integral, errors)
            inputs = np.repeat(errors, self.held)
            answers.append(self._integrated(rest, inputs, 0.0))
            if self.tracking_gain:
                answers.append(self._integrated(rest, inputs, self.tracking_gain))
        return [np.clip(answer, self.low, self.high) for answer in answers]

    def _superposed(self, unit: Real, errors: Sequence[float]) -> Real:
        """Answer to errors that follow each other, from that to a unit step."""
        answer = np.zeros(len(unit))
        for i, (before, error) in enumerate(pairwise((0.0, *errors))):
            start = i * self.held
            answer[start:] += (error - before) * unit[: len(unit) - start]
        return answer

    def _integrated(self, rest: Real, inputs: Real, tracking_gain: float) -> Real:
        """The rest and its integrals, held at the limits, or led back by what the limits cut off."""
        states = [0.0] * (len(self._integrals) + 1)
        answer = []
        for u, r in zip(inputs.tolist(), rest.tolist(), strict=True):
            value = r + states[0]
            excess = value - min(max(value, self.low), self.high)
            answer.append(value)
            above = states[1:]
            for i, gain in enumerate(self._integrals):
                increment = gain * u + above[i]
                if tracking_gain:
                    states[i] += increment - (tracking_gain * excess if i == 0 else 0.0)
                elif excess * increment <= 0:
                    states[i] += increment
        return np.array(answer)


def integral_gains(discrete: PulseTransferFunction) -> tuple[Fraction, ...]:
    """``R_1, R_2, ...`` of ``Gd = rest(z) + sum_i R_i/(z - 1)^i``, by the power series at z = 1."""
    order = sum(root.multiplicity for root in discrete.poles if root.value == 0)
    if not order:
        return ()
    numerator, denominator = (
        poly.shift(poly.trimmed(p), Fraction(1))[::-1] for p in (discrete.numerator, discrete.denominator)
    )
    below = denominator[order:]
    series: list[Fraction] = []
    for i in range(order):
        known = sum((series[j] * below[i - j] for j in range(i) if i - j < len(below)), Fraction(0))
        series.append(((numerator[i] if i < len(numerator) else Fraction(0)) - known) / below[0])
    return tuple(reversed(series))


def _integral_response(gains: Sequence[float], samples: Whole) -> Real:
    """Step response of ``sum_i R_i/(z - 1)^i``: ``sum_i R_i (k over i)``."""
    response, choose = np.zeros(len(samples)), np.ones(len(samples))
    for i, gain in enumerate(gains, start=1):
        choose = choose * (samples - (i - 1)) / i
        response += gain * choose
    return response


def _extremes(laws: _Laws, signals: Signals) -> list[tuple[float, float]]:
    """Greatest and least errors: moderate ones as far as the input range holds them, and those of the range."""
    sizes = np.abs(laws.unit)
    typical = max(middle(sizes), float(sizes.max()) * _BEYOND / _FAR_BEYOND)
    error = _BEYOND * max(abs(laws.low), abs(laws.high)) / typical if typical else 0.0
    if signals.input_range is None:
        return [(error, -error)]
    low, high = (float(limit) for limit in signals.input_range)
    low, high = min(low, 0.0), max(high, 0.0)
    return list(dict.fromkeys([(min(error, high), max(-error, low)), (high, low)]))


def _compared(laws: _Laws, errors: Sequence[float], simulate: Simulate) -> _Worst:
    """Where the output lies farthest outside what the laws ask."""
    inputs = np.repeat(errors, laws.held)
    output = np.array(simulate(inputs.tolist()))
    asked = laws.asked(errors)
    low, high = _hull(asked)
    if laws.tracking_gain:
        strict_low, strict_high = _hull(asked[:2])
        strict = (output <= laws.low) | (output >= laws.high)
        strict[2 * laws.held :] = False
        half = laws.span / 2
        low, high = np.where(strict, strict_low - half, low), np.where(strict, strict_high + half, high)
    distance = np.maximum(np.maximum(low - output, output - high), 0.0)
    i = int(np.argmax(distance))
    wanted = float(np.clip(output[i], low[i], high[i]))
    phase, k = divmod(i, laws.held)
    reason = (
        f"held at {errors[0]:.5g}, then {errors[1]:.5g}, then 0, for {laws.held} samples each; "
        f"farthest {k} samples after the error became {errors[phase]:.5g}"
    )
    return _Worst(float(distance[i]), wanted, float(output[i]), reason)


def _hull(answers: Sequence[Real]) -> tuple[Real, Real]:
    """Least and greatest of some answers at each sample and its neighbours."""
    low, high = np.min(answers, axis=0), np.max(answers, axis=0)
    for bound, pick in ((low, np.minimum), (high, np.maximum)):
        own = bound.copy()
        bound[1:] = pick(bound[1:], own[:-1])
        bound[:-1] = pick(bound[:-1], own[1:])
    return low, high
