"""One operating point: its causal design, what the checks compare with, and ``Gd``, not yet rounded."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any, NamedTuple

from realize.algebra.enclosure import Unresolved
from realize.arithmetic.grouping import split_integral
from realize.arithmetic.realization import Realization
from realize.checks import Check, ContinuousReference
from realize.design import Accept, Design, require_period
from realize.design.schedule import Place, design_at, place_text, placed, refuse_vanishing
from realize.errors import RealizeError, Refused
from realize.methods import Discretization
from realize.schedule.layout import Numbers
from realize.schedule.worst import severity
from realize.workflow.causal import band_of, make_causal
from realize.workflow.compare import discretized, loop_setting_of, with_unrounded
from realize.workflow.floats import checked_floats
from realize.workflow.gate import gate
from realize.workflow.results import MethodResult

if TYPE_CHECKING:
    from realize.loop_design import LoopSetting


class Prepared(NamedTuple):
    """A design at a place, converted."""

    place: Place
    design: Design
    reference: ContinuousReference
    setting: LoopSetting | None
    made: Discretization

    @property
    def numbers(self) -> Numbers:
        """What is to be stored, parted."""
        return Numbers(*split_integral(self.made.pulse), self.made.pulse.period_s)


class Judged(NamedTuple):
    """What is stored at a place, or looked up there, and its checks.

    Attributes
    ----------
    place : Place
        Where.
    realization : Realization
        The numbers.
    checks : tuple of Check
        Of the stored numbers and, at a point, of the exact ones where these differ.
    blocking : tuple of Check
        Those that are out and not agreed to.
    accepted : tuple of (Check, Accept)
        Those that are out, and the agreement that covers them.
    loop : tuple of dict
        With a plant, for each of its cases ``case`` and the figures of the sampled loop.
    """

    place: Place
    realization: Realization
    checks: tuple[Check, ...]
    blocking: tuple[Check, ...]
    accepted: tuple[tuple[Check, Accept], ...]
    loop: tuple[dict[str, Any], ...] = ()

    @property
    def worst(self) -> Check:
        """Of stored numbers the check that uses the largest share of its tolerance."""
        stored = [check for check in self.checks if check.of == "stored"]
        return max((check for check in stored if check.tolerance and check.difference is not None), key=severity)


def prepared(design: Design, place: Place, method: str) -> Prepared:
    """Convert the design as it is at a place by one method.

    Raises
    ------
    Refused, RealizeError
        When there is no such design, or the method does not apply; the message names the place.
    """
    schedule = design.schedule
    assert schedule is not None
    there = design_at(design, place)
    refuse_vanishing(design, place)
    try:
        causal = make_causal(there, assume=False)
        period_s = require_period(there)
        reference = ContinuousReference(causal.transfer, period_s, band_of(there, causal.transfer)[0])
        setting = loop_setting_of(there, causal.transfer, period_s)
        return Prepared(place, there, reference, setting, discretized(there, reference, setting, method))
    except RealizeError as error:
        raise placed(error, schedule, place) from None
    except Unresolved:
        found = "a coefficient cannot be told from a neighbour at any permitted precision"
        where = f"[schedule] {place_text(schedule, place)}"
        raise Refused(where, found, "", "another method, or a point next to it") from None


def judge(there: Prepared, stored: Realization) -> Judged:
    """Run every check of stored numbers at a place; at a point those of the exact numbers too."""
    design, reference, numbers = there.design, there.reference, checked_floats(there.design, there.reference, stored)
    loop = there.setting.judged(numbers.pulse) if there.setting else None
    checks = numbers.checks + (loop.checks if loop else ())
    result = MethodResult(there.made.method, None, there.made, stored, checks, *gate(checks, design.accept))
    if not there.place.share:
        result = with_unrounded(design, reference, result)
    kept = tuple(c for c in result.checks if c.of == "stored" or c in result.blocking)
    return Judged(there.place, stored, kept, result.blocking, result.accepted, loop.figures if loop else ())
