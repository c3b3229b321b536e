"""What the controller is connected to: a plant, its dead time, and the sensor in the feedback path.

The loop transfer function is ``L = C P H exp(-s dead_time)``; the plant's output is taken before the sensor, the
sampler sits behind it.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.roots import Root, isolate
from realize.errors import RealizeError, Refused
from realize.transfer import TransferFunction

#: A sensor that shows the output as it is.
UNITY = TransferFunction((1,), (1,))


class Plant(NamedTuple):
    """A plant for one case.

    Attributes
    ----------
    transfer : TransferFunction
        From the controller's output to the plant's output, proper, without its dead time.
    dead_time_s : Fraction
        Not negative.
    sensor : TransferFunction
        Proper; in the feedback path, before the sampler.
    case : str
        Name of the case; empty for the nominal one.
    """

    transfer: TransferFunction
    dead_time_s: Fraction = Fraction(0)
    sensor: TransferFunction = UNITY
    case: str = ""


class Ratio(NamedTuple):
    """A product of transfer functions, nothing cancelled: integer polynomials in descending powers of s."""

    numerator: poly.Integers
    denominator: poly.Integers

    @property
    def common(self) -> poly.Integers:
        """Greatest common divisor of numerator and denominator."""
        return poly.greatest_common_divisor(self.numerator, self.denominator)

    @property
    def lowest(self) -> TransferFunction:
        """In lowest terms."""
        common = self.common
        if len(common) == 1:
            return TransferFunction(self.numerator, self.denominator)
        parts = (poly.divide(_fractions(p), _fractions(common))[0] for p in (self.numerator, self.denominator))
        numerator, denominator = poly.integer_form(*parts)
        return TransferFunction(numerator, denominator, common)


def checked_plant(plant: Plant) -> Plant:
    """Return the plant, or refuse it.

    Raises
    ------
    RealizeError
        When the dead time is negative.
    Refused
        When the plant or its sensor is improper.
    """
    if plant.dead_time_s < 0:
        raise RealizeError(
            "[plant] dead_time",
            f"{float(plant.dead_time_s):.5g} s: it would answer before it is asked",
            "a time of 0 s or more",
            "a positive dead time is a delay",
        )
    for where, part in (("transfer", plant.transfer), ("sensor", plant.sensor)):
        if part.relative_degree < 0:
            raise Refused(
                f"[plant] {where}",
                "it is improper: its numerator has a higher degree than its denominator",
                "as many poles as zeros, or more",
                "add the poles that every real plant and sensor has",
            )
    return plant


def series(*parts: TransferFunction) -> Ratio:
    """Product of transfer functions, nothing cancelled."""
    numerator: poly.Integers = (1,)
    denominator: poly.Integers = (1,)
    for part in parts:
        numerator = poly.multiply(numerator, part.numerator)
        denominator = poly.multiply(denominator, part.denominator)
    return Ratio(numerator, denominator)


def lost_modes(*parts: TransferFunction) -> tuple[Root, ...]:
    """Poles of one part that a zero of another one cancels: the loop neither sees nor moves them."""
    common = series(*parts).common
    return isolate(common) if len(common) > 1 else ()


def _fractions(p: Sequence[int]) -> poly.Rationals:
    return tuple(Fraction(c) for c in p)
