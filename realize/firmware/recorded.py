"""A record as it lies on disk: read, and its stored numbers as exact ones.

What a record says is not trusted here: every entry that is used is looked at first.
"""

from __future__ import annotations

import json
from collections.abc import Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from typing import Any, NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.expression.printing import read_exact
from realize.algebra.expression.ratio import UnfitError
from realize.algebra.expression.tokens import printable, shown
from realize.arithmetic.realization import exact_pulse
from realize.errors import RealizeError
from realize.firmware.record import SCHEMA
from realize.transfer import PulseTransferFunction

ENDING = ".record.json"

#: Fraction bits that a double can scale by.
_MOST_BITS = 1000

_WANTED, _AGAIN = "a record that realize emit wrote", "emit the design again"

#: What every record has, and of which kind.
_KINDS: Mapping[str, type] = {
    "design": dict,
    "causal": dict,
    "method": str,
    "structure": str,
    "arithmetic": str,
    "integral": list,
    "sections": list,
    "checks": list,
    "accepted": list,
    "files": dict,
    "tool": dict,
}


class RecordedSection(NamedTuple):
    """One section: exact coefficients in ascending powers of 1/z, ``a`` without its 1, and the entry they stand in."""

    b: tuple[Fraction, ...]
    a: tuple[Fraction, ...]
    entry: Mapping[str, Any]


class Recorded(NamedTuple):
    """The stored numbers of a record, exactly.

    Attributes
    ----------
    sections : tuple of RecordedSection
        One after the other, or side by side.
    parallel : bool
        Which of the two.
    direct_gain : Fraction
        What passes beside parallel sections.
    integral : tuple of Fraction
        ``R_1, R_2, ...``.
    scale : Fraction
        What a gain of 1 between physical units is in these numbers: other than 1 for integers, which count.
    period_s : Fraction
        Sample period.
    """

    sections: tuple[RecordedSection, ...]
    parallel: bool
    direct_gain: Fraction
    integral: tuple[Fraction, ...]
    scale: Fraction
    period_s: Fraction


def read_record(path: str) -> dict[str, Any]:
    """Read a record.

    Raises
    ------
    RealizeError
        When there is none, it cannot be read, is of a newer schema, or is something else.
    """
    content = _content(path)
    try:
        record = json.loads(content)
    except (ValueError, RecursionError):
        raise RealizeError(printable(path), "not JSON", _WANTED, _AGAIN) from None
    schema = record.get("schema") if isinstance(record, dict) else None
    if schema != SCHEMA:
        raise _other_schema(path, schema)
    for key, kind in _KINDS.items():
        if not isinstance(record.get(key), kind):
            raise RealizeError(f"{printable(path)}, {key}", described(record.get(key)), _WANTED, _AGAIN)
    for key in ("name", "transfer"):
        if not isinstance(record["design"].get(key), str):
            raise RealizeError(f"{printable(path)}, design.{key}", "nothing", _WANTED, _AGAIN)
    return dict(record)


def _content(path: str) -> bytes:
    try:
        return Path(path).read_bytes()
    except FileNotFoundError:
        raise RealizeError(
            printable(path), "there is no such file", _WANTED, "check the name and the directory"
        ) from None
    except IsADirectoryError:
        found = "a directory"
        raise RealizeError(printable(path), found, f"a file that ends in {ENDING}", "name the record in it") from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "its name is not possible"
        raise RealizeError(printable(path), f"cannot be read: {reason}", _WANTED, "check its rights") from None


def _other_schema(path: str, schema: object) -> RealizeError:
    where, text = printable(path), schema if isinstance(schema, str) else ""
    kind, _, number = text.partition("/")
    own, _, ours = SCHEMA.partition("/")
    if kind == own and number.isdecimal() and int(number) > int(ours):
        found = f"a record of the newer schema {shown(text)}"
        return RealizeError(where, found, f"schema {SCHEMA}", "use the realize that wrote it, or a newer one")
    found = "no record: it names no schema" if schema is None else f"the unknown schema {shown(str(schema))}"
    return RealizeError(where, found, _WANTED, f"name a file that ends in {ENDING}")


def described(value: object) -> str:
    """Say in a few words what stands where something else should."""
    if value is None:
        return "nothing"
    kinds = {dict: "a table", list: "a list", bool: "true or false"}
    return kinds.get(type(value)) or shown(str(value))


def recorded_numbers(record: Mapping[str, Any], path: str) -> Recorded:
    """The stored numbers.

    Raises
    ------
    RealizeError
        When one of them is no exact number.
    """
    where = printable(path)
    sections = tuple(_section(entry, f"{where}, section {k}") for k, entry in enumerate(record["sections"], 1))
    direct = record.get("direct_gain")
    design = record["design"]
    return Recorded(
        sections,
        record["structure"] == "parallel",
        Fraction(0) if direct is None else _value(direct, f"{where}, direct_gain"),
        tuple(_value(entry, f"{where}, integral gain {i}") for i, entry in enumerate(record["integral"], 1)),
        _scale(design, where) if record["arithmetic"].startswith("int") else Fraction(1),
        recorded_period_s(record, path),
    )


def recorded_period_s(record: Mapping[str, Any], path: str) -> Fraction:
    """The sample period.

    Raises
    ------
    RealizeError
        When it is no exact time above zero.
    """
    where = f"{printable(path)}, design.sampling.period_s"
    return _number(_at(record["design"], "sampling", "period_s"), where, positive=True)


def _section(entry: object, where: str) -> RecordedSection:
    table: Mapping[str, Any] = entry if isinstance(entry, dict) else {}
    b, a = (table.get(key) for key in ("b", "a"))
    if not (isinstance(b, list) and isinstance(a, list) and len(b) == len(a) + 1):
        raise RealizeError(where, "no lists b and a that belong together", "b with one entry more than a", _AGAIN)
    _check_own(table.get("coefficients"), where)
    return RecordedSection(
        tuple(_value(each, f"{where} b{i}") for i, each in enumerate(b)),
        tuple(_value(each, f"{where} a{i}") for i, each in enumerate(a, 1)),
        table,
    )


def _check_own(coefficients: object, where: str) -> None:
    """Look at the numbers that are stored in place of ``b`` and ``a``: by name, or as lists of that name."""
    if coefficients is None:
        return
    if not isinstance(coefficients, dict):
        raise RealizeError(f"{where} coefficients", described(coefficients), "stored numbers by their names", _AGAIN)
    as_lists = coefficients.keys() == {"b", "a"}
    for name, entry in coefficients.items():
        for each in entry if as_lists and isinstance(entry, list) else [entry]:
            _value(each, f"{where} {printable(name)}")


def _value(entry: object, where: str) -> Fraction:
    """The exact value of a stored number."""
    table: Mapping[str, Any] = entry if isinstance(entry, dict) else {}
    bits = table.get("fraction_bits")
    if "stored" not in table or not (bits is None or (type(bits) is int and abs(bits) <= _MOST_BITS)):
        allowed = f"value, stored, and fraction_bits up to {_MOST_BITS} or null"
        raise RealizeError(where, described(entry), allowed, _AGAIN)
    return _number(table.get("value"), where)


def _scale(design: Mapping[str, Any], where: str) -> Fraction:
    incoming, outgoing = (
        _number(_at(design, "signals", key, "per_count"), f"{where}, design.signals.{key}.per_count", positive=True)
        for key in ("input", "output")
    )
    return incoming / outgoing


def _number(value: object, where: str, *, positive: bool = False) -> Fraction:
    try:
        number = read_exact(value) if isinstance(value, str) else None
    except UnfitError:
        number = None
    if number is None or (positive and number <= 0):
        raise RealizeError(where, described(value), "an exact number in quotes", _AGAIN)
    return number


def _at(document: Mapping[str, Any], *keys: str) -> object:
    value: Any = document
    for key in keys:
        value = value.get(key) if isinstance(value, dict) else None
    return value


def recorded_pulse(recorded: Recorded) -> PulseTransferFunction:
    """What the stored numbers are as a pulse transfer function, exactly, in physical units.

    Raises
    ------
    RealizeError
        When they are no transfer function: every coefficient is zero.
    """
    bottoms = [(Fraction(1), *section.a) for section in recorded.sections]
    top = poly.scale(_above(recorded), 1 / recorded.scale)
    return exact_pulse(top, bottoms, tuple(gain / recorded.scale for gain in recorded.integral), recorded.period_s)


def _above(recorded: Recorded) -> poly.Rationals:
    """Numerator over the product of the denominators."""
    if not recorded.parallel:
        return _product([poly.trimmed(section.b) for section in recorded.sections]) if recorded.sections else ()
    whole: poly.Rationals = (Fraction(1),)
    above: poly.Rationals = ()
    for b, a, _ in recorded.sections:
        own = (Fraction(1), *a)
        above = poly.add(poly.multiply(above, own), poly.multiply(poly.trimmed(b), whole))
        whole = poly.multiply(whole, own)
    return poly.add(above, poly.scale(whole, recorded.direct_gain)) if recorded.direct_gain else above


def _product(polynomials: Sequence[poly.Rationals]) -> poly.Rationals:
    result: poly.Rationals = (Fraction(1),)
    for each in polynomials:
        result = poly.multiply(result, each)
    return result
