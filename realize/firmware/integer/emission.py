"""What an emission in integers is made from."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any, NamedTuple

from realize.arithmetic.integer.model import IntegerRecursion
from realize.arithmetic.sample import HOLD_INTEGRAL

if TYPE_CHECKING:
    from realize.arithmetic.integer.realization import IntegerRealization


class IntegerEmission(NamedTuple):
    """Everything that ends up in the files.

    Attributes
    ----------
    name, method, transfer_text, about, revision, requirement, author, particulars
        As in :class:`realize.firmware.emission.Emission`.
    realization : IntegerRealization
        The stored numbers, with counts, limits and types at both ends, and what is proven.
    input_range, output_range : tuple of Fraction or None
        Physical, for the header.
    input_unit, output_unit : str
        May be empty.
    coefficients : str
        ``inline``, or ``table`` for a constant struct passed by pointer.
    recursion_sign : str
        ``subtract``, or ``add`` where the C text stores ``-a``.
    anti_windup, tracking_time_s
        What the realization was made with: ``hold-integral``, ``back-calculation`` or ``none``.
    notes, design, causal, loop, checks, accepted
        As in :class:`realize.firmware.emission.Emission`.
    """

    name: str
    realization: IntegerRealization
    method: str
    transfer_text: str
    about: str | None = None
    revision: str | None = None
    requirement: str | None = None
    author: str | None = None
    particulars: Sequence[tuple[str, str]] = ()
    input_range: tuple[Fraction, Fraction] | None = None
    output_range: tuple[Fraction, Fraction] | None = None
    input_unit: str = ""
    output_unit: str = ""
    coefficients: str = "inline"
    recursion_sign: str = "subtract"
    anti_windup: str = HOLD_INTEGRAL
    tracking_time_s: Fraction | None = None
    notes: Sequence[str] = ()
    design: Mapping[str, Any] = {}
    causal: Mapping[str, Any] = {}
    loop: Mapping[str, Any] | None = None
    checks: Sequence[Mapping[str, Any]] = ()
    accepted: Sequence[Mapping[str, Any]] = ()

    def recursion(self) -> IntegerRecursion:
        """The bit-exact model, cleared."""
        return IntegerRecursion(self.realization.program)
