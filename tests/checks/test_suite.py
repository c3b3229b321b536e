from __future__ import annotations

import json
from fractions import Fraction
from math import isfinite
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.arithmetic.formats import FLOAT32
from realize.arithmetic.realization import realization, stored_pulse
from realize.band import band_edge
from realize.checks import Check, ContinuousReference, Signals, run_checks
from realize.errors import Refused
from realize.methods import METHODS, discretize
from realize.transfer import TransferFunction
from tests.checks.designs import DEFAULT, answers, converted, reference
from tests.strategies import Factored, sampled_designs

_DESIGNS = json.loads(
    (Path(__file__).parents[2] / "fixtures" / "reference_coefficients.json").read_text(encoding="utf-8")
)

#: In the order of the tables.
NAMES = (
    "stability",
    "pole shift",
    "zero shift",
    "magnitude in band",
    "phase in band",
    "low-frequency gain",
    "step deviation",
    "step overshoot",
    "converter step",
    "saturation recovery",
)


def outcome(design: dict[str, Any], method: str) -> set[str]:
    """Names of the checks that are out; growth of the design itself is no matter of the method."""
    g = TransferFunction.from_polynomials(*([Fraction(c) for c in design[p]] for p in ("numerator", "denominator")))
    period_s = Fraction(design["period_s"])
    band_rad_s, _ = band_edge(g, period_s, None)
    match_hz = design["match_frequency_hz"]
    exact_at = Fraction(match_hz) * Fraction(710, 113) if match_hz else band_rad_s
    known = "unstable" if g.zeros_minus_poles_at_origin < -1 else None
    design_reference = ContinuousReference(g, period_s, band_rad_s)
    try:
        made = discretize(g, period_s, method, exact_at)
    except Refused:
        return {"refused"}
    known = None if made.has_exact_denominator else design_reference.stability
    found = run_checks(design_reference, made.pulse, "exact", DEFAULT, Signals(), known_stability=known)
    return {c.check for c in found if c.verdict == "out" and c.reference != c.obtained}


@pytest.mark.parametrize(
    ("method", "expected"),
    [
        ("ramp-invariant", 20),
        ("pole-zero-mapped", 20),
        ("bilinear", 18),
        ("bilinear-prewarped", 19),
        ("step-invariant", 9),
        ("backward-difference", 5),
        ("forward-difference", 5),
    ],
)
def test_of_twenty_designs_as_many_pass_as_the_defaults_were_set_for(method: str, expected: int) -> None:
    assert len(_DESIGNS) == 20
    assert sum(not outcome(design, method) for design in _DESIGNS) == expected


def test_a_bilinear_that_moves_a_resonance_from_159_to_115_hz_is_caught() -> None:
    (design,) = (d for d in _DESIGNS if d["name"] == "near_nyquist")
    assert {"pole shift", "step deviation"} <= outcome(design, "bilinear")


def test_every_check_answers_in_the_stated_order() -> None:
    design = reference("1/(s + 1)", "0.1")
    found = run_checks(design, converted("1/(s + 1)", "0.1", "bilinear"), "stored", DEFAULT, Signals())
    assert tuple(c.check for c in found) == NAMES
    assert {c.of for c in found} == {"stored"}


def finite(check: Check) -> bool:
    figures = [check.reference, check.obtained, check.difference, check.tolerance]
    numbers = [complex(f) for f in figures if f is not None and not isinstance(f, str)]
    return all(isfinite(n.real) and isfinite(n.imag) for n in numbers)


@settings(max_examples=40)
@given(sampled_designs(most_order=6), st.sampled_from(sorted(METHODS)))
def test_no_design_leaves_a_figure_that_json_cannot_hold(case: tuple[Factored, Fraction], method: str) -> None:
    factored, period_s = case
    g = factored.transfer()
    band_rad_s, _ = band_edge(g, period_s, None)
    try:
        design = ContinuousReference(g, period_s, band_rad_s)
        made = discretize(g, period_s, method, band_rad_s)
        stored = stored_pulse(realization(made.pulse, FLOAT32))
    except Refused:
        return
    known = None if made.has_exact_denominator else design.stability
    for discrete, class_known in ((made.pulse, known), (stored, None)):
        for check in answers(design, discrete, known_stability=class_known).values():
            assert finite(check)
            assert check.difference is None or check.difference >= 0
            assert check.verdict in ("within", "out", "undefined")
            assert check.reason
            assert (check.verdict == "undefined") == (check.obtained is None and check.verdict != "out")


@pytest.mark.parametrize("gain", ["1e-260", "1e260"])
def test_a_gain_beyond_doubles_is_refused(gain: str) -> None:
    with pytest.raises(Refused, match="its gain at low frequency is beyond the range of a double"):
        reference(f"{gain}/(s + 1)", "0.1")


def test_what_depends_on_the_design_alone_is_computed_once() -> None:
    design = reference("9/(s^2 + s + 9)", "0.05")
    for method in ("bilinear", "step-invariant"):
        answers(design, converted("9/(s^2 + s + 9)", "0.05", method))
    assert design.step is design.step
    assert design.frequency is design.frequency
    assert design.step.bounds is design.step.bounds
    assert design.step.peak is design.step.peak


@pytest.mark.parametrize("text", ["3", "-1/2", "1/s", "1/(s + 1)", "1/(s^2 + 1)", "1/(s + 1)^16", "1/(s^2 + 1)^3"])
def test_static_gains_high_orders_and_undamped_pairs_are_followed(text: str) -> None:
    design = reference(text, "0.1")
    found = answers(design, converted(text, "0.1", "step-invariant"), known_stability=design.stability)
    kept = ("pole shift", "zero shift", "low-frequency gain", "step deviation", "step overshoot")
    assert {found[name].verdict for name in kept} <= {"within", "undefined"}
    assert found["step deviation"].difference == pytest.approx(0, abs=1e-9)
