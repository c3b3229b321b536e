"""What the header says about the loop that the controller was checked in."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import Any

from realize.firmware.c_text import number_text
from realize.quantity import format_engineering

#: Figures of a case: key, name, unit.
FIGURES = (
    ("phase_margin_deg", "phase margin", " deg"),
    ("gain_margin_db", "gain margin", " dB"),
    ("gain_reduction_margin_db", "margin to a lower gain", " dB"),
    ("maximum_sensitivity", "maximum sensitivity", ""),
    ("step_overshoot_percent", "step overshoot", " %"),
)

MEASURED = "the plant is a measured response: whether the loop is stable was not judged"

_STABILITY = {True: "stable", False: "NOT STABLE", None: "stability not judged"}


def loop_sentence(loop: Mapping[str, Any]) -> str:
    """Which delay the loop was checked with; without it no figure below holds."""
    delay_s, samples = loop["compute_delay_s"], loop["compute_delay_samples"]
    return (
        f"checked with the command reaching the actuator {_samples_text(samples)} "
        f"({format_engineering(delay_s, 's')}) after the input was sampled; margins hold only then."
    )


def loop_entries(loop: Mapping[str, Any]) -> list[str]:
    """Figures of every case with the stored numbers, the jitter margin, what was not judged, and notes."""
    return [
        *(_case(entry["case"], entry["discrete"]) for entry in loop["cases"]),
        *_jitter(loop["jitter_margin_s"], len(loop["cases"]) > 1),
        *([MEASURED] if loop["measured"] else []),
        *loop["notes"],
    ]


def _samples_text(samples: Fraction) -> str:
    return f"{number_text(samples)} sample{'' if samples == 1 else 's'}"


def _case(case: str, figures: Mapping[str, Any]) -> str:
    found = [(name, figures[key], unit) for key, name, unit in FIGURES]
    shown = [f"{name} {value:.5g}{unit}" for name, value, unit in found if value is not None]
    return (f"case {case}: " if case else "") + ", ".join([_STABILITY[figures["stable"]], *shown])


def _jitter(margin_s: float | None, several: bool) -> list[str]:
    if margin_s is None:
        return []
    of = " (nominal case)" if several else ""
    margin = format_engineering(margin_s, "s")
    return [
        f"jitter margin {margin}{of}: the delay may grow by up to so much, differently in each sample (sufficient, not "
        "necessary)"
    ]
