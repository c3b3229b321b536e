"""The plant as the sampled controller sees it: held, delayed by any time, sampled behind the sensor; exactly.

With a total delay ``(d - m) T``, d whole and 0 <= m < 1, the response to one held step is sampled at ``(k - d + m) T``:

    Gd(z) = z^-d (1 - 1/z) sum_j s((j + m) T) z^-j,   s the step response of plant and sensor

the modified z-transform (Jury 1958; Astrom & Wittenmark, Computer-Controlled Systems). The coefficients are enclosures,
the denominator is ``prod(z - exp(pT))``; a value at a jump is the one after it.
"""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache
from math import ceil, pi
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.exponential import Hold
from realize.checks.modes import every, in_words
from realize.loop.plant import Plant, checked_plant, lost_modes, series
from realize.methods.conversion import Conversion, pulse_transfer_function
from realize.methods.invariant import exponential_conversion
from realize.transfer import PulseTransferFunction, TransferFunction

#: Two poles alias onto each other when they differ by a multiple of the sampling frequency to within this share of it:
#: the mode they leave then shows in the samples 1e-6 times, which no measurement sees.
ALIASED = 1e-6


class HeldPlant(NamedTuple):
    """A plant with hold and delay at one period.

    Attributes
    ----------
    plant : Plant
    period_s : Fraction
    compute_delay_s : Fraction
        From sampling to output.
    whole : int
        d: samples of delay, taken out of ``pulse``.
    offset : Fraction
        m: part of a period by which the samples follow the change of the held input.
    pulse : PulseTransferFunction
        ``z^d Gd(z)``, nothing cancelled between plant and sensor.
    conversion : Conversion
        The enclosures of its coefficients.
    notes : tuple of str
        Modes that sampling loses, by name.
    """

    plant: Plant
    period_s: Fraction
    compute_delay_s: Fraction
    whole: int
    offset: Fraction
    pulse: PulseTransferFunction
    conversion: Conversion
    notes: tuple[str, ...]

    @property
    def delay_s(self) -> Fraction:
        """Dead time and compute delay."""
        return self.plant.dead_time_s + self.compute_delay_s


@lru_cache(maxsize=64)
def held_plant(plant: Plant, period_s: Fraction, compute_delay_s: Fraction) -> HeldPlant:
    """Discretize a plant with its sensor and all delay.

    Parameters
    ----------
    plant : Plant
    period_s : Fraction
        Sample period, positive.
    compute_delay_s : Fraction
        From sampling to output; not negative.

    Raises
    ------
    Refused
        When a part is improper, or a mode grows beyond the range of a double within a period, or aliases onto z = 1.
    """
    checked_plant(plant)
    delay = (plant.dead_time_s + compute_delay_s) / period_s
    whole = ceil(delay)
    offset = whole - delay
    chain = TransferFunction(*series(plant.transfer, plant.sensor))
    conversion = _conversion(chain, period_s, offset)
    pulse = pulse_transfer_function(conversion, period_s)
    notes = (*_lost_notes(plant), *_alias_notes(chain, period_s))
    return HeldPlant(plant, period_s, compute_delay_s, whole, offset, pulse, conversion, notes)


def _conversion(chain: TransferFunction, period_s: Fraction, offset: Fraction) -> Conversion:
    """Numerator and denominator of ``z^d Gd(z)``."""
    zeros, at_origin = poly.trailing_zeros(chain.numerator), poly.trailing_zeros(chain.denominator)
    return exponential_conversion(
        chain,
        period_s,
        Hold(1, offset),
        # One zero at z = 1 is the plant's; more only where they meet poles at the origin in the other part.
        zeros_at_one=min(zeros, at_origin) + min(1, max(zeros - at_origin, 0)),
        structural={0: chain.feed_through} if offset == 0 else {},
    )


def _lost_notes(plant: Plant) -> tuple[str, ...]:
    return tuple(
        f"the mode at {in_words(root.value)} is cancelled between plant and sensor: the controller cannot move it"
        for root in lost_modes(plant.transfer, plant.sensor)
    )


def _alias_notes(chain: TransferFunction, period_s: Fraction) -> tuple[str, ...]:
    """Name the modes of which sampling shows only a combination with another one."""
    turn = 2 * pi / float(period_s)
    poles = every(chain.poles)
    notes = []
    for i, pole in enumerate(poles):
        for other in poles[:i]:
            turns = (pole - other) / (1j * turn)
            if round(turns.real) and abs(turns - round(turns.real)) < ALIASED:
                mode = pole if pole.imag else other
                notes.append(
                    f"pathological sampling: the mode at {in_words(mode)} repeats a multiple of the sample rate "
                    f"away, at {in_words(other if mode is pole else pole)}, and is lost between the samples"
                )
    return tuple(dict.fromkeys(notes))
