"""What a state that was set at rest can be off by: the bumpless start, on which the proofs hold too.

A state at rest is rounded. It is the state that a constant past would have left, had every sum of a section been off
by a constant error then: ``(I - A) e`` for an offset ``e`` of the section's state. So a bound of what happens after is
a bound of what constant errors of the past do, beside what a proof counts anyway.
"""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction

from realize.arithmetic.integer.program import INPUT, Program, linear, stepped
from realize.arithmetic.integer.settling import Gain, Settled, settle
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.state_space import paths

#: Relative width of the peak gains, whose upper ends are used.
_WIDTH = Fraction(1, 1 << 4)

_HALF = Fraction(1, 2)


def resting_errors(program: Program) -> dict[str, Fraction]:
    """Bound of what the rounding of a state at rest adds to every variable, in its own units.

    Parameters
    ----------
    program : Program
        Without a stored pole on or outside the unit circle.

    Returns
    -------
    dict
        By target of a sum.
    """
    constant: dict[str, Fraction] = {}
    for section in settle(program).sections:
        for gain in section.gains:
            off = _off(program, gain, constant)
            for name, change in _constant_errors(program, section, gain).items():
                constant[name] = constant.get(name, Fraction(0)) + change * off
    named = tuple(name for name, error in constant.items() if error)
    # What was discarded is zero at rest, so that these errors are not given back.
    plain = program._replace(
        outputs=tuple(each._replace(remainder=None) for each in program.outputs),
        updates=tuple(each._replace(remainder=None) for each in program.updates),
    )
    system, _, targets = linear(plain, named)
    found = {}
    for target, row in zip(targets, paths(system), strict=True):
        gains = (peak_gain(path, _WIDTH).high for path in row[1:])
        found[target] = sum(
            (gain * constant[name] for gain, name in zip(gains, named, strict=True) if gain is not None), Fraction(0)
        )
    return found


def _constant_errors(program: Program, section: Settled, gain: Gain) -> dict[str, Fraction]:
    """For states off by a unit of one rounded gain: the constant error of each sum that would keep them there."""
    states = [state for state, local in section.stored if local == gain.target]
    offset = dict.fromkeys(states, Fraction(1))
    moved = dict(program.moves)
    after = stepped(program, offset, Fraction(0))
    errors: dict[str, Fraction] = {}
    for state, _ in section.stored:
        change = offset.get(state, Fraction(0)) - after.get(state, Fraction(0))
        if change:
            name = moved.get(state, state)
            errors[name] = errors.get(name, Fraction(0)) + abs(change)
    return errors


def _off(program: Program, gain: Gain, constant: Mapping[str, Fraction]) -> Fraction:
    """Largest distance of a state from its exact value at rest.

    Half a unit; half a unit of the mantissa, which is the nearest; and, from a section whose history is at rest too,
    what it hands on may differ from its history by the error that would keep it there, another rounding, and those of
    the words it is added up from.
    """
    if gain.variable == INPUT:
        return _HALF + _HALF * program.interface.input.reach / Fraction(2) ** gain.shift
    largest = 1 << program.words[gain.variable].bits - 1
    handed = _HALF + constant.get(gain.variable, Fraction(0)) + _at_once(program, gain.variable)
    return _HALF + (_HALF * largest + abs(gain.mantissa) * handed) / Fraction(2) ** gain.shift


def _at_once(program: Program, target: str) -> Fraction:
    """What the roundings of the words that a sum adds up do to it in the same sample, in its units."""
    rounded = {each.target for each in program.outputs if each.shift and each.base is None}
    own = next(each for each in program.outputs if each.target == target)
    factors = (abs(term.stored) << term.shift for term in own.terms if term.variable in rounded - {target})
    return _HALF * sum(factors, 0) / (1 << own.shift)


def with_resting(errors: Mapping[str, Fraction], resting: Mapping[str, Fraction]) -> dict[str, Fraction]:
    """Rounding errors of every sample, and those of a start at rest."""
    return {name: error + resting.get(name, Fraction(0)) for name, error in errors.items()}
