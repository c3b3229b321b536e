"""Where the phase goes: from the ideal controller around the bare plant to the sampled loop, item by item.

Every item is the difference of two angles at one frequency, each the start of the next, so that they add up to what the
sampled loop lags behind ``C_ideal P``.
"""

from __future__ import annotations

from math import degrees, pi, remainder
from typing import NamedTuple

from realize.loop.held import HeldPlant
from realize.loop.response import Continuous, Hold, Sampled, phase_at
from realize.transfer import PulseTransferFunction, TransferFunction

#: Items in the order in which they are listed.
ITEMS = (
    "hold",
    "compute delay",
    "dead time",
    "sensor",
    "sampling of the plant",
    "roll-off",
    "method",
    "number format",
)


class Ledger(NamedTuple):
    """Phase in degrees at one frequency; negative for a lag.

    Attributes
    ----------
    w_rad_s : float
    items : tuple of (str, float)
        As in :data:`ITEMS`. ``sampling of the plant`` is what the samples of the plant differ by from its response
        with hold and delay: aliases of higher frequencies.
    total_deg : float
        Angle of the sampled loop less that of the ideal controller around the bare plant.
    """

    w_rad_s: float
    items: tuple[tuple[str, float], ...]
    total_deg: float


def phase_ledger(
    w_rad_s: float,
    controllers: tuple[TransferFunction, TransferFunction, PulseTransferFunction, PulseTransferFunction],
    held: HeldPlant,
) -> Ledger:
    """Account for the phase at one frequency.

    Parameters
    ----------
    w_rad_s : float
        Up to half the sample rate; the crossover of the sampled loop, as a rule.
    controllers : tuple
        As the user wrote it (improper or not), made causal, discretized exactly, as stored.
    held : HeldPlant
    """
    w = w_rad_s
    plant = held.plant
    ideal, causal = (phase_at(Continuous(c), w) for c in controllers[:2])
    exact, stored = (phase_at(Sampled(c), w) for c in controllers[2:])
    hold = phase_at(Hold(float(held.period_s)), w)
    compute, dead = (-w * float(t) for t in (held.compute_delay_s, plant.dead_time_s))
    bare, sensor = (phase_at(Continuous(g), w) for g in (plant.transfer, plant.sensor))
    seen = phase_at(Sampled(held.pulse), w) - w * float(held.whole * held.period_s)
    differences = (
        hold,
        compute,
        dead,
        _turned(sensor),
        _turned(seen - (bare + sensor + hold + compute + dead)),
        _turned(causal - ideal),
        _turned(exact - causal),
        _turned(stored - exact),
    )
    items = tuple((name, degrees(value)) for name, value in zip(ITEMS, differences, strict=True))
    listed = sum(value for _, value in items)
    total = degrees(stored + seen - ideal - bare)
    return Ledger(w, items, total - 360 * round((total - listed) / 360))


def _turned(angle: float) -> float:
    """An angle within half a turn."""
    return remainder(angle, 2 * pi)
