"""The phase a roll-off takes at the band edge, and how slow its pole may be to keep the budget.

Phases in degrees, positive where the roll-off lags; ``x`` is the band edge over the pole, so a faster pole
has a smaller x.
"""

from __future__ import annotations

from fractions import Fraction
from math import atan, atan2, degrees, inf, log, radians, sin, sqrt, tan

import numpy as np
import numpy.typing as npt

from realize.rolloff.case import Case
from realize.rolloff.criteria import Circumstances

#: Search steps per e-fold of the pole: the phase of a ratio of low degree crosses the budget and comes back
#: within a step of 1 % only where it grazes it, and then exceeds it by a step squared, 1e-4 of a radian.
_STEPS_PER_FOLD = 100

#: |1 - F(jx)| is at most this times x, or order times x, the larger, for x up to 1/2: n poles give, by their
#: slope, n x; a pair gives x |2 damping + jx| / |1 - x^2 + 2j damping x| <= x sqrt(4.25) / 0.75 = 2.75 x.
_LEAST_REACH = 3
_REACH_HOLDS_TO = 0.5

#: Halvings of a search step of 1 %: 0.01 * 2**-47 is below the last bit of a double.
_HALVINGS = 47

Complexes = npt.NDArray[np.complex128]
Floats = npt.NDArray[np.float64]


def phase_lost_deg(case: Case, x: float) -> float | None:
    """Phase lost at the band edge, which lies at ``x`` times the pole; on the whole it may exceed 180 deg."""
    if case.placement == "whole" and case.order == 2:
        return degrees(atan2(2 * float(case.damping) * x, 1 - x * x))
    if case.placement == "whole":
        return case.order * degrees(atan(x))
    losses = _derivative_losses_deg(case, np.array([x]))
    return None if losses is None else float(losses[0])


def most_phase_lost_deg(case: Case, top: float) -> float:
    """Largest phase lost with a pole of the band edge over ``top`` or any faster one; 0 where none is defined."""
    losses = [phase_lost_deg(case, float(x)) for x in _relative_frequencies(case, top)]
    return max(loss or 0.0 for loss in losses)


def slowest_within_budget(case: Case, floor: float) -> float:
    """Smallest pole such that it and all faster ones keep the budget; 0 where all above ``floor`` do."""
    edge, budget = float(case.around.band_rad_s), float(case.around.phase_budget_deg)
    if case.placement == "whole":
        return edge / affordable_frequency(case.order, case.damping, case.around)
    x = _relative_frequencies(case, edge / floor)
    losses = _derivative_losses_deg(case, x)
    if losses is None or not (losses > budget).any():
        return 0.0
    first = int((losses > budget).argmax())
    within, beyond = float(x[max(first - 1, 0)]), float(x[first])
    for _ in range(_HALVINGS):
        middle = (within + beyond) / 2
        loss = phase_lost_deg(case, middle)
        within, beyond = (within, middle) if loss is None or loss > budget else (middle, beyond)
    return edge / within


def affordable_frequency(order: int, damping: Fraction, around: Circumstances) -> float:
    """Frequency over pole at which a filter on the whole loses the budget."""
    budget = radians(float(around.phase_budget_deg))
    if order != 2:
        return tan(budget / order)
    z, t = float(damping), tan(budget)
    return t / (z + sqrt(z * z + t * t))


def _relative_frequencies(case: Case, top: float) -> Floats:
    """Band edge over pole, from where the budget holds for certain up to ``top``."""
    certain = sin(radians(float(case.around.phase_budget_deg)))
    reach = max(_LEAST_REACH, case.order) * abs(case.share or 0)
    start = min(_REACH_HOLDS_TO, certain / reach if reach else inf, top)
    return np.geomspace(start, top, 2 + int(_STEPS_PER_FOLD * log(top / start)))


def _derivative_losses_deg(case: Case, x: Floats) -> Floats | None:
    """Phase lost when ``P`` alone is filtered: of ``C_rolled/C = 1 - (P/C)(1 - F)``, in (-180, 180]."""
    if case.share is None:
        return None
    losses: Floats = -np.degrees(np.angle(1 - case.share * _missing(case.order, float(case.damping), x)))
    return losses


def _missing(order: int, damping: float, x: Floats) -> Complexes:
    """``1 - F(jx)`` without cancellation for small x, the pole at 1."""
    s = 1j * x
    if order == 2:
        missing: Complexes = s * (s + 2 * damping) / (1 + s * (s + 2 * damping))
    else:
        missing = s * sum(np.power(1 / (1 + s), m) for m in range(1, order + 1))
    return missing
