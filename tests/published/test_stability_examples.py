"""Worked examples of the Jury test.

Source: texts of the National Programme on Technology Enhanced Learning, course 108103008, module 3
(polynomials and verdicts read there, partly elided; rebuilt from their stated roots); the last from memory.
"""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.algebra import polynomial as poly
from realize.checks.schur import stability

_EXAMPLES = {
    "stable": (("1", "-1.2", "0.07", "0.3", "-0.08"), ("0.8", "0.5", "0.4", "-0.5"), "stable"),
    "one root outside": (("1", "-1.3", "-0.08", "0.24"), ("1.2", "0.5", "-0.4"), "unstable"),
    "root at 1": (("1", "-1.1", "-0.1", "0.2"), ("1", "0.5", "-0.4"), "marginal"),
}


def _exact(texts: tuple[str, ...]) -> poly.Rationals:
    return tuple(Fraction(text) for text in texts)


@pytest.mark.parametrize("name", _EXAMPLES)
def test_verdict_is_the_published_one(name: str) -> None:
    coefficients, _, verdict = _EXAMPLES[name]
    assert stability(_exact(coefficients)) == verdict


@pytest.mark.parametrize("name", _EXAMPLES)
def test_published_polynomial_has_its_stated_roots(name: str) -> None:
    """So that the verdicts above are no misprints."""
    coefficients, roots, _ = _EXAMPLES[name]
    assert [poly.evaluate(_exact(coefficients), root) for root in _exact(roots)] == [0] * len(roots)


def test_pair_on_the_circle_is_marginal() -> None:
    """``z^3 + 0.25 z^2 + z + 0.25``: roots +-j and -0.25."""
    example = _exact(("1", "0.25", "1", "0.25"))
    assert example == poly.multiply(_exact(("1", "0", "1")), _exact(("1", "0.25")))
    assert stability(example) == "marginal"


def test_pair_on_the_circle_twice_is_unstable() -> None:
    """By hand: the response to an impulse grows like k."""
    assert stability(poly.power(_exact(("1", "0", "1")), 2)) == "unstable"


@pytest.mark.parametrize(
    ("a1", "a2", "verdict"),
    [
        ("-1.4", "0.9", "stable"),
        ("-1.9", "0.9", "marginal"),
        ("-1.901", "0.9", "unstable"),
        ("0", "1", "marginal"),
        ("0", "1.0000001", "unstable"),
        ("1.9", "0.9", "marginal"),
    ],
)
def test_second_order_verdicts_follow_the_triangle(a1: str, a2: str, verdict: str) -> None:
    """``|a2| < 1`` and ``|a1| < 1 + a2``, the triangle of every textbook; equality is the circle."""
    assert stability(_exact(("1", a1, a2))) == verdict
