"""The lookup of coefficients as the firmware does it, bit for bit.

For ``x_i <= x < x_{i+1}`` each coefficient is ``c_i + s (c_{i+1} - c_i)`` with ``s = (x - x_i)/(x_{i+1} - x_i)``, every
operation rounded once to the format. At a point ``s = 0``: its coefficients come out as they are. Below the first
point, and for a variable that is not a number, those of the first are taken; from the last on, those of the last.

Rounding is monotonic, so ``0 <= s <= 1``. The poles of a second-order section lie inside the unit circle where
``(a_1, a_2)`` lies in the triangle ``|a_2| < 1, |a_1| < 1 + a_2`` (Jury). That is an intersection of half planes, hence
convex: with the same ``s`` for both coefficients, exact interpolation between two stable sections is stable at every
``s``; so is a first-order section, with ``|a_1| < 1``. The coefficients in delta depend linearly on these. What is left
is rounding, of half a unit in the last place here and there: it is looked at on a grid. All of this is about a
variable that stands still: sections that are stable at every fixed ``s`` need not be so while ``s`` changes from sample
to sample.
"""

from __future__ import annotations

from bisect import bisect_right
from collections.abc import Sequence
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise
from typing import Any

import numpy as np
import numpy.typing as npt

from realize.algebra.rounding import FloatFormat
from realize.arithmetic.realization import Realization
from realize.errors import Refused


def breakpoints(points: Sequence[Fraction], target: FloatFormat) -> tuple[float, ...]:
    """Points in the format of the code.

    Raises
    ------
    Refused
        When two become the same number, or one or their distance is beyond the format.
    """
    stored = tuple(_stored(point, f"point {i}", target) for i, point in enumerate(points, 1))
    for i, (before, after) in enumerate(pairwise(stored), 1):
        if before < after:
            _stored(Fraction(after) - Fraction(before), f"the distance of points {i} and {i + 1}", target)
        if before >= after or target.round((Fraction(before) + Fraction(after)) / 2) in (before, after):
            apart = "the same number" if before >= after else "neighbours, with nothing between"
            raise Refused(
                "[schedule] points",
                f"points {i} and {i + 1} are {apart} in {target.name}: {before!r}",
                f"points that {target.name} tells apart",
                'points farther apart, or arithmetic = "float64"',
            )
    return stored


def _stored(value: Fraction, what: str, target: FloatFormat) -> float:
    """A number of the lookup in the format of the code."""
    try:
        return target.round(value)
    except Refused as refusal:
        raise Refused(
            "[schedule] points",
            f"{what} is beyond {target.name}: about {float(value):.3g}"
            if abs(value) < 10**300
            else f"{what} is too large",
            f"numbers that {target.name} can hold",
            "another unit of the variable",
        ) from refusal


class Lookup:
    """A table of numbers by a variable.

    Parameters
    ----------
    target : FloatFormat
        Of everything.
    points : sequence of float
        Values of the format, ascending.
    sets : sequence of sequence of float
        For each point the same number of values of the format.
    """

    def __init__(self, target: FloatFormat, points: Sequence[float], sets: Sequence[Sequence[float]]) -> None:
        self._number: Any = np.float32 if target.name == "float32" else np.float64
        self._ascending = list(points)
        self._points: npt.NDArray[Any] = np.array(points, self._number)
        self._sets: npt.NDArray[Any] = np.array(sets, self._number).reshape(len(points), -1)

    def at(self, variable: float) -> list[float]:
        """The numbers for a value of the variable, itself a value of the format."""
        lower, upper, share = self._place(variable)
        with np.errstate(all="ignore"):
            first = self._sets[lower]
            found: list[float] = (first + share * (self._sets[upper] - first)).tolist()
        return found

    def is_between(self, variable: float) -> bool:
        """Whether two sets are interpolated for a value of the variable."""
        return bool(self._place(variable)[2] > 0)

    def _place(self, variable: float) -> tuple[int, int, Any]:
        """The two points, and how far from the first to the second."""
        last = len(self._ascending) - 1
        if not variable > self._ascending[0]:
            return 0, 0, self._number(0)
        if variable >= self._ascending[last]:
            return last, last, self._number(0)
        lower = bisect_right(self._ascending, variable) - 1
        with np.errstate(all="ignore"):
            first = self._points[lower]
            return lower, lower + 1, (self._number(variable) - first) / (self._points[lower + 1] - first)


def flat(realization: Realization) -> list[float]:
    """Every stored coefficient of a realization, in a fixed order."""
    sections = [c for section in realization.sections for c in (*section.b, *section.a)]
    return [*sections, *realization.integral]


def shaped(numbers: Sequence[float], like: Realization) -> Realization:
    """The reverse of :func:`flat`, for another set of the same layout."""
    left = iter(numbers)
    sections = tuple(
        section._replace(b=tuple(next(left) for _ in section.b), a=tuple(next(left) for _ in section.a))
        for section in like.sections
    )
    return replace(like, sections=sections, integral=tuple(left))
