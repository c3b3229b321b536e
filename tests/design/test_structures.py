"""The design knows the structures by name; what they are stands higher up."""

from realize.arithmetic.integer import STRUCTURES, WIDTHS
from realize.arithmetic.integer.interface import TYPES
from realize.design.model import COUNT_TYPES, INTEGER_STRUCTURES


def test_the_names_in_the_design_are_those_of_the_structures() -> None:
    assert tuple(STRUCTURES) == INTEGER_STRUCTURES
    assert tuple(TYPES) == COUNT_TYPES
    assert tuple(WIDTHS) == ("int16", "int32")
