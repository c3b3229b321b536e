"""Integer arithmetic: counts at both ends, structures, binary points, stored integers, and what is proven of them.

The way of the data: ``interface`` (counts) and ``layout`` (structures, unrounded) go into ``quantize``, which makes a
``program`` (the steps of a sample); ``proof`` bounds it, ``model`` runs it bit for bit, ``realization`` is the whole.
"""

from realize.arithmetic.integer.choice import StructureChoice, choices
from realize.arithmetic.integer.interface import Interface, Port, interface_of
from realize.arithmetic.integer.layout import STRUCTURES
from realize.arithmetic.integer.model import IntegerRecursion
from realize.arithmetic.integer.realization import (
    WIDTHS,
    IntegerRealization,
    Rounded,
    Widths,
    integer_realization,
    proven_realization,
    rounded,
    rounded_pulse,
    stored_integer_pulse,
)

__all__ = [
    "STRUCTURES",
    "WIDTHS",
    "IntegerRealization",
    "IntegerRecursion",
    "Interface",
    "Port",
    "Rounded",
    "StructureChoice",
    "Widths",
    "choices",
    "integer_realization",
    "interface_of",
    "proven_realization",
    "rounded",
    "rounded_pulse",
    "stored_integer_pulse",
]
