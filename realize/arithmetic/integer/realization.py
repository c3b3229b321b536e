"""From ``Gd(z)`` to stored integers: a program, what it is as a pulse transfer function, and what is proven of it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.arithmetic.grouping import Rest, split_integral
from realize.arithmetic.integer.integration import Integration
from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.integer.layout import Layout, Ratio, layouts
from realize.arithmetic.integer.program import INPUT, Program
from realize.arithmetic.integer.proof import Proof
from realize.arithmetic.integer.proving import proven, refuse_lost
from realize.arithmetic.integer.quantize import WIDEST, Choice, Needs, Room, ideal_room, quantized
from realize.arithmetic.realization import exact_pulse
from realize.errors import Refused
from realize.transfer import PulseTransferFunction

#: Word and accumulators of an arithmetic, the narrow ones first: 32-bit processors multiply 16 by 16 bits at once.
WIDTHS: Mapping[str, tuple[int, tuple[int, ...]]] = {"int16": (16, (32, 64)), "int32": (32, (64,))}


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
        return _stored_integral(self.program)

    @property
    def direct_gain(self) -> Fraction:
        """What passes beside parallel sections, as stored, in counts."""
        return _direct_gain(self.layout, self.program)


class Rounded(NamedTuple):
    """Coefficients of a structure as they are rounded first; nothing is proven.

    Attributes
    ----------
    structure, widths, layout, numerators_anew, period_s
        As in :class:`IntegerRealization`.
    program : Program
        What a sample does, unless a proof finds that something needs more room.
    ideal : Room
        For which its binary points were chosen.
    integration : Integration
        What is integrated.
    """

    structure: str
    widths: Widths
    layout: Layout
    numerators_anew: bool
    period_s: Fraction
    program: Program
    ideal: Room
    integration: Integration

    @property
    def pulse(self) -> PulseTransferFunction:
        """What the coefficients are, exactly, in physical units."""
        return _pulse(self.layout, self.program, self.period_s)


def integer_realization(
    pulse: PulseTransferFunction,
    interface: Interface,
    widths: Widths,
    structure: str,
    *,
    hold: bool = True,
    tracking: Fraction = Fraction(0),
) -> IntegerRealization:
    """Split, lay out, choose binary points, round, and prove: :func:`rounded`, then :func:`proven_realization`.

    Raises
    ------
    Refused
        As these.
    """
    return proven_realization(rounded(pulse, interface, widths, structure, hold=hold, tracking=tracking))


def rounded(
    pulse: PulseTransferFunction,
    interface: Interface,
    widths: Widths,
    structure: str,
    *,
    hold: bool = True,
    tracking: Fraction = Fraction(0),
) -> Rounded:
    """Split, lay out, choose binary points, and round: cheap beside a proof.

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
        When the structure does not suit the poles, the words do not suffice, or a pole or gain is lost; the message
        says which, and what would do.
    """
    rest, integration = _in_counts(pulse, interface, hold, tracking)
    _refuse_one_sided(interface, integration)
    _refuse_zero(rest, integration)
    well = _rounded_well(rest, structure, interface, widths, integration)
    refuse_lost(well.layout, well.program)
    return Rounded(structure, widths, well.layout, well.anew, pulse.period_s, well.program, well.ideal, integration)


def proven_realization(made: Rounded) -> IntegerRealization:
    """Prove what was rounded; where something may overflow, with binary points that give it more room.

    Raises
    ------
    Refused
        When no bound exists, or the words do not suffice.
    """
    choice = Choice(*made.widths)
    program, proof = proven(made.layout, made.program.interface, choice, made.integration, made.ideal)
    return IntegerRealization(
        made.structure, made.widths, program, proof, made.layout, made.numerators_anew, made.period_s
    )


def rounded_pulse(
    pulse: PulseTransferFunction, interface: Interface, bits: int, structure: str
) -> PulseTransferFunction:
    """What rounding the coefficients to so many bits makes of a pulse transfer function; nothing is proven.

    Parameters
    ----------
    pulse : PulseTransferFunction
        ``Gd(z)`` in physical units.
    interface : Interface
        Counts at both ends.
    bits : int
        Of a coefficient.
    structure : str
        Key of :data:`realize.arithmetic.integer.layout.STRUCTURES`.

    Raises
    ------
    Refused
        When the structure does not suit the poles.
    """
    rest, integration = _in_counts(pulse, interface, True, Fraction(0))
    # A range that fits any word: coefficients do not depend on it, and the input's own bits are another question.
    interface = interface._replace(input=interface.input._replace(low=-1, high=1))
    widths = Widths(bits, WIDEST)
    well = _rounded_well(rest, structure, interface, widths, integration)
    return _pulse(well.layout, well.program, pulse.period_s)


def _in_counts(
    pulse: PulseTransferFunction, interface: Interface, hold: bool, tracking: Fraction
) -> tuple[Rest, Integration]:
    """The rest and the integral, in counts of output per count of input."""
    integral, rest = split_integral(pulse)
    scaled = tuple(gain * interface.scale for gain in integral)
    return rest._replace(gain=rest.gain * interface.scale), Integration(scaled, hold, tracking)


class _Well(NamedTuple):
    """A layout, its program, the room it was made for, and whether its numerators were scaled."""

    layout: Layout
    program: Program
    ideal: Room
    anew: bool


def _rounded_well(rest: Rest, structure: str, interface: Interface, widths: Widths, integration: Integration) -> _Well:
    """The layout whose gains rounding keeps better: as it is, or with numerators scaled to the rounded denominators.

    Binary points are chosen for the first in any case: the factors are 1 to within what rounding does.
    """
    layout = layouts(rest, structure)
    ideal = ideal_room(layout, interface)
    needs = Needs(ideal, ideal)
    plain = _Well(layout, quantized(layout, interface, Choice(*widths), integration, needs), ideal, False)
    scales = _rescaled(layout, plain.program)
    if scales is None:
        return plain
    anew = layouts(rest, structure, scales)
    try:
        other = _Well(anew, quantized(anew, interface, Choice(*widths), integration, needs), ideal, True)
    except Refused:
        return plain
    better = _gain_error(layout, anew, other.program) < _gain_error(layout, layout, plain.program)
    return other if better else plain


def stored_integer_pulse(stored: IntegerRealization) -> PulseTransferFunction:
    """The pulse transfer function that the stored integers have, exactly, in physical units."""
    return _pulse(stored.layout, stored.program, stored.period_s)


def _pulse(layout: Layout, program: Program, period_s: Fraction) -> PulseTransferFunction:
    scale, sections = program.interface.scale, _stored_sections(layout, program)
    if layout.parallel:
        numerator = _parallel(_direct_gain(layout, program), sections)
    else:
        numerator = _product([poly.trimmed(section.b) for section in sections]) if sections else ()
    integral = tuple(gain / scale for gain in _stored_integral(program))
    bottoms = [(Fraction(1), *section.a) for section in sections]
    return exact_pulse(poly.scale(numerator, 1 / scale), bottoms, integral, period_s)


# ---------------------------------------------------------------- gains


def _rescaled(layout: Layout, program: Program) -> tuple[Fraction, ...] | None:
    """For each section with a gain at z = 1 the factor that brings it back; None where none differs."""
    values = {name: term.value for name, term in program.coefficients.items()}
    factors = []
    for part in layout.parts:
        wanted, found = (_gain(1, part.ratio[1]), _gain(1, part.stored(values)[1]))
        factors.append(wanted / found if found and sum(part.ratio[0]) else Fraction(1))
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


def _stored_integral(program: Program) -> tuple[Fraction, ...]:
    integral = program.integral
    if integral is None:
        return ()
    return tuple(gain / Fraction(2) ** integral.word.fraction_bits for gain in integral.stored)


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
            f"no {side} value, so that the integral could only ever move one way and would end at a limit",
            "a range with both signs, as the error of a loop has",
            "write range = [-8.0, 8.0], with your own ends",
        )


def _refuse_zero(rest: Rest, integration: Integration) -> None:
    if rest.gain == 0 and not any(integration.gains):
        raise Refused(
            "transfer", "a gain of zero: the output would never move", "a gain other than zero", "check the values"
        )
