"""The design file: read, validated, and kept whole in the record.

:func:`load_design` is the gate. What it returns is exact and checked; what it cannot understand, it refuses by
file, table and key, with what was found, what is allowed and what to try.
"""

from __future__ import annotations

from fractions import Fraction

from realize.design.load import design_from_text, load_design
from realize.design.model import (
    CHECK_UNITS,
    LOOP_METHODS,
    METHODS,
    TOLERANCE_KEYS,
    Accept,
    Design,
    LoopTable,
    Overrides,
    PlantCase,
    PlantTable,
    Rolloff,
    Schedule,
    Signal,
    Target,
)
from realize.design.record import design_from_resolved
from realize.design.tables import checked_name
from realize.errors import RealizeError

__all__ = [
    "CHECK_UNITS",
    "LOOP_METHODS",
    "METHODS",
    "TOLERANCE_KEYS",
    "Accept",
    "Design",
    "LoopTable",
    "Overrides",
    "PlantCase",
    "PlantTable",
    "Rolloff",
    "Schedule",
    "Signal",
    "Target",
    "checked_name",
    "design_from_resolved",
    "design_from_text",
    "load_design",
    "require_period",
]


def require_period(design: Design) -> Fraction:
    """Sample period of a design, for the commands that cannot do without.

    Raises
    ------
    RealizeError
        When the design has none.
    """
    if design.period_s is None:
        raise RealizeError(
            f"{design.source}, [sampling]",
            "no sample rate",
            "rate or period under [sampling], or --rate or --period",
            'add rate = "2 kHz" under [sampling], or --rate "2 kHz" to the command',
        )
    return design.period_s
