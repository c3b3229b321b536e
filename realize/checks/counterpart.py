"""What the checks need of one pulse transfer function: its roots one by one, and its gain near z = 1."""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property

from realize.checks.modes import every
from realize.transfer import PulseTransferFunction


class Counterpart:
    """``Gd`` in factors: ``gain v^k prod(1 - v/zero)/prod(1 - v/pole)`` with ``v = z - 1``.

    Attributes
    ----------
    discrete : PulseTransferFunction
        What it is made from.
    zeros, poles : list of complex
        Every one by itself, as ``z - 1``.
    k : int
        Zeros minus poles at z = 1.
    """

    def __init__(self, discrete: PulseTransferFunction) -> None:
        self.discrete = discrete
        self.zeros = every(discrete.zeros)
        self.poles = every(discrete.poles)
        self.k = discrete.zeros_minus_poles_at_one

    @property
    def low_frequency_gain(self) -> Fraction:
        """Limit of ``((z - 1)/T)^-k Gd`` for z to 1."""
        return self.discrete.low_frequency_gain

    @cached_property
    def gain(self) -> float:
        """The factor in front."""
        return float(self.low_frequency_gain / self.discrete.period_s**self.k)
