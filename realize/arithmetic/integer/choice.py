"""Which structures to try, and in which order: the cheapest first."""

from __future__ import annotations

from collections.abc import MutableMapping
from typing import NamedTuple

from realize.arithmetic.grouping import split_integral
from realize.arithmetic.integer.interface import Interface
from realize.arithmetic.integer.layout import SINGLE, STRUCTURES, Layout, layouts
from realize.arithmetic.integer.program import kept_bytes
from realize.arithmetic.integer.realization import WIDTHS, Widths
from realize.errors import Refused
from realize.transfer import PulseTransferFunction

AUTO = "auto"


class StructureChoice(NamedTuple):
    """A structure in certain widths.

    Attributes
    ----------
    structure : str
        Key of :data:`realize.arithmetic.integer.layout.STRUCTURES`.
    widths : Widths
        Of its words and sums.
    multiplications, state_bytes : int
        What a sample of it costs, the integral apart.
    """

    structure: str
    widths: Widths
    multiplications: int
    state_bytes: int


def choices(
    pulse: PulseTransferFunction,
    interface: Interface,
    arithmetic: str,
    structure: str,
    refusals: MutableMapping[str, Refused],
) -> list[StructureChoice]:
    """Structures for a pulse transfer function, the cheapest first.

    Parameters
    ----------
    pulse : PulseTransferFunction
        ``Gd(z)`` in physical units.
    interface : Interface
        Counts at both ends.
    arithmetic : str
        Key of :data:`realize.arithmetic.integer.realization.WIDTHS`.
    structure : str
        A name, or ``auto`` for all of them.
    refusals : mapping
        Takes what the structures say that do not suit the poles.

    Notes
    -----
    Narrow sums come first (a 64-bit product costs a small processor some twenty times a 32-bit one), then fewer
    multiplications, then fewer bytes of state, then the order of the table of structures. Layouts that come to the
    same sums are tried once.
    """
    _, rest = split_integral(pulse)
    rest = rest._replace(gain=rest.gain * interface.scale)
    bits, accumulators = WIDTHS[arithmetic]
    found: dict[object, StructureChoice] = {}
    for name in STRUCTURES if structure == AUTO else (structure,):
        try:
            layout = layouts(rest, name)
        except Refused as refusal:
            refusals[name] = refusal
            continue
        for accumulator_bits in accumulators:
            widths = Widths(bits, accumulator_bits)
            made = StructureChoice(name, widths, *_cost(layout, widths))
            found.setdefault((layout.outputs, layout.command, layout.updates, accumulator_bits), made)
    return sorted(found.values(), key=lambda c: (c.widths.accumulator_bits, c.multiplications, c.state_bytes))


def _cost(layout: Layout, widths: Widths) -> tuple[int, int]:
    """Multiplications and bytes of state."""
    addends = [a for each in (*layout.outputs, *layout.updates) for a in each.addends]
    multiplied = sum(1 for a in (*addends, *layout.command) if a.name and a.value)
    kept = {each.target: each.words for each in layout.updates if each.target.startswith("state.")}
    kept |= {target: SINGLE for target, _ in layout.moves if target not in kept}
    remainders = sum(1 for each in layout.outputs if each.shaped)
    state_bytes = sum(kept_bytes(words * widths.bits) for words in kept.values())
    return multiplied, state_bytes + remainders * kept_bytes(widths.accumulator_bits)
