"""The published methods from ``G(s)`` to ``Gd(z)``.

To add one: write a unit that returns a :class:`Conversion`, its formula and source in the docstring, and add a
line to :data:`METHODS`.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

from realize.algebra.enclosure import Unresolved
from realize.algebra.rounding import FloatFormat
from realize.errors import RealizeError, Refused
from realize.methods.conversion import CARRIED_BITS, Conversion, Discretization, pulse_transfer_function
from realize.methods.invariant import impulse_invariant, ramp_invariant, step_invariant
from realize.methods.mapped import pole_zero_mapped
from realize.methods.substitution import (
    backward_difference,
    bilinear,
    bilinear_prewarped,
    blended_difference,
    forward_difference,
)
from realize.transfer import TransferFunction

Convert = Callable[[TransferFunction, Fraction, Fraction | None], Conversion]

#: Every method by its name, in the order in which tables show them.
METHODS: dict[str, Convert] = {
    "step-invariant": step_invariant,
    "ramp-invariant": ramp_invariant,
    "impulse-invariant": impulse_invariant,
    "forward-difference": forward_difference,
    "backward-difference": backward_difference,
    "bilinear": bilinear,
    "bilinear-prewarped": bilinear_prewarped,
    "blended-difference": blended_difference,
    "pole-zero-mapped": pole_zero_mapped,
}


def discretize(
    transfer: TransferFunction, period_s: Fraction, method: str, exact_at_rad_s: Fraction | None = None
) -> Discretization:
    """Turn a proper transfer function into a pulse transfer function.

    Parameters
    ----------
    transfer : TransferFunction
        Proper.
    period_s : Fraction
        Sample period, positive.
    method : str
        A key of :data:`METHODS`.
    exact_at_rad_s : Fraction, optional
        For ``bilinear-prewarped``: the frequency at which the response is kept exactly.

    Raises
    ------
    RealizeError
        When the method is unknown.
    Refused
        When the transfer function is improper or the method does not apply; the message says why.
    """
    try:
        conversion = _described(transfer, period_s, method, exact_at_rad_s)
        pulse = pulse_transfer_function(conversion, period_s)
    except Unresolved:
        raise _unresolved() from None
    return Discretization(method, pulse, conversion)


def coefficients(
    transfer: TransferFunction,
    period_s: Fraction,
    method: str,
    target: FloatFormat,
    exact_at_rad_s: Fraction | None = None,
) -> tuple[tuple[float, ...], tuple[float, ...]]:
    """Only the correctly rounded coefficients of what :func:`discretize` makes.

    Parameters
    ----------
    transfer, period_s, method, exact_at_rad_s
        As for :func:`discretize`.
    target : FloatFormat
        Format of the coefficients.

    Returns
    -------
    tuple of float, tuple of float
        Numerator and denominator, descending powers of z.

    Raises
    ------
    RealizeError
        When the method is unknown.
    Refused
        When the transfer function is improper, the method does not apply, or a coefficient is beyond the format.

    Notes
    -----
    No pulse transfer function is carried and no root of it looked for, so that a root is not refused either for falling
    on z = 1.
    """
    try:
        return _described(transfer, period_s, method, exact_at_rad_s).rounded(target)
    except Unresolved:
        raise _unresolved() from None


def _described(
    transfer: TransferFunction, period_s: Fraction, method: str, exact_at_rad_s: Fraction | None
) -> Conversion:
    if method not in METHODS:
        raise RealizeError("method", f"unknown name {method!r}", ", ".join(METHODS), "use one of these names")
    if transfer.relative_degree < 0:
        raise Refused(
            "transfer",
            f"it is improper: its numerator has {-transfer.relative_degree} more than its denominator's degree",
            "as many poles as zeros, or more",
            "add a roll-off pole first",
        )
    return METHODS[method](transfer, period_s, exact_at_rad_s)


def _unresolved() -> Refused:
    return Refused(
        "method",
        "a number of it cannot be told from zero at any permitted precision",
        "frequencies and rates within some hundred orders of magnitude",
        "choose another method, frequency or sample rate",
    )


__all__ = ["CARRIED_BITS", "METHODS", "Conversion", "Discretization", "coefficients", "discretize"]
