"""What happens between two operating points, where coefficients are looked up: on a grid, which is no proof."""

from __future__ import annotations

from fractions import Fraction
from math import isfinite

from realize.algebra.rounding import FloatFormat
from realize.arithmetic.realization import Realization, stored_denominator
from realize.checks.check import Asked, Check
from realize.checks.schur import CLASSES, stability
from realize.design import Schedule
from realize.design.schedule import Place, place_text, variable_at
from realize.schedule.lookup import Lookup, breakpoints, flat, shaped

#: Where between two points all checks are run; on the rest of the grid it is stability alone.
MIDDLE = Fraction(1, 2)


def places(schedule: Schedule, point: int) -> list[Place]:
    """Where the grid looks between a point and the next: the middle belongs to it whatever its parts are."""
    shares = {Fraction(k, schedule.grid) for k in range(1, schedule.grid)} | {MIDDLE}
    return [Place(point, share) for share in sorted(shares)]


class Between:
    """The coefficients anywhere in a schedule.

    Parameters
    ----------
    schedule : Schedule
        Its points.
    stored : sequence of Realization
        One for each, of one layout.
    """

    def __init__(self, schedule: Schedule, stored: list[Realization]) -> None:
        self._schedule = schedule
        self._like = stored[0]
        self._format: FloatFormat = stored[0].format
        points = breakpoints(schedule.points, self._format)
        self._lookup = Lookup(self._format, points, [flat(each) for each in stored])

    def realization(self, place: Place) -> Realization:
        """What the firmware has where the variable, rounded to the format, is that of the place."""
        variable = self._format.round(variable_at(self._schedule, place))
        return shaped(self._lookup.at(variable), self._like)

    def stability(self, place: Place, worst_class: str) -> Check:
        """Decide exactly whether looked-up coefficients are worse than the points on both sides.

        Parameters
        ----------
        place : Place
            Between two points.
        worst_class : str
            Of the designs at both.
        """
        asked = Asked("stability", "stored", "", 0.0)
        stored = self.realization(place)
        where = place_text(self._schedule, place)
        if not all(map(isfinite, flat(stored))):
            return asked.failed(worst_class, None, f"at {where} an interpolated coefficient is not finite")
        found = stability(stored_denominator(stored))
        worse = CLASSES.index(found) > CLASSES.index(worst_class)
        reason = f"at {where} the interpolated coefficients are {found}" if worse else "decided exactly"
        return asked.measured(worst_class, found, float(worse), reason)
