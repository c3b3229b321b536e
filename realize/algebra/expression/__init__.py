"""Algebra in s as a person writes it: read exactly, and printed so that it reads back the same.

The grammar is the project's own: numbers (decimal or scientific), names, ``+ - * / ^``, parentheses, unary
minus, integer exponents, ``sqrt(...)`` of a constant, ``pi`` and ``s``. Nothing is ever handed to Python to
evaluate.
"""

from __future__ import annotations

from realize.algebra.expression.grammar import (
    RESERVED_NAMES,
    evaluate_constant,
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
    "decimal_text",
    "evaluate_constant",
    "evaluate_transfer",
    "exact_text",
    "format_polynomial",
    "format_transfer",
    "names_in",
    "read_exact",
]
