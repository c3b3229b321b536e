"""The table of coefficients that the firmware looks up: names, a set for every point, and the lookup in Python.

What a sample does is described once for all points. A coefficient of exactly 0, 1 or -1 loses its multiplication only
where it is that at every point; so the description is made from stand-ins for what changes, and numbers go in by name.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from itertools import count

from realize.arithmetic.realization import AnySection, Realization
from realize.arithmetic.settling import rest_figures
from realize.schedule.lookup import Lookup, breakpoints

#: Name of the share of the input that the output at rest may be off by; and what it is where rest is not known.
BOUND, NO_REST = "settled_bound", -1.0

#: What loses its multiplication: see :func:`realize.arithmetic.sample.product`.
_PLAIN = (0.0, 1.0, -1.0)


@dataclass(frozen=True)
class Table:
    """Coefficient sets by the scheduling variable.

    Attributes
    ----------
    variable, unit : str
        What they follow.
    points : tuple of Fraction
        Where they are given.
    grid : int
        Equal parts of each interval at whose ends stability was decided.
    stored : tuple of Realization
        What is stored at each.
    """

    variable: str
    unit: str
    points: tuple[Fraction, ...]
    grid: int
    stored: tuple[Realization, ...]

    @cached_property
    def stand_in(self) -> Realization:
        """A realization that stands for all of them where steps are listed; its changing coefficients mean nothing."""
        first = self.stored[0]
        sections = tuple(_stand_in([each.sections[k] for each in self.stored]) for k in range(len(first.sections)))
        integral = tuple(
            _general([each.integral[i] for each in self.stored], 0.5 + i / 64) for i in range(len(first.integral))
        )
        return Realization(first.format, first.structure, integral, sections, first.period_s)

    @cached_property
    def breakpoints(self) -> tuple[float, ...]:
        """The points as the code has them."""
        return breakpoints(self.points, self.stored[0].format)

    @cached_property
    def sets(self) -> tuple[dict[str, float], ...]:
        """Every coefficient of each point by the name that the steps of a sample have for it."""
        return tuple(_named(each) for each in self.stored)

    def at(self, variable: float) -> Mapping[str, float]:
        """The coefficients that the lookup gives for a value of the variable.

        Notes
        -----
        Between points a section's gain at rest is not the interpolated one: ``sum b/(1 + sum a)`` is no linear function
        of what is interpolated. So there the preset is given a bound that only an input of 0 keeps, which is at rest
        whatever the coefficients are.
        """
        found = dict(zip(self.sets[0], self._lookup.at(variable), strict=True))
        if BOUND in found and self._lookup.is_between(variable):
            found[BOUND] = NO_REST
        return found

    @cached_property
    def _lookup(self) -> Lookup:
        return Lookup(self.stored[0].format, self.breakpoints, [list(each.values()) for each in self.sets])


def _named(stored: Realization) -> dict[str, float]:
    """Coefficients, and what the preset needs of them; a zero without a sign."""
    gains, bound, floor = rest_figures(stored)
    named: dict[str, float] = {}
    for k, (section, gain) in enumerate(zip(stored.sections, gains, strict=True), 1):
        named |= {f"section{k}_b{i}": b for i, b in enumerate(section.b)}
        named |= {f"section{k}_a{i}": a for i, a in enumerate(section.a, 1)}
        named[f"section{k}_gain"] = gain
    named |= {f"integral{i}_gain": gain for i, gain in enumerate(stored.integral, 1)}
    if not stored.integral:
        named |= {BOUND: bound, "settled_floor": floor}
    return {name: value + 0.0 for name, value in named.items()}


def _stand_in(sections: Sequence[AnySection]) -> AnySection:
    """A section that loses a multiplication, that by its gain at rest too, only where all of them do."""
    first = sections[0]
    if all(each == first for each in sections):
        return first
    gains = {_gain(section) for section in sections}
    for attempt in count(1):
        shift = attempt / 1024
        section = first._replace(
            b=tuple(_general([s.b[i] for s in sections], 0.5 + i / 64 + shift) for i in range(len(first.b))),
            a=tuple(_general([s.a[i] for s in sections], 0.25 + i / 32 + shift) for i in range(len(first.a))),
        )
        # A gain of 0 at every point, as a zero at z = 1 gives it, may be left out of the steps.
        if _gain(section) not in _PLAIN or gains == {_gain(section)}:
            return section
    raise AssertionError  # count() does not end


def _gain(section: AnySection) -> float:
    """At rest, of a section without a pole at z = 1."""
    b, a = section.in_z()
    return float(sum(b) / (1 + sum(a)))


def _general(values: Sequence[float], otherwise: float) -> float:
    """A number that stands for all: itself where they are the same, else one that is multiplied."""
    return values[0] if all(value == values[0] for value in values) else otherwise
