"""How figures are written: five significant digits at the most, with their unit."""

from __future__ import annotations

import re
from math import pi

from realize.quantity import format_engineering

#: An exponent of ten, as Python pads it.
_EXPONENT = re.compile(r"e\+?(-?)0*")

#: Below it a value of the table is written as a whole number rather than with an exponent, which is no shorter.
_WHOLE = 1e5

#: Differences above this are lost causes, by whatever factor.
_MOST_SHOWN = 1e6

#: Figures below this are shown with decimals: five digits in all at the most.
_MOST_WITH_DECIMALS = 1000


def decimals(value: float | None, count: int) -> str:
    """So many decimals, which stand below each other in a column; few digits where it is large."""
    if value is None or abs(value) >= _MOST_WITH_DECIMALS:
        return figure(value)
    # Adding 0 turns a rounded -0 into 0.
    return f"{round(value, count) + 0.0:.{count}f}"


def with_unit(value: float | None, unit: str) -> str:
    """A figure of three digits; a dash where there is none."""
    return "-" if value is None else f"{value:.3g}{unit}"


def figure(value: float | None, digits: int = 3) -> str:
    """A difference or tolerance: two or three digits tell how close it came."""
    if value is not None and value > _MOST_SHOWN:
        return f">{_MOST_SHOWN:g}"
    return "-" if value is None else f"{value:.{digits}g}"


def value_text(value: float | complex | str | None, digits: int = 5) -> str:
    """What a check compares."""
    if isinstance(value, complex):
        return complex_text(value, digits)
    return value if isinstance(value, str) else optional(value, "")


def complex_text(z: complex, digits: int = 5) -> str:
    """A root, or both of a pair."""
    if z.imag == 0:
        return f"{z.real:.5g}"
    # A real part below the last of five digits of the whole is not shown.
    imaginary = _short(abs(z.imag), digits)
    return f"{_short(z.real, digits - 1)}+-{imaginary}j" if abs(z.real) > 5e-6 * abs(z) else f"+-{imaginary}j"


def _short(value: float, digits: int) -> str:
    """So many digits, and no more characters than they take."""
    text = f"{value:.{digits}g}"
    if "e" in text and 1 <= abs(value) < _WHOLE:
        return f"{value:.0f}"
    return _EXPONENT.sub(r"e\1", text)


def optional(value: float | None, unit: str) -> str:
    """A figure of five digits; a dash where there is none."""
    return "-" if value is None else f"{value:.5g}{unit}"


def hz(rad_s: float) -> str:
    """A frequency in both units."""
    return f"{in_hz(rad_s)} ({rad_s:.5g} rad/s)"


def in_hz(rad_s: float) -> str:
    """A frequency in rad/s, shown in Hz."""
    return format_engineering(rad_s / (2 * pi), "Hz")


def count(n: int, noun: str) -> str:
    """So many of something."""
    return f"{n or 'no'} {noun}{'' if n == 1 else 's'}"
