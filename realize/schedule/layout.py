"""One layout of sections for all operating points, so that interpolating between them joins like with like.

The roots of the first point are followed from point to point. What is a complex pair at any point shares a section at
every point, as two real roots where it is no pair. The groups, their order and their powers of two are chosen once.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from math import prod
from typing import NamedTuple

from realize.algebra.rounding import FloatFormat
from realize.arithmetic.grouping import Factor, Group, Rest
from realize.arithmetic.realization import Realization, carrier_of, parts_of, sections_of, structure_name
from realize.errors import Refused
from realize.schedule.following import followed

_ADVICE = (
    "keep a coefficient from vanishing at one point alone (a small number in place of 0), or make a design of each "
    "range of the variable"
)


class Numbers(NamedTuple):
    """``Gd`` of one point, parted: exact integral gains, and the rest; and the period."""

    integral: tuple[Fraction, ...]
    rest: Rest
    period_s: Fraction


class _Slot(NamedTuple):
    """One root, a member of a pair by itself."""

    value: complex
    factor: Factor
    number: int  # of the factor among its kind


class _Part(NamedTuple):
    """One section: the places of its poles and zeros among those of the first point, and its delay."""

    poles: frozenset[int]
    zeros: frozenset[int]
    delays: int


class Layout(NamedTuple):
    """How every point is realized.

    Attributes
    ----------
    structure : str
        As asked for.
    parts : tuple
        Sections in the order in which a sample passes them.
    gains : tuple of Fraction
        Power of two of each; that of the carrier counts for nothing.
    carrier : int
        Which section takes the gain that the others leave.
    points : tuple of Numbers
        What is realized.
    poles, zeros : tuple
        Of each point, in the order of the first.
    """

    structure: str
    parts: tuple[_Part, ...]
    gains: tuple[Fraction, ...]
    carrier: int
    points: tuple[Numbers, ...]
    poles: tuple[tuple[_Slot, ...], ...]
    zeros: tuple[tuple[_Slot, ...], ...]

    def realized(self, point: int, target: FloatFormat) -> Realization:
        """Round the numbers of a point.

        Raises
        ------
        Refused
            When the format or the structure cannot hold them.
        """
        integral, rest, period_s = self.points[point]
        groups = [
            Group(_factors(self.poles[point], p.poles), _factors(self.zeros[point], p.zeros), p.delays)
            for p in self.parts
        ]
        gains = list(self.gains)
        if gains:
            gains[self.carrier] = rest.gain / prod(g for i, g in enumerate(gains) if i != self.carrier)
        sections = sections_of(list(zip(groups, gains, strict=True)), rest, target, self.structure)
        name = structure_name(self.structure, len(sections))
        return Realization(target, name, tuple(target.round(r) for r in integral), sections, period_s)


def layout_of(points: Sequence[Numbers], target: FloatFormat, structure: str, named: Callable[[int], str]) -> Layout:
    """Choose the layout.

    Parameters
    ----------
    points : sequence of Numbers
        In the order of the schedule.
    target : FloatFormat
        In which peak gains are estimated, which set order and powers of two.
    structure : str
        ``direct``, ``cascade``, ``delta`` or ``auto``.
    named : callable
        From the number of a point, from 0, to what the user calls it.

    Raises
    ------
    Refused
        When a point has other poles, zeros or integral states in number, or roots pair with different partners at
        different points; when the structure cannot hold them.
    """
    for i, point in enumerate(points):
        _refuse_other_count(points[0], point, named(i))
    poles = _followed([point.rest.poles for point in points])
    zeros = _followed([point.rest.zeros for point in points])
    first = points[0].rest
    couples = [_couples(kind, what, named) for kind, what in ((poles, "poles"), (zeros, "zeros"))]
    stand_ins = [_stand_ins(kind[0], pairs) for kind, pairs in zip((poles, zeros), couples, strict=True)]
    rest = Rest(first.gain, *(tuple(factor for factor, _ in kind) for kind in stand_ins))
    chosen = parts_of(rest, target, structure)
    left = [list(kind) for kind in stand_ins]
    parts = tuple(_Part(_taken(g.poles, left[0]), _taken(g.zeros, left[1]), g.delays) for g, _ in chosen)
    carrier = carrier_of([g for g, _ in chosen], structure) if chosen else 0
    return Layout(structure, parts, tuple(gain for _, gain in chosen), carrier, tuple(points), poles, zeros)


def _refuse_other_count(first: Numbers, point: Numbers, name: str) -> None:
    counts = [_counts(each) for each in (first, point)]
    for what, wanted in counts[0].items():
        found = counts[1][what]
        if found != wanted:
            raise Refused(
                f"[schedule] {name}",
                f"another layout than at point 1: {what}: {found}, there {wanted}",
                "the same number of poles, zeros and integral states at every point",
                _ADVICE,
            )


def _counts(point: Numbers) -> dict[str, int]:
    """What has to be the same at every point."""
    rest = point.rest
    counts = {"integral states": len(point.integral), "gains beside them": int(rest.gain != 0)}
    for what, factors in (("poles", rest.poles), ("zeros", rest.zeros)):
        fixed = [f.root.value.real for f in factors if f.is_fixed]
        counts[f"{what} beside the integral states"] = sum(f.degree for f in factors)
        counts[f"{what} at z = 1"] = fixed.count(0)
        counts[f"{what} at z = -1"] = fixed.count(-2)
    return counts


def _followed(by_point: Sequence[Sequence[Factor]]) -> tuple[tuple[_Slot, ...], ...]:
    """Roots of every point in the order of the first; those at z = 1 and z = -1 stay what they are."""
    rows = [_slots(by_point[0])]
    for factors in by_point[1:]:
        slots, row = _slots(factors), list(rows[-1])
        for kind in (None, 0.0, -2.0):
            places = [i for i, slot in enumerate(rows[-1]) if _point_of(slot) == kind]
            new = [slot for slot in slots if _point_of(slot) == kind]
            matches = followed([rows[-1][i].value for i in places], [slot.value for slot in new])
            for i, match in zip(places, matches, strict=True):
                row[i] = new[match]
        rows.append(tuple(row))
    return tuple(rows)


def _point_of(slot: _Slot) -> float | None:
    """Where in ``z - 1`` a root lies that rounding must not move; None for any other."""
    return slot.factor.root.value.real if slot.factor.is_fixed else None


def _slots(factors: Sequence[Factor]) -> tuple[_Slot, ...]:
    return tuple(_Slot(value, factor, number) for number, factor in enumerate(factors) for value in _members(factor))


def _members(factor: Factor) -> tuple[complex, ...]:
    value = factor.root.value
    return (value, value.conjugate()) if factor.root.is_pair else (value,)


def _couples(
    rows: Sequence[tuple[_Slot, ...]], what: str, named: Callable[[int], str]
) -> dict[tuple[int, int], Factor]:
    """Places that are a pair at some point, with the pair where it is one first."""
    couples: dict[tuple[int, int], Factor] = {}
    partner: dict[int, int] = {}
    for i, row in enumerate(rows):
        by_factor: dict[int, list[int]] = {}
        for place, slot in enumerate(row):
            by_factor.setdefault(slot.number, []).append(place)
        for places in by_factor.values():
            if len(places) == 2:
                one, other = places
                if partner.setdefault(one, other) != other or partner.setdefault(other, one) != one:
                    raise Refused(
                        f"[schedule] {named(i)}",
                        f"a pair of complex {what} made from {what} of two pairs that there are at points before",
                        f"{what} that pair with the same partner wherever they are a pair, so that each pair keeps its "
                        "section",
                        "points closer together there, or a design of each range of the variable",
                    )
                couples.setdefault((one, other), row[one].factor)
    return couples


def _stand_ins(row: tuple[_Slot, ...], couples: dict[tuple[int, int], Factor]) -> list[tuple[Factor, tuple[int, ...]]]:
    """Factors of the first point with their places, pairs of other points in place of two real roots."""
    coupled = {place for places in couples for place in places}
    alone = [(slot.factor, (place,)) for place, slot in enumerate(row) if place not in coupled]
    return [*((factor, places) for places, factor in couples.items()), *alone]


def _taken(factors: Sequence[Factor], left: list[tuple[Factor, tuple[int, ...]]]) -> frozenset[int]:
    """Places of the factors of a group, taken from those left."""
    places: list[int] = []
    for factor in factors:
        entry = next(each for each in left if each[0] == factor)
        left.remove(entry)
        places += entry[1]
    return frozenset(places)


def _factors(row: tuple[_Slot, ...], places: frozenset[int]) -> tuple[Factor, ...]:
    """Every factor once."""
    return tuple({row[place].number: row[place].factor for place in sorted(places)}.values())
