"""What an emission is made from: a realization and what the header and the record say about it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any, NamedTuple

from realize.arithmetic.recursion import Recursion
from realize.arithmetic.sample import HOLD_INTEGRAL

if TYPE_CHECKING:
    from realize.arithmetic.realization import Realization
    from realize.schedule.table import Table


class Emission(NamedTuple):
    """Everything that ends up in the files.

    Attributes
    ----------
    name : str
        C identifier, the prefix of every name.
    realization : Realization
        The stored numbers.
    method : str
        How ``G(s)`` became ``Gd(z)``.
    transfer_text : str
        ``G(s)`` as the user wrote it.
    about, revision, requirement, author : str or None
        Echoed in the header.
    particulars : sequence of (str, str)
        Further label and text lines of the header: values, roll-off.
    input_range, output_range : tuple of Fraction or None
        Physical. The command is clamped to the output range.
    input_unit, output_unit : str
        May be empty.
    input_count, output_count : (Fraction, int) or None
        Physical size of one count, and the count at physical zero.
    coefficients : str
        ``inline``, or ``table`` for a constant struct passed by pointer.
    recursion_sign : str
        ``subtract``, or ``add`` where the C text stores ``-a``.
    anti_windup, tracking_time_s, guard_nonfinite
        As in :func:`realize.arithmetic.sample.describe`.
    notes : sequence of str
        What the method has to say, for the header.
    design : mapping
        The resolved design, for the record.
    causal : mapping
        What was discretized: the transfer function after roll-off, and its band. For the record.
    loop : mapping or None
        The loops, where the design has a plant; see :func:`realize.firmware.job.loop_document`. For the record and
        the header.
    checks, accepted : sequence of mapping
        For the record; ``accepted`` (check, limit, unit, because, by) for the header too.
    schedule : Table or None
        Coefficients by a variable; then ``realization`` is that of the first point, and ``coefficients`` is ``table``.
    schedule_entry : mapping or None
        The schedule's account, for the record.
    """

    name: str
    realization: Realization
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
    input_count: tuple[Fraction, int] | None = None
    output_count: tuple[Fraction, int] | None = None
    coefficients: str = "inline"
    recursion_sign: str = "subtract"
    anti_windup: str = HOLD_INTEGRAL
    tracking_time_s: Fraction | None = None
    guard_nonfinite: bool = True
    notes: Sequence[str] = ()
    design: Mapping[str, Any] = {}
    causal: Mapping[str, Any] = {}
    loop: Mapping[str, Any] | None = None
    checks: Sequence[Mapping[str, Any]] = ()
    accepted: Sequence[Mapping[str, Any]] = ()
    schedule: Table | None = None
    schedule_entry: Mapping[str, Any] | None = None

    @property
    def described(self) -> Realization:
        """What the steps of a sample are listed from: with a schedule, what stands for every point."""
        return self.realization if self.schedule is None else self.schedule.stand_in

    def recursion(self) -> Recursion:
        """The bit-exact model, cleared; with a schedule, with the coefficients of the first point."""
        model = Recursion(
            self.described,
            self.output_range,
            self.anti_windup,
            self.tracking_time_s,
            self.guard_nonfinite,
        )
        if self.schedule is not None:
            model.take(self.schedule.sets[0])
        return model
