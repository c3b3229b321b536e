"""How the scheduling variable moves in the vectors: a staircase up and down, past both ends, and what is no number.

It stays for some samples at each step, so that the self-test can hold an input; the steps share no rhythm with the
inputs.
"""

from __future__ import annotations

from math import inf, nan
from typing import TYPE_CHECKING

from realize.algebra.rounding import FloatFormat
from realize.firmware.vectors import in_format

if TYPE_CHECKING:
    from realize.schedule.table import Table

#: Samples at each step, and steps from one end to the other; the points themselves come on top where they are few.
STAY, STEPS = 13, 11

#: How far beyond the ends, as a part of the range: a step.
_BEYOND = 1 / STEPS

#: Most points that each have a step of their own: beyond them a stair past all would be longer than the vectors.
_MOST_OWN = 12


def swept(table: Table, count: int) -> list[float]:
    """A value of the format for each sample."""
    stair = _stair(table)
    return [stair[k // STAY % len(stair)] for k in range(count)]


def _stair(table: Table) -> list[float]:
    """Up, through what is no number, and down again."""
    points, target = table.breakpoints, table.stored[0].format
    span = points[-1] - points[0]
    own = points if len(points) <= _MOST_OWN else (points[0], points[1], points[-1])
    shares = [(k + 0.5) / STEPS for k in range(STEPS)]
    inner = {points[0] + share * span for share in shares} | {points[0] - _BEYOND * span, points[-1] + _BEYOND * span}
    up = sorted({*own, *_finite(inner, target)})
    return [*up, inf, nan, *reversed(up), -inf]


def _finite(values: set[float], target: FloatFormat) -> list[float]:
    """In the format; what it cannot hold is left out."""
    return [value for value in in_format(sorted(values), target) if abs(value) < inf]
