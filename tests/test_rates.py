"""Rates: the lowest from which everything passes, found by the same checks as everywhere else."""

from fractions import Fraction

import numpy as np
import pytest

from realize.design import design_from_text
from realize.errors import RealizeError
from realize.rates import answer, rates
from realize.report.range_of_rates import rates_document, rates_text
from realize.workflow import compare
from tests.schemas.validation import validated

LAG = '[design]\nname = "lag"\ntransfer = "1/(0.01*s + 1)"\n[sampling]\nband = "16 Hz"\n'


@pytest.fixture(scope="module")
def found():  # type: ignore[no-untyped-def]
    return rates(design_from_text(LAG, "test.toml"), points=8)


def test_each_answer_is_what_the_checks_say_there_and_one_rate_below(found) -> None:  # type: ignore[no-untyped-def]
    for method in found.methods:
        acceptable = [outcome.acceptable for outcome in method.outcomes]
        if method.lowest_hz is not None:
            first = found.rates_hz.index(method.lowest_hz)
            assert all(acceptable[first:])
            assert first == 0 or not acceptable[first - 1]
        else:
            assert not acceptable[-1]


def test_the_outcomes_are_those_of_a_comparison_at_that_rate(found) -> None:  # type: ignore[no-untyped-def]
    rate = found.rates_hz[3]
    one = compare(design_from_text(LAG + f'period = "1/{rate} s"\n', "test.toml"))
    assert {m.method: m.acceptable for m in one.methods} == {m.method: m.outcomes[3].acceptable for m in found.methods}


def test_where_the_lowest_rate_tried_passes_nothing_is_claimed_below_it() -> None:
    good = rates(design_from_text(LAG + '[method]\nname = "bilinear"\n', "t"), low_hz=Fraction(500), points=2)
    bilinear = next(m for m in good.methods if m.method == "bilinear")
    assert (bilinear.lowest_hz, bilinear.binding) == (500, None)
    assert "bilinear from 500 Hz or lower; " in answer(good)
    assert "500 Hz or lower  nothing: it passes over the whole range" in rates_text(good)


def test_the_own_rate_is_at_least_as_many_times_the_least_where_the_least_is_the_lowest_tried() -> None:
    text = LAG + 'rate = "1 kHz"\n[method]\nname = "bilinear"\n'
    good = rates(design_from_text(text, "test.toml"), low_hz=Fraction(500), points=2)
    assert "the design's own 1 kHz is at least 2 times the least for bilinear" in rates_text(good)


@pytest.mark.parametrize(("band", "said"), [("", True), ('[sampling]\nband = "16 Hz"\n', False)])
def test_an_assumed_band_is_said_to_go_with_the_rate_and_a_given_one_is_not(band: str, said: bool) -> None:
    text = '[design]\ntransfer = "1/(0.01*s + 1)"\n' + band
    screen = " ".join(rates_text(rates(design_from_text(text, "test.toml"), points=2)).split())
    assert ("each rate is judged in its own band, at most 1/30 of it, so that compare" in screen) is said


def test_rules_of_thumb_are_in_the_prefix_that_suits_them_the_unit_once_where_it_is_the_same() -> None:
    # 20 and 40 times 16 Hz, 60 Hz and 30 Hz.
    spans = {"16": "320 to 640 Hz", "60": "1.2 to 2.4 kHz", "30": "600 Hz to 1.2 kHz"}
    for band, span in spans.items():
        (rule,) = rates(design_from_text(LAG.replace("16 Hz", f"{band} Hz"), "test.toml"), points=2).rules
        assert f": {span}, the band edge" in rule


def test_the_default_range_is_4_to_200_times_the_band(found) -> None:  # type: ignore[no-untyped-def]
    assert found.rates_hz[0] == 64
    assert found.rates_hz[-1] == 3200


def test_a_named_method_alone_is_looked_at_with_the_outcomes_it_has_among_all(found) -> None:  # type: ignore[no-untyped-def]
    alone = rates(design_from_text(LAG, "test.toml"), points=8, only="bilinear")
    (method,) = alone.methods
    assert method == next(m for m in found.methods if m.method == "bilinear")
    assert answer(alone).startswith("bilinear from ")
    assert "step-invariant" not in rates_text(alone)


def test_a_named_method_of_an_improper_design_gets_the_roll_off_that_a_comparison_assumes() -> None:
    text = LAG.replace("1/(0.01*s + 1)", "1 + 0.01*s")
    alone = rates(design_from_text(text, "test.toml"), points=3, only="bilinear")
    (method,) = alone.methods
    for rate, outcome in zip(alone.rates_hz, method.outcomes, strict=True):
        one = compare(design_from_text(text + f'period = "1/{rate} s"\n', "test.toml"))
        assert outcome.acceptable == next(m.acceptable for m in one.methods if m.method == "bilinear")


def test_a_method_that_the_design_names_does_not_hide_the_others() -> None:
    named = rates(design_from_text(LAG + '[method]\nname = "bilinear"\n', "test.toml"), points=2)
    assert len(named.methods) > 1


def test_a_named_method_that_is_never_acceptable_is_answered_by_name_with_the_reason_once_in_full() -> None:
    alone = rates(design_from_text(LAG, "test.toml"), points=2, only="plant-input-mapped")
    text = rates_text(alone)
    assert text.startswith("no: lag: plant-input-mapped is not acceptable at 3.2 kHz, the highest rate: refused: ")
    assert "refused at the highest rate: see below" in text
    assert "Refused\n  - plant-input-mapped: " in text
    assert max(len(line) for line in text.splitlines()) <= 100


def test_screen_and_document_agree(found) -> None:  # type: ignore[no-untyped-def]
    document, text = validated(rates_document(found)), rates_text(found)
    assert document["answer"] == answer(found)
    assert text.startswith(("yes: ", "no: "))
    assert max(len(line) for line in text.splitlines()) <= 100
    assert [m["method"] for m in document["methods"]] == [m.method for m in found.methods]


@pytest.mark.parametrize(
    ("low", "high", "points", "named"),
    [(Fraction(100), Fraction(10), 8, "--from"), (None, None, 1, "--points"), (None, None, 5000, "--points")],
)
def test_an_empty_range_is_refused(low: Fraction | None, high: Fraction | None, points: int, named: str) -> None:
    with pytest.raises(RealizeError, match=named):
        rates(design_from_text(LAG, "test.toml"), low_hz=low, high_hz=high, points=points)


def test_signals_that_no_rate_can_mend_are_refused_once_and_not_by_every_method() -> None:
    design = design_from_text(
        '[design]\ntransfer = "1/(s + 10)"\n[target]\narithmetic = "int16"\n[signals.input]\nrange = [-1, 1]\n',
        "one.toml",
    )
    with pytest.raises(RealizeError) as caught:
        rates(design, points=2)
    assert "per_count" in caught.value.found


def test_a_loop_that_lacks_margin_before_it_is_sampled_is_named() -> None:
    """``400 (s + 1)/(s^2 (s + 10))``: its margin found by numpy from the polynomial of ``|L|^2 = 1``."""
    squares = np.polysub(np.polymul([1, 0, 0, 0], [1, 0, 100, 0]), 160_000 * np.array([1, 0, 1]))
    crossover = max(root.real for root in np.roots(squares) if abs(root.imag) < 1e-9 * abs(root))
    s = 1j * crossover
    margin_deg = 180 + np.degrees(np.angle(s + 1) - np.angle(s + 10)) - 180
    text = (
        '[design]\nname = "thin"\ntransfer = "40*(s + 1)/s"\n[sampling]\nrate = "1 kHz"\n'
        '[plant]\ntransfer = "10/(s*(s + 10))"\n'
    )
    said = answer(rates(design_from_text(text, "thin.toml"), points=2))
    assert f"has a phase margin of {margin_deg:.3g} deg, below the least of 30 deg" in said
    lower = design_from_text(
        text + '[tolerance]\nloop_phase_margin_least = "20 deg"\nloop_sensitivity_most = 1.2\n', "thin.toml"
    )
    assert "which no rate mends" not in answer(rates(lower, points=2))
