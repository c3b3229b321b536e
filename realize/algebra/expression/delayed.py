"""Ratios of polynomials with dead time: what an expression builds when ``exp(-T*s)`` may stand in it.

A value is a ratio times ``exp(-dead_time_s s)``. Products add dead times; a sum of different ones is no such value,
so dead time stays a factor of the whole. Everything else is left to :mod:`realize.algebra.expression.ratio`.
"""

from __future__ import annotations

from fractions import Fraction
from typing import NamedTuple

from realize.algebra.expression import ratio
from realize.algebra.expression.ratio import Ratio, UnfitError

_FORM = "exp(-T*s), T a constant that is zero or positive"
_FACTOR = f"{_FORM}, as a factor of the whole transfer"


class Delayed(NamedTuple):
    """``ratio * exp(-dead_time_s s)``; the dead time is ``None`` where no exp(...) was written, and 0 s is a time."""

    ratio: Ratio
    dead_time_s: Fraction | None = None


def add(a: Delayed, b: Delayed) -> Delayed:
    """Sum of two values without dead time.

    Raises
    ------
    UnfitError
        When either has dead time, or as :func:`ratio.add`.
    """
    if a.dead_time_s is not None or b.dead_time_s is not None:
        raise UnfitError(
            "dead time in one term of a sum, which no ratio of polynomials times one dead time can express",
            _FACTOR,
            "multiply the whole transfer by it; paths with different dead times can be given as a measured response",
        )
    return Delayed(ratio.add(a.ratio, b.ratio))


def subtract(a: Delayed, b: Delayed) -> Delayed:
    """Difference, as :func:`add`."""
    return add(a, negate(b))


def negate(a: Delayed) -> Delayed:
    """Opposite of ``a``."""
    return Delayed(ratio.negate(a.ratio), a.dead_time_s)


def multiply(a: Delayed, b: Delayed) -> Delayed:
    """Product, nothing cancelled; dead times add up.

    Raises
    ------
    UnfitError
        Above a bound.
    """
    return Delayed(ratio.multiply(a.ratio, b.ratio), _total(a.dead_time_s, b.dead_time_s))


def divide(a: Delayed, b: Delayed) -> Delayed:
    """Quotient by a value without dead time, nothing cancelled.

    Raises
    ------
    UnfitError
        When ``b`` has dead time, or as :func:`ratio.divide`.
    """
    if b.dead_time_s is not None:
        raise _prediction("a division by dead time")
    return Delayed(ratio.divide(a.ratio, b.ratio), a.dead_time_s)


def power(a: Delayed, exponent: Delayed) -> Delayed:
    """``a`` to a constant integer power; dead time takes none below zero.

    Raises
    ------
    UnfitError
        As :func:`ratio.power`, and when the exponent has dead time, or is negative and ``a`` has.
    """
    times = _without_dead_time(exponent, "an exponent")
    result = ratio.power(a.ratio, times)
    if a.dead_time_s is None:
        return Delayed(result)
    if times.numerator and times.numerator[0] < 0:
        raise _prediction("a negative power of dead time")
    return Delayed(result, ratio.value_of(ratio.multiply(ratio.constant(a.dead_time_s), times)))


def root(a: Delayed) -> Delayed:
    """Square root of a constant, as :func:`ratio.root`."""
    return Delayed(ratio.root(_without_dead_time(a, "a square root")))


def exponential(exponent: Delayed) -> Delayed:
    """``exp`` of ``-T s``: dead time.

    Raises
    ------
    UnfitError
        When the exponent is anything else, or would predict.
    """
    numerator, denominator = _without_dead_time(exponent, "the exponent of exp(...)")
    a_multiple_of_s = not numerator or (len(numerator) == 2 and numerator[1] == 0)
    if not a_multiple_of_s or len(denominator) > 1:
        raise UnfitError(
            "exp(...) of something other than a constant times s",
            _FORM,
            "write dead time as exp(-0.002*s), the exponential of a constant as a number, anything else as a ratio",
        )
    dead_time_s = Fraction(-numerator[0] if numerator else 0, *denominator)
    if dead_time_s < 0:
        raise _prediction("exp(...) of a positive multiple of s")
    return Delayed(ratio.constant(Fraction(1)), dead_time_s)


def _without_dead_time(value: Delayed, place: str) -> Ratio:
    """The ratio of a value that must have no dead time."""
    if value.dead_time_s is not None:
        raise UnfitError(f"dead time in {place}", _FACTOR, "write it as a factor")
    return value.ratio


def _total(a: Fraction | None, b: Fraction | None) -> Fraction | None:
    if a is None or b is None:
        return b if a is None else a
    # The sum of ratios, because it is bounded: hundreds of long dead times would take long to add.
    return ratio.value_of(ratio.add(ratio.constant(a), ratio.constant(b)))


def _prediction(found: str) -> UnfitError:
    return UnfitError(
        f"{found}, which is a prediction: acausal, its output would come before its input",
        _FACTOR,
        "write dead time with a minus sign, as in exp(-0.002*s)",
    )
