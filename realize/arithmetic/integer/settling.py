"""How a state comes to rest at a given input: the bumpless start, for the model and the firmware text alike.

Section after section: its states at rest are gains times what it is given, histories filled with them, remainders
zero; what it then hands on is its own sum. With an integral, its first state takes what the command lacks.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.arithmetic.integer.program import INPUT, Program, Sum, Term
from realize.arithmetic.state_space import StateSpace, Vector, paths, probed

#: Bits of what a gain's product is made in, the sign included.
PRODUCT_BITS = 64


class Gain(NamedTuple):
    """``target = floor((mantissa * variable + half)/2**shift)``; a negative shift multiplies.

    Attributes
    ----------
    target : str
        A local, where the section comes to rest.
    name : str
        Of the coefficient.
    mantissa, shift : int
        ``mantissa/2**shift`` is the gain at rest in units of the state per unit of the variable.
    variable : str
        What the section is given.
    """

    target: str
    name: str
    mantissa: int
    shift: int
    variable: str


class Settled(NamedTuple):
    """One section: its gains; states and the locals that go into them, or None for zero; its sums; then histories of
    what it hands on."""

    gains: tuple[Gain, ...]
    stored: tuple[tuple[str, str | None], ...]
    sums: tuple[Sum, ...]
    histories: tuple[tuple[str, str], ...]


class Settling(NamedTuple):
    """The way to rest.

    Attributes
    ----------
    inputs : tuple of str
        States that keep earlier inputs: all become the input.
    sections : tuple of Settled
        In their order.
    rest : tuple of Term
        With an integral: the command's terms but for it.
    shift : int
        With an integral: ``integral1 = floor(((wanted << command shift) - rest + half) / 2**shift)``.
    integrating : bool
        Whether only input 0 is at rest: ``I_{i+1} = -R_i x`` keeps all but the last integral state still otherwise.
    """

    inputs: tuple[str, ...]
    sections: tuple[Settled, ...]
    rest: tuple[Term, ...]
    shift: int
    integrating: bool


def settle(program: Program) -> Settling:
    """Find the gains of every section at rest, exactly on the stored integers, and round them once.

    Parameters
    ----------
    program : Program
        Without poles at z = 1 beside the integral.
    """
    count = max((_section(name) for name in (*program.states, *(each.target for each in program.sums))), default=0)
    sections = tuple(_settled(program, k) for k in range(1, count + 1))
    inputs = tuple(name for name in program.states if _history_of(name) == INPUT)
    if program.integral is None:
        return Settling(inputs, sections, (), 0, False)
    terms = program.command.terms
    rest = tuple(term for term in terms if term.variable != "state.integral1")
    shift = next(term.shift for term in terms if term.variable == "state.integral1")
    return Settling(inputs, sections, rest, shift, True)


def _settled(program: Program, k: int) -> Settled:
    output = f"section{k}_output"
    outputs = tuple(each for each in program.outputs if _section(each.target) == k)
    own = [each for each in program.sums if _section(each.target) == k]
    states = [name for name in program.states if _section(name) == k]
    remainders = [each.remainder for each in own if each.remainder]
    recursive = {term.variable for each in own for term in each.terms}
    # A history that only the next section reads follows what is handed on, rounded as it is.
    copies = [
        name for name in states if _history_of(name) == output and not recursive & {_aged(output, i) for i in (1, 2)}
    ]
    resting = [name for name in states if name not in remainders and name not in copies]
    source = _source(own, k)
    gains = _gains(program, own, resting, source) if resting else []
    stored: list[tuple[str, str | None]] = []
    made: dict[Fraction, Gain] = {}
    for name, gain in zip(resting, gains, strict=True):
        if gain and gain not in made:
            made[gain] = _rounded(gain, k, len(made) + 1, source, program)
        stored.append((name, made[gain].target if gain else None))
    return Settled(
        tuple(made.values()),
        (*stored, *((name, None) for name in remainders)),
        tuple(each._replace(remainder=None) for each in outputs),
        tuple((name, output) for name in copies),
    )


def _section(name: str) -> int:
    """Number of the section a variable belongs to; 0 for none."""
    part = name.removeprefix("state.").partition("_")[0]
    return int(part.removeprefix("section")) if part.startswith("section") else 0


def _history_of(name: str) -> str:
    """What a state keeps earlier values of; the name itself where it is no history."""
    signal, _, age = name.removeprefix("state.").rpartition("_")
    return signal if age.isdigit() and (signal == INPUT or signal.endswith("_output")) else name


def _aged(signal: str, age: int) -> str:
    return f"state.{signal}_{age}"


def _source(own: Sequence[Sum], k: int) -> str:
    """What a section is given."""
    read = (term.variable for each in own for term in each.terms)
    return next((_history_of(name) for name in read if _section(name) != k), INPUT)


def _gains(program: Program, own: Sequence[Sum], states: Sequence[str], source: str) -> list[Fraction]:
    """Of each state at rest, from what the section is given, in their own units."""
    n = len(states)
    system = probed(_step(program, own, states, source), n, 1)
    identity = tuple(tuple(Fraction(i == j) for j in range(n)) for i in range(n))
    reached = paths(StateSpace(system.A, system.B, identity, ((Fraction(0),),) * n))
    return [sum(row[0].numerator, Fraction(0)) / sum(row[0].denominator, Fraction(0)) for row in reached]


def _step(
    program: Program, own: Sequence[Sum], states: Sequence[str], source: str
) -> Callable[[Vector, Vector], tuple[list[Fraction], list[Fraction]]]:
    """One sample of a section alone, nothing rounded, everything it is given being at rest."""

    def step(state: Vector, inputs: Vector) -> tuple[list[Fraction], list[Fraction]]:
        values = dict(zip(states, state, strict=True))
        for each in own:
            total = Fraction(0)
            for term in each.terms:
                value = inputs[0] if _history_of(term.variable) == source else values[term.variable]
                total += term.stored * Fraction(2) ** (term.shift - each.shift) * value
            values[each.target] = total + (values[each.base] if each.base else 0)
        for target, moved in program.moves:
            if target in states:
                values[target] = values[moved]
        return [values[name] for name in states], []

    return step


def _rounded(gain: Fraction, k: int, number: int, source: str, program: Program) -> Gain:
    """Mantissa and shift with which a product has a bit to spare for rounding."""
    largest = program.interface.input.reach if source == INPUT else 1 << program.words[source].bits - 1
    room = Fraction(1 << PRODUCT_BITS - 2) / (abs(gain) * largest)
    shift = room.numerator.bit_length() - room.denominator.bit_length()
    shift = min(PRODUCT_BITS - 2, shift - (Fraction(2) ** shift > room))
    which = "" if number == 1 else str(number)
    mantissa = round(gain * Fraction(2) ** shift)
    return Gain(f"section{k}_settled{which}", f"section{k}_gain{which}", mantissa, shift, source)
