"""All places of a schedule by one method and one structure: converted, laid out alike, rounded, and judged."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from typing import NamedTuple

from realize.algebra.rounding import FloatFormat
from realize.arithmetic.formats import FORMATS
from realize.arithmetic.realization import Realization
from realize.checks.schur import CLASSES
from realize.design import Design, Schedule
from realize.design.schedule import Place, place_text, placed
from realize.errors import Refused
from realize.schedule.between import MIDDLE, Between, places
from realize.schedule.layout import Layout, layout_of
from realize.schedule.points import Judged, Prepared, judge, prepared
from realize.schedule.worst import Worst

#: How much of what is judged is looked at.
LookedAt = Callable[[Iterator[Judged]], Iterator[Judged]]


class Attempt(NamedTuple):
    """All places by one method and structure.

    Attributes
    ----------
    method, structure : str
        Which.
    points, middles : tuple of Judged
        Every point, and the middle of every interval, as far as they were looked at.
    grid : tuple of Worst
        Stability at every other place between.
    """

    method: str
    structure: str
    points: tuple[Judged, ...]
    middles: tuple[Judged, ...]
    grid: tuple[Worst, ...]

    @property
    def blocking(self) -> list[Worst]:
        """Everything that stands in the way."""
        by_place = [Worst(check, each.place) for each in (*self.points, *self.middles) for check in each.blocking]
        return by_place + [each for each in self.grid if each.check.verdict == "out"]


class Series(NamedTuple):
    """The design at every point and in every middle, converted by one method."""

    points: list[Prepared]
    middles: list[Prepared]


def converted(design: Design, method: str) -> Series:
    """Convert the design everywhere.

    Raises
    ------
    Refused, RealizeError
        As :func:`realize.schedule.points.prepared`.
    """
    assert design.schedule is not None
    count = len(design.schedule.points)
    points = [prepared(design, Place(i), method) for i in range(count)]
    return Series(points, [prepared(design, Place(i, MIDDLE), method) for i in range(count - 1)])


def up_to_the_first_out(judged: Iterator[Judged]) -> Iterator[Judged]:
    """End with the first that may not be emitted."""
    for each in judged:
        yield each
        if each.blocking:
            return


def attempted(design: Design, series: Series, method: str, structure: str, looked_at: LookedAt) -> Attempt:
    """Lay all points out alike, round and judge them.

    Parameters
    ----------
    design : Design
        With its schedule.
    series : Series
        It, converted.
    method, structure : str
        By what, and in what.
    looked_at : callable
        Which of the places, in their order.

    Raises
    ------
    Refused
        When there is no layout for all, the format cannot hold a point, or nothing changes from point to point.
    """
    schedule, target = design.schedule, FORMATS[design.target.arithmetic]
    assert schedule is not None
    names = [place_text(schedule, each.place) for each in series.points]
    layout = layout_of([each.numbers for each in series.points], target, structure, names.__getitem__)
    stored = [_realized(layout, schedule, each.place, target) for each in series.points]
    _refuse_unchanging(stored)
    between = Between(schedule, stored)
    points = tuple(looked_at(judge(*each) for each in zip(series.points, stored, strict=True)))
    grid = tuple(
        Worst(between.stability(place, _worse_class(series.points[i : i + 2])), place)
        for i in range(len(series.middles))
        for place in places(schedule, i)
    )
    unstable = {each.place.point for each in grid if each.check.verdict == "out"}
    # Where stability is lost on the grid there is no response to compare.
    settled = (each for each in series.middles if each.place.point not in unstable)
    middles = tuple(looked_at(judge(each, between.realization(each.place)) for each in settled))
    return Attempt(method, stored[0].structure, points, middles, grid)


def _realized(layout: Layout, schedule: Schedule, place: Place, target: FloatFormat) -> Realization:
    try:
        return layout.realized(place.point, target)
    except Refused as refusal:
        raise placed(refusal, schedule, place) from None


def _refuse_unchanging(stored: Sequence[Realization]) -> None:
    if all(each == stored[0] for each in stored):
        raise Refused(
            "[schedule.values]",
            "values that leave every stored coefficient as it is",
            "values with which the transfer function changes",
            "remove [schedule], or correct the lists",
        )


def _worse_class(ends: Sequence[Prepared]) -> str:
    return max((each.reference.stability for each in ends), key=CLASSES.index)
