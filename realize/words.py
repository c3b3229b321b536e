"""Which words a design needs: structures and word lengths side by side, judged by the same checks.

The method is the one the design names, or the one recommended for unrounded numbers: word lengths do not choose it.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import TYPE_CHECKING, NamedTuple

from realize.arithmetic.deadband import smallest_float_answered
from realize.arithmetic.formats import FORMATS
from realize.arithmetic.integer import (
    STRUCTURES,
    WIDTHS,
    IntegerRealization,
    Interface,
    StructureChoice,
    Widths,
    choices,
    interface_of,
    rounded_pulse,
)
from realize.arithmetic.integer.quantize import WIDEST
from realize.arithmetic.integer.quiet import FEW_SAMPLES, FEW_STATES, Quiet, quiet
from realize.arithmetic.realization import Realization
from realize.checks import Check, ContinuousReference
from realize.design import Design
from realize.errors import Refused
from realize.transfer import PulseTransferFunction
from realize.workflow import Comparison, choose, refuse_unacceptable
from realize.workflow.compare import loop_setting_of
from realize.workflow.gate import gate
from realize.workflow.integers import integer_numbers
from realize.workflow.stored import checks_of_stored
from realize.workflow.target import stored_numbers

if TYPE_CHECKING:
    from realize.loop_design import LoopSetting

#: Shortest and longest word that is tried: below 6 bits a coefficient of a section has no room for sign and integer
#: part and three fraction bits; above 32 there is no target.
SHORTEST_BITS, LONGEST_BITS = 6, 32


class Row(NamedTuple):
    """A structure in words of one length.

    Attributes
    ----------
    structure : str
        Its name.
    widths : Widths
        Bits of words and sums.
    refused : str or None
        Why it cannot be; then nothing below is known.
    realization : IntegerRealization or None
        What would be stored.
    checks : tuple of Check
        Of it.
    out : tuple of str
        Checks that are in the way.
    quiet : Quiet or None
        Deadband and limit cycles, where they were looked for.
    """

    structure: str
    widths: Widths
    refused: str | None
    realization: IntegerRealization | None = None
    checks: tuple[Check, ...] = ()
    out: tuple[str, ...] = ()
    quiet: Quiet | None = None

    @property
    def acceptable(self) -> bool:
        """Whether it may be emitted."""
        return self.refused is None and not self.out

    def difference(self, name: str) -> float | None:
        """Figure of a check of the stored numbers."""
        return next((c.difference for c in self.checks if c.check == name and c.of == "stored"), None)


class StructureWords(NamedTuple):
    """What one structure needs.

    Attributes
    ----------
    structure : str
        Its name.
    coefficient_bits : int or None
        Shortest coefficients with which every check of coefficients is within; None where none up to 32 bits is.
    smallest_bits : int or None
        Shortest word with which everything is; None where 32 bits do not suffice.
    """

    structure: str
    coefficient_bits: int | None
    smallest_bits: int | None


class FloatWords(NamedTuple):
    """A floating-point target beside the integers.

    Attributes
    ----------
    arithmetic : str
        ``float32`` or ``float64``.
    refused : str or None
        Why it cannot be.
    structure : str
        What it would take.
    out : tuple of str
        Checks that are in the way.
    smallest_answered : int or None
        Smallest size of input in counts that is ever answered, its integral at the far end of the output range, for the
        sign that answers less; None where no input of a sign is.
    """

    arithmetic: str
    refused: str | None
    structure: str = ""
    out: tuple[str, ...] = ()
    smallest_answered: int | None = None


class Words(NamedTuple):
    """Structures and word lengths side by side.

    Attributes
    ----------
    comparison : Comparison
        From which the method comes.
    method : str
        The method.
    interface : Interface
        Counts at both ends.
    rows : tuple of Row
        Every structure at the word length of every integer target.
    structures : tuple of StructureWords
        What each needs.
    floats : tuple of FloatWords
        The floating-point targets.
    refused : mapping
        Why structures do not suit the poles, by name.
    recommended : Row or None
        The cheapest that is within every tolerance: what `emit` takes by that method.
    """

    comparison: Comparison
    method: str
    interface: Interface
    rows: tuple[Row, ...]
    structures: tuple[StructureWords, ...]
    floats: tuple[FloatWords, ...]
    refused: Mapping[str, str]
    recommended: Row | None


class _Bench(NamedTuple):
    """What every structure is tried on."""

    design: Design
    reference: ContinuousReference
    setting: LoopSetting | None
    unrounded: PulseTransferFunction
    interface: Interface


def words(design: Design) -> Words:
    """Try every structure in every word length.

    Parameters
    ----------
    design : Design
        Its own arithmetic does not matter; its signals do.

    Raises
    ------
    RealizeError
        When a range or the size of a count is missing.
    Refused
        When no method is within tolerance even unrounded.
    """
    interface_of(design.input, design.output, "int32")  # refused before any method is run
    unrounded = replace(design, target=design.target._replace(arithmetic="float64", structure="auto"))
    comparison = choose(unrounded)
    chosen = refuse_unacceptable(comparison)
    assert chosen.discretization is not None
    bench = _bench(replace(comparison, design=design), chosen.discretization.pulse)
    order, refusals = _order(bench)
    found = [name for name in STRUCTURES if name in {choice.structure for choice in order}]
    rows = [_with_quiet(_best(bench, name, bits, sums)) for bits, sums in WIDTHS.values() for name in found]
    needs = tuple(_needs(bench, name, [row for row in rows if row.structure == name]) for name in found)
    floats = tuple(_floats(bench, arithmetic) for arithmetic in FORMATS)
    recommended = _recommended(rows, order)
    return Words(comparison, chosen.method, bench.interface, tuple(rows), needs, floats, refusals, recommended)


def _order(bench: _Bench) -> tuple[list[StructureChoice], dict[str, str]]:
    """Structures that suit the poles, in the order in which `emit` tries them, and why the others do not."""
    refusals: dict[str, Refused] = {}
    order = [
        choice
        for arithmetic in WIDTHS
        for choice in choices(bench.unrounded, bench.interface, arithmetic, bench.design.target.structure, refusals)
    ]
    return order, {name: refusal.found for name, refusal in refusals.items()}


class Bound(NamedTuple):
    """Round-off of one structure in words of one length.

    Attributes
    ----------
    bits : int
        Of a word.
    percent : float or None
        Proven bound of what rounding does to the output, in % of the output range; None where it cannot be stored.
    tolerance_percent : float or None
        Most that it may be.
    """

    bits: int
    percent: float | None
    tolerance_percent: float | None


def bounds_by_word(comparison: Comparison, structure: str, bits: Sequence[int]) -> tuple[Bound, ...]:
    """Bound of round-off against word length, for the method that is chosen, in the widest sums.

    Raises
    ------
    RealizeError
        When a range or the size of a count is missing.
    """
    chosen = comparison.chosen
    assert chosen is not None
    assert chosen.discretization is not None
    bench = _bench(comparison, chosen.discretization.pulse)
    return tuple(_bound(_row(bench, structure, Widths(length, WIDEST)), length) for length in bits)


def _bound(row: Row, bits: int) -> Bound:
    found = next((c for c in row.checks if c.check == "round-off"), None)
    return Bound(bits, *((None, None) if found is None else (found.difference, found.tolerance)))


def _bench(comparison: Comparison, unrounded: PulseTransferFunction) -> _Bench:
    design, transfer = comparison.design, comparison.causal.transfer
    reference = ContinuousReference(transfer, comparison.period_s, comparison.band_rad_s)
    setting = loop_setting_of(design, transfer, comparison.period_s)
    return _Bench(design, reference, setting, unrounded, interface_of(design.input, design.output, "int32"))


def _best(bench: _Bench, structure: str, bits: int, sums: Sequence[int]) -> Row:
    """In the narrowest sums that are within every tolerance, else in the narrowest that can be had at all."""
    rows = [_row(bench, structure, Widths(bits, wide)) for wide in sums]
    possible = [row for row in rows if row.refused is None]
    return next((row for row in possible if row.acceptable), (possible or rows)[0])


def _row(bench: _Bench, structure: str, widths: Widths) -> Row:
    try:
        stored = integer_numbers(
            bench.design, bench.reference, bench.unrounded, bench.interface, StructureChoice(structure, widths, 0, 0)
        )
    except Refused as refusal:
        return Row(structure, widths, refusal.found)
    loop = bench.setting.result(bench.unrounded, stored.pulse) if bench.setting else None
    checks = stored.checks + (loop.checks if loop else ())
    blocking, _ = gate(checks, bench.design.accept)
    assert isinstance(stored.realization, IntegerRealization)
    return Row(structure, widths, None, stored.realization, checks, tuple(dict.fromkeys(c.check for c in blocking)))


def _with_quiet(row: Row) -> Row:
    return row if row.realization is None else row._replace(quiet=quiet(row.realization, FEW_SAMPLES, FEW_STATES))


def _floats(bench: _Bench, arithmetic: str) -> FloatWords:
    target = bench.design.target._replace(arithmetic=arithmetic, structure="auto")
    try:
        stored = stored_numbers(replace(bench.design, target=target), bench.reference, bench.unrounded)
    except Refused as refusal:
        return FloatWords(arithmetic, refusal.found)
    assert isinstance(stored.realization, Realization)
    loop = bench.setting.result(bench.unrounded, stored.pulse) if bench.setting else None
    blocking, _ = gate(stored.checks + (loop.checks if loop else ()), bench.design.accept)
    port = bench.interface.input
    level = float(max(bench.design.output.range or (0, 0), key=abs))
    sides = [
        smallest_float_answered(stored.realization, port.per_count, inputs, level)
        for inputs in (range(1, port.high + 1), range(-1, port.low - 1, -1))
        if inputs
    ]
    answered = None if None in sides else max(abs(side) for side in sides if side is not None)
    names = tuple(dict.fromkeys(c.check for c in blocking))
    return FloatWords(arithmetic, None, stored.realization.structure, names, answered)


def _recommended(rows: Sequence[Row], order: Sequence[StructureChoice]) -> Row | None:
    """The first that is within every tolerance, in the order in which `emit` tries them."""
    able = {(row.structure, row.widths): row for row in rows if row.acceptable}
    return next((able[c.structure, c.widths] for c in order if (c.structure, c.widths) in able), None)


def _needs(bench: _Bench, structure: str, rows: Sequence[Row]) -> StructureWords:
    enough = [b for b in range(SHORTEST_BITS, LONGEST_BITS + 1) if _coefficients_suffice(bench, structure, b)]
    known = {row.widths.bits: row.acceptable for row in rows}
    tried = sorted({*enough, *(bits for bits, able in known.items() if able)})
    if not known.get(LONGEST_BITS):
        return StructureWords(structure, enough[0] if enough else None, None)
    words = next(
        b for b in tried if known.get(b) or _row(bench, structure, Widths(b, WIDEST)).acceptable
    )  # sums are not what fails
    return StructureWords(structure, min([words, *enough]), words)


def _coefficients_suffice(bench: _Bench, structure: str, bits: int) -> bool:
    """Whether rounding the coefficients alone keeps every check of them within its tolerance."""
    try:
        pulse = rounded_pulse(bench.unrounded, bench.interface, bits, structure)
    except Refused:
        return False
    blocking, _ = gate(checks_of_stored(bench.design, bench.reference, pulse), bench.design.accept)
    return not blocking
