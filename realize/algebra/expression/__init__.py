"""Algebra in s as a person writes it: read exactly, and printed so that it reads back the same.

The grammar is the project's own: numbers (decimal or scientific), names, ``+ - * / ^``, parentheses, unary
minus, integer exponents, ``sqrt(...)`` of a constant, ``pi`` and ``s``; for a plant also dead time, ``exp(-T*s)``, as
a factor of the whole. Nothing is ever handed to Python to evaluate.
"""

from __future__ import annotations

from realize.algebra.expression.grammar import (
    RESERVED_NAMES,
    DelayedTransfer,
    evaluate_constant,
    evaluate_delayed_transfer,
    evaluate_transfer,
    names_in,
)
from realize.algebra.expression.printing import (
    decimal_text,
    exact_text,
    format_polynomial,
    format_transfer,
    read_exact,
)

__all__ = [
    "RESERVED_NAMES",
    "DelayedTransfer",
    "decimal_text",
    "evaluate_constant",
    "evaluate_delayed_transfer",
    "evaluate_transfer",
    "exact_text",
    "format_polynomial",
    "format_transfer",
    "names_in",
    "read_exact",
]
