"""Roundings and recursions of the literature, which the emitted code does not use: to hold the search against them."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from realize.arithmetic.limit_cycles import Counts, Rounding, Unforced
from realize.arithmetic.state_space import section_ratio


def _away(value: Counts, unit: int) -> Counts:
    size = (2 * abs(value) + unit) // (2 * unit)
    return size - 2 * size * (value < 0)


#: To the nearest, halves away from zero.
TIES_AWAY = Rounding(_away, Fraction(0), Fraction(1, 2))

#: Down, as a shift alone does.
DOWN = Rounding(lambda value, unit: value // unit, Fraction(-1, 2), Fraction(1, 2))


def rounded_products(a: Sequence[int], unit: int, rounding: Rounding) -> Unforced:
    """Direct form I or II with every product ``-a y`` rounded by itself; parameters as in :func:`rounded_sum`."""

    def step(state: tuple[Counts, ...]) -> tuple[Counts, ...]:
        return sum(rounding.apply(-c * y, unit) for c, y in zip(a, state, strict=True)), *state[:-1]

    inexact = sum(1 for c in a if c % unit)
    return Unforced(
        step,
        section_ratio((1,), [Fraction(c, unit) for c in a]),
        inexact,
        rounding,
        len(a),
        (),
        unit + sum(map(abs, a)),
    )


def first_order_bound(a: Fraction, rounding: Rounding) -> Fraction | None:
    """No cycle of ``y[k] = round(-a y[k-1])`` exceeds ``error/(1 - |a|)`` steps; ``None`` where it is not stable."""
    return rounding.largest_error / (1 - abs(a)) if abs(a) < 1 else None
