"""The crossover a roll-off is chosen from: of ``C P H``, improper or not, and the pole that follows from it."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.loop.continuous import gain_crossovers_rad_s
from realize.loop.measured import MeasuredLoop, MeasuredPlant
from realize.loop.plant import Plant, series
from realize.transfer import TransferFunction

#: Rounds of the search: the pole lies far above the crossover, so each round moves it by a few percent of the last
#: move; proposals come rounded to three digits, and it stops within a handful.
_MOST_ROUNDS = 30


class Settled(NamedTuple):
    """What became of a pole that depends on the crossover it moves.

    Attributes
    ----------
    pole_rad_s : Fraction
        The last pole.
    crossover_rad_s : float
        Highest crossover with that pole.
    converged : bool
        Whether the crossover calls for the same pole again.
    poles_rad_s : tuple of Fraction
        Every pole tried, in order.
    """

    pole_rad_s: Fraction
    crossover_rad_s: float
    converged: bool
    poles_rad_s: tuple[Fraction, ...]


def highest_crossover_rad_s(controller: TransferFunction, plants: Sequence[Plant | MeasuredPlant]) -> float | None:
    """Highest gain crossover of ``C P H`` over the cases; None where no case has one, or none that was measured.

    Parameters
    ----------
    controller : TransferFunction
        Improper or not.
    """
    found = (_highest_of_case_rad_s(controller, plant) for plant in plants)
    return max((crossover for crossover in found if crossover is not None), default=None)


def _highest_of_case_rad_s(controller: TransferFunction, plant: Plant | MeasuredPlant) -> float | None:
    if isinstance(plant, MeasuredPlant):
        return MeasuredLoop(controller, plant).highest_crossover_rad_s
    crossovers = gain_crossovers_rad_s(series(controller, plant.transfer, plant.sensor))
    return crossovers[-1][0] if crossovers else None


def settled_pole(
    first_crossover_rad_s: float,
    pole_for: Callable[[float], Fraction],
    controller_with: Callable[[Fraction], TransferFunction],
    plants: Sequence[Plant | MeasuredPlant],
) -> Settled:
    """Follow crossover to pole to crossover until neither moves.

    Parameters
    ----------
    first_crossover_rad_s : float
        Of the controller without the pole.
    pole_for : callable
        The pole that a crossover calls for, in rad/s, rounded as proposals are.
    controller_with : callable
        The controller with that pole.

    Returns
    -------
    Settled
        ``converged`` is False when a pole came back that was left before, when a crossover was lost, or after 30
        rounds.
    """
    crossover, poles = first_crossover_rad_s, [pole_for(first_crossover_rad_s)]
    while True:
        following = highest_crossover_rad_s(controller_with(poles[-1]), plants)
        crossover = crossover if following is None else following
        pole = poles[-1] if following is None else pole_for(crossover)
        if pole == poles[-1] or pole in poles or len(poles) >= _MOST_ROUNDS:
            done = following is not None and pole == poles[-1]
            return Settled(poles[-1], crossover, done, tuple(poles))
        poles.append(pole)
