"""Exact numbers: expressions, polynomials, enclosures, exponentials, roots, rounding."""
