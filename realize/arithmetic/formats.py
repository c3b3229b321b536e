"""The number formats a design may ask for."""

from __future__ import annotations

from realize.algebra.rounding import FLOAT32, FLOAT64, FloatFormat

FORMATS: dict[str, FloatFormat] = {"float32": FLOAT32, "float64": FLOAT64}

__all__ = ["FLOAT32", "FLOAT64", "FORMATS", "FloatFormat"]
