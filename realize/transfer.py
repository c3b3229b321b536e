"""The two transfer functions: ``G(s)`` as the user wrote it and ``Gd(z)`` as a method makes it.

Conventions: coefficients in descending powers; roots of ``Gd`` are kept as ``z - 1``, because near ``z = 1``
only the difference still carries information. Frequencies are in rad/s, periods in seconds.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property

from realize.algebra import polynomial as poly
from realize.algebra.roots import Root, isolate
from realize.errors import Refused


@dataclass(frozen=True)
class TransferFunction:
    """A ratio of real polynomials in s, in lowest terms, exactly.

    Attributes
    ----------
    numerator, denominator : tuple of int
        Descending powers of s, without a common integer divisor; the leading denominator coefficient is
        positive.
    cancelled : tuple of int
        The common factor that was divided out (descending powers); ``(1,)`` when there was none.
    """

    numerator: poly.Integers
    denominator: poly.Integers
    cancelled: poly.Integers = (1,)

    @classmethod
    def from_polynomials(
        cls, numerator: Sequence[Fraction | int], denominator: Sequence[Fraction | int]
    ) -> TransferFunction:
        """Reduce a ratio of polynomials to lowest terms.

        Parameters
        ----------
        numerator, denominator : sequence of Fraction or int
            Descending powers of s.

        Raises
        ------
        Refused
            When the transfer function is zero, when its denominator is, or when the cancellation hides a
            growing mode.
        """
        n, d = poly.integer_form(poly.rationals(numerator), poly.rationals(denominator))
        if not d:
            raise Refused("transfer", "the denominator is zero", "a denominator other than zero", "check the values")
        if not n:
            raise Refused("transfer", "it is zero", "a transfer function other than zero", "check the values")
        common = poly.greatest_common_divisor(n, d)
        _refuse_hidden_growth(common)
        n, d = poly.integer_form(
            poly.divide(poly.rationals(n), poly.rationals(common))[0],
            poly.divide(poly.rationals(d), poly.rationals(common))[0],
        )
        sign = 1 if d[0] > 0 else -1
        return cls(poly.scale(n, sign), poly.scale(d, sign), common)

    @property
    def relative_degree(self) -> int:
        """Degree of the denominator minus degree of the numerator; negative means improper."""
        return len(self.denominator) - len(self.numerator)

    @property
    def order(self) -> int:
        """Degree of the denominator."""
        return poly.degree(self.denominator)

    @cached_property
    def poles(self) -> tuple[Root, ...]:
        """Poles: real ones, and one of each conjugate pair (positive imaginary part)."""
        return isolate(self.denominator)

    @cached_property
    def zeros(self) -> tuple[Root, ...]:
        """Finite zeros: real ones, and one of each conjugate pair (positive imaginary part)."""
        return isolate(self.numerator)

    @property
    def gain(self) -> Fraction:
        """Ratio of the leading coefficients: ``G = gain * prod(s - zero) / prod(s - pole)``."""
        return Fraction(self.numerator[0], self.denominator[0])

    @property
    def feed_through(self) -> Fraction:
        """Limit for s to infinity of a proper transfer function: ``D``."""
        return self.gain if self.relative_degree == 0 else Fraction(0)

    @property
    def zeros_minus_poles_at_origin(self) -> int:
        """The k for which the limit of ``s^-k G(s)`` for s to 0 is neither 0 nor infinite."""
        return poly.trailing_zeros(self.numerator) - poly.trailing_zeros(self.denominator)

    @property
    def low_frequency_gain(self) -> Fraction:
        """Limit of ``s^-k G(s)`` for s to 0, k = zeros minus poles at the origin."""
        lowest = [next(c for c in reversed(p) if c) for p in (self.numerator, self.denominator)]
        return Fraction(*lowest)


@dataclass(frozen=True)
class PulseTransferFunction:
    """A ratio of real polynomials in z, with its roots, at one period.

    Attributes
    ----------
    numerator, denominator : tuple of Fraction
        Descending powers of z, equally long (the numerator may start with zeros), ``denominator[0] == 1``;
        exact, or carried to :data:`realize.methods.CARRIED_BITS` bits where a method needs ``exp``, ``tan``.
    period_s : Fraction
        Sample period.
    poles, zeros : tuple of Root
        Roots in ``z - 1``: real ones, and one of each conjugate pair.
    """

    numerator: poly.Rationals
    denominator: poly.Rationals
    period_s: Fraction
    poles: tuple[Root, ...]
    zeros: tuple[Root, ...]

    @property
    def gain(self) -> Fraction:
        """First numerator coefficient that is not zero: ``Gd = gain * prod(z - zero) / prod(z - pole)``."""
        return next((c for c in self.numerator if c), Fraction(0))

    @property
    def feed_through(self) -> Fraction:
        """What the output answers at once: the limit for z to infinity."""
        return self.numerator[0]

    @property
    def zeros_minus_poles_at_one(self) -> int:
        """The k for which the limit of ``(z - 1)^-k Gd(z)`` for z to 1 is neither 0 nor infinite."""
        return _multiplicity_at_zero(self.zeros) - _multiplicity_at_zero(self.poles)

    @cached_property
    def low_frequency_gain(self) -> Fraction:
        """Limit of ``((z - 1)/T)^-k Gd(z)`` for z to 1, k = zeros minus poles at z = 1."""
        n, d = (
            poly.shift(p, Fraction(1))[-1 - _multiplicity_at_zero(roots)]
            for p, roots in ((self.numerator, self.zeros), (self.denominator, self.poles))
        )
        return n / d * self.period_s**self.zeros_minus_poles_at_one


def _multiplicity_at_zero(roots: Sequence[Root]) -> int:
    return sum(root.multiplicity for root in roots if root.value == 0)


def _refuse_hidden_growth(common: poly.Integers) -> None:
    growing = [root.value for root in isolate(common) if root.value.real > 0]
    if growing:
        raise Refused(
            "transfer",
            f"a common factor of numerator and denominator hides a growing mode at s = {growing[0]:.5g}",
            "cancellations of decaying modes only",
            "remove the unstable factor from the expression, or realize the two parts apart",
        )
