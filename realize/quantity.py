"""Quantities: a number and a unit in, an exact number in the dimension's own unit out, and back to text.

Angular frequencies are in rad/s, rates in Hz, times in s, angles in degrees; percent and decibel keep their
figure. Hz becomes rad/s by the ``pi`` that is right to 400 digits.
"""

from __future__ import annotations

import re
from decimal import ROUND_HALF_EVEN, Decimal
from fractions import Fraction
from typing import Literal

from realize.algebra.expression.printing import MAX_EXACT_DIGITS, format_polynomial, read_exact, rounded
from realize.algebra.expression.ratio import UnfitError
from realize.algebra.expression.tokens import literal, nearest, shown
from realize.algebra.irrational import pi
from realize.errors import RealizeError

Dimension = Literal["rate", "angular frequency", "time", "percent", "decibel", "angle", "samples"]

#: Longest text of a quantity: the longest exact number, and room for a unit.
MAX_LENGTH = MAX_EXACT_DIGITS + 20

#: Significant digits of a figure that people read.
SHOWN_DIGITS = 5

_HERTZ = {"Hz": Fraction(1), "kHz": Fraction(10**3), "MHz": Fraction(10**6)}

#: What one of each unit is in the unit of the dimension (cycles for the angular frequencies in Hz).
_UNITS: dict[Dimension, dict[str, Fraction]] = {
    "rate": _HERTZ,
    "angular frequency": {**_HERTZ, "rad/s": Fraction(1)},
    "time": {
        "s": Fraction(1),
        "ms": Fraction(1, 10**3),
        "us": Fraction(1, 10**6),
        "\N{MICRO SIGN}s": Fraction(1, 10**6),
        "\N{GREEK SMALL LETTER MU}s": Fraction(1, 10**6),
        "ns": Fraction(1, 10**9),
        "min": Fraction(60),
        "h": Fraction(3600),
    },
    "percent": {"%": Fraction(1)},
    "decibel": {"dB": Fraction(1)},
    "angle": {"deg": Fraction(1)},
    "samples": {"samples": Fraction(1), "sample": Fraction(1)},
}

#: Units as people spell them out; plurals, since one letter less is still like them.
_SPELLED_OUT = {
    "hertz": "Hz",
    "kilohertz": "kHz",
    "megahertz": "MHz",
    "radians per second": "rad/s",
    "sec": "s",
    "seconds": "s",
    "milliseconds": "ms",
    "microseconds": "us",
    "nanoseconds": "ns",
    "minutes": "min",
    "hours": "h",
    "percent": "%",
    "decibels": "dB",
    "degrees": "deg",
}

#: What a plain number is in, where it stands for a quantity of each dimension.
_SI_UNITS: dict[Dimension, str] = {"time": "s", "rate": "Hz", "angular frequency": "rad/s"}

#: Longest number that an advice repeats.
_LONGEST_ADVISED = 40

#: A quantity of each dimension, to show what is meant.
_EXAMPLES: dict[Dimension, str] = {
    "rate": "2 kHz",
    "angular frequency": "20 Hz",
    "time": "500 us",
    "percent": "2 %",
    "decibel": "0.5 dB",
    "angle": "6 deg",
    "samples": "1 sample",
}

_LITERAL = r"[0-9.]+(?:[eE][-+]?[0-9]+)?"
_QUANTITY = re.compile(rf"(?P<number>[-+]?{_LITERAL}(?:\s*/\s*{_LITERAL})?)\s*(?P<unit>.*)", re.DOTALL)

#: Units with prefixes that figures are written in, largest first, by the unit without prefix.
_PREFIXED: dict[str, tuple[tuple[str, Fraction], ...]] = {
    "Hz": tuple((name, _UNITS["rate"][name]) for name in ("MHz", "kHz", "Hz")),
    "s": tuple((name, _UNITS["time"][name]) for name in ("s", "ms", "us", "ns")),
}


def parse_quantity(text: str, dimension: Dimension, where: str) -> Fraction:
    """Read a number and a unit, exactly.

    Parameters
    ----------
    text : str
        Such as ``2 kHz``, ``5e-4 s`` or ``1/20 s``.
    dimension : str
        What it must be: "rate" (answered in Hz), "angular frequency" (in rad/s; given in Hz or rad/s), "time"
        (s), "percent" (%), "decibel" (dB), "angle" (deg) or "samples".
    where : str
        The place it stands in, as the user knows it.

    Raises
    ------
    RealizeError
        When it is no such quantity.
    """
    try:
        number, unit = _split(text)
        return number * _size(unit, dimension)
    except UnfitError as problem:
        raise RealizeError(where, problem.found, quantity_allowed(dimension), problem.advice) from None


def quantity_allowed(dimension: Dimension) -> str:
    """Say what may stand where a quantity of this dimension is expected."""
    # One of the two micro signs is enough: they look the same.
    units = [unit for unit in _UNITS[dimension] if "\N{GREEK SMALL LETTER MU}" not in unit]
    return f'a number with its unit ({", ".join(units)}), such as "{_EXAMPLES[dimension]}"'


def plain_number(text: str) -> tuple[str, str] | None:
    """Say what to write where a plain number is wanted, and a time or frequency stands.

    Parameters
    ----------
    text : str
        What stands there.

    Returns
    -------
    tuple of str or None
        The unit, and the number in s, in rad/s, or of a frequency in Hz both in Hz and in rad/s. ``None`` where the
        text is no such quantity, or its number is too long to repeat.
    """
    try:
        number, unit = _split(text)
    except UnfitError:
        return None
    dimension = next((known for known in _SI_UNITS if unit in _UNITS[known]), None)
    if dimension is None:
        return None
    value = format_polynomial([number * _UNITS[dimension][unit]])
    plain = f'"{value}"' if "/" in value else value
    turned = f', or "2*pi*{value}" for rad/s' if dimension == "rate" else ""
    return (unit, f"{plain} for {_SI_UNITS[dimension]}{turned}") if len(value) <= _LONGEST_ADVISED else None


def dimension_meant(text: str, choices: tuple[Dimension, ...]) -> Dimension:
    """Which of several dimensions a text is most likely meant to have: the first where nothing tells."""
    try:
        _, unit = _split(text)
    except UnfitError:
        return choices[0]
    named = [dimension for dimension in choices if unit in _UNITS[dimension]]
    return next(iter(named + [dimension for dimension in choices if _nearest_unit(unit, dimension)]), choices[0])


def round_significant(value: Fraction, digits: int, rounding: str = ROUND_HALF_EVEN) -> Fraction:
    """Round to a number of significant decimal digits, by a mode of ``decimal``; the result is exact."""
    return Fraction(rounded(value, digits, rounding))


def format_engineering(value: Fraction | float, unit: str) -> str:
    """Write a quantity to at most five significant digits, with the prefix that suits it.

    Parameters
    ----------
    value : Fraction or float
        In ``unit``; finite.
    unit : str
        Hz and s take prefixes; every other unit stays as it is. May be empty.

    Returns
    -------
    str
        Such as ``2 kHz``, ``500 us`` or ``1885 rad/s``; the same on every machine.
    """
    # Rounded first: 999.999 us is 1 ms.
    figure = round_significant(Fraction(value), SHOWN_DIGITS)
    name, size = _prefixed(figure, unit)
    return f"{_digits(rounded(figure / size, SHOWN_DIGITS))} {name}".strip()


def _split(text: str) -> tuple[Fraction, str]:
    """Number and unit of a quantity, the unit not yet looked at."""
    if len(text) > MAX_LENGTH:
        raise UnfitError(f"a quantity of {len(text)} characters", "", "round the number")
    match = _QUANTITY.fullmatch(text.strip())
    if match is None:
        raise UnfitError(f"{shown(text)}, which is no quantity", "", "write a number first, then its unit")
    if not match["unit"]:
        raise UnfitError(f"{shown(text)} without a unit", "", "add the unit")
    return _number(match["number"]), match["unit"]


def _number(text: str) -> Fraction:
    """A signed literal, or the quotient of two."""
    exact = read_exact("".join(text.split()))
    if exact is not None:
        return exact
    numerator, _, divisor = text.lstrip("-+").partition("/")
    value = literal(numerator.strip())
    if divisor:
        below = literal(divisor.strip())
        if not below:
            raise UnfitError("a division by zero", "", "check the number")
        value /= below
    return -value if text.startswith("-") else value


def _size(unit: str, dimension: Dimension) -> Fraction:
    """What one unit is in the dimension's own."""
    units = _UNITS[dimension]
    if unit not in units:
        others = [other for other, known in _UNITS.items() if unit in known]
        like = _nearest_unit(unit, dimension)
        raise UnfitError(
            f"the unit {shown(unit)}" + (f", which belongs to {_with_article(others[0])}" if others else ""),
            "",
            f"did you mean {like}?" if like and not others else f"give {_with_article(dimension)}",
        )
    return units[unit] * (2 * pi() if dimension == "angular frequency" and unit in _HERTZ else 1)


def _nearest_unit(unit: str, dimension: Dimension) -> str | None:
    """The unit of a dimension that another text is most like: as it is written first, then spelled out."""
    units = _UNITS[dimension]
    spelled_out = {word: sign for word, sign in _SPELLED_OUT.items() if sign in units}
    return nearest(unit, units) or spelled_out.get(nearest(unit, spelled_out) or "")


def _with_article(dimension: Dimension) -> str:
    names: dict[Dimension, str] = {
        "percent": "a percentage",
        "decibel": "a level",
        "samples": "a number of samples",
    }
    article = "an" if dimension[0] == "a" else "a"
    return names.get(dimension, f"{article} {dimension}")


def _prefixed(value: Fraction, unit: str) -> tuple[str, Fraction]:
    """The largest prefixed unit not above the value; the smallest where all are."""
    choices = _PREFIXED.get(unit, ()) if value else ()
    return next((c for c in choices if c[1] <= abs(value)), choices[-1] if choices else (unit, Fraction(1)))


def _digits(figure: Decimal) -> str:
    """Plain digits in the range people read at a glance, else with a power of ten."""
    return f"{figure:f}" if -4 <= figure.adjusted() < 6 else f"{figure:e}"
