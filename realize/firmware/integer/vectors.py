"""``NAME_vectors.csv`` in integers: inputs that reach every rounding and every limit, and the model's answers.

Full scale is the ends of the input's range, in counts. Inputs that a limit of the type stops at are left as they are:
the code holds them to its range by itself.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from copy import copy
from math import gcd

from realize.arithmetic.integer.interface import Port, type_range
from realize.arithmetic.integer.model import IntegerRecursion
from realize.arithmetic.integer.program import INPUT, Program, Sum
from realize.arithmetic.peak_gain import attaining_input
from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.patterns import UNIT, impulse, noise, sweep

#: Samples of each segment: the input that attains the peak gain, from a cleared state; then an impulse; noise within
#: the output's limits, to compare every rounding where no clamp hides it; a step; a sweep up to half the rate; noise
#: at full scale.
ATTAINING, QUIET, STEP, NOISE = 96, 192, 128, 192

#: After these: each level of a saturating pass; both ends of the input's type; inputs at ties and limits; a rest before
#: one count of input, which is held for long. At least 1,936 in all.
HELD, ENDS, DIRECTED, REST, FAINT = 24, 24, 192, 64, 512

#: The most samples a level is held for, where the command has to be integrated to its limits.
MOST_HELD = 384

#: Levels of a saturating pass, as parts of full scale: driven to a limit, then back with little, so that the command
#: meets both limits with increments of both signs and leaves them again.
LEVELS = (UNIT, -512, -UNIT, 512, UNIT, 512, -UNIT, -512)


def vectors_text(inputs: Sequence[int], outputs: Sequence[int]) -> str:
    """Inputs and outputs as comma-separated integers."""
    rows = [f"{x},{y}" for x, y in zip(inputs, outputs, strict=True)]
    return "\n".join(["input,output", *rows]) + "\n"


def vectors(emission: IntegerEmission) -> tuple[list[int], list[int]]:
    """Inputs in the order of the segments, and the model's answers from a cleared state."""
    model, port = emission.recursion(), emission.realization.program.interface.input
    signs, quiet = attaining_input(emission.realization.proof.transfer, ATTAINING), _quiet(emission, port)
    inputs = [port.offset + (port.high if sign > 0 else port.low) for sign in signs]
    inputs += [_scaled(m, port) for m in impulse()]
    inputs += quiet
    inputs += [_scaled(m, port) for m in (*[UNIT] * STEP, *sweep(), *noise(NOISE))]
    outputs = model.run(inputs)
    faint = port.offset + (1 if port.high else -1)
    saturating = [*_saturating(model, port), *(end for end in type_range(port.type) for _ in range(ENDS))]
    outputs += model.run(saturating)
    directed = [*_directed(model, port, quiet), *[port.offset] * REST, *[faint] * FAINT]
    outputs += model.run(directed)
    return [*inputs, *saturating, *directed], outputs


def _scaled(m: int, port: Port) -> int:
    """``m/UNIT`` of full scale, towards the high end where m is positive, in counts."""
    return port.offset + (m * port.high // UNIT if m >= 0 else -(-m * -port.low // UNIT))


def _quiet(emission: IntegerEmission, port: Port) -> list[int]:
    """Noise, halved until the command stays within its limits, as long as there is something to halve.

    A limit at physical zero does not count: every command meets it.
    """
    output = emission.realization.program.interface.output
    limits, halved = {output.offset + end for end in (output.low, output.high) if end}, 0
    while True:
        inputs = [_scaled(int(m / 2**halved), port) for m in noise(QUIET)]
        if not limits & set(emission.recursion().run(inputs)) or port.reach >> halved <= 2:
            return inputs
        halved += 1


def _saturating(model: IntegerRecursion, port: Port) -> list[int]:
    """Levels held twice as long until the command meets both limits, as far as it does."""
    output = model.program.interface.output
    limits, held = {output.low + output.offset, output.high + output.offset}, HELD
    while True:
        inputs = [_scaled(level, port) for level in LEVELS for _ in range(held)]
        if limits <= set(_copied(model).run(inputs)) or 2 * held > MOST_HELD:
            return inputs
        held *= 2


def _copied(model: IntegerRecursion) -> IntegerRecursion:
    """A model in the same state, that may go its own way."""
    other = copy(model)
    other.state = copy(model.state)
    return other


# ---------------------------------------------------------------- directed inputs


def _directed(model: IntegerRecursion, port: Port, quiet: Sequence[int]) -> list[int]:
    """Inputs chosen sample by sample: exact ties of what is rounded and just below; where the clamp begins."""
    model, program = _copied(model), model.program
    known = _known(program)
    solvable = [each for each in (*program.outputs, program.command) if each.shift and _is_solvable(each, known)]
    inputs: list[int] = []
    for k, filler in enumerate(quiet[:DIRECTED]):
        kind, turn = k % 3, k // 3
        x = None
        if kind == 1 and solvable:
            x = _tie(model, solvable[turn // 2 % len(solvable)], known, turn % 2)
        elif kind == 2:
            edge = _edge(model, high=turn % 2 == 0)
            x = edge and edge[0]
        inputs.append(filler if x is None else port.offset + x)
        model.update(inputs[-1])
    return inputs


def _known(program: Program) -> dict[str, Sum]:
    """Locals that follow from the state alone."""
    found: dict[str, Sum] = {}
    for each in program.outputs:
        if all(term.variable.startswith("state.") or term.variable in found for term in each.terms):
            found[each.target] = each
    return found


def _is_solvable(each: Sum, known: Mapping[str, Sum]) -> bool:
    """Whether a sum depends on the input directly, and beside it on the state alone."""
    variables = {term.variable for term in each.terms}
    return {name for name in variables if not name.startswith("state.") and name not in known} == {INPUT}


def _tie(model: IntegerRecursion, each: Sum, known: Mapping[str, Sum], below: int) -> int | None:
    """The input with which a sum lies on a tie, or as little below as its factor allows; first of all one that shows.

    Notes
    -----
    ``rest + factor x = tie - below`` modulo ``2^shift``; a power of two in the factor divides both sides.
    """
    port, unit = model.program.interface.input, 1 << each.shift
    factor = sum(term.stored << term.shift for term in each.terms if term.variable == INPUT)
    common = gcd(factor, unit)
    turns = unit // common
    wanted = ((unit >> 1) - below - _total(model, each, known)) // common
    least = wanted * pow(factor // common, -1, turns) % turns if turns > 1 else 0
    for low, high in (_shown(model), (port.low, port.high)):
        first = low + (least - low) % turns
        if first <= high:
            return first + (high - first) // turns // 2 * turns
    return None


def _total(model: IntegerRecursion, each: Sum, known: Mapping[str, Sum]) -> int:
    """A sum but for the input's terms."""
    terms = [term for term in each.terms if term.variable != INPUT]
    total = sum((term.stored << term.shift) * _value(model, term.variable, known) for term in terms)
    return total + (_value(model, each.remainder, known) if each.remainder else 0)


def _value(model: IntegerRecursion, name: str, known: Mapping[str, Sum]) -> int:
    if name not in known:
        return int(getattr(model.state, name.removeprefix("state.")))
    each = known[name]
    return (_total(model, each, known) + (1 << each.shift >> 1)) >> each.shift


def _shown(model: IntegerRecursion) -> tuple[int, int]:
    """The least and the greatest input that the clamp does not act on, in counts from physical zero."""
    low, high = model.program.interface.input[:2]
    for edge in (_edge(model, high=False), _edge(model, high=True)):
        if edge:
            beyond, within = edge
            low, high = (low, min(high, within)) if beyond > within else (max(low, within), high)
    return low, high


def _edge(model: IntegerRecursion, *, high: bool) -> tuple[int, int] | None:
    """The first input that the clamp acts on and its neighbour that it does not; None where there is no such pair."""
    port, output = model.program.interface
    limit = output.offset + (output.high if high else output.low)

    def clamped(x: int) -> bool:
        return model.output(port.offset + x) == limit

    beyond, within = (port.low, port.high) if clamped(port.low) else (port.high, port.low)
    if clamped(beyond) == clamped(within):
        return None
    while abs(beyond - within) > 1:
        middle = (beyond + within) // 2
        beyond, within = (middle, within) if clamped(middle) else (beyond, middle)
    return beyond, within
