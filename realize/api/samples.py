"""Samples of the step response of an exact pulse transfer function, by its difference equation in integers."""

from __future__ import annotations

from fractions import Fraction
from math import ceil, log2

import numpy as np
import numpy.typing as npt

from realize.api.response import nearest
from realize.checks.modes import every
from realize.errors import RealizeError
from realize.transfer import PulseTransferFunction

#: Most samples: a second or two of work.
MOST_SAMPLES = 100_000

#: Growth over the samples, as a power of two, beyond which doubles could not hold them.
_MOST_GROWTH = 1024

#: Bits of a sample that are left when all that rounding can do is taken off: two doubles.
_LEFT_BITS = 128


def step_samples(pulse: PulseTransferFunction, count: int) -> npt.NDArray[np.float64]:
    """Answer to the input 1, 1, 1, ... from rest.

    Parameters
    ----------
    pulse : PulseTransferFunction
        ``Gd(z)``.
    count : int
        Number of samples, the first at time 0.

    Raises
    ------
    RealizeError
        When there are too many, or they grow beyond every double.

    Notes
    -----
    With numerators scaled to a largest coefficient of 1, all numbers are integers in units of ``2**-bits``. Rounding
    coefficients and dropping bits costs a sample at most ``(n + 2)(1 + max |y|)`` units at once; later samples take
    that over with the impulse response of 1/denominator, which over k samples sums up to at most ``(k + n)^n R^k``, R
    the largest pole's magnitude or 1. The bits make up for both. Over the first n + 1 samples ``max |y|`` is at least
    ``2**-(n + 1) R^-n``, since the coefficient 1 is a sum of their differences times coefficients of the denominator.
    """
    if not 1 <= count <= MOST_SAMPLES:
        raise RealizeError("samples", str(count), f"1 to {MOST_SAMPLES}", "look at fewer samples, or lower the rate")
    largest = max(map(abs, pulse.numerator))
    if not largest:
        return np.zeros(count)
    bits = _bits(pulse, count)
    forward = [round(c / largest * (1 << bits)) for c in pulse.numerator]
    back = [round(c * (1 << bits)) for c in pulse.denominator[1:]]
    return _rounded(_samples(forward, back, bits, count), largest, bits)


def _bits(pulse: PulseTransferFunction, count: int) -> int:
    order = len(pulse.denominator) - 1
    radius = max([1.0, *(abs(1 + delta) for delta in every(pulse.poles))])
    growth = (count + order) * log2(radius)
    if growth > _MOST_GROWTH:
        most = int(_MOST_GROWTH / log2(radius)) - order
        found = f"{count}, in which a pole of magnitude {radius:.5g} grows beyond every double"
        raise RealizeError("samples", found, f"at most {max(1, most)} for this system", "look at fewer samples")
    spread = (order + 1) * (count + order + 1).bit_length()
    return _LEFT_BITS + spread + ceil(growth) + order + 8


def _samples(forward: list[int], back: list[int], bits: int, count: int) -> list[int]:
    """``y[k] = sum_(i <= k) b_i - sum_i a_i y[k - i]``."""
    history, driven, samples = [0] * len(back), 0, []
    for k in range(count):
        driven += forward[k] if k < len(forward) else 0
        sample = driven - (sum(a * y for a, y in zip(back, history, strict=True)) >> bits)
        history = [sample, *history[:-1]] if history else history
        samples.append(sample)
    return samples


def _rounded(samples: list[int], scale: Fraction, bits: int) -> npt.NDArray[np.float64]:
    unit = scale.denominator << bits
    return np.array([nearest(sample * scale.numerator, unit) for sample in samples])
