"""The corpus in ``fixtures/reference_coefficients.json`` was computed apart from this project (see ``SOURCES.md``)."""

from __future__ import annotations

import json
from fractions import Fraction
from math import copysign
from pathlib import Path
from typing import Any

import pytest

from realize.algebra.irrational import pi
from realize.algebra.rounding import FLOAT32, FLOAT64, FloatFormat
from realize.methods import METHODS, discretize
from realize.transfer import TransferFunction

CORPUS: list[dict[str, Any]] = json.loads(
    (Path(__file__).parents[2] / "fixtures" / "reference_coefficients.json").read_text()
)

CASES = [(design, method) for design in CORPUS for method in design["methods"]]


def test_the_corpus_has_twenty_designs_and_every_method() -> None:
    assert len(CORPUS) == 20
    assert {method for _, method in CASES} == set(METHODS)
    for design in CORPUS:
        assert set(METHODS) - set(design["methods"]) <= {"bilinear-prewarped"}


@pytest.mark.parametrize("target", [FLOAT64, FLOAT32], ids=["float64", "float32"])
@pytest.mark.parametrize(("design", "method"), CASES, ids=[f"{d['name']} {m}" for d, m in CASES])
def test_every_coefficient_is_the_correctly_rounded_one(
    design: dict[str, Any], method: str, target: FloatFormat
) -> None:
    transfer = TransferFunction.from_polynomials(
        *([Fraction(text) for text in design[key]] for key in ("numerator", "denominator"))
    )
    frequency_hz = design["match_frequency_hz"]
    exact_at = 2 * pi() * Fraction(frequency_hz) if method == "bilinear-prewarped" else None
    result = discretize(transfer, Fraction(design["period_s"]), method, exact_at)
    for obtained, texts in zip(
        result.rounded(target),
        (design["methods"][method][key] for key in ("numerator", "denominator")),
        strict=True,
    ):
        assert obtained == tuple(target.round(Fraction(text)) for text in texts)
        # Structural zeros are zeros, and without a sign.
        assert all(copysign(1, c) == 1 for c, text in zip(obtained, texts, strict=True) if text == "0")
