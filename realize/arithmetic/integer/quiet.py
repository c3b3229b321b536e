"""What an integer program does not answer, and where it does not come to rest: deadband and limit cycles."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from math import ceil, comb, floor
from typing import TYPE_CHECKING, NamedTuple

from realize.algebra import polynomial as poly
from realize.arithmetic.integer.model import IntegerRecursion
from realize.arithmetic.integer.program import COMMAND, INPUT, Program, Sum, Term, linear
from realize.arithmetic.limit_cycles import (
    MOST_STATES,
    TIES_UP,
    Counts,
    LimitCycles,
    Unforced,
    error_feedback,
    limit_cycles,
    rounded_sum,
    smallest_answered,
)
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.state_space import PulseRatio, paths

if TYPE_CHECKING:
    from realize.arithmetic.integer.realization import IntegerRealization

#: Samples of the model that the search for the smallest answered input may take for each sign: a tenth of a second.
SEARCHED_SAMPLES = 1 << 14

#: The same, and states of a section of which every cycle is searched, where many programs are looked at or one in
#: passing: a dozen of them then take a second.
FEW_SAMPLES, FEW_STATES = 1 << 12, 1 << 16


class Answered(NamedTuple):
    """Smallest size of a constant input of one sign that the output ever answers, from rest.

    Attributes
    ----------
    counts : int or None
        From physical zero; None where no input of this sign is answered, or none is known to be.
    exact : bool
        Whether every smaller one is known to be ignored for good; else all from ``counts`` on are answered, smaller
        ones perhaps. True without counts: the output's limits hide every answer, or the input has no such side.
    """

    counts: int | None
    exact: bool


class IntegrationTimes(NamedTuple):
    """What one count of input does through the integral.

    Attributes
    ----------
    samples_per_count : int
        After which it has moved the output by one count.
    samples_to_limit : int
        After which it has moved the output by its whole range.
    """

    samples_per_count: int
    samples_to_limit: int


class SectionCycles(NamedTuple):
    """Cycles of one section by itself, its input at zero.

    Attributes
    ----------
    section : int
        Number.
    variable : str
        In whose units the cycles are.
    fraction_bits : int
        A unit is ``2**-fraction_bits`` counts.
    cycles : LimitCycles
        Bound (proven), and the largest found where all states were searched.
    """

    section: int
    variable: str
    fraction_bits: int
    cycles: LimitCycles

    @property
    def rests(self) -> bool:
        """Whether it comes to rest at zero wholly: what was searched is all it remembers, and none of it is left."""
        return self.variable.endswith("_output") and self.cycles.searched and not self.cycles.amplitude


class Quiet(NamedTuple):
    """Deadband and limit cycles.

    Attributes
    ----------
    positive, negative : Answered
        Smallest constant input of each sign that is answered.
    integration : IntegrationTimes or None
        What the integral makes of one count.
    sections : tuple of SectionCycles
        Of every section that feeds back what it rounded.
    largest_output : int
        Without input, and without an integral, the output stays within this of zero once it has settled, in counts:
        proven.
    searched_output : int or None
        The largest that remains at the output, in counts, where every state was searched and the output is nothing but
        what was searched, rounded; else None.
    """

    positive: Answered
    negative: Answered
    integration: IntegrationTimes | None
    sections: tuple[SectionCycles, ...]
    largest_output: int
    searched_output: int | None

    @property
    def dies_out(self) -> bool:
        """Whether no section is left with a cycle: proven by the search."""
        return all(each.rests for each in self.sections)

    @property
    def rests_at_zero(self) -> bool:
        """Whether without input, and without an integral, the output comes to rest at zero: proven."""
        return self.largest_output == 0 or self.dies_out


def quiet(stored: IntegerRealization, samples: int = SEARCHED_SAMPLES, most_states: int = MOST_STATES) -> Quiet:
    """Deadband and limit cycles of a realization.

    Parameters
    ----------
    stored : IntegerRealization
        With its proofs.
    samples : int
        Of the model that the search for the smallest answered input may take, for each sign.
    most_states : int
        Of a section, beyond which its cycles are only bounded.
    """
    program, proof = stored.program, stored.proof
    if program.integral is not None and any(program.integral.stored):
        # Nothing of an increment is lost, and it is not zero: one count moves the output, sooner or later.
        sides = [_seen(program, _slope(program) * sign, Answered(1, True), sign) for sign in (1, -1)]
    else:
        sides = [_answered(stored, sign, samples) for sign in (1, -1)]
    sections, largest = _sections(program, most_states), floor(proof.output_error)
    return Quiet(sides[0], sides[1], _integration(program), sections, largest, _searched_output(program, sections))


# ---------------------------------------------------------------- deadband


class _OutOfSamplesError(Exception):
    pass


def _answered(stored: IntegerRealization, sign: int, samples: int) -> Answered:
    program, proof = stored.program, stored.proof
    most = program.interface.input.high if sign > 0 else -program.interface.input.low
    certain = _certainly_answered(proof.transfer, proof.output_error)
    if most == 0:
        return Answered(None, True)
    model, left = IntegerRecursion(program), [samples]
    offset = program.interface.input.offset
    names = list(vars(model.state))

    def step(state: tuple[int, ...], value: int) -> tuple[tuple[int, ...], int]:
        left[0] -= 1
        if left[0] < 0:
            raise _OutOfSamplesError
        vars(model.state).update(zip(names, state, strict=True))
        output = model.update(value + offset)
        return tuple(vars(model.state).values()), output

    try:
        found = smallest_answered(step, (0,) * len(names), range(sign, sign * (most + 1), sign))
    except _OutOfSamplesError:
        known = certain is not None and certain <= most
        return _seen(program, _direction(proof.transfer) * sign, Answered(certain if known else None, False), sign)
    return Answered(None if found is None else abs(found), True)


def _certainly_answered(transfer: PulseRatio, error: Fraction) -> int | None:
    """Least input whose answer, at once or at rest, exceeds what rounding can hide; None where both are zero."""
    gain = max(abs(_at_once(transfer)), abs(_at_rest(transfer)))
    return floor(error / gain) + 1 if gain else None


def _at_once(transfer: PulseRatio) -> Fraction:
    return transfer.numerator[0] if len(transfer.numerator) == len(transfer.denominator) else Fraction(0)


def _at_rest(transfer: PulseRatio) -> Fraction:
    one = Fraction(1)
    return poly.evaluate(transfer.numerator, one) / poly.evaluate(transfer.denominator, one)


def _direction(transfer: PulseRatio) -> Fraction:
    """Sign of what is certainly answered."""
    return max(_at_once(transfer), _at_rest(transfer), key=abs)


def _slope(program: Program) -> int:
    """Sign of where a long constant positive input takes the integral: the highest state wins."""
    assert program.integral is not None
    return next(gain for gain in reversed(program.integral.stored) if gain)


def _seen(program: Program, direction: Fraction | int, answer: Answered, sign: int) -> Answered:
    """The answer, unless the input has no such side or a limit at zero hides where the output goes in the end.

    It may have gone the other way before, unless nothing but a gain of the same sign stands beside the integral.
    """
    incoming, outgoing = program.interface
    room = outgoing.high if direction > 0 else -outgoing.low
    if not (incoming.high if sign > 0 else -incoming.low):
        return Answered(None, True)
    return answer if room else Answered(None, _goes_one_way(program, direction * sign))


def _goes_one_way(program: Program, direction: Fraction | int) -> bool:
    """Whether a positive input never moves the output against a direction, for it passes gains of one sign alone."""
    if program.states or program.outputs:
        return False
    factors = [_factor(term) for term in program.command.terms if term.variable == INPUT]
    gains = [*factors, *(program.integral.stored if program.integral else ())]
    return all(gain * direction >= 0 for gain in gains)


def _integration(program: Program) -> IntegrationTimes | None:
    integral = program.integral
    if integral is None or not any(integral.stored):
        return None
    unit = Fraction(2) ** integral.word.fraction_bits
    port = program.interface.output
    gains = [gain / unit for gain in integral.stored]
    return IntegrationTimes(_samples(gains, 1), _samples(gains, port.high - port.low))


def _samples(gains: Sequence[Fraction], counts: int) -> int:
    """Samples after which chained integrals of one count have moved the first by so many: ``sum R_i C(n, i)``.

    The fewest where all gains have one sign.
    """

    def moved(n: int) -> bool:
        return abs(sum((gain * comb(n, i) for i, gain in enumerate(gains, 1)), Fraction(0))) >= counts

    high = 1
    while not moved(high):
        high *= 2
    low = high // 2
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (low, middle) if moved(middle) else (middle, high)
    return high


# ---------------------------------------------------------------- limit cycles


def _sections(program: Program, most_states: int) -> tuple[SectionCycles, ...]:
    found = []
    for number in sorted({_number(each.target) for each in program.sums} - {0}):
        own = tuple(each for each in program.sums if _number(each.target) == number)
        found += [_cycles(program, number, own, most_states)] if _feeds_back(program, own) else []
    return tuple(found)


def _searched_output(program: Program, sections: Sequence[SectionCycles]) -> int | None:
    """What the command makes of the largest cycle of the only section, where that is all it is made of."""
    if all(each.rests for each in sections):
        return 0
    alone = len(sections) == 1 and {term.variable for term in program.command.terms} - {"state.integral1"}
    if alone != {sections[0].variable} or sections[0].cycles.amplitude is None:
        return None
    term = next(term for term in program.command.terms if term.variable == sections[0].variable)
    sum_of_it = abs(_factor(term)) * sections[0].cycles.amplitude
    return int(TIES_UP.apply(sum_of_it, 1 << program.command.shift))


def _number(name: str) -> int:
    """Of the section that a variable belongs to; 0 for none."""
    digits = name.removeprefix("state.").removeprefix("section").partition("_")[0]
    return int(digits) if digits.isdigit() else 0


def _feeds_back(program: Program, own: Sequence[Sum]) -> bool:
    reached = {each.target for each in own}
    for target, source in reversed(program.moves):
        reached |= {target} if source in reached else set()
    read = {name for each in own for name in (*(term.variable for term in each.terms), each.base) if name}
    return any(name.startswith("state.") for name in read & reached)


def _cycles(program: Program, number: int, own: tuple[Sum, ...], most_states: int) -> SectionCycles:
    by_target = {each.target: each for each in own}
    output = by_target.get(f"section{number}_output")
    first = f"state.section{number}_1"
    recursion = direct_recursion(program, output) if output else None
    if recursion is not None and output is not None:
        fraction_bits = program.words[output.target].fraction_bits
        return SectionCycles(number, output.target, fraction_bits, limit_cycles(recursion, most_states))
    if f"section{number}_next1" in by_target:
        cycles = limit_cycles(normal_recursion(program, number), most_states)
    else:
        cycles = LimitCycles(_own_bounds(program, own)[first], False, None, None)
    return SectionCycles(number, first, program.words[first].fraction_bits, cycles)


def direct_recursion(program: Program, each: Sum) -> Unforced | None:
    """What a direct form I section does without input, with error feedback or without.

    Parameters
    ----------
    program : Program
        Whole.
    each : Sum
        Of the section's output.

    Returns
    -------
    Unforced or None
        In units of the output; None where the sum does not feed back past values of its target.
    """
    ages = {each.target: 0}
    for target, source in reversed(program.moves):
        ages |= {target: ages[source] + 1} if source in ages else {}
    fed_back = {ages[term.variable]: -_factor(term) for term in each.terms if term.variable in ages}
    if not fed_back:
        return None
    a = [fed_back.get(age, 0) for age in range(1, max(fed_back) + 1)]
    return (error_feedback if each.remainder else rounded_sum)(a, 1 << each.shift, TIES_UP)


def normal_recursion(program: Program, number: int) -> Unforced:
    """What a section in normal form does without input, in units of its first state.

    Parameters
    ----------
    program : Program
        Whole.
    number : int
        Of the section.

    Notes
    -----
    Both states are rounded, each with its own paths; the bound of the first stands as a constant path.
    """
    names = f"state.section{number}_1", f"state.section{number}_2"
    own = tuple(each for each in program.updates if each.target in (f"section{number}_next1", names[1]))
    bounds = _own_bounds(program, own)
    rows = [[sum(_factor(t) for t in each.terms if t.variable == name) for name in names] for each in own]
    units = [1 << each.shift for each in own]
    reach = [floor(bounds[name]) for name in names]

    def step(state: tuple[Counts, ...]) -> tuple[Counts, ...]:
        sums = (row[0] * state[0] + row[1] * state[1] for row in rows)
        return tuple(TIES_UP.apply(total, unit) for total, unit in zip(sums, units, strict=True))

    sizes = (sum(abs(c) * r for c, r in zip(row, reach, strict=True)) for row in rows)
    largest = max(size + unit for size, unit in zip(sizes, units, strict=True))
    constant = PulseRatio((2 * bounds[names[0]],), (Fraction(1),))
    return Unforced(step, constant, 1, TIES_UP, 1, ((-reach[1], reach[1]),), ceil(Fraction(largest, reach[0] + 1)))


def _own_bounds(program: Program, own: tuple[Sum, ...]) -> dict[str, Fraction]:
    """How far a section's own rounding errors move its variables, in their units."""
    nothing = Sum(COMMAND, (), 0, program.command.bits)
    alone = program._replace(
        outputs=tuple(each for each in program.outputs if each in own),
        command=nothing,
        updates=tuple(each for each in program.updates if each in own),
        moves=tuple(move for move in program.moves if move[1] in {each.target for each in own}),
        integral=None,
    )
    system, _, targets = linear(alone)
    bounds = {
        target: sum((peak_gain(path).high or Fraction(0) for path in row[1:]), Fraction(0)) / 2
        for target, row in zip(targets, paths(system), strict=True)
    }
    return bounds | {target: bounds[source] for target, source in reversed(alone.moves)}


def _factor(term: Term) -> int:
    return term.stored << term.shift
