"""A whole schedule: one method, one structure and one layout for every operating point, and all of it checked.

At every point all checks are run on what is stored. Between two points the looked-up coefficients are checked: in the
middle by every check, against the design whose scheduled values are interpolated there, and on a grid for stability.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from typing import NamedTuple

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.realization import Realization
from realize.checks import Check
from realize.design import Accept, Design, Schedule
from realize.design.schedule import Place, design_at, placed, refuse_vanishing
from realize.errors import RealizeError, Refused
from realize.schedule.attempt import Attempt, LookedAt, attempted, converted, up_to_the_first_out
from realize.schedule.lookup import breakpoints
from realize.schedule.points import Judged
from realize.schedule.refusal import refusal_of
from realize.schedule.table import Table
from realize.schedule.worst import Worst, at_place, worst_of
from realize.workflow.compare import choose
from realize.workflow.gate import recommendation
from realize.workflow.refusal import refuse_unacceptable
from realize.workflow.results import Comparison, MethodResult


class Scheduled(NamedTuple):
    """What a schedule comes to.

    Attributes
    ----------
    design : Design
        With its schedule.
    comparison : Comparison
        Of the first point.
    method, because : str
        The method, and why this one.
    points, middles : tuple of Judged
        Every point, and the middle between it and the next.
    worst : tuple of Worst
        Each check of stored numbers, where it is worst.
    accepted : tuple of (Check, Accept)
        Of each agreed deviation that is needed the worst.
    places_between : int
        How many places were looked at between the points.
    """

    design: Design
    comparison: Comparison
    method: str
    because: str
    points: tuple[Judged, ...]
    middles: tuple[Judged, ...]
    worst: tuple[Worst, ...]
    accepted: tuple[tuple[Check, Accept], ...]
    places_between: int

    @property
    def schedule(self) -> Schedule:
        """The operating points."""
        assert self.design.schedule is not None
        return self.design.schedule

    @property
    def stored(self) -> list[Realization]:
        """Numbers of every point."""
        return [each.realization for each in self.points]

    @property
    def chosen(self) -> MethodResult:
        """The method, its checks the worst over all places."""
        checks = tuple(at_place(self.schedule, each) for each in self.worst)
        return MethodResult(self.method, None, None, self.points[0].realization, checks, (), self.accepted, self.notes)

    @property
    def notes(self) -> tuple[str, ...]:
        """What the method has to say at the first point."""
        return next(result.notes for result in self.comparison.methods if result.method == self.method)


def table_of(found: Scheduled) -> Table:
    """What the firmware looks up."""
    schedule = found.schedule
    return Table(schedule.variable, schedule.unit, schedule.points, schedule.grid, tuple(found.stored))


def scheduled(design: Design) -> Scheduled:
    """Do the whole job for a design with a schedule.

    Raises
    ------
    Refused
        When the target is one of integers, the points have no layout in common, or a check is out at a point or
        between.
    RealizeError
        When the design is not understood at a point.
    """
    schedule = design.schedule
    assert schedule is not None
    if design.target.arithmetic not in FORMATS:
        raise Refused(
            "[target] arithmetic",
            f"{design.target.arithmetic} with a schedule: binary points differ from point to point, and numbers of "
            "different binary points cannot be interpolated",
            'arithmetic = "float32" or "float64" where there is a [schedule]',
            'arithmetic = "float32"; or emit a design of each point, and switch between them at rest',
        )
    breakpoints(schedule.points, FORMATS[design.target.arithmetic])
    comparison = _first_comparison(design)
    candidates = _candidates(comparison)
    attempts = list(_until_good(design, candidates))
    good = attempts[-1]
    if good is None or good.blocking:
        raise refusal_of(schedule, [each for each in attempts if each is not None], candidates)
    return _summed_up(design, comparison, good, candidates)


def _first_comparison(design: Design) -> Comparison:
    """The methods at the first point, of which at least one is within every tolerance."""
    schedule, first = design.schedule, Place(0)
    assert schedule is not None
    there = design_at(design, first)
    refuse_vanishing(design, first)
    try:
        comparison = choose(there)
        refuse_unacceptable(comparison)
    except RealizeError as error:
        raise placed(error, schedule, first) from None
    return comparison


def _candidates(comparison: Comparison) -> list[str]:
    """Methods that are acceptable at the first point, in the order of recommendation."""
    left, names = list(comparison.methods), []
    while left and (name := recommendation(left)[0]) is not None:
        names.append(name)
        left = [result for result in left if result.method != name]
    return names


def _until_good(design: Design, candidates: Sequence[str]) -> Iterator[Attempt | None]:
    """Attempts, the last of which is good if any is; the last refusal is raised where no method came to figures."""
    structure = design.target.structure
    structures = ("auto", "delta") if structure == "auto" else (structure,)
    refusal: Refused | None = None
    # The first is what a refusal tells of, so all of it is looked at; of the others it is enough that they fail.
    looked_at: LookedAt = iter
    for name in candidates:
        try:
            series = converted(design, name)
            for each in structures:
                attempt = attempted(design, series, name, each, looked_at)
                looked_at = up_to_the_first_out
                yield attempt
                if not attempt.blocking:
                    return
        except Refused as error:
            refusal = refusal or error
    if refusal is not None and looked_at is iter:
        raise refusal
    yield None


def _summed_up(design: Design, comparison: Comparison, good: Attempt, candidates: Sequence[str]) -> Scheduled:
    judged = (*good.points, *good.middles)
    every = [Worst(check, each.place) for each in judged for check in each.checks if check.of == "stored"]
    first = f"at the first point {comparison.because}"
    because = first if good.method == candidates[0] else _passed_over(good.method, candidates)
    return Scheduled(
        design,
        comparison,
        good.method,
        because,
        good.points,
        good.middles,
        worst_of(every),
        _agreed([pair for each in judged for pair in each.accepted]),
        len(good.grid),
    )


def _passed_over(method: str, candidates: Sequence[str]) -> str:
    count = candidates.index(method)
    others = f"{count} methods that are" if count > 1 else f"{candidates[0]}, which is"
    where = "preferred at the first point, but out of tolerance elsewhere"
    return f"the next in the order of recommendation: {others} {where}"


def _agreed(accepted: Sequence[tuple[Check, Accept]]) -> tuple[tuple[Check, Accept], ...]:
    """Of each agreement the deviation that is largest."""
    worst: dict[str, tuple[Check, Accept]] = {}
    for check, agreement in accepted:
        known = worst.get(check.check)
        if known is None or (check.difference or 0.0) > (known[0].difference or 0.0):
            worst[check.check] = (check, agreement)
    return tuple(worst.values())
