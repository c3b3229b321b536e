"""From a layout to a program: binary points from peak gains, coefficients with as many bits as fit.

Every variable gets as many fraction bits as its peak gain leaves; every coefficient as many as its word and the
accumulator hold. What is chosen here is only a choice: that nothing overflows is proven afterwards, on the stored
integers.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from fractions import Fraction
from math import ceil
from typing import NamedTuple

from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.integer.layout import Addend, Equation, Layout
from realize.arithmetic.integer.program import COMMAND, INPUT, Integral, Program, Sum, Term, Word
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.state_space import StateSpace, Vector, paths, probed
from realize.errors import Refused

#: Relative width of the peak gains that choose binary points: a format needs one bit of it.
_WIDTH = Fraction(1, 64)

#: Significant bits of the coefficients that choose binary points: more than any word has.
_SIGNIFICANT = 48

#: Bits of the widest integer of the C standard's minimum: no state or sum has more.
WIDEST = 64

#: Of an integral state, bits left free: one for the sum of the command, one for its sign.
_SPARE = 2


class Choice(NamedTuple):
    """What a structure leaves open.

    Attributes
    ----------
    bits : int
        Of a factor of a product.
    accumulator_bits : int
        Of sums.
    lowered : mapping
        Fraction bits taken from a variable by name, because its rounding errors had no room.
    """

    bits: int
    accumulator_bits: int
    lowered: Mapping[str, int] = {}


class Integration(NamedTuple):
    """The integral, before anything is rounded.

    Attributes
    ----------
    gains : tuple of Fraction
        ``R_1, R_2, ...`` in counts of output per count of input.
    hold : bool
        Whether a state stops while the command is limited.
    tracking : Fraction
        Gain of back-calculation per sample; 0 without.
    """

    gains: tuple[Fraction, ...]
    hold: bool = True
    tracking: Fraction = Fraction(0)


def quantized(layout: Layout, interface: Interface, choice: Choice, integration: Integration) -> Program:
    """Choose binary points and round the coefficients.

    Parameters
    ----------
    layout : Layout
        Sums with real coefficients, in counts.
    interface : Interface
        Counts at both ends.
    choice : Choice
        Widths.
    integration : Integration
        What is integrated.

    Raises
    ------
    Refused
        When a variable has no bound, the input no room in a word, or a sum none in the accumulator.
    """
    if interface.input.reach > greatest(choice.bits):
        raise _wide_input(interface, choice.bits)
    reach = _reaches(layout, interface.input.reach)
    words = _words(layout, reach, choice)
    integral = _integral(integration, interface, choice, reach[COMMAND])
    own = [(each, _sum(each.target, each.addends, each.base, words, reach, choice)) for each in layout.outputs]
    outputs = tuple(_topped(equation, made, words) for equation, made in own)
    updates = tuple(_sum(each.target, each.addends, each.base, words, reach, choice) for each in layout.updates)
    words |= {each.remainder: Word(each.shift + 1, each.shift) for each in outputs if each.remainder}
    command = _command(layout, integral, words, reach, choice)
    words[COMMAND] = Word(command.bits, 0)
    return Program(interface, choice.bits, words, outputs, command, updates, layout.moves, integral, integration.hold)


def greatest(bits: int) -> int:
    """Largest value of a signed word."""
    return (1 << bits - 1) - 1


# ---------------------------------------------------------------- reach and binary points


def _reaches(layout: Layout, largest: int) -> dict[str, Fraction]:
    """Peak of every variable over all inputs within the range, in counts, coefficients unrounded."""
    equations = (*layout.outputs, Equation(COMMAND, layout.command), *layout.updates)
    names = tuple(equation.target for equation in equations)
    reach = {INPUT: Fraction(largest)}
    for name, row in zip(names, paths(_ideal(equations, layout.moves)), strict=True):
        gain = peak_gain(row[0], _WIDTH)
        if gain.high is None:
            raise Refused(
                "[target] arithmetic",
                f"{gain.reason}; integers need a bound to be safe from overflow",
                "poles that decay, beside those of the integral at z = 1",
                "damp the pair of poles, or use float32",
            )
        reach[name] = gain.high * largest
    for target, source in reversed(layout.moves):
        reach[target] = reach[source]
    return reach


def _ideal(equations: Sequence[Equation], moves: Sequence[tuple[str, str]]) -> StateSpace:
    states = tuple(name for name in dict.fromkeys(_mentioned(equations, moves)) if name.startswith("state."))
    return probed(_ideal_step(equations, moves, states), len(states), 1)


def _mentioned(equations: Iterable[Equation], moves: Iterable[tuple[str, str]]) -> list[str]:
    names = [name for e in equations for name in (e.base, e.top_of, *(a.variable for a in e.addends), e.target) if name]
    return names + [name for move in moves for name in move]


def _ideal_step(
    equations: Sequence[Equation], moves: Sequence[tuple[str, str]], states: Sequence[str]
) -> Callable[[Vector, Vector], tuple[list[Fraction], list[Fraction]]]:
    rounded = {a.value: _significant(a.value) for e in equations for a in e.addends}

    def step(state: Vector, inputs: Vector) -> tuple[list[Fraction], list[Fraction]]:
        values = dict(zip(states, state, strict=True)) | {INPUT: inputs[0]}
        answers = []
        for e in equations:
            total = sum((rounded[a.value] * values[a.variable] for a in e.addends), Fraction(0))
            values[e.target] = total + sum((values[name] for name in (e.base, e.top_of) if name), Fraction(0))
            answers.append(values[e.target])
        for target, source in moves:
            values[target] = values[source]
        return [values[name] for name in states], answers

    return step


def _significant(value: Fraction) -> Fraction:
    if value == 0:
        return value
    exponent = value.numerator.bit_length() - value.denominator.bit_length() - _SIGNIFICANT
    return round(value / Fraction(2) ** exponent) * Fraction(2) ** exponent


def _words(layout: Layout, reach: Mapping[str, Fraction], choice: Choice) -> dict[str, Word]:
    words = {INPUT: Word(choice.bits, 0)}
    for equation in (*layout.updates, *layout.outputs):
        name = equation.target
        if equation.top_of:
            words[name] = Word(choice.bits, words[equation.top_of].fraction_bits - choice.bits)
        else:
            bits = choice.bits * equation.words
            words[name] = Word(bits, fraction_bits(reach[name], bits) - choice.lowered.get(name, 0))
    for target, source in reversed(layout.moves):
        words[target] = words[source]
    return words


def fraction_bits(reach: Fraction, bits: int) -> int:
    """The most with which values up to ``reach`` and a unit of rounding stay within a word; 0 for no reach."""
    if reach == 0:
        return 0
    room = (greatest(bits) - 1) / reach
    return _floor_log2(room)


def _floor_log2(value: Fraction) -> int:
    guess = value.numerator.bit_length() - value.denominator.bit_length()
    return guess if Fraction(2) ** guess <= value else guess - 1


# ---------------------------------------------------------------- sums


def _sum(
    target: str,
    addends: Sequence[Addend],
    base: str | None,
    words: Mapping[str, Word],
    reach: Mapping[str, Fraction],
    choice: Choice,
    wide: tuple[str, ...] = (),
) -> Sum:
    """Align the terms at the finest binary point at which their sum fits the accumulator."""
    point = words[target].fraction_bits if target in words else 0
    needed = [words[a.variable].fraction_bits - _exponent(a.unit) for a in addends if a.name is None]
    least = max([point, *needed])
    limit = max([least, *(words[a.variable].fraction_bits + _most_bits(a, choice.bits) for a in addends if a.name)])
    while limit >= least:
        terms, at = _aligned(addends, words, choice.bits, limit, least)
        most = sum(abs(t.stored) * 2**t.shift * _units(t.variable, words, reach) for t in terms)
        if most + (1 << max(at - point - 1, 0)) <= greatest(choice.accumulator_bits):
            return Sum(target, terms, at - point, choice.accumulator_bits, base)
        limit -= 1
    raise Refused(
        "[target] arithmetic",
        f"the sum for {target} has no room in {choice.accumulator_bits} bits",
        "gains and ranges that leave room",
        "use int32, another structure, or a coarser per_count of the output",
    )


def _units(variable: str, words: Mapping[str, Word], reach: Mapping[str, Fraction]) -> int:
    """Largest integer in a variable, a unit of rounding included."""
    return ceil(reach[variable] * Fraction(2) ** words[variable].fraction_bits) + 1


def _most_bits(addend: Addend, bits: int) -> int:
    """Fraction bits with which a coefficient fills its word."""
    if addend.value == 0:
        return 0
    return fraction_bits(abs(addend.value), bits)


def _aligned(
    addends: Sequence[Addend], words: Mapping[str, Word], bits: int, limit: int, least: int
) -> tuple[tuple[Term, ...], int]:
    """Terms at the finest binary point up to ``limit``; those of variables with one point share theirs."""
    points = {a.variable: words[a.variable].fraction_bits for a in addends}
    shared: dict[int, int] = {}
    for a in addends:
        if a.name:
            point = points[a.variable]
            shared[point] = min(shared.get(point, limit - point), _most_bits(a, bits))
    at = max([least, *(point + own for point, own in shared.items())])
    terms = []
    for a in addends:
        point = points[a.variable]
        if a.name is None:
            terms.append(Term(None, a.multiple, at - point + _exponent(a.unit), a.variable, 0))
        else:
            own = shared[point]
            terms.append(
                Term(a.name, round(a.unit * Fraction(2) ** own) * a.multiple, at - point - own, a.variable, own)
            )
    return tuple(terms), at


def _exponent(power: Fraction) -> int:
    """Of a power of two."""
    return power.numerator.bit_length() - power.denominator.bit_length()


def _topped(equation: Equation, made: Sum, words: Mapping[str, Word]) -> Sum:
    """What an equation says beside its addends: the upper half of a double word, or a remainder kept."""
    if equation.top_of:
        double = words[equation.top_of]
        half = words[equation.target].bits
        return Sum(equation.target, (Term(None, 1, 0, equation.top_of, 0),), half, double.bits)
    if equation.shaped and made.shift:
        return made._replace(remainder=f"state.{equation.target}_remainder")
    return made


# ---------------------------------------------------------------- the integral and the command


def _integral(integration: Integration, interface: Interface, choice: Choice, rest: Fraction) -> Integral | None:
    if not integration.gains:
        return None
    reaches = integral_reaches(integration, interface, rest)
    full = min(fraction_bits(abs(gain), choice.bits) for gain in integration.gains if gain)
    narrow = fraction_bits(max(reaches), WIDEST // 2 - _SPARE)
    bits = WIDEST // 2 if narrow >= full and choice.accumulator_bits <= WIDEST // 2 else WIDEST
    point = min(full, fraction_bits(max(reaches), bits - _SPARE))
    unit = Fraction(2) ** point
    held = [not integration.hold or i > 0 for i in range(len(reaches))]
    limits = tuple(
        (-int(reach * unit), int(reach * unit)) if by_itself else None
        for reach, by_itself in zip(reaches, held, strict=True)
    )
    stored = tuple(round(gain * unit) for gain in integration.gains)
    return Integral(stored, Word(bits, point), limits, round(integration.tracking * unit))


def integral_reaches(integration: Integration, interface: Interface, rest: Fraction) -> tuple[Fraction, ...]:
    """Largest value of each integral state in counts, from the limits of the output.

    Notes
    -----
    A state that is held goes no further out than its last increment takes it beyond what the limit leaves after the
    rest; a unit covers the rounding of the command. Any other is held to limits of its own: the first to twice what
    takes the output from one limit to the other against the rest, those above it to the width of the output range per
    sample, beyond which they could not be used.
    """
    span = Fraction(interface.output.high - interface.output.low)
    beyond = interface.output.reach + rest + 1
    chained = span if len(integration.gains) > 1 else Fraction(0)
    increment = abs(integration.gains[0]) * interface.input.reach + chained
    first = beyond + increment if integration.hold else 2 * (beyond + span)
    return (first, *(span for _ in integration.gains[1:]))


def _command(
    layout: Layout,
    integral: Integral | None,
    words: Mapping[str, Word],
    reach: Mapping[str, Fraction],
    choice: Choice,
) -> Sum:
    """The rest and the first integral state, in counts."""
    if integral is None:
        return _sum(COMMAND, layout.command, None, words, reach, choice)
    state = "state.integral1"
    bits = max(choice.accumulator_bits, integral.word.bits)
    reaches = dict(reach) | {
        state: Fraction(1 << integral.word.bits - _SPARE) / Fraction(2) ** integral.word.fraction_bits
    }
    return _sum(
        COMMAND,
        (*layout.command, Addend(None, Fraction(1), state)),
        None,
        dict(words) | {state: integral.word},
        reaches,
        choice._replace(accumulator_bits=bits),
    )


def _wide_input(interface: Interface, bits: int) -> Refused:
    needed = interface.input.reach.bit_length() + 1
    return Refused(
        "[signals.input] range",
        f"{interface.input.reach} counts from physical zero, which takes {needed} bits",
        f"at most {greatest(bits)}, the words of {bits} bits",
        "use int32, move offset to the middle of the range, or a coarser per_count",
    )
