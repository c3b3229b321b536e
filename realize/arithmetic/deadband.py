"""The smallest constant input that a float realization answers."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import replace
from fractions import Fraction
from typing import Any

from realize.arithmetic.limit_cycles import smallest_answered
from realize.arithmetic.realization import Realization
from realize.arithmetic.recursion import Recursion


def smallest_float_answered(
    stored: Realization, per_count: Fraction, inputs: Iterable[int], level: float = 0.0
) -> int | None:
    """First of some constant inputs that ever moves the output of a float realization at rest.

    Parameters
    ----------
    stored : Realization
        Of floats. Where it has integral states, those alone are asked: what passes beside them answers at once, but
        an error is only taken away by what the integral takes up.
    per_count : Fraction
        Physical size of one count of the input.
    inputs : iterable of int
        Counts in the order to try: ``range(1, 1 << 15)``, ``range(-1, -1 << 15, -1)``.
    level : float
        Output at which the integral rests: the larger it is, the coarser its last bit.

    Returns
    -------
    int or None
        None when none does. Exact: an input is ignored when the state comes back to one it had.

    Raises
    ------
    Refused
        When an input is undecided after :data:`realize.arithmetic.limit_cycles.MOST_SAMPLES`.
    """
    recursion = Recursion(replace(stored, sections=()) if stored.integral else stored, guard_nonfinite=False)
    if stored.integral:
        recursion.preset(0.0, level)
    state = vars(recursion._state)

    def step(values: tuple[Any, ...], value: int) -> tuple[tuple[Any, ...], float]:
        state.update(zip(state, values, strict=True))
        output = recursion.update(float(value * per_count))
        return tuple(state.values()), output

    return smallest_answered(step, tuple(state.values()), inputs)
