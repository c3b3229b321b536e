"""From ``Gd(z)`` to stored integers: a program, what it is as a pulse transfer function, and what is proven of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.arithmetic.grouping import Rest, split_integral
from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.integer.layout import Layout, Ratio, layouts
from realize.arithmetic.integer.program import INPUT, Program
from realize.arithmetic.integer.proof import Bound, Proof, prove
from realize.arithmetic.integer.quantize import Choice, Integration, quantized
from realize.arithmetic.realization import exact_pulse
from realize.errors import Refused
from realize.transfer import PulseTransferFunction

#: Word and accumulators of an arithmetic, the narrow ones first: 32-bit processors multiply 16 by 16 bits at once.
WIDTHS: Mapping[str, tuple[int, tuple[int, ...]]] = {"int16": (16, (32, 64)), "int32": (32, (64,))}

#: Times that a variable is given more room for its rounding errors: one bit holds them, where they are not the signal.
_MOST_LOWERED = 4


class Widths(NamedTuple):
    """Bits of a factor of a product, and of a sum."""

    bits: int
    accumulator_bits: int


class StoredSection(NamedTuple):
    """A section as stored, exactly: ascending powers of 1/z, ``a`` without its leading 1."""

    b: tuple[Fraction, ...]
    a: tuple[Fraction, ...]


@dataclass(frozen=True)
class IntegerRealization:
    """What the firmware stores, with its proofs.

    Attributes
    ----------
    structure : str
        Key of :data:`realize.arithmetic.integer.layout.STRUCTURES`.
    widths : Widths
        Of its words and sums.
    program : Program
        What a sample does.
    proof : Proof
        What is proven of it.
    layout : Layout
        What it was rounded from.
    numerators_anew : bool
        Whether the numerators were scaled to the rounded denominators before they were rounded.
    period_s : Fraction
        Sample period.
    """

    structure: str
    widths: Widths
    program: Program
    proof: Proof
    layout: Layout
    numerators_anew: bool
    period_s: Fraction

    @property
    def sections(self) -> tuple[StoredSection, ...]:
        """Each section as stored, in counts."""
        return _stored_sections(self.layout, self.program)

    @property
    def integral(self) -> tuple[Fraction, ...]:
        """``R_1, R_2, ...`` as stored, in counts of output per count of input."""
        integral = self.program.integral
        if integral is None:
            return ()
        return tuple(gain / Fraction(2) ** integral.word.fraction_bits for gain in integral.stored)

    @property
    def direct_gain(self) -> Fraction:
        """What passes beside parallel sections, as stored, in counts."""
        return _direct_gain(self.layout, self.program)


def integer_realization(
    pulse: PulseTransferFunction,
    interface: Interface,
    widths: Widths,
    structure: str,
    *,
    hold: bool = True,
    tracking: Fraction = Fraction(0),
) -> IntegerRealization:
    """Split, lay out, choose binary points, round, and prove.

    Parameters
    ----------
    pulse : PulseTransferFunction
        ``Gd(z)`` in physical units.
    interface : Interface
        Counts at both ends.
    widths : Widths
        Of words and sums.
    structure : str
        Key of :data:`realize.arithmetic.integer.layout.STRUCTURES`.
    hold, tracking
        As in :class:`realize.arithmetic.integer.quantize.Integration`.

    Raises
    ------
    Refused
        When the structure does not suit the poles, no bound exists, or the words do not suffice; the message says
        which, and what would do.
    """
    integral, rest = split_integral(pulse)
    rest = rest._replace(gain=rest.gain * interface.scale)
    integration = Integration(tuple(gain * interface.scale for gain in integral), hold, tracking)
    _refuse_one_sided(interface, integration)
    _refuse_zero(rest, integration)
    layout = layouts(rest, structure)
    program, proof = _proven(layout, interface, widths, integration)
    scales = _rescaled(layout, program)
    anew = False
    if scales is not None:
        other = layouts(rest, structure, scales)
        try:
            program_anew, proof_anew = _proven(other, interface, widths, integration)
        except Refused:
            program_anew = None
        if program_anew is not None and _gain_error(layout, other, program_anew) < _gain_error(layout, layout, program):
            layout, program, proof, anew = other, program_anew, proof_anew, True
    return IntegerRealization(structure, widths, program, proof, layout, anew, pulse.period_s)


def stored_integer_pulse(stored: IntegerRealization) -> PulseTransferFunction:
    """The pulse transfer function that the stored integers have, exactly, in physical units."""
    scale = stored.program.interface.scale
    tops, bottoms = [], []
    for b, a in stored.sections:
        tops.append(poly.trimmed(b))
        bottoms.append((Fraction(1), *a))
    if stored.layout.parallel:
        numerator = _parallel(stored.direct_gain, stored.sections)
    else:
        numerator = _product(tops) if tops else ()
    return exact_pulse(
        poly.scale(numerator, 1 / scale), bottoms, tuple(gain / scale for gain in stored.integral), stored.period_s
    )


# ---------------------------------------------------------------- proving


def _proven(layout: Layout, interface: Interface, widths: Widths, integration: Integration) -> tuple[Program, Proof]:
    """Quantize; give room to what rounding errors make overflow, and try again.

    Raises
    ------
    Refused
        When the words do not suffice.
    """
    lowered: dict[str, int] = {}
    overflowing: tuple[Bound, ...] = ()
    for _ in range(_MOST_LOWERED):
        program = quantized(layout, interface, Choice(*widths, lowered), integration)
        proof = prove(program, integration)
        if proof is None:
            raise _lost_pole(layout, program, widths)
        overflowing = proof.overflowing
        if not overflowing:
            return program, proof
        for name in {_room_giver(bound, program) for bound in overflowing}:
            lowered[name] = lowered.get(name, 0) + 1
    raise Refused(
        "[target] arithmetic",
        f"{layout.structure} in {widths.bits} bits has no room for what rounding adds up to in "
        f"{overflowing[0].variable.removeprefix('state.')}",
        "words that hold signal and rounding errors",
        "use int32, structure error-feedback or delta, or a lower sample rate",
    )


def _room_giver(bound: Bound, program: Program) -> str:
    """The variable whose binary point decides whether a bound holds."""
    name = bound.variable.removesuffix(" (sum)")
    moves = dict(program.moves)
    while name in moves:
        name = moves[name]
    tops = {
        each.target: each.terms[0].variable for each in program.outputs if each.target.rpartition("_")[2][:3] == "top"
    }
    return tops.get(name, name)


def _lost_pole(layout: Layout, program: Program, widths: Widths) -> Refused:
    """Name the section whose stored denominator does not decay, and the bits that would keep it."""
    values = {name: term.value for name, term in program.coefficients.items()}
    for k, part in enumerate(layout.parts, 1):
        a = part.stored(values)[1]
        if not decays(a):
            margin = _margin(part.ratio[1])
            needed = _fraction_bits_for(margin)
            return Refused(
                "[target] arithmetic",
                f"section {k}: rounded to {widths.bits} bits its coefficients a have a pole that does not decay; what "
                f"they leave to z = 1 or -1 is {float(margin):.3g}, which takes {needed} fraction bits",
                "coefficients that keep the pole inside the unit circle",
                'structure = "delta", int32, or a lower sample rate',
            )
    return Refused("[target] arithmetic", "a stored pole does not decay", "poles that decay", "use int32, or float32")


def decays(a: Sequence[Fraction]) -> bool:
    """Whether the poles of a section lie inside the unit circle (Jury's conditions, exact)."""
    a1, a2 = (*a, Fraction(0), Fraction(0))[:2]
    return abs(a2) < 1 and abs(a1) < 1 + a2


def _margin(a: Sequence[Fraction]) -> Fraction:
    """Least distance of the coefficients from where a pole leaves the unit circle."""
    a1, a2 = (*a, Fraction(0), Fraction(0))[:2]
    return min(1 - abs(a2), 1 + a2 - abs(a1)) if len(a) > 1 else 1 - abs(a1)


def _fraction_bits_for(margin: Fraction) -> int:
    """With which a hundredth of it is still resolved: poles shift by about as much as their distance is off."""
    return max(0, (100 / margin).__ceil__().bit_length())


# ---------------------------------------------------------------- gains


def _rescaled(layout: Layout, program: Program) -> tuple[Fraction, ...] | None:
    """For each section the factor that brings back its gain at z = 1; None where none differs."""
    values = {name: term.value for name, term in program.coefficients.items()}
    factors = []
    for part in layout.parts:
        wanted, found = (_gain(1, part.ratio[1]), _gain(1, part.stored(values)[1]))
        factors.append(wanted / found if found else Fraction(1))
    return tuple(factors) if any(factor != 1 for factor in factors) else None


def _gain(b: Fraction | int, a: Sequence[Fraction]) -> Fraction:
    below = 1 + sum(a, Fraction(0))
    return b / below if below else Fraction(0)


def _gain_error(wanted: Layout, layout: Layout, program: Program) -> Fraction:
    """Of the gains at z = 1, that of the worst section, relative; sections without one do not count."""
    values = {name: term.value for name, term in program.coefficients.items()}
    worst = Fraction(0)
    for target, part in zip(wanted.parts, layout.parts, strict=True):
        b, a = part.stored(values)
        aimed = _gain(sum(target.ratio[0], Fraction(0)), target.ratio[1])
        if aimed:
            worst = max(worst, abs(_gain(sum(b, Fraction(0)), a) / aimed - 1))
    return worst


def _stored_sections(layout: Layout, program: Program) -> tuple[StoredSection, ...]:
    values = {name: term.value for name, term in program.coefficients.items()}
    return tuple(StoredSection(*part.stored(values)) for part in layout.parts)


def _direct_gain(layout: Layout, program: Program) -> Fraction:
    if not layout.parallel:
        return Fraction(0)
    found = [term for term in program.command.terms if term.variable == INPUT]
    return found[0].stored * Fraction(2) ** (found[0].shift - program.command.shift) if found else Fraction(0)


def _parallel(direct_gain: Fraction, sections: Sequence[Ratio]) -> poly.Rationals:
    whole: poly.Rationals = (Fraction(1),)
    numerator: poly.Rationals = ()
    for b, a in sections:
        own = (Fraction(1), *a)
        numerator = poly.add(poly.multiply(numerator, own), poly.multiply(poly.trimmed(b), whole))
        whole = poly.multiply(whole, own)
    return poly.add(numerator, poly.scale(whole, direct_gain)) if direct_gain else numerator


def _product(polynomials: Sequence[poly.Rationals]) -> poly.Rationals:
    result: poly.Rationals = (Fraction(1),)
    for p in polynomials:
        result = poly.multiply(result, p)
    return result


# ---------------------------------------------------------------- refusals


def _refuse_one_sided(interface: Interface, integration: Integration) -> None:
    port = interface.input
    if integration.gains and not port.low < 0 < port.high:
        side = "negative" if port.low == 0 else "positive"
        raise Refused(
            "[signals.input] range",
            f"no {side} value, so that the integral could only ever move one way",
            "a range with both signs, as the error of a loop has",
            "write range = [-8.0, 8.0], with your own ends",
        )


def _refuse_zero(rest: Rest, integration: Integration) -> None:
    if rest.gain == 0 and not any(integration.gains):
        raise Refused(
            "transfer", "a gain of zero: the output would never move", "a gain other than zero", "check the values"
        )
