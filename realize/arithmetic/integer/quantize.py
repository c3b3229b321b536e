"""From a layout to a program: binary points from peak gains, coefficients with as many bits as fit.

Every variable gets as many fraction bits as its peak gain leaves; every coefficient as many as its word and the
accumulator hold. What is chosen here is only a choice: that nothing overflows is proven afterwards, on the stored
integers.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from fractions import Fraction
from functools import lru_cache
from math import ceil
from typing import NamedTuple

from realize.arithmetic.integer.integration import Integration, integral_reaches, sums_of_integral
from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.integer.layout import SINGLE, Addend, Equation, Layout
from realize.arithmetic.integer.poles import refuse_growing
from realize.arithmetic.integer.program import COMMAND, INPUT, Integral, Program, Sum, Term, Word
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.sample import is_recursive
from realize.arithmetic.state_space import StateSpace, Vector, paths, probed
from realize.errors import Refused

#: Relative width of the peak gains that choose binary points: a format needs one bit of it.
_WIDTH = Fraction(1, 64)

#: Significant bits of the coefficients that choose binary points: more than any word has.
_SIGNIFICANT = 48

#: Significant bits that the largest coefficient of a signal keeps where it gives up some to share a binary point: 16
#: times finer than what float32 stores. What is given up is seen by every check, since they judge stored numbers.
_KEPT = 28

#: Bits of the widest integer of the C standard's minimum: no state or sum has more.
WIDEST = 64

#: Of an integral state, bits left free for the sum of the command, in which the rest is added.
_SPARE = 1


class Choice(NamedTuple):
    """What a structure leaves open.

    Attributes
    ----------
    bits : int
        Of a factor of a product.
    accumulator_bits : int
        Of sums.
    """

    bits: int
    accumulator_bits: int


class Room(NamedTuple):
    """What variables need by name, signal and rounding errors apart: a finer unit makes only the errors smaller.

    Attributes
    ----------
    reach : mapping
        Largest signal in counts.
    margin : mapping
        Rounding errors in units of the variable; 1 where none is given.
    """

    reach: Mapping[str, Fraction]
    margin: Mapping[str, int] = {}

    def raised(self, other: Room, names: Iterable[str]) -> Room:
        """The larger of both for some names."""
        reach, margin = dict(self.reach), dict(self.margin)
        for name in names:
            reach[name] = max(reach.get(name, Fraction(0)), other.reach.get(name, Fraction(0)))
            margin[name] = max(margin.get(name, 1), other.margin.get(name, 1))
        return Room(reach, margin)


class Needs(NamedTuple):
    """Room for which binary points are chosen, and for which the terms of sums are aligned."""

    words: Room
    sums: Room


def quantized(
    layout: Layout, interface: Interface, choice: Choice, integration: Integration, needs: Needs | None = None
) -> Program:
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
    needs : Needs, optional
        Of the variables; by default those of :func:`ideal_room`.

    Raises
    ------
    Refused
        When a variable has no bound, the input no room in a word, a sum none in the accumulator, or rounding errors
        fill a word.
    """
    if not fits(interface, choice.bits):
        raise _wide_input(interface, choice.bits)
    if needs is None:
        ideal = ideal_room(layout, interface)
        needs = Needs(ideal, ideal)
    words = _words(layout, needs.words, choice)
    integral = _integral(integration, interface, choice, needs.sums.reach[COMMAND])
    outputs, updates = _consistent(layout, words, needs.sums, choice)
    words |= {
        each.remainder: Word(each.shift, words[each.target].fraction_bits + each.shift)
        for each in outputs
        if each.remainder
    }
    command = _command(layout, integral, words, needs.sums, choice)
    words[COMMAND] = Word(command.bits, 0)
    return Program(interface, choice.bits, words, outputs, command, updates, layout.moves, integral, integration.hold)


def greatest(bits: int) -> int:
    """Largest value of a signed word."""
    return (1 << bits - 1) - 1


def fits(interface: Interface, bits: int) -> bool:
    """Whether every input within its range, less its offset, has room in a word."""
    return -greatest(bits) - 1 <= interface.input.low and interface.input.high <= greatest(bits)


# ---------------------------------------------------------------- reach and binary points


def ideal_room(layout: Layout, interface: Interface) -> Room:
    """Peak of every variable over all inputs within the range, in counts, coefficients unrounded.

    Raises
    ------
    Refused
        When a pole does not decay.
    """
    refuse_growing(layout)
    largest = interface.input.reach
    # As they are without rounding, so that structures that differ in it alone ask once.
    unrounded = [each._replace(words=SINGLE, shaped=False) for each in (*layout.outputs, *layout.updates)]
    outputs, updates = unrounded[: len(layout.outputs)], unrounded[len(layout.outputs) :]
    equations = (*outputs, Equation(COMMAND, layout.command), *updates)
    reach = {INPUT: Fraction(largest)}
    for name, gain in _ideal_gains(equations, layout.moves).items():
        if gain is None:
            raise Refused(
                "[target] arithmetic",
                f"{layout.structure}: a pole so near the unit circle that coefficients of {_SIGNIFICANT} bits lose it",
                "poles that the coefficients of a word keep inside",
                way_out(layout.structure, _SIGNIFICANT),
            )
        reach[name] = gain * largest
    for target, source in reversed(layout.moves):
        reach[target] = reach[source]
    return Room(reach)


@lru_cache(maxsize=64)
def _ideal_gains(equations: tuple[Equation, ...], moves: tuple[tuple[str, str], ...]) -> Mapping[str, Fraction | None]:
    """Peak gain of every variable; kept, because every word length asks for it."""
    rows = paths(_ideal(equations, moves))
    return {equation.target: peak_gain(row[0], _WIDTH).high for equation, row in zip(equations, rows, strict=True)}


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


def _words(layout: Layout, room: Room, choice: Choice) -> dict[str, Word]:
    words = {INPUT: Word(choice.bits, 0)}
    tops = {equation.top_of: equation.target for equation in layout.outputs if equation.top_of}
    finest = _finest_beside_others(layout, room, choice)
    ways = way_out(layout.structure, choice.bits)
    for equation in (*layout.updates, *layout.outputs):
        name = equation.target
        if equation.top_of:
            words[name] = Word(choice.bits, words[equation.top_of].fraction_bits - choice.bits)
            continue
        bits = choice.bits * equation.words
        point = _point(name, room, bits, ways)
        if name in tops:
            # Its upper half is rounded once more.
            margin = {name: room.margin.get(tops[name], 1)}
            point = min(point, choice.bits + _point(name, Room(room.reach, margin), choice.bits, ways))
        words[name] = Word(bits, min(point, finest.get(name, point)))
    for target, source in reversed(layout.moves):
        words[target] = words[source]
    return words


def _finest_beside_others(layout: Layout, room: Room, choice: Choice) -> dict[str, int]:
    """Fraction bits of variables that are added in the command as they are: what the accumulator leaves them."""
    if len(layout.command) < 2:
        return {}
    total = sum((abs(a.value) * room.reach[a.variable] for a in layout.command), Fraction(0))
    most = fraction_bits(total, choice.accumulator_bits) - 1
    return {a.variable: most for a in layout.command if a.name is None}


def _point(name: str, room: Room, bits: int, ways: str) -> int:
    """Fraction bits of a variable.

    Raises
    ------
    Refused
        When its rounding errors take more than half of its word: less than that is left of the signal.
    """
    margin = room.margin.get(name, 1)
    if 2 * margin > greatest(bits):
        raise Refused(
            "[target] arithmetic",
            f"rounding errors in {name.removeprefix('state.')} add up to as much as +-{margin} units, and its {bits} "
            f"bits hold +-{greatest(bits)}; with the signal that takes words of {margin.bit_length() + 2} bits",
            "words that hold a signal larger than the rounding errors",
            ways,
        )
    return fraction_bits(room.reach[name], bits, margin)


def way_out(structure: str, bits: int) -> str:
    """What to try where words of so many bits do not suffice."""
    structures = ['structure = "delta"'] if structure != "delta" else []
    wider = ['arithmetic = "int32"'] if bits < WIDEST // 2 else []
    return ", ".join([*structures, *wider, "or a lower sample rate"])


def fraction_bits(reach: Fraction, bits: int, margin: int = 1) -> int:
    """The most with which values up to ``reach`` and some units of rounding stay within a word; 0 for no reach."""
    if reach == 0:
        return 0
    return _floor_log2((greatest(bits) - margin) / reach)


def _floor_log2(value: Fraction) -> int:
    guess = value.numerator.bit_length() - value.denominator.bit_length()
    return guess if Fraction(2) ** guess <= value else guess - 1


# ---------------------------------------------------------------- sums


def _consistent(
    layout: Layout, words: Mapping[str, Word], room: Room, choice: Choice
) -> tuple[tuple[Sum, ...], tuple[Sum, ...]]:
    """Sums of outputs and updates, a coefficient that stands in several being one and the same number."""
    caps: dict[str, int] = {}
    while True:
        outputs = tuple(_output(each, words, room, choice, caps) for each in layout.outputs)
        updates = tuple(_sum(each, words, room, choice, caps) for each in layout.updates)
        found: dict[str, set[int]] = {}
        for term in (term for each in (*outputs, *updates) for term in each.terms if term.name):
            found.setdefault(str(term.name), set()).add(term.fraction_bits)
        differing = {name: min(bits) for name, bits in found.items() if len(bits) > 1}
        if not differing:
            return outputs, updates
        caps |= differing


def _output(equation: Equation, words: Mapping[str, Word], room: Room, choice: Choice, caps: Mapping[str, int]) -> Sum:
    """A sum, or the upper half of a double word, rounded."""
    if not equation.top_of:
        return _sum(equation, words, room, choice, caps)
    double = words[equation.top_of]
    half = words[equation.target].bits
    return Sum(equation.target, (Term(None, 1, 0, equation.top_of, 0),), half, double.bits)


def _sum(equation: Equation, words: Mapping[str, Word], room: Room, choice: Choice, caps: Mapping[str, int]) -> Sum:
    """Align the terms at the finest binary point at which their sum fits the accumulator."""
    target, addends = equation.target, equation.addends
    point = words[target].fraction_bits if target in words else 0
    needed = [words[a.variable].fraction_bits - _exponent(a.unit) for a in addends if a.name is None]
    least = max([point, *needed])
    limit = max(
        [
            least,
            *(words[a.variable].fraction_bits + _most_bits(a.unit, a.multiple, choice.bits) for a in addends if a.name),
        ]
    )
    while True:
        terms, at = _aligned(addends, words, choice.bits, limit, least, caps)
        most = sum(abs(t.stored) * 2**t.shift * _units(t.variable, words, room) for t in terms)
        halves = 2 if equation.shaped else 1
        most += halves << max(at - point - 1, 0)
        if most <= greatest(choice.accumulator_bits):
            kept = f"state.{target}_remainder" if equation.shaped and at > point else None
            return Sum(target, terms, at - point, choice.accumulator_bits, equation.base, kept)
        if limit <= least:
            raise _no_room(target, most, choice)
        limit -= 1


def _no_room(target: str, most: int, choice: Choice) -> Refused:
    return Refused(
        "[target] arithmetic",
        f"the sum for {target.removeprefix('state.')} reaches {most.bit_length() + 1} bits, and its accumulator has "
        f"{choice.accumulator_bits}",
        "gains and ranges that leave room",
        'arithmetic = "int32", another structure, or a coarser per_count of the output',
    )


def _units(variable: str, words: Mapping[str, Word], room: Room) -> int:
    """Largest integer in a variable, rounding errors included."""
    return ceil(room.reach[variable] * Fraction(2) ** words[variable].fraction_bits) + room.margin.get(variable, 1)


def _most_bits(unit: Fraction, multiple: int, bits: int) -> int:
    """Fraction bits with which a coefficient, rounded to nearest, fills its word; 0 for 0."""
    if unit == 0:
        return 0
    least = _floor_log2(greatest(bits) / abs(unit * multiple)) - 1
    # Rounding may take it either way across the end of the word.
    candidates = range(least, least + 3)
    return max(own for own in candidates if abs(round(unit * Fraction(2) ** own) * multiple) <= greatest(bits))


def _aligned(
    addends: Sequence[Addend],
    words: Mapping[str, Word],
    bits: int,
    limit: int,
    least: int,
    caps: Mapping[str, int],
) -> tuple[tuple[Term, ...], int]:
    """Terms at the finest binary point up to ``limit``; the coefficients of one signal's past share theirs."""
    points = {a.variable: words[a.variable].fraction_bits for a in addends}
    shared: dict[tuple[str, int], int] = {}
    for a in addends:
        if a.name:
            point = points[a.variable]
            key = _signal(a.variable), point
            shared[key] = min(
                shared.get(key, limit - point), _most_bits(a.unit, a.multiple, bits), caps.get(a.name, limit - point)
            )
    _share_point(shared, addends, bits)
    at = max([least, *(point + own for (_, point), own in shared.items())])
    terms = []
    for a in addends:
        point = points[a.variable]
        if a.name is None:
            terms.append(Term(None, a.multiple, at - point + _exponent(a.unit), a.variable, 0))
        else:
            own = shared[_signal(a.variable), point]
            stored = round(a.unit * Fraction(2) ** own) * a.multiple
            terms.append(Term(a.name, stored, at - point - own, a.variable, own))
    return tuple(terms), at


def _share_point(shared: dict[tuple[str, int], int], addends: Sequence[Addend], bits: int) -> None:
    """Take products of long words to the binary point of the coarsest, where the coefficients have bits to spare.

    A product at another point is shifted in every sample, in twice its words. What feeds a pole back keeps its bits.
    """
    if bits <= _KEPT:
        return
    fed_back = {_signal(a.variable) for a in addends if a.name and is_recursive(a.name)}
    coarsest = min((point + own for (_, point), own in shared.items()), default=0)
    for signal, point in shared:
        largest = max(abs(a.unit * a.multiple) for a in addends if a.name and _signal(a.variable) == signal)
        enough = largest * Fraction(2) ** (coarsest - point) >= 1 << _KEPT - 1
        if signal not in fed_back and enough:
            shared[signal, point] = coarsest - point


def _signal(variable: str) -> str:
    """Of which a variable is a past value: ``state.section1_output_2`` of ``section1_output``."""
    name, _, age = variable.removeprefix("state.").rpartition("_")
    return name if name and age.isdigit() and variable.startswith("state.") else variable


def _exponent(power: Fraction) -> int:
    """Of a power of two."""
    return power.numerator.bit_length() - power.denominator.bit_length()


# ---------------------------------------------------------------- the integral and the command


def _integral(integration: Integration, interface: Interface, choice: Choice, rest: Fraction) -> Integral | None:
    if not integration.gains:
        return None
    reaches = integral_reaches(integration, interface, rest)
    most = max(sums_of_integral(integration, interface, rest, reaches))
    full = min(_most_bits(gain, 1, choice.bits) for gain in integration.gains if gain)
    narrow = fraction_bits(most, WIDEST // 2 - _SPARE)
    bits = WIDEST // 2 if narrow >= full and choice.accumulator_bits <= WIDEST // 2 else WIDEST
    point = min(full, fraction_bits(most, bits - _SPARE))
    unit = Fraction(2) ** point
    stored = tuple(round(gain * unit) for gain in integration.gains)
    tracking = round(integration.tracking * unit)
    _refuse_vanished(integration, stored, tracking, Word(bits, point))
    held = [not integration.hold or i > 0 for i in range(len(reaches))]
    limits = tuple(
        (-int(reach * unit), int(reach * unit)) if by_itself else None
        for reach, by_itself in zip(reaches, held, strict=True)
    )
    return Integral(stored, Word(bits, point), limits, tracking)


def _refuse_vanished(integration: Integration, stored: Sequence[int], tracking: int, word: Word) -> None:
    wanted = [(f"R{i}, the gain of an integral state", gain) for i, gain in enumerate(integration.gains, 1)]
    wanted.append(("the gain of back-calculation per sample", integration.tracking))
    for (what, value), found in zip(wanted, (*stored, tracking), strict=True):
        if value and not found:
            raise Refused(
                "[target] arithmetic",
                f"{what}, {float(value):.3g}, becomes 0: its word of {word.bits} bits has {word.fraction_bits} right "
                f"of the binary point, and it needs {bits_to_keep(value)}",
                "an integral that still integrates",
                "a lower sample rate, a coarser per_count of the input, a narrower range of the output, or float32",
            )


def bits_to_keep(value: Fraction) -> int:
    """Least fraction bits with which a value other than 0 is 1 unit at least."""
    return max(0, -_floor_log2(abs(value)))


def _command(
    layout: Layout,
    integral: Integral | None,
    words: Mapping[str, Word],
    room: Room,
    choice: Choice,
) -> Sum:
    """The rest and the first integral state, in counts."""
    if integral is None:
        return _sum(Equation(COMMAND, layout.command), words, room, choice, {})
    state = "state.integral1"
    bits = max(choice.accumulator_bits, integral.word.bits)
    largest = Fraction(greatest(integral.word.bits - _SPARE)) / Fraction(2) ** integral.word.fraction_bits
    return _sum(
        Equation(COMMAND, (*layout.command, Addend(None, Fraction(1), state))),
        dict(words) | {state: integral.word},
        Room(dict(room.reach) | {state: largest}, room.margin),
        choice._replace(accumulator_bits=bits),
        {},
    )


def _wide_input(interface: Interface, bits: int) -> Refused:
    port = interface.input
    needed = max(port.high, -port.low - 1).bit_length() + 1
    centred = port.high - port.low < 1 << bits
    moved = ["physical zero (offset) in the middle of the range"] if centred else []
    wider = ['arithmetic = "int32"'] if bits < WIDEST // 2 else []
    return Refused(
        "[signals.input] range",
        f"counts from {port.low} to {port.high} from physical zero, which takes {needed} bits",
        f"the words of {bits} bits, from {-greatest(bits) - 1} to {greatest(bits)}",
        ", ".join([*wider, *moved, "or a coarser per_count"]),
    )
