"""What a roll-off is judged by: the defaults a design may rely on, and the budget that is none."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.errors import RealizeError
from realize.rolloff import circumstances
from tests.rolloff.designs import BAND_RAD_S, PID, SIGNALS

F = Fraction


def test_what_a_design_leaves_open_takes_its_default() -> None:
    around = circumstances(PID, band_rad_s=BAND_RAD_S)
    assert (around.band_rad_s, around.phase_budget_deg, around.converter_step_tolerance_percent) == (F(126), F(6), F(5))
    assert (around.period_s, around.input_per_count, around.output_span, around.method) == (None, None, None, "auto")


def test_a_count_has_a_size_in_percent_only_with_both_ends_known() -> None:
    """0.0005 of a span of 2 is 0.025 %."""
    around = circumstances(PID, **SIGNALS)
    assert around.count_percent == F("0.025")
    assert around._replace(input_per_count=None).count_percent is None
    assert around._replace(output_span=None).count_percent is None


@pytest.mark.parametrize("budget", [F(0), F(-6), F(90)])
def test_a_phase_budget_outside_a_quarter_turn_is_refused(budget: Fraction) -> None:
    with pytest.raises(RealizeError, match=r"\[rolloff\] phase_budget: -?\d+ deg") as refusal:
        circumstances(PID, phase_budget_deg=budget)
    assert refusal.value.allowed == "more than 0 deg and less than 90 deg"
