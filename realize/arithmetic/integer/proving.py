"""Quantize until everything is proven, or say what is missing: coefficients, poles, or room for rounding errors."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from typing import NamedTuple

from realize.arithmetic.integer.integration import Integration
from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.integer.layout import Layout
from realize.arithmetic.integer.poles import decays, least_margin, margins
from realize.arithmetic.integer.program import COMMAND, Program
from realize.arithmetic.integer.proof import Bound, Proof, prove
from realize.arithmetic.integer.quantize import Choice, Needs, Room, bits_to_keep, ideal_room, quantized, way_out
from realize.errors import Refused

#: Times that variables are given the room that a proof found them to need: a coarser unit makes what others need
#: larger by a bit at most, and that once for each of a few sections.
_MOST_ATTEMPTS = 6

#: Fraction bits beyond those with which a value does not become 0, for 1 %: half a unit of 2**-6 is 1/128.
_BITS_FOR_A_PERCENT = 6
_A_PERCENT = Fraction(1, 100)

_ZERO = Fraction(0)


class Proven(NamedTuple):
    """A program and what is proven of it."""

    program: Program
    proof: Proof


def proven(
    layout: Layout, interface: Interface, choice: Choice, integration: Integration, ideal: Room | None = None
) -> Proven:
    """Quantize; where something may overflow, give it the room that it was found to need, and try again.

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
    ideal : Room, optional
        To begin with; by default that of :func:`realize.arithmetic.integer.quantize.ideal_room`.

    Raises
    ------
    Refused
        When a stored pole does not decay, a section has lost its gain, or the words do not suffice.
    """
    first = ideal_room(layout, interface) if ideal is None else ideal
    needs = Needs(first, first)
    overflowing: tuple[Bound, ...] = ()
    for _ in range(_MOST_ATTEMPTS):
        program = quantized(layout, interface, choice, integration, needs)
        refuse_lost(layout, program)
        proof = prove(program)
        if proof is None:
            raise _without_bound()
        overflowing = proof.overflowing
        if not overflowing:
            return Proven(program, proof)
        tight = {name for bound in overflowing for name in _room_givers(bound, program)}
        needs = Needs(needs.words.raised(proof.room, tight), needs.sums.raised(proof.room, proof.room.reach))
    raise _no_room(layout, choice, overflowing[0])


def _room_givers(bound: Bound, program: Program) -> Iterable[str]:
    """The variable whose binary point decides whether a bound holds; with the upper half of a double word, both."""
    name = bound.variable.removesuffix(" (sum)")
    moves = dict(program.moves)
    while name in moves:
        name = moves[name]
    if name not in program.words or name == COMMAND:
        return ()
    halves = [(each.target, each.terms[0].variable) for each in program.outputs if each.shift == program.bits]
    return {name, *(other for pair in halves if name in pair for other in pair)}


def _no_room(layout: Layout, choice: Choice, bound: Bound) -> Refused:
    name = bound.variable.removeprefix("state.")
    return Refused(
        "[target] arithmetic",
        f"{name} reaches {bound.largest} units with its rounding errors, which takes {bound.bits - bound.spare_bits} "
        f"bits, and has {bound.bits}",
        "words and accumulators that hold signal and rounding errors",
        way_out(layout.structure, choice.bits),
    )


def _without_bound() -> Refused:
    return Refused(
        "[target] arithmetic",
        "a stored pole lies within 1e-18 of the unit circle: no bound is computed",
        "poles that decay",
        'a lower sample rate, or arithmetic = "float32"',
    )


# ---------------------------------------------------------------- what rounding must leave


def refuse_lost(layout: Layout, program: Program) -> None:
    """Refuse stored numbers without a proof that have lost what no check could judge.

    Raises
    ------
    Refused
        When a stored pole does not decay, or a section has lost its gain.
    """
    _refuse_lost_poles(layout, program)
    _refuse_lost_gains(layout, program)


def _refuse_lost_poles(layout: Layout, program: Program) -> None:
    """Refuse stored denominators with a root on or outside the unit circle, exactly."""
    values = _values(program)
    for k, part in enumerate(layout.parts, 1):
        if decays(part.stored(values)[1]):
            continue
        raise Refused(
            "[target] arithmetic",
            f"section {k} has a pole that does not decay once it is rounded to {program.bits} bits: "
            + _lost_of_pole(layout, program, k),
            "coefficients that keep the pole inside the unit circle",
            way_out(layout.structure, program.bits),
        )


def _lost_of_pole(layout: Layout, program: Program, k: int) -> str:
    """Coefficients of the denominator that became 0, or what those that did not leave; then other coefficients."""
    lost = _lost(layout, program, k)
    if lost.startswith(_denominators(k)):
        return lost
    place, margin = least_margin(layout.parts[k - 1].ratio[1])
    bits = min(term.fraction_bits for name, term in program.coefficients.items() if name.startswith(_denominators(k)))
    left = f"{place} = {float(margin):.3g} becomes 0 or less with {bits} fraction bits, and needs {_needed(margin)}"
    return f"{left}; {lost}" if lost else left


def _denominators(k: int) -> tuple[str, ...]:
    return tuple(f"section{k}_{letter}" for letter in "asw")


def _refuse_lost_gains(layout: Layout, program: Program) -> None:
    """Refuse a section whose numerator, or by a coefficient that became 0 whose gain at z = 1, is gone.

    Of sections beside each other one may be too small to matter; all of them are not.
    """
    values = _values(program)
    gone = []
    for k, part in enumerate(layout.parts, 1):
        wanted, found = part.ratio[0], part.stored(values)[0]
        lost = _lost(layout, program, k)
        if any(wanted) and (not any(found) or (lost and sum(wanted, _ZERO) and not sum(found, _ZERO))):
            gone.append((k, lost))
    if not gone or (layout.parallel and len(gone) < len(layout.parts)):
        return
    k, lost = gone[0]
    raise Refused(
        "[target] arithmetic",
        f"section {k} has lost its gain once it is rounded to {program.bits} bits: {lost}",
        "coefficients that keep the gain",
        way_out(layout.structure, program.bits),
    )


def _lost(layout: Layout, program: Program, k: int) -> str:
    """Coefficients of a section that became 0, with the fraction bits they have and need; empty for none."""
    wanted = {
        str(a.name): a.value
        for addends in (*(each.addends for each in (*layout.outputs, *layout.updates)), layout.command)
        for a in addends
        if a.name
    }
    gone = {name: t.fraction_bits for name, t in program.coefficients.items() if not t.stored and wanted[name]}
    return "; ".join(
        f"{name} = {float(wanted[name]):.3g} becomes 0 with {bits} fraction bits, and needs {_needed(wanted[name])}"
        for name, bits in sorted(gone.items(), key=lambda entry: not entry[0].startswith(_denominators(k)))
        if name.startswith(f"section{k}_")
    )


def worst_rounded(layout: Layout, program: Program) -> str:
    """What the coefficients ``a`` of a section leave to the unit circle, where rounding changed that by over 1 %.

    Returns
    -------
    str
        That of the section changed most, with the fraction bits it has and needs; empty for none.
    """
    values = _values(program)
    found: list[tuple[Fraction, str]] = []
    for k, part in enumerate(layout.parts, 1):
        bits = [t.fraction_bits for name, t in program.coefficients.items() if name.startswith(f"section{k}_a")]
        wanted, stored = (margins(ratio[1]) for ratio in (part.ratio, part.stored(values)))
        for place, value in wanted.items() if bits else ():
            changed = abs(stored[place] / value - 1)
            needed = bits_to_keep(value) + _BITS_FOR_A_PERCENT
            text = (
                f"{place} = {float(value):.3g} of section {k} is stored as {float(stored[place]):.3g} with {min(bits)} "
            )
            found += [(changed, f"{text}fraction bits, and needs {needed} for 1 %")] if changed > _A_PERCENT else []
    return max(found, default=(_ZERO, ""))[1]


def _needed(value: Fraction) -> str:
    bits = bits_to_keep(value)
    return f"{bits} ({bits + _BITS_FOR_A_PERCENT} for 1 %)"


def _values(program: Program) -> Mapping[str, Fraction]:
    return {name: term.value for name, term in program.coefficients.items()}
