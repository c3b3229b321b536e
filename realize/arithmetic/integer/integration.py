"""The integral of a program, before anything is rounded, and how far its states can go."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.arithmetic.integer.interface import Interface


class Integration(NamedTuple):
    """The integral, before anything is rounded.

    Attributes
    ----------
    gains : tuple of Fraction
        ``R_1, R_2, ...`` in counts of output per count of input.
    hold : bool
        Whether a state stops while the command is limited.
    tracking : Fraction
        Gain of back-calculation per sample; 0 without.
    """

    gains: tuple[Fraction, ...]
    hold: bool = True
    tracking: Fraction = Fraction(0)


def integral_reaches(integration: Integration, interface: Interface, rest: Fraction) -> tuple[Fraction, ...]:
    """Largest value of each integral state in counts, from the limits of the output.

    Parameters
    ----------
    integration : Integration
        As stored, or before.
    interface : Interface
        Limits of both ends.
    rest : Fraction
        Largest value of the command without the integral, in counts.

    Notes
    -----
    A state that is held goes no further out than its last increment takes it beyond what the limit leaves after the
    rest; a unit covers the rounding of the command. Any other is held to limits of its own: the first to twice what
    takes the output from one limit to the other against the rest, those above it to the width of the output range per
    sample, beyond which they could not be used.
    """
    span = Fraction(interface.output.high - interface.output.low)
    beyond = interface.output.reach + rest + 1
    chained = span if len(integration.gains) > 1 else Fraction(0)
    increment = abs(integration.gains[0]) * interface.input.reach + chained
    first = beyond + increment if integration.hold else 2 * (beyond + span)
    return (first, *(span for _ in integration.gains[1:]))


def sums_of_integral(
    integration: Integration, interface: Interface, rest: Fraction, reaches: Sequence[Fraction]
) -> tuple[Fraction, ...]:
    """Largest value, in counts, that the sum of each integral state and its increment passes on the way.

    Parameters
    ----------
    integration, interface, rest
        As in :func:`integral_reaches`.
    reaches : sequence of Fraction
        Of the states before the sum.

    Notes
    -----
    The state, ``|R_i|`` times the input, the state above, and in the first, with back-calculation, the gain times how
    far the command lies from what was applied.
    """
    above = (*reaches[1:], Fraction(0))
    tracked = abs(integration.tracking) * (interface.output.reach + rest + reaches[0] + 1)
    return tuple(
        own + abs(gain) * interface.input.reach + next_state + (tracked if i == 0 else 0)
        for i, (own, gain, next_state) in enumerate(zip(reaches, integration.gains, above, strict=True))
    )
