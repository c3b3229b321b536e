"""What rounding the stored numbers may do to a section, to first order: one direction for each of them.

A section is ``B/A`` in ascending powers of 1/z. A stored number moves both along polynomials; how far it may be from
what it was rounded from is its unit: for floats half a unit in the last place, to which each is correctly rounded; for
integers a whole one, as a number may stand for a coefficient and for its double.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from realize.algebra import polynomial as poly
from realize.arithmetic.formats import FORMATS
from realize.firmware.recorded import RecordedSection

Floats = npt.NDArray[np.float64]

#: An entry of the record: value, stored, fraction_bits.
Entry = Mapping[str, Any]


class Move(NamedTuple):
    """How far a stored number may be off, and where B and A go with it."""

    unit: float
    b: Floats
    a: Floats


def moves_of(section: RecordedSection, record: Mapping[str, Any]) -> list[Move]:
    """One move for each stored number of a section.

    Parameters
    ----------
    section : RecordedSection
        As :func:`realize.firmware.recorded.recorded_numbers` reads it.
    record : mapping
        Its record: arithmetic, structure, and whether numerators were scaled to the rounded denominators.
    """
    found = _moves(section, record)
    if record.get("numerators_anew"):
        at_one = abs(float(1 + sum(section.a)))
        share = sum(move.unit * abs(float(move.a.sum())) for move in found) / at_one if at_one else 0.0
        found.append(Move(share, _floats(section.b), np.zeros(len(section.b))))
    return found


def units(entries: Sequence[Entry], arithmetic: str) -> list[float]:
    """How far each of the numbers of a section may be from what it was rounded from."""
    if arithmetic in FORMATS:
        target = FORMATS[arithmetic]
        least = 2.0 ** (target.least_exponent - 1) if target.least_exponent > -1074 else 0.0
        return [abs(float(Fraction(each["value"]))) * 2.0**-target.precision + least for each in entries]
    rounded = {each.get("fraction_bits") for each in entries if not _is_as_it_is(each)}
    return [_unit(each, rounded) for each in entries]


def _unit(entry: Entry, rounded: set[Any]) -> float:
    """Powers of two are not multiplied, and not rounded, unless they share the binary point of others that are."""
    bits = entry.get("fraction_bits")
    if entry["stored"] is None or bits is None or (_is_as_it_is(entry) and bits not in rounded):
        return 0.0
    return float(2.0**-bits)


def _is_as_it_is(entry: Entry) -> bool:
    """Whether an entry is zero or a power of two, in lowest terms, as is written for what is not multiplied."""
    value = Fraction(entry["value"])
    is_power = not any(n & (n - 1) for n in (abs(value.numerator), value.denominator))
    return is_power and entry.get("fraction_bits") == value.denominator.bit_length() - 1


def _moves(section: RecordedSection, record: Mapping[str, Any]) -> list[Move]:
    own = section.entry.get("coefficients")
    if own is None:
        entries = [*section.entry["b"], *section.entry["a"]]
        return _along(entries, *_powers(len(section.a)), record)
    if own.keys() == {"b", "a"}:
        return _along([*own["b"], *own["a"]], *_powers_of_delta(len(section.a)), record)
    directions = _directions(section, own, record["structure"])
    each_unit = dict(zip(own, units(list(own.values()), record["arithmetic"]), strict=True))
    return [Move(unit, *directions[name]) for name, unit in each_unit.items()]


def _along(entries: Sequence[Entry], b: Sequence[Floats], a: Sequence[Floats], record: Mapping[str, Any]) -> list[Move]:
    still = np.zeros(len(b))
    directions = [*((each, still) for each in b), *((still, each) for each in a)]
    return [Move(unit, *way) for unit, way in zip(units(entries, record["arithmetic"]), directions, strict=True)]


def _powers(order: int) -> tuple[list[Floats], list[Floats]]:
    """Directions of ``b`` and ``a`` as they are: the powers of 1/z."""
    rows = list(np.eye(order + 1))
    return rows, rows[1:]


def _powers_of_delta(order: int) -> tuple[list[Floats], list[Floats]]:
    """The same for sections in delta: ``(1 - 1/z)^(order - i) / z^i``."""
    rows = []
    for i in range(order + 1):
        power = poly.power((Fraction(1), Fraction(-1)), order - i)
        rows.append(_floats((*(Fraction(0),) * i, *power)))
    return rows, rows[1:]


def _directions(section: RecordedSection, names: Iterable[str], structure: str) -> Mapping[str, tuple[Floats, Floats]]:
    """By name, where B and A go; a section without a history of its output is in direct form in any structure."""
    if any(name.startswith("b") for name in names):
        return _direct(section)
    return _normal(section) if structure == "normal" else _delta(section)


def _direct(section: RecordedSection) -> dict[str, tuple[Floats, Floats]]:
    """Numbers called as they are in a direct form."""
    b, a = _powers(len(section.a))
    still = np.zeros(len(b))
    return {f"b{i}": (row, still) for i, row in enumerate(b)} | {f"a{i}": (still, row) for i, row in enumerate(a, 1)}


def _delta(section: RecordedSection) -> dict[str, tuple[Floats, Floats]]:
    """``b = d A + sum c_i delta^(n - i)``, ``A = delta^n + sum a_i delta^(n - i)``."""
    rows, _ = _powers_of_delta(len(section.a))
    below, d, still = _floats((Fraction(1), *section.a)), float(section.b[0]), np.zeros(len(rows))
    found = {"d": (below, still)}
    for i, row in enumerate(rows[1:], 1):
        found |= {f"c{i}": (row, still), f"a{i}": (d * row, row)}
    return found


def _normal(section: RecordedSection) -> dict[str, tuple[Floats, Floats]]:
    """``H = d + (c1 w + c2 (z - s))/((z - s)^2 + w^2)``, multiplied out and differentiated."""
    a1, a2 = map(float, section.a)
    s = -a1 / 2
    w = max(a2 - s * s, 0.0) ** 0.5
    d, b1, b2 = map(float, section.b)
    c2 = b1 - d * a1
    c1 = (b2 - d * a2 + c2 * s) / w if w else 0.0
    still = np.zeros(3)
    return {
        "d": (np.array([1, a1, a2]), still),
        "c1": (np.array([0, 0, w]), still),
        "c2": (np.array([0, 1, -s]), still),
        "s": (np.array([0, -2 * d, 2 * s * d - c2]), np.array([0, -2, 2 * s])),
        "w": (np.array([0, 0, 2 * w * d + c1]), np.array([0, 0, 2 * w])),
    }


def _floats(values: Sequence[Fraction]) -> Floats:
    return np.array([float(value) for value in values])
