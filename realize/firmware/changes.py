"""What differs between two documents of JSON, place by place, and how a place and a value are called."""

from __future__ import annotations

import json
from collections.abc import Iterable, Iterator, Mapping
from fractions import Fraction
from itertools import zip_longest
from typing import Any, NamedTuple

from realize.algebra.expression import decimal_text
from realize.algebra.expression.printing import read_exact
from realize.algebra.expression.ratio import UnfitError
from realize.algebra.expression.tokens import printable

#: Keys from the root of a document to one of its entries; an entry of a list by its number, from 0.
Place = tuple[str | int, ...]

#: Exact numbers in decimals, for people: where such a number differs, it says so itself.
_TWIN = "_decimal"

#: What follows from a transfer function as text, and from values.
_DERIVED = ("numerator", "denominator", "cancelled")

#: Longest value that is quoted whole.
_LONGEST = 60

#: Characters that are quoted before the first difference in it.
_BEFORE = 30

#: Digits of an exact number for people: what tells any two values of float32 apart.
_DIGITS = 9

#: Significant digits that tell any two doubles apart.
_DOUBLE_DIGITS = 17


class Missing:
    """What stands where a document has no entry."""


MISSING = Missing()


class Change(NamedTuple):
    """One place at which two documents differ; :data:`MISSING` where one has no entry."""

    place: Place
    old: Any
    new: Any


def changes(old: Any, new: Any) -> Iterator[Change]:
    """Every place at which two documents differ, in the order of the first; a stored coefficient is one place."""
    return _below((), old, new)


def _below(place: Place, old: Any, new: Any) -> Iterator[Change]:
    if isinstance(old, dict) and isinstance(new, dict) and not (is_coefficient(old) or is_coefficient(new)):
        for key in dict.fromkeys((*old, *new)):
            yield from _below((*place, key), old.get(key, MISSING), new.get(key, MISSING))
    elif isinstance(old, list) and isinstance(new, list):
        for i, (before, now) in enumerate(zip_longest(old, new, fillvalue=MISSING)):
            yield from _below((*place, i), before, now)
    elif type(old) is not type(new) or old != new:
        yield Change(place, old, new)


def telling(found: Iterable[Change]) -> list[Change]:
    """Without what stands there for people only, or follows from what else differs."""
    own = [c for c in found if not any(isinstance(key, str) and key.endswith(_TWIN) for key in c.place)]
    return [c for c in own if not any(key in _DERIVED for key in c.place)] or own


def is_coefficient(value: object) -> bool:
    """Whether an entry is a stored number with its value and binary point."""
    return isinstance(value, dict) and {"value", "stored"} <= value.keys()


def place_text(place: Place) -> str:
    """A place of a record in words; its coefficients as they are called everywhere else."""
    match place:
        case ("integral", int(i)):
            return f"integral gain {i + 1}"
        case ("sections", int(k), *rest):
            return f"section {k + 1}{_within_section(tuple(rest))}"
        case ("direct_gain",):
            return "direct gain"
        case ("schedule", "points", int(i), ("sections" | "integral"), *_):
            return f"point {i + 1}, {place_text(place[3:])}"
        case _:
            return dotted(place)


def _within_section(rest: Place) -> str:
    match rest:
        case ():
            return ""
        case ("b", int(i)):
            return f" b{i}"
        case ("a", int(i)):
            return f" a{i + 1}"
        case ("coefficients", ("b" | "a") as letter, int(i)):
            return f" {letter}{i if letter == 'b' else i + 1} in 1/delta"
        case ("coefficients", str(name)):
            return f" {name}"
        case _:
            return f", {dotted(rest)}"


def dotted(place: Place) -> str:
    """A place by its keys, entries of lists counted from 1."""
    return printable(".".join(str(key + 1) if isinstance(key, int) else key for key in place)) or "the whole"


def named_place_text(place: Place, *documents: Any) -> str:
    """A place by its keys, entries of lists by their names where these are the same in every document."""
    words, nodes = [], list(documents)
    for key in place:
        nodes = [_child(node, key) for node in nodes]
        names = {node["name"] for node in nodes if isinstance(node, dict) and isinstance(node.get("name"), str)}
        if isinstance(key, int):
            words.append(names.pop() if len(names) == 1 else str(key + 1))
        else:
            words.append(key)
    return printable(".".join(words).removesuffix(".value")) or "the whole"


def _child(node: Any, key: str | int) -> Any:
    if isinstance(node, list) and isinstance(key, int):
        return node[key] if key < len(node) else None
    return node.get(key) if isinstance(node, dict) else None


def checks_by_name(checks: Iterable[Any]) -> dict[str, Any]:
    """Checks by name and by whose numbers they are about: ``pole shift (stored)``."""
    named: dict[str, Any] = {}
    for i, check in enumerate(checks):
        known = isinstance(check, dict) and {"check", "of"} <= check.keys()
        name = printable(f"{check['check']} ({check['of']})" if known else f"number {i + 1}")
        named[name if name not in named else f"{name}, number {i + 1}"] = check
    return named


def value_texts(old: object, new: object) -> tuple[str, str]:
    """Two values in words, with as many digits as it takes to see that they differ."""
    for digits in (_DIGITS, _DOUBLE_DIGITS):
        texts = value_text(old, digits), value_text(new, digits)
        if texts[0] != texts[1]:
            return texts
    return excerpts(_whole(old), _whole(new))


def excerpts(old: str, new: str) -> tuple[str, str]:
    """Two texts, each cut to what a line shows around the first difference."""
    common = next((i for i, (a, b) in enumerate(zip(old, new, strict=False)) if a != b), min(len(old), len(new)))
    first = max(0, common - _BEFORE) if max(len(old), len(new)) > _LONGEST else 0
    return _excerpt(old, first), _excerpt(new, first)


def _excerpt(text: str, first: int) -> str:
    cut = text[first : first + _LONGEST]
    return ("..." if first else "") + printable(cut) + ("..." if first + _LONGEST < len(text) else "")


def value_text(value: object, digits: int = _DIGITS) -> str:
    """A value in words, in one line; long exact numbers to some significant digits."""
    if isinstance(value, Missing) or value is None:
        return "nothing"
    if isinstance(value, dict):
        return _table_text(value, digits)
    if isinstance(value, list):
        whole = ", ".join(value_text(each, digits) for each in value)
        return f"[{whole}]" if len(whole) <= _LONGEST else f"a list of {_entries(len(value))}"
    if isinstance(value, str):
        return _string_text(value, digits)
    return str(value).lower() if isinstance(value, bool) else f"{value}"


def _table_text(value: dict[str, Any], digits: int) -> str:
    if is_coefficient(value):
        return _coefficient_text(value, digits)
    if value.keys() == {"re", "im"} and all(isinstance(part, float) for part in value.values()):
        return f"{value['re']}{value['im']:+}j" if value["im"] else f"{value['re']}"
    if {"bits", "fraction_bits"} <= value.keys():
        return f"{value['bits']} bits, {value['fraction_bits']} of them fraction bits"
    return f"a table of {_entries(len(value))}"


def _entries(count: int) -> str:
    return f"{count} {'entry' if count == 1 else 'entries'}"


def _string_text(value: str, digits: int) -> str:
    if len(value) <= _LONGEST:
        return printable(value) or "an empty text"
    exact = _exactly(value)
    return printable(value[: _LONGEST - 3]) + "..." if exact is None else decimal_text(exact, digits)


def _coefficient_text(entry: Mapping[str, Any], digits: int) -> str:
    """Decimals first, then what is stored, in brackets."""
    text = str(entry["value"])
    exact = _exactly(text)
    number = printable(text[:_LONGEST]) if exact is None else decimal_text(exact, digits)
    if entry["stored"] is None:
        return number
    bits = entry.get("fraction_bits")
    stored = printable(str(entry["stored"])[:_LONGEST])
    return f"{number} ({stored}{'' if bits is None else f', {bits} fraction bits'})"


def _exactly(text: str) -> Fraction | None:
    try:
        return read_exact(text)
    except UnfitError:
        return None


def _whole(value: object) -> str:
    """Nothing left out, for two that look alike when cut short."""
    if isinstance(value, Missing):
        return "no entry"
    return value if isinstance(value, str) else json.dumps(value)
