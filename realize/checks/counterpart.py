"""What the checks need of one pulse transfer function: its roots one by one, and its gain near z = 1."""

from __future__ import annotations

from collections.abc import Sequence
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
        self._at_one = self.zeros.count(0), self.poles.count(0)
        self.k = self._at_one[0] - self._at_one[1]

    @cached_property
    def low_frequency_gain(self) -> Fraction:
        """Limit of ``((z - 1)/T)^-k Gd`` for z to 1.

        Notes
        -----
        How many roots lie at z = 1 is known from the roots: coefficients carried to finitely many bits need not
        show it.
        """
        p = self.discrete
        top, bottom = map(_taylor_coefficient, (p.numerator, p.denominator), self._at_one)
        return top / bottom * p.period_s**self.k

    @cached_property
    def gain(self) -> float:
        """The factor in front."""
        return float(self.low_frequency_gain / self.discrete.period_s**self.k)


def _taylor_coefficient(p: Sequence[Fraction], power: int) -> Fraction:
    """Coefficient of ``(z - 1)^power`` in p, by synthetic division."""
    left = list(p)
    value = Fraction(0)
    for _ in range(power + 1):
        value, quotient = Fraction(0), []
        for c in left:
            value += c
            quotient.append(value)
        left = quotient[:-1]
    return value
