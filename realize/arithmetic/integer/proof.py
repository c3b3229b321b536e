"""What is proven of a program, on the stored integers: no overflow, and how far rounding can move the output."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import ceil, floor
from typing import NamedTuple

from realize.arithmetic.integer.integration import Integration, integral_reaches, sums_of_integral
from realize.arithmetic.integer.program import COMMAND, INPUT, Program, Sum, linear
from realize.arithmetic.integer.quantize import Room
from realize.arithmetic.integer.resting import resting_errors, with_resting
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.roundoff import expected_rms
from realize.arithmetic.state_space import PulseRatio, paths

#: Relative width of the peak gains of a proof, whose upper ends are used.
_WIDTH = Fraction(1, 1 << 10)


class Bound(NamedTuple):
    """A proven bound.

    Attributes
    ----------
    variable : str
        What is bounded; a sum by its target and ``(sum)``.
    bits : int
        It has, its sign included.
    largest : int
        It lies from ``-largest - 1`` to ``largest``, in its own units.
    """

    variable: str
    bits: int
    largest: int

    @property
    def spare_bits(self) -> int:
        """Bits the word has more than it needs; negative where it may overflow."""
        return self.bits - 1 - self.largest.bit_length()


class Proof(NamedTuple):
    """What is known of a program.

    Attributes
    ----------
    bounds : tuple of Bound
        Of every variable and every sum.
    output_error : Fraction
        Rounding moves the output by no more, in counts; that of the command itself included. Proven, as long as no
        limit acts, or where none acts on a state: an integral that is held passes on what it missed.
    rms_error : float or None
        To expect, in counts: errors independent and uniform over a step. An estimate.
    transfer : PulseRatio
        From the input to the command, in counts, without the integral: what the stored integers are.
    room : Room
        Signal and rounding errors of every variable apart, proven.
    """

    bounds: tuple[Bound, ...]
    output_error: Fraction
    rms_error: float | None
    transfer: PulseRatio
    room: Room

    @property
    def overflowing(self) -> tuple[Bound, ...]:
        """Bounds that their word does not hold: nothing is proven while there are any."""
        return tuple(bound for bound in self.bounds if bound.spare_bits < 0)


def prove(program: Program) -> Proof | None:
    """Bound every variable and sum of a program, and the error of its output.

    Returns
    -------
    Proof or None
        None where a stored pole does not decay: then there is no bound.

    Notes
    -----
    A variable is at most its peak gain from the input times the input's reach, plus for every rounding the peak gain
    from there times half a unit, plus what the rounding of a state set at rest adds. A partial sum is at most the sum
    of its terms' bounds, and at most the whole sum's bound plus those of the terms still missing; no product exceeds
    its own bound.
    """
    system, _, targets = linear(program)
    table = dict(zip(targets, paths(system), strict=True))
    largest = program.interface.input.reach
    resting = resting_errors(program)
    signal, errors = {INPUT: Fraction(largest)}, {INPUT: Fraction(0)}
    for target, row in table.items():
        gains = [gain for gain in (peak_gain(path, _WIDTH).high for path in row) if gain is not None]
        if len(gains) < len(row):
            return None
        signal[target], errors[target] = gains[0] * largest, sum(gains[1:], Fraction(0)) / 2
    for target, source in reversed(program.moves):
        signal[target], errors[target] = signal[source], errors[source]
    half = errors[COMMAND]
    errors = with_resting(errors, resting)
    for target, source in reversed(program.moves):
        errors[target] = errors[source]
    reach = {name: signal[name] + errors[name] for name in signal}
    bounds = [*_integral_bounds(program, reach), *_word_bounds(program, reach)]
    bounds += [_sum_bound(program, each, reach) for each in program.sums]
    rms = expected_rms((path, Fraction(1)) for path in table[COMMAND][1:])
    return Proof(tuple(bounds), half, rms, table[COMMAND][0], _room(program, signal, errors))


def _room(program: Program, signal: Mapping[str, Fraction], errors: Mapping[str, Fraction]) -> Room:
    counts = {name: value / Fraction(2) ** program.words[name].fraction_bits for name, value in signal.items()}
    return Room(counts, {name: max(1, ceil(value)) for name, value in errors.items()})


def _word_bounds(program: Program, reach: Mapping[str, Fraction]) -> list[Bound]:
    inputs = {INPUT}
    for target, source in reversed(program.moves):
        inputs |= {target} if source in inputs else set()
    port = program.interface.input
    kept = [name for name in program.words if name in reach and name != COMMAND]
    return [
        Bound(
            name,
            program.words[name].bits,
            max(port.high, -port.low - 1) if name in inputs else floor(reach[name]),
        )
        for name in kept
    ]


def _integral_bounds(program: Program, reach: dict[str, Fraction]) -> list[Bound]:
    """Of the states, and of their sums on the way; enters the states into ``reach``, in their units."""
    if program.integral is None:
        return []
    stored = program.integral
    unit = Fraction(2) ** stored.word.fraction_bits
    integration = Integration(tuple(gain / unit for gain in stored.stored), program.hold, stored.tracking / unit)
    held = integral_reaches(integration, program.interface, reach[COMMAND])
    reaches = tuple(
        Fraction(max(-limits[0], limits[1])) / unit if limits else by_itself
        for limits, by_itself in zip(stored.limits, held, strict=True)
    )
    sums = sums_of_integral(integration, program.interface, reach[COMMAND], reaches)
    bounds = []
    for i, (state, total) in enumerate(zip(reaches, sums, strict=True), 1):
        name = f"state.integral{i}"
        reach[name] = state * unit
        bounds += [Bound(name, stored.word.bits, floor(state * unit))]
        bounds += [Bound(f"{name} (sum)", stored.word.bits, floor(total * unit))]
    return bounds


def _sum_bound(program: Program, each: Sum, reach: Mapping[str, Fraction]) -> Bound:
    sizes = [abs(term.stored) * 2**term.shift * reach[term.variable] for term in each.terms]
    half = Fraction(1 << each.shift - 1) if each.shift else Fraction(0)
    kept = half if each.remainder else Fraction(0)
    whole = sum(sizes, kept)
    if each.base is None and each.target != COMMAND:
        whole = min(whole, (reach[each.target] + 1) * 2**each.shift)
    largest, before, after = max([whole + half, *sizes]), kept, sum(sizes, Fraction(0))
    for size in sizes:
        before, after = before + size, after - size
        largest = max(largest, min(before, whole + after))
    return Bound(f"{each.target} (sum)", each.bits, floor(largest))
