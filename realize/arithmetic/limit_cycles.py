"""Where an integer recursion does not come to rest, and what it does not answer.

Without input, a rounded recursion may go on for ever in a small cycle. A cycle is a steady response to its own
rounding errors, so no value in it exceeds their size times the peak gain from the rounding to the output; searching
every state within that bound finds all cycles there are, which is a proof.

Conventions: signals are integers (one step each), coefficients integers over a common ``unit``, for firmware a power
of two; ``a`` in ascending powers of 1/z, without its leading 1, and subtracted. Nothing saturates here: the bound
says whether it would.
"""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterable, Sequence
from fractions import Fraction
from math import ceil, floor, prod
from typing import Any, NamedTuple, TypeVar

import numpy as np

from realize.algebra import polynomial as poly
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.state_space import PulseRatio, section_ratio
from realize.errors import RealizeError, Refused

#: An integer, or an array of them.
Counts = Any

#: States that are searched: a tenth of a second, and some 30 MB.
MOST_STATES = 1 << 20

#: Sums in the search are 64 bits wide, one of them for the sign and one for doubling before rounding.
_WIDEST = 1 << 61

#: Samples after which an input that is neither answered nor certain to be ignored is given up: some seconds.
MOST_SAMPLES = 1 << 22

#: Least and greatest value.
Range = tuple[int, int]

State = TypeVar("State", bound=Hashable)


class Rounding(NamedTuple):
    """How a sum becomes an integer.

    Attributes
    ----------
    apply : callable
        ``apply(value, unit)``: ``value/unit`` as an integer; for integers and arrays of them, ``unit`` positive.
    centre, half_range : Fraction
        The error, result less value, is within ``half_range`` of ``centre``; in steps.
    """

    apply: Callable[[Counts, int], Counts]
    centre: Fraction
    half_range: Fraction

    @property
    def largest_error(self) -> Fraction:
        """Of one rounding, in steps."""
        return abs(self.centre) + self.half_range


#: To the nearest, halves upward: half a unit is added, then rounded down, as a shift does.
TIES_UP = Rounding(lambda value, unit: (2 * value + unit) // (2 * unit), Fraction(0), Fraction(1, 2))


class Unforced(NamedTuple):
    """A recursion without input.

    Attributes
    ----------
    step : callable
        From a state to the next; its first entry is the output. For integers and arrays of them.
    path : PulseRatio
        From a rounding error to the output.
    roundings : int
        Of one sample, all entering there.
    rounding : Rounding
        Each of them.
    order : int
        Outputs in the state; they come first.
    kept : tuple of (int, int)
        Ranges of what else is in it.
    largest_sum : int
        In a step, per step of the output, the unit included.
    """

    step: Callable[[tuple[Counts, ...]], tuple[Counts, ...]]
    path: PulseRatio
    roundings: int
    rounding: Rounding
    order: int
    kept: tuple[Range, ...]
    largest_sum: int


class LimitCycles(NamedTuple):
    """Cycles of a recursion without input.

    Attributes
    ----------
    bound : Fraction or None
        No value of a cycle exceeds it, in steps: proven. ``None`` where a pole on or outside the unit circle leaves
        none.
    searched : bool
        Whether every state within the bound was followed; then the rest is proven, too.
    amplitude, period : int or None
        Of the largest cycle, the longest of those; amplitude 0 and period 1 when all dies out. ``None`` if not
        searched.
    """

    bound: Fraction | None
    searched: bool
    amplitude: int | None
    period: int | None


def rounded_sum(a: Sequence[int], unit: int, rounding: Rounding) -> Unforced:
    """Direct form I or II with one rounding: ``y[k] = round(-sum a y)``.

    Parameters
    ----------
    a : sequence of int
        Coefficients over ``unit``.
    unit : int
        Positive.
    rounding : Rounding
        Of the sum.

    Notes
    -----
    In direct form II, y is the state before the numerator, which no feedback passes.
    """

    def step(state: tuple[Counts, ...]) -> tuple[Counts, ...]:
        return rounding.apply(_fed_back(a, state), unit), *state[:-1]

    return Unforced(step, _recursive(a, unit), 1, rounding, len(a), (), unit + sum(map(abs, a)))


def error_feedback(a: Sequence[int], unit: int, rounding: Rounding) -> Unforced:
    """Direct form I with what the rounding discards added back in the next sample.

    Parameters as in :func:`rounded_sum`. The state ends with what was discarded, over ``unit``.
    """

    def step(state: tuple[Counts, ...]) -> tuple[Counts, ...]:
        total = _fed_back(a, state[:-1]) + state[-1]
        y = rounding.apply(total, unit)
        return y, *state[:-2], total - y * unit

    path = section_ratio((1, -1), [Fraction(c, unit) for c in a])
    discarded = (
        ceil(-(rounding.centre + rounding.half_range) * unit),
        floor((rounding.half_range - rounding.centre) * unit),
    )
    return Unforced(step, path, 1, rounding, len(a), (discarded,), unit + sum(map(abs, a)))


def outputs(recursion: Unforced, start: Sequence[int], count: int) -> list[int]:
    """First outputs from a state on, its own first entry included."""
    state = tuple(start)
    found = []
    for _ in range(count):
        found.append(int(state[0]))
        state = recursion.step(state)
    return found


def limit_cycles(recursion: Unforced, most_states: int = MOST_STATES) -> LimitCycles:
    """Bound the cycles of a recursion without input, and search them all when that is feasible.

    Parameters
    ----------
    recursion : Unforced
        What is rounded, and how.
    most_states : int
        States within the bound beyond which nothing is searched.

    Notes
    -----
    A cycle lies within the bound wholly, so a state whose successor lies outside is in none. Following every state
    for at least as many steps as there are states leaves exactly those on cycles.
    """
    bound = _bound(recursion)
    if bound is None:
        return LimitCycles(None, False, None, None)
    largest = floor(bound)
    ranges = ((-largest, largest),) * recursion.order + recursion.kept
    sums = recursion.largest_sum * (largest + 1) + sum(abs(end) for kept in recursion.kept for end in kept)
    if prod(high - low + 1 for low, high in ranges) > most_states or sums > _WIDEST:
        return LimitCycles(bound, False, None, None)
    amplitude, period = _largest_cycle(_successors(recursion, ranges), 2 * largest + 1)
    return LimitCycles(bound, True, amplitude, period)


def _bound(recursion: Unforced) -> Fraction | None:
    """The constant part of the errors passes as a constant, the rest at worst with the peak gain."""
    path, rounding = recursion.path, recursion.rounding
    gain = peak_gain(path).high
    if gain is None:
        return None
    at_rest = poly.evaluate(path.numerator, Fraction(1)) / poly.evaluate(path.denominator, Fraction(1))
    return recursion.roundings * (abs(rounding.centre * at_rest) + rounding.half_range * gain)


def smallest_answered(
    step: Callable[[State, int], tuple[State, Any]], rest: State, inputs: Iterable[int]
) -> int | None:
    """First of some constant inputs that a recursion at rest answers at all; what comes before is its deadband.

    Parameters
    ----------
    step : callable
        ``step(state, input)`` returns the next state and the output; for integers or floats, as the firmware has it.
    rest : State
        Stays as it is without input.
    inputs : iterable of int
        In the order to try: ``range(1, 1 << 15)``, ``range(-1, -1 << 15, -1)``.

    Returns
    -------
    int or None
        The first input that ever moves the output; ``None`` when none does. Exact: an input is ignored when the state
        comes back to one it had.

    Raises
    ------
    RealizeError
        When the state is not at rest.
    Refused
        When an input is undecided after :data:`MOST_SAMPLES`.
    """
    state, still = step(rest, 0)
    if state != rest:
        raise RealizeError(
            "deadband", "the state moves without input", "a state at rest", "start from the cleared state"
        )
    return next((value for value in inputs if _answers(step, rest, value, still)), None)


def _answers(step: Callable[[State, int], tuple[State, Any]], rest: State, value: int, still: Any) -> bool:
    """Whether the output ever moves; states are compared with the one after 1, 2, 4, ... samples (Brent 1980)."""
    state = seen = rest
    renewal = 1
    for sample in range(1, MOST_SAMPLES + 1):
        state, output = step(state, value)
        if output != still:
            return True
        if state == seen:
            return False
        if sample == renewal:
            seen, renewal = state, 2 * renewal
    raise Refused(
        "deadband",
        f"a constant input of {value} is neither answered nor ignored for good after {MOST_SAMPLES} samples",
        "recursions that are decided sooner",
        "compute it from the gain of the integral",
    )


def _fed_back(a: Sequence[int], state: Sequence[Counts]) -> Counts:
    return -sum(c * y for c, y in zip(a, state, strict=True))


def _recursive(a: Sequence[int], unit: int) -> PulseRatio:
    return section_ratio((1,), [Fraction(c, unit) for c in a])


def _successors(recursion: Unforced, ranges: Sequence[Range]) -> np.ndarray[Any, np.dtype[np.int64]]:
    """For every state, by number, the number of the next; one more number, its own successor, for all outside.

    A state's number has its entries, each counted from the least, as digits, the first the lowest.
    """
    count = prod(high - low + 1 for low, high in ranges)
    rest = np.arange(count, dtype=np.int64)
    state = []
    for low, high in ranges:
        state.append(rest % (high - low + 1) + low)
        rest //= high - low + 1
    number = np.zeros(count, dtype=np.int64)
    outside = np.zeros(count, dtype=np.bool_)
    for value, (low, high) in reversed(list(zip(recursion.step(tuple(state)), ranges, strict=True))):
        number = number * (high - low + 1) + value - low
        outside |= (value < low) | (value > high)
    number[outside] = count
    return np.append(number, count)


def _largest_cycle(successors: np.ndarray[Any, np.dtype[np.int64]], size: int) -> tuple[int, int]:
    """Amplitude and period of the largest cycle; the first digit to base ``size`` is the output."""
    outside = len(successors) - 1
    reached = successors
    for _ in range(len(successors).bit_length()):
        reached = reached[reached]
    on_cycles = set(np.unique(reached).tolist()) - {outside}
    largest = (0, 1)
    while on_cycles:
        first = state = on_cycles.pop()
        amplitude, period = abs(first % size - size // 2), 1
        while (state := int(successors[state])) != first:
            on_cycles.discard(state)
            amplitude, period = max(amplitude, abs(state % size - size // 2)), period + 1
        largest = max(largest, (amplitude, period))
    return largest
