"""What one sample does in integers, as a list of steps with the words they work on.

The firmware text, the bit-exact model and the proofs are made from the same steps. A variable is an integer; it stands
for that many units of ``2**-fraction_bits`` counts. ``state.x`` is kept between samples, any other name lives
within one.

A sample: the input, less its offset, is held to its range; the sums of ``outputs`` follow, then ``command``, held to
the output's range. After that, with what was applied, ``updates`` in their order, then ``moves`` in theirs, then the
integral states.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.state_space import StateSpace, Vector, probed

INPUT, COMMAND = "input", "unclamped"


class Word(NamedTuple):
    """Bits of a variable, the sign included, and how many of them are right of the binary point of a count.

    ``fraction_bits`` may be negative, or more than ``bits``.
    """

    bits: int
    fraction_bits: int


class Term(NamedTuple):
    """``stored * variable * 2**shift``.

    Attributes
    ----------
    name : str or None
        Of the coefficient; None where ``stored`` is 1 or -1, so that nothing is multiplied.
    stored : int
        As multiplied, its sign included.
    shift : int
        To the left, so that all terms of a sum have their binary points in one place.
    variable : str
        What it is multiplied with.
    fraction_bits : int
        ``stored/2**fraction_bits`` is what the coefficient stands for.
    """

    name: str | None
    stored: int
    shift: int
    variable: str
    fraction_bits: int

    @property
    def value(self) -> Fraction:
        """What the coefficient stands for."""
        return Fraction(self.stored) / Fraction(2) ** self.fraction_bits


class Sum(NamedTuple):
    """``target = base + floor((sum of terms + remainder + half)/2**shift)``: rounded to nearest, ties upward.

    Attributes
    ----------
    target : str
        What it becomes.
    terms : tuple of Term
        Added from left to right.
    shift : int
        To the right; 0 rounds nothing.
    bits : int
        Of the accumulator.
    base : str or None
        A variable in units of the target, added unrounded.
    remainder : str or None
        State that keeps what rounding discards, and gives it back in the next sample.
    """

    target: str
    terms: tuple[Term, ...]
    shift: int
    bits: int
    base: str | None = None
    remainder: str | None = None


class Integral(NamedTuple):
    """Integral states: ``I_i += R_i x + I_{i+1}``, all of the same word, nothing rounded.

    Attributes
    ----------
    stored : tuple of int
        ``R_1, R_2, ...`` in units of the word per count of input.
    word : Word
        Of every state.
    limits : tuple of (int, int) or None
        What each state is held to, where nothing else bounds it.
    tracking : int
        Gain of back-calculation in units of the word per count of output; 0 without.
    """

    stored: tuple[int, ...]
    word: Word
    limits: tuple[tuple[int, int] | None, ...] = ()
    tracking: int = 0


class Program(NamedTuple):
    """Everything a sample does.

    Attributes
    ----------
    interface : Interface
        Counts at both ends.
    bits : int
        Of a factor of a product: 16 or 32.
    words : mapping
        Of every variable by name.
    outputs : tuple of Sum
        What the command needs.
    command : Sum
        In counts; the integral included.
    updates : tuple of Sum
        What is left when the command is known.
    moves : tuple of (str, str)
        Target and source of copies.
    integral : Integral or None
        Its states are ``state.integral1, ...``.
    hold : bool
        Whether the anti-windup is ``hold-integral``.
    """

    interface: Interface
    bits: int
    words: Mapping[str, Word]
    outputs: tuple[Sum, ...]
    command: Sum
    updates: tuple[Sum, ...]
    moves: tuple[tuple[str, str], ...]
    integral: Integral | None
    hold: bool

    @property
    def sums(self) -> tuple[Sum, ...]:
        """Every sum, in the order of a sample."""
        return (*self.outputs, self.command, *self.updates)

    @property
    def states(self) -> tuple[str, ...]:
        """What is kept between samples besides the integral, in the order of first use."""
        return states_of(self.sums, self.moves)

    @property
    def coefficients(self) -> dict[str, Term]:
        """The first term of every coefficient that is multiplied, by name."""
        found: dict[str, Term] = {}
        for term in (term for each in self.sums for term in each.terms if term.name):
            found.setdefault(str(term.name), term)
        return found

    @property
    def multiplications(self) -> int:
        """Of one sample, those of the integral included."""
        own = sum(1 for each in self.sums for term in each.terms if term.name)
        gains = (*self.integral.stored, self.integral.tracking) if self.integral else ()
        return own + sum(1 for gain in gains if gain)

    @property
    def state_bytes(self) -> int:
        """Of everything kept between samples."""
        own = sum(kept_bytes(self.words[state].bits) for state in self.states)
        return own + (len(self.integral.stored) * kept_bytes(self.integral.word.bits) if self.integral else 0)


def stored_bytes(bits: int) -> int:
    """Of the narrowest C type that holds a word."""
    return next(size for size in (1, 2, 4, 8) if bits <= 8 * size)


def kept_bytes(bits: int) -> int:
    """Of what is kept between samples: 4, or 8; processors load several of these at once, and narrower ones singly."""
    return max(4, stored_bytes(bits))


def states_of(sums: Iterable[Sum], moves: Sequence[tuple[str, str]]) -> tuple[str, ...]:
    """Names of kept variables but for the integral, in the order of first use."""
    names: dict[str, None] = {}
    for each in sums:
        read = (*(term.variable for term in each.terms), each.base, each.remainder, each.target)
        names |= dict.fromkeys(name for name in read if name)
    for move in moves:
        names |= dict.fromkeys(move)
    return tuple(name for name in names if name.startswith("state.") and not name.startswith("state.integral"))


def linear(
    program: Program, sources: tuple[str, ...] | None = None
) -> tuple[StateSpace, tuple[str, ...], tuple[str, ...]]:
    """The program without its integral, nothing rounded or limited, each variable in its own units.

    Parameters
    ----------
    program : Program
        What a sample does.
    sources : tuple of str, optional
        Targets of the sums in which an error may enter; by default of those that round.

    Returns
    -------
    system : StateSpace
        Inputs: the input, then the error of every source, in units of its target. Outputs: the target of every sum, in
        their order.
    sources : tuple of str
        As given.
    targets : tuple of str
        Targets of all sums.
    """
    states = program.states
    sources = tuple(each.target for each in program.sums if each.shift) if sources is None else sources
    step = _linear_step(program, states, sources)
    targets = tuple(each.target for each in program.sums)
    return probed(step, len(states), 1 + len(sources)), sources, targets


def stepped(program: Program, state: Mapping[str, Fraction], value: Fraction) -> dict[str, Fraction]:
    """States after one linear sample from some that are not zero."""
    names = program.states
    following, _ = _linear_step(program, names, ())(tuple(state.get(name, _ZERO) for name in names), (value,))
    return dict(zip(names, following, strict=True))


def _linear_step(
    program: Program, states: Sequence[str], sources: Sequence[str]
) -> Callable[[Vector, Vector], tuple[list[Fraction], list[Fraction]]]:
    def step(state: Vector, inputs: Vector) -> tuple[list[Fraction], list[Fraction]]:
        values = dict(zip(states, state, strict=True)) | {INPUT: inputs[0]}
        errors = dict(zip(sources, inputs[1:], strict=True))
        answers = []
        for each in program.sums:
            total = sum((term.stored * 2**term.shift * values.get(term.variable, _ZERO) for term in each.terms), _ZERO)
            error = errors.get(each.target, _ZERO)
            result = total / (1 << each.shift) + error
            if each.remainder:
                # What was discarded last time comes back: less the last error.
                result -= values[each.remainder]
                values[each.remainder] = error
            values[each.target] = result + (values[each.base] if each.base else _ZERO)
            answers.append(values[each.target])
        for target, source in program.moves:
            values[target] = values[source]
        return [values[name] for name in states], answers

    return step


_ZERO = Fraction(0)
