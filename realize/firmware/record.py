"""``NAME.record.json``: how the firmware text came to be, for machines."""

from __future__ import annotations

import json
from collections.abc import Mapping
from fractions import Fraction
from hashlib import sha256
from math import isfinite
from typing import TYPE_CHECKING, Any

from realize.algebra.expression import exact_text
from realize.arithmetic.realization import DeltaSection
from realize.firmware.c_text import hexadecimal
from realize.version import VERSION

if TYPE_CHECKING:
    from realize.arithmetic.realization import AnySection, Realization
    from realize.firmware.emission import Emission
    from realize.firmware.integer.emission import IntegerEmission

SCHEMA = "realize/1"

#: Significant digits of a measured figure: what stays the same on every machine and every numpy.
FIGURE_DIGITS = 5


def record(emission: Emission, files: Mapping[str, str]) -> dict[str, Any]:
    """The account of an emission, ready for JSON.

    Parameters
    ----------
    emission : Emission
        What was emitted.
    files : mapping
        Name and text of the files it describes.

    Returns
    -------
    dict
        Coefficients in ascending powers of 1/z, ``a`` without its 1 and for subtraction, whatever sign the C text
        stores. Sections in delta have these too, but do not store them: theirs, in ascending powers of 1/delta, are
        under ``coefficients``. Figures of the checks and of the loop are rounded to five digits; what is not finite is
        null.
    """
    realization = emission.realization
    stored = {
        "structure": realization.structure,
        "arithmetic": realization.format.name,
        **stored_entries(realization),
    }
    if emission.schedule_entry is not None:
        stored["schedule"] = _figures(emission.schedule_entry)
    return assembled(emission, stored, files)


def stored_entries(realization: Realization) -> dict[str, Any]:
    """The stored coefficients."""
    return {
        "integral": [_coefficient(gain) for gain in realization.integral],
        "sections": [_section(section) for section in realization.sections],
    }


def assembled(
    emission: Emission | IntegerEmission, stored: Mapping[str, Any], files: Mapping[str, str]
) -> dict[str, Any]:
    """A record with what is stored in any arithmetic between the design and the checks."""
    return {
        "schema": SCHEMA,
        "design": dict(emission.design),
        "causal": dict(emission.causal),
        "method": emission.method,
        **stored,
        "checks": [_figures(check) for check in emission.checks],
        "accepted": [_figures(entry) for entry in emission.accepted],
        "loop": _figures(emission.loop),
        "files": {name: sha256(text.encode()).hexdigest() for name, text in files.items()},
        "tool": {"name": "realize", "version": VERSION},
    }


def record_text(emission: Emission, files: Mapping[str, str]) -> str:
    """The record as JSON text."""
    return document_text(record(emission, files))


def document_text(document: Mapping[str, Any]) -> str:
    """A record as text."""
    return json.dumps(document, indent=2, allow_nan=False) + "\n"


def _section(section: AnySection) -> dict[str, Any]:
    stored = {"b": [_coefficient(b) for b in section.b], "a": [_coefficient(a) for a in section.a]}
    if not isinstance(section, DeltaSection):
        return stored
    b, a = section.in_z()
    return {"b": [_unstored(c) for c in b], "a": [_unstored(c) for c in a], "operator": "delta", "coefficients": stored}


def _coefficient(value: float) -> dict[str, Any]:
    return {"value": str(Fraction(value)), "stored": hexadecimal(value), "fraction_bits": None}


def _unstored(value: Fraction) -> dict[str, Any]:
    """A coefficient that follows from what is stored."""
    return {"value": str(value), "stored": None, "fraction_bits": None}


def _figures(value: Any) -> Any:
    """Figures rounded, complex ones taken apart, what is not finite as null."""
    if isinstance(value, complex):
        return {"re": _figures(value.real), "im": _figures(value.imag)}
    if isinstance(value, float):
        return float(f"{value:.{FIGURE_DIGITS}g}") if isfinite(value) else None
    if isinstance(value, Fraction):
        return exact_text(value)
    if isinstance(value, Mapping):
        return {key: _figures(entry) for key, entry in value.items()}
    if isinstance(value, (list, tuple)):
        return [_figures(entry) for entry in value]
    return value
