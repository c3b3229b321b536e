"""Frequency responses as the logarithm of their magnitude and an unwrapped phase, from factors.

Every part answers for arrays of frequencies in rad/s with ``(ln |.|, phase in rad)``. The phase of a factor is
continuous along the axis (or the circle), a root on it counting as one left of the axis (inside the circle): so the
phase of a product is unwrapped without looking at neighbours, and its change along a stretch is exact.
Polynomials are never evaluated; ``exp(jwT) - 1`` is taken by its sine form.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import zip_longest
from math import exp, log, pi, prod
from typing import NamedTuple, Protocol

import numpy as np
import numpy.typing as npt

from realize.checks.modes import every, logarithm
from realize.transfer import PulseTransferFunction, TransferFunction

Real = npt.NDArray[np.float64]
Complex = npt.NDArray[np.complex128]
Whole = npt.NDArray[np.int64]

#: Root in ``z - 1`` at z = -1, the end of the frequency axis.
_AT_NYQUIST = -2 + 0j


class Part(Protocol):
    """Anything with a frequency response."""

    def at(self, w: Real) -> tuple[Real, Real]:
        """``ln |.|`` and phase at frequencies above 0."""


class Start(NamedTuple):
    """How a response begins at low frequency: ``gain (jw)^order``.

    Attributes
    ----------
    order : int
        Zeros minus poles at the origin.
    log_gain : float
        ``ln |gain|``.
    phase : float
        Unwrapped phase of the gain: a multiple of pi.
    """

    order: int
    log_gain: float
    phase: float


class Continuous:
    """A transfer function at ``s = jw``.

    Attributes
    ----------
    features : array of complex
        Roots off the origin in rad/s: what the response is shaped by.
    growing : int
        Poles right of the imaginary axis.
    start : Start
        Behaviour at low frequency.
    """

    def __init__(self, transfer: TransferFunction) -> None:
        self._gain = log_size(transfer.gain), 0.0 if transfer.gain > 0 else pi
        low = transfer.low_frequency_gain
        self._low_gain = log_size(low), 0.0 if low > 0 else pi
        self._zeros, self._poles = (_array(every(roots)) for roots in (transfer.zeros, transfer.poles))
        self._factors = _OnAxis(np.concatenate([self._zeros, self._poles]), len(self._zeros))
        away = self._factors.without(0j)
        self.features = away.roots
        self.growing = int(np.sum(self._poles.real > 0))
        phase = self._gain[1] + float(away.at(np.zeros(1))[1][0])
        self.start = Start(transfer.zeros_minus_poles_at_origin, log_size(low), _multiple_of_pi(phase))

    def value(self, s: Complex) -> Complex:
        """``G(s)`` anywhere off its poles."""
        value = np.full(len(s), exp(self._low_gain[0]) * np.cos(self._low_gain[1]), complex)
        for zero, pole in zip_longest(sorted(self._zeros, key=abs), sorted(self._poles, key=abs)):
            if zero is not None:
                value *= _factor(zero, s)
            if pole is not None:
                value /= _factor(pole, s)
        return value

    def expansion(self, a: float, resolved_rad_s: float, powers: int) -> Real:
        """First coefficients of G in powers of ``u = a/(s + a)``; roots beyond what is resolved are static.

        Returns
        -------
        array, (powers + 1,)
            Ascending; zeros where G grows with frequency as far as it is resolved.
        """
        zeros, poles = ([r for r in roots if abs(r) < resolved_rad_s] for roots in (self._zeros, self._poles))
        order = len(poles) - len(zeros)
        series = np.zeros(powers + 1, complex)
        if not 0 <= order <= powers:
            return series.real
        # 1 - s/root = (-a/root) (1 - (1 + root/a) u)/u, and s = a (1 - u)/u.
        lead = prod(-a / z if z else a for z in zeros) / prod(-a / p if p else a for p in poles)
        series[order] = exp(self._low_gain[0]) * np.cos(self._low_gain[1]) * lead
        for zero in zeros:
            series[1:] -= (1 + zero / a) * series[:-1]
        for pole in poles:
            for k in range(order + 1, powers + 1):
                series[k] += (1 + pole / a) * series[k - 1]
        return series.real

    def at(self, w: Real) -> tuple[Real, Real]:
        """``ln |G(jw)|`` and phase."""
        size, turn = self._factors.at(w)
        return self._gain[0] + size, self._gain[1] + turn


class _OnAxis:
    """Factors ``jw - root``, the zeros first."""

    def __init__(self, roots: Complex, zeros: int) -> None:
        self.roots = roots
        self._signs = np.where(np.arange(len(roots)) < zeros, 1.0, -1.0)[:, None]
        self._re, self._im = np.abs(roots.real)[:, None], roots.imag[:, None]
        # A root right of the axis turns the other way, from half a turn.
        grows = roots.real > 0
        self._turns = np.where(grows[:, None], -self._signs, self._signs)
        self._fixed = float(pi * self._signs[grows].sum())

    def without(self, root: complex) -> _OnAxis:
        kept = self.roots != root
        return _OnAxis(self.roots[kept], int(np.sum(kept & (self._signs[:, 0] > 0))))

    def at(self, w: Real) -> tuple[Real, Real]:
        im = w - self._im
        with np.errstate(divide="ignore"):
            size = (self._signs * np.log(self._re * self._re + im * im)).sum(axis=0) / 2
        return size, self._fixed + (self._turns * np.arctan2(im, self._re)).sum(axis=0)


class Sampled:
    """A product of pulse transfer functions of one period at ``z = exp(jwT)``, 0 < wT <= pi.

    Attributes
    ----------
    features, growing, start
        As for :class:`Continuous`: ``ln(z)/T`` for the roots, poles outside the unit circle.
    end_phase : float
        Unwrapped phase at half the sample rate, a multiple of pi; a pole at z = -1 is passed outside.
    """

    def __init__(self, *pulses: PulseTransferFunction) -> None:
        self._period_s = float(pulses[0].period_s)
        gains = [pulse.gain for pulse in pulses]
        self._gain = sum(map(log_size, gains)), pi * sum(gain < 0 for gain in gains)
        zeros, poles = ([d for pulse in pulses for d in every(getattr(pulse, kind))] for kind in ("zeros", "poles"))
        self._factors = _OnCircle(_array([*zeros, *poles]), len(zeros))
        away = [d for d in (*zeros, *poles) if d not in (0, -1)]
        self.features = _array([logarithm(d) / self._period_s for d in away])
        self.growing = self._factors.poles_outside
        self.start = Start(
            sum(pulse.zeros_minus_poles_at_one for pulse in pulses),
            sum(log_size(pulse.low_frequency_gain) for pulse in pulses),
            _multiple_of_pi(self._phase_without(0.0, 0j)),
        )
        # (z + 1) at z = -1 - 0 has the phase pi.
        turns = pi * (zeros.count(_AT_NYQUIST) - poles.count(_AT_NYQUIST))
        self.end_phase = _multiple_of_pi(self._phase_without(pi, _AT_NYQUIST) + turns)

    def at(self, w: Real) -> tuple[Real, Real]:
        """``ln |Gd(exp(jwT))|`` and phase."""
        half = w * (self._period_s / 2)
        sine = np.sin(half)
        size, turn = self._factors.at(2 * half, -2 * sine * sine + 2j * sine * np.cos(half))
        return self._gain[0] + size, self._gain[1] + turn

    def _phase_without(self, angle: float, excluded: complex) -> float:
        turned = np.array([-2.0 + 0j if angle else 0j])
        return self._gain[1] + float(self._factors.without(excluded).at(np.array([angle]), turned)[1][0])


class _OnCircle:
    """Factors ``z - root`` on the unit circle, the roots given as ``z - 1``, the zeros first."""

    def __init__(self, deltas: Complex, zeros: int) -> None:
        self._deltas = deltas
        self._signs = np.where(np.arange(len(deltas)) < zeros, 1.0, -1.0)
        excess = 2 * deltas.real + np.abs(deltas) ** 2
        grows = excess > 0
        self.poles_outside = int(np.sum(grows & (self._signs < 0)))
        # exp(j angle) - root = exp(j angle) (1 - root exp(-j angle)) inside, -root (1 - exp(j angle)/root) outside:
        # the bracket stays right of the imaginary axis.
        self._grows = grows[:, None]
        self._turned = np.where(grows, -1 / np.where(grows, 1 + deltas, 1), 1)[:, None]
        self._fixed = float(np.sum(np.where(grows, self._signs * np.angle(-1 - deltas), 0)))
        self._inside = float(np.sum(self._signs[~grows]))

    def without(self, delta: complex) -> _OnCircle:
        kept = self._deltas != delta
        return _OnCircle(self._deltas[kept], int(np.sum(kept & (self._signs > 0))))

    def at(self, angle: Real, turned: Complex) -> tuple[Real, Real]:
        """``ln |.|`` and phase of the product at ``exp(j angle) = 1 + turned``."""
        factor = (turned - self._deltas[:, None]) * np.where(self._grows, self._turned, np.conj(1 + turned))
        with np.errstate(divide="ignore"):
            size = np.log(np.abs(factor))
        # What is outside was divided by its root.
        signs = self._signs[:, None]
        size = (signs * (size - np.log(np.abs(self._turned)))).sum(axis=0)
        return size, self._fixed + self._inside * angle + (signs * np.angle(factor)).sum(axis=0)


class Delay:
    """``exp(-s delay)``."""

    def __init__(self, delay_s: float) -> None:
        self.delay_s = delay_s

    def at(self, w: Real) -> tuple[Real, Real]:
        """No gain, and a phase that falls in proportion."""
        return np.zeros_like(w), -self.delay_s * w


class Hold:
    """``(1 - exp(-sT))/(sT)``: a held sample, seen as a filter."""

    def __init__(self, period_s: float) -> None:
        self.period_s = period_s

    def at(self, w: Real) -> tuple[Real, Real]:
        """``ln |sin x / x|`` and ``-x``, half a turn back at every zero, ``x = wT/2``."""
        x = w * (self.period_s / 2)
        with np.errstate(divide="ignore"):
            return np.log(np.abs(np.sinc(x / pi))), -x + pi * np.floor(x / pi)


def log_size(value: Fraction) -> float:
    """``ln |value|`` of a rational of any size but 0."""
    return log(abs(value.numerator)) - log(value.denominator)


def combined(parts: Sequence[Part], w: Real) -> tuple[Real, Real]:
    """``ln |.|`` and phase of a product of parts."""
    sizes, phases = zip(*(part.at(w) for part in parts), strict=True)
    return sum(sizes[1:], sizes[0]), sum(phases[1:], phases[0])


def phase_at(part: Part, w: float) -> float:
    """Phase in rad at one frequency."""
    return float(part.at(np.array([w]))[1][0])


def _factor(root: complex, s: Complex) -> Complex:
    return 1 - s / root if root else s


def _array(roots: Sequence[complex]) -> Complex:
    return np.array(roots, dtype=complex)


def _multiple_of_pi(phase: float) -> float:
    return pi * round(phase / pi)
