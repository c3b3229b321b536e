"""What is proven of a program, on the stored integers: no overflow, and how far rounding can move the output."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from math import floor
from typing import NamedTuple

from realize.arithmetic.integer.program import COMMAND, INPUT, Program, Sum, linear
from realize.arithmetic.integer.quantize import Integration, integral_reaches
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.roundoff import expected_rms
from realize.arithmetic.state_space import PulseRatio, paths

#: Relative width of the peak gains of a proof, whose upper ends are used.
_WIDTH = Fraction(1, 1 << 10)

_HALF = Fraction(1, 2)


class Bound(NamedTuple):
    """A proven bound.

    Attributes
    ----------
    variable : str
        What is bounded; a sum by its target and ``(sum)``.
    bits : int
        It has, its sign included.
    largest : int
        No larger magnitude occurs, in its own units.
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
        Rounding moves the output by no more, in counts; that of the command itself included. Proven.
    rms_error : float
        To expect, in counts: errors independent and uniform over a step. An estimate.
    transfer : PulseRatio
        From the input to the command, in counts, without the integral: what the stored integers are.
    """

    bounds: tuple[Bound, ...]
    output_error: Fraction
    rms_error: float | None
    transfer: PulseRatio

    @property
    def overflowing(self) -> tuple[Bound, ...]:
        """Bounds that their word does not hold: nothing is proven while there are any."""
        return tuple(bound for bound in self.bounds if bound.spare_bits < 0)


def prove(program: Program, integration: Integration) -> Proof | None:
    """Bound every variable and sum of a program, and the error of its output.

    Returns
    -------
    Proof or None
        None where a stored pole does not decay: then there is no bound.

    Notes
    -----
    A variable is at most its peak gain from the input times the input's reach, plus for every rounding the peak gain
    from there times half a unit. A partial sum is at most the sum of its terms' bounds, and at most the whole sum's
    bound plus those of the terms still missing.
    """
    system, _, targets = linear(program)
    table = dict(zip(targets, paths(system), strict=True))
    reach = {INPUT: Fraction(program.interface.input.reach)}
    for target, row in table.items():
        gains = [peak_gain(path, _WIDTH).high for path in row]
        if any(gain is None for gain in gains):
            return None
        known = [gain for gain in gains if gain is not None]
        reach[target] = known[0] * program.interface.input.reach + sum(known[1:], Fraction(0)) * _HALF
    rest = reach[COMMAND]
    for target, source in reversed(program.moves):
        reach[target] = reach[source]
    bounds = [*_integral_bounds(program, integration, rest, reach), *_word_bounds(program, reach)]
    bounds += [_sum_bound(program, each, reach) for each in program.sums]
    errors = table[COMMAND][1:]
    half = sum((peak_gain(path, _WIDTH).high or Fraction(0) for path in errors), Fraction(0)) * _HALF
    return Proof(tuple(bounds), half, expected_rms((path, Fraction(1)) for path in errors), table[COMMAND][0])


def _word_bounds(program: Program, reach: Mapping[str, Fraction]) -> list[Bound]:
    kept = [name for name in program.words if name in reach and name != COMMAND]
    return [Bound(name, program.words[name].bits, floor(reach[name])) for name in kept]


def _integral_bounds(
    program: Program, integration: Integration, rest: Fraction, reach: dict[str, Fraction]
) -> list[Bound]:
    """Of the states, the increment still in them; enters them into ``reach``."""
    if program.integral is None:
        return []
    word = program.integral.word
    unit = Fraction(2) ** word.fraction_bits
    stored = integration._replace(gains=tuple(gain / unit for gain in map(Fraction, program.integral.stored)))
    bounds = []
    for i, largest in enumerate(integral_reaches(stored, program.interface, rest), 1):
        reach[f"state.integral{i}"] = largest * unit
        bounds.append(Bound(f"state.integral{i}", word.bits, floor(2 * largest * unit)))
    return bounds


def _sum_bound(program: Program, each: Sum, reach: Mapping[str, Fraction]) -> Bound:
    sizes = [abs(term.stored) * 2**term.shift * reach[term.variable] for term in each.terms]
    half = Fraction(1 << each.shift - 1) if each.shift else Fraction(0)
    kept = half if each.remainder else Fraction(0)
    whole = sum(sizes, kept)
    if each.base is None and each.target != COMMAND:
        whole = min(whole, (reach[each.target] + 1) * 2**each.shift)
    largest, before, after = whole + half, kept, sum(sizes, Fraction(0))
    for size in sizes:
        before, after = before + size, after - size
        largest = max(largest, min(before, whole + after))
    return Bound(f"{each.target} (sum)", each.bits, floor(largest))
