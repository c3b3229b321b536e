"""The gate: one value at a time from a table of the design file, checked, exact, or refused by its full name.

A :class:`Table` knows what the user calls the place it stands for, so that every refusal reads the same.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from math import ceil, floor
from types import MappingProxyType
from typing import TypeGuard

from realize.algebra.expression import evaluate_constant, read_exact
from realize.algebra.expression.ratio import MAX_BITS, UnfitError
from realize.algebra.expression.tokens import VALUES_TABLE, listed, literal, nearest, shown
from realize.errors import RealizeError
from realize.quantity import Dimension, parse_quantity, plain_number, quantity_allowed

#: Longest line of text (about, requirement, ...): two lines of a comment of 100 columns.
MAX_TEXT = 200

#: Largest quantity, corner in rad/s or signal, and one over the smallest: no machine comes near, and float64 still
#: holds the cube of it, so that figures can be computed from it without a thought.
LARGEST = 10**100

#: How a quantity in each unit of a check or tolerance is read.
DIMENSIONS: dict[str, Dimension] = {"%": "percent", "dB": "decibel", "deg": "angle"}

_NUMBER = 'a number (4.2), or a string with an expression ("1/3", "2*pi*50")'


class WrittenNumber(str):
    """A TOML float as it was written: its digits are the number."""

    __slots__ = ()


class Table:
    """A table of the design file.

    Parameters
    ----------
    entries : mapping
        What stands in it.
    source : str
        The file, as the user knows it.
    place : str
        The table, as the user writes it: ``[sampling]``; empty for the file itself.
    """

    def __init__(self, entries: Mapping[str, object], source: str, place: str = "") -> None:
        self.entries = entries
        self.source = source
        self.place = place

    def __contains__(self, key: str) -> bool:
        return key in self.entries

    def where(self, key: str) -> str:
        """Name the place of a key as the user knows it."""
        if not self.place:
            return f"{self.source}, [{key}]"
        return f"{self.source}, {self.place}{' ' if self.place.endswith(']') else ', '}{key}"

    def error(self, key: str, found: str, allowed: str, advice: str) -> RealizeError:
        """Compose the refusal of what stands at a key."""
        return RealizeError(self.where(key), found, allowed, advice)

    def only(self, known: Iterable[str]) -> None:
        """Refuse any key but the known ones."""
        names = list(known)
        for key in self.entries:
            if key in names:
                continue
            like = nearest(str(key), names)
            kind = "key" if self.place else "table"
            raise RealizeError(
                f"{self.source}, {self.place}" if self.place else self.source,
                f"the unknown {kind} {shown(str(key))}",
                listed(names),
                f"did you mean {like}?" if like else "remove it, or look for its name in the starter file",
            )

    def table(self, key: str) -> Table:
        """Open a table in this one; an empty one where it is missing."""
        value = self.entries.get(key, {})
        place = self._place_below(key)
        if not is_table(value):
            raise self.error(key, described(value), "a table", f"write {place} on a line, and its keys below")
        return Table(value, self.source, place)

    def tables(self, key: str) -> list[Table]:
        """Open an array of tables; empty where it is missing."""
        entries = self.entries.get(key, [])
        below = self._place_below(key)
        place = f"[{below}]" if below.endswith("]") else below
        if not isinstance(entries, list) or not all(is_table(entry) for entry in entries):
            raise RealizeError(
                f"{self.source}, {place}",
                described(entries),
                "one table for each entry",
                f"write {place} with two brackets on a line, and its keys below",
            )
        return [
            Table(entry, self.source, f"{place} number {i}") for i, entry in enumerate(entries, 1) if is_table(entry)
        ]

    def _place_below(self, key: str) -> str:
        if not self.place:
            return f"[{key}]"
        return f"[{self.place[1:-1]}.{key}]" if self.place.endswith("]") else f"{self.place}, {key}"

    def text(self, key: str, longest: int = MAX_TEXT) -> str | None:
        """Read one line of printable text, or ``None`` where it is missing."""
        if key not in self.entries:
            return None
        value = self.entries[key]
        allowed = f"one line of at most {longest} printable characters, in quotes"
        if not isinstance(value, str) or isinstance(value, WrittenNumber):
            raise self.error(key, described(value), allowed, "put it in quotes")
        if len(value) > longest:
            raise self.error(key, f"a text of {len(value)} characters", allowed, "shorten it")
        # Not printable are also the invisible characters that change the direction of text: a comment must
        # show what it says.
        if not value.isprintable() or not value.strip():
            found = "a text with control characters" if value.strip() else "an empty text"
            raise self.error(key, found, allowed, "write a plain line, or remove the key")
        return value

    def expression(self, key: str, example: str) -> str:
        """Read the text of an expression in s, to be evaluated."""
        value = self.entries[key]
        if not isinstance(value, str) or isinstance(value, WrittenNumber):
            raise self.error(key, described(value), "an expression in s, in quotes", f'write {key} = "{example}"')
        return value

    def choice(
        self, key: str, options: Sequence[str], default: str, meant: Mapping[str, str] = MappingProxyType({})
    ) -> str:
        """Read one word of several; what other words are meant for may be told."""
        return checked_choice(self.entries.get(key, default), options, self.where(key), meant)

    def flag(self, key: str, default: bool) -> bool:
        """Read true or false."""
        value = self.entries.get(key, default)
        if not isinstance(value, bool):
            raise self.error(key, described(value), "true or false, without quotes", f"write {key} = true")
        return value

    def integer(self, key: str, low: int, high: int) -> int | None:
        """Read an integer within bounds, or ``None`` where it is missing."""
        if key not in self.entries:
            return None
        value = self.entries[key]
        allowed = f"an integer from {low} to {high}"
        if not isinstance(value, int) or isinstance(value, bool) or not low <= value <= high:
            raise self.error(key, described(value), allowed, f"write {key} = {_integers_near(value, low, high)}")
        return value

    def number(self, key: str, values: Mapping[str, Fraction] | None = None) -> Fraction | None:
        """Read a number exactly, or ``None`` where it is missing."""
        if key not in self.entries:
            return None
        return checked_number(self.entries[key], values or {}, self.where(key))

    def positive_number(self, key: str) -> Fraction | None:
        """Read a number above zero, or ``None`` where it is missing."""
        value = self.number(key)
        if value is not None and value <= 0:
            raise self.error(key, described(self.entries[key]), "a number above zero", "check the sign")
        return None if value is None else within_range(value, self.where(key))

    def quantity(self, key: str, dimension: Dimension, *, zero: bool = False) -> Fraction | None:
        """Read a quantity above zero (or at zero, where that makes sense); ``None`` where it is missing."""
        if key not in self.entries:
            return None
        return checked_quantity(self.entries[key], dimension, self.where(key), zero=zero)

    def numbers(self, key: str) -> list[object]:
        """Read a list whose entries are yet to be checked."""
        value = self.entries.get(key, [])
        if not isinstance(value, list):
            raise self.error(key, described(value), "a list", f"write {key} = [..], with brackets")
        return value


def is_table(value: object) -> TypeGuard[Mapping[str, object]]:
    """Tell whether a value is a table."""
    return isinstance(value, Mapping)


def checked_number(
    value: object, values: Mapping[str, Fraction], where: str, values_table: str = VALUES_TABLE
) -> Fraction:
    """Read a number, exactly: an integer, a decimal, or an expression in a string.

    Parameters
    ----------
    value : object
        What stands in the file.
    values : mapping of str to Fraction
        Names an expression may use.
    where : str
        The place, as the user knows it.
    values_table : str
        Where the user may name values for it.
    """
    try:
        if isinstance(value, WrittenNumber):
            return _written(value)
        if isinstance(value, int) and not isinstance(value, bool):
            return _integer(value)
        exact = read_exact(value.strip()) if isinstance(value, str) else None
    except UnfitError as problem:
        raise RealizeError(where, problem.found, problem.allowed, problem.advice) from None
    if exact is not None:
        return exact
    if isinstance(value, str):
        _refuse_quantity(value, values, where)
        return evaluate_constant(value, values, where, values_table)
    raise RealizeError(where, described(value), _NUMBER, "write a number")


def checked_quantity(value: object, dimension: Dimension, where: str, *, zero: bool = False) -> Fraction:
    """Read a quantity that is above zero, or at zero where that is allowed."""
    if not isinstance(value, str) or isinstance(value, WrittenNumber):
        allowed = quantity_allowed(dimension)
        raise RealizeError(where, described(value), allowed, "write number and unit together, in quotes")
    result = parse_quantity(value, dimension, where)
    if result < 0 or (result == 0 and not zero):
        bound = "zero or more" if zero else "above zero"
        raise RealizeError(where, shown(value), f"a quantity {bound}", "check the number and its sign")
    return within_range(result, where)


def within_range(value: Fraction, where: str) -> Fraction:
    """Refuse a number whose figures float64 could not hold: a slip of an exponent."""
    if value and not Fraction(1, LARGEST) <= abs(value) <= LARGEST:
        size = "large" if abs(value) > 1 else "small"
        allowed = f"zero, or sizes from {1 / LARGEST:.0e} to {LARGEST:.0e}"
        raise RealizeError(where, f"a number that is too {size}", allowed, "check the power of ten")
    return value


def checked_choice(
    value: object, options: Sequence[str], where: str, meant: Mapping[str, str] = MappingProxyType({})
) -> str:
    """Read one word of several; what other words are meant for may be told."""
    if isinstance(value, str) and value in options:
        return value
    like = (meant.get(value.lower()) or nearest(value, options)) if isinstance(value, str) else None
    advice = f'did you mean "{like}"?' if like else "write one of these, in quotes"
    raise RealizeError(where, described(value), listed(options), advice)


def described(value: object) -> str:
    """Say what stands in the file, in one line."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, WrittenNumber):
        return f"the number {shown(value)[1:-1]}"
    if isinstance(value, int):
        return f"the number {value}" if abs(value) < 10**20 else "a very large number"
    if isinstance(value, str):
        return shown(value)
    if value is None:
        return "nothing"
    kinds = {list: "a list", dict: "a table", float: "a binary number"}
    return kinds.get(type(value), "a date or a time")


def _refuse_quantity(text: str, names: Mapping[str, Fraction], where: str) -> None:
    """Refuse a time or frequency where a plain number is wanted; a named value may be called as a unit is."""
    found = plain_number(text)
    if found is not None and found[0] not in names:
        raise RealizeError(where, shown(text), "a plain number, in SI units: it has no unit here", f"write {found[1]}")


def _integers_near(value: object, low: int, high: int) -> str:
    """The allowed integers next to a number; any allowed one for what is none."""
    try:
        number = checked_number(value, {}, "")
    except RealizeError:
        return str(max(low, min(high, 1)))
    near = {max(low, min(high, n)) for n in (floor(number), ceil(number))}
    return " or ".join(map(str, sorted(near)))


def _written(value: WrittenNumber) -> Fraction:
    plain = value.replace("_", "")
    if plain.lstrip("+-") in ("nan", "inf"):
        raise UnfitError(f"{plain}, which is no finite number", "finite numbers", "write a number")
    magnitude = literal(plain.lstrip("+-"))
    return -magnitude if plain.startswith("-") else magnitude


def _integer(value: int) -> Fraction:
    if value.bit_length() > MAX_BITS:
        raise UnfitError("a very large number", f"numbers of at most {MAX_BITS} bits", "use fewer digits")
    return Fraction(value)
