"""What opens an empty window: each way out against closed forms, and tried."""

from __future__ import annotations

import re
from fractions import Fraction
from typing import Any

from hypothesis import given
from hypothesis import strategies as st

from realize.rolloff import circumstances, proposal_for
from tests.rolloff.designs import BAND_RAD_S, PID, placements, ways_out

F = Fraction


def numbers(text: str) -> list[Fraction]:
    return [F(number) for number in re.findall(r"(?:at least|resolution of) ([0-9.]+)", text)]


def test_an_empty_window_at_too_low_a_rate_names_the_rate_and_the_phase() -> None:
    """The whole of PID needs 1200 rad/s = 2/T, so 600 Hz; 2/T = 1000 rad/s loses atan(0.126) = 7.18 deg."""
    around = circumstances(PID, period_s=F(1, 500), band_rad_s=BAND_RAD_S)
    price = proposal_for(PID, around, placement="whole")
    assert ways_out(price) == [
        "a rate of at least 600 Hz, the band staying at 20.054 Hz",
        "a phase budget of at least 7.19 deg",
    ]


def test_an_empty_window_at_too_coarse_a_count_names_resolution_and_phase() -> None:
    """At 1200 rad/s the gain is 108: 5 % of a span of 2 takes 0.1/108 = 0.000925 per count."""
    around = circumstances(PID, band_rad_s=BAND_RAD_S, input_per_count=F("0.001"), output_span=F(2))
    price = proposal_for(PID, around, placement="whole")
    assert ways_out(price) == [
        "an input resolution of 0.000925 per count or finer",
        "a phase budget of at least 6.47 deg",  # atan(126 * 0.09/100)
    ]


def test_a_band_above_the_fastest_pole_leaves_no_phase_budget_as_a_way_out() -> None:
    around = circumstances(PID, period_s=F(1, 40), band_rad_s=BAND_RAD_S)
    (way,) = ways_out(proposal_for(PID, around, placement="whole"))
    assert way.startswith("a rate of at least 600 Hz")


@given(st.integers(1, 2000), st.integers(1, 500), st.integers(1, 400), placements, st.integers(1, 3))
def test_every_way_out_opens_the_window_and_a_percent_less_does_not(
    rate: int, band: int, count: int, placement: str, order: int
) -> None:
    known: dict[str, Any] = {"band_rad_s": F(band), "output_span": F(2)}
    here = circumstances(PID, period_s=F(1, rate), input_per_count=F(count, 10**4), **known)
    price = proposal_for(PID, here, placement=placement, order=order)
    assert bool(ways_out(price)) is (price.window_rad_s is None)
    for way in ways_out(price):
        needed = dict(zip(re.findall(r"rate|resolution|phase", way), numbers(way), strict=True))

        def opened(slack: Fraction, needed: dict[str, Fraction] = needed) -> bool:
            around = here._replace(
                period_s=1 / (needed["rate"] * (1 - slack)) if "rate" in needed else here.period_s,
                input_per_count=needed.get("resolution", here.input_per_count),
                phase_budget_deg=needed.get("phase", here.phase_budget_deg) * (1 - slack),
            )
            return proposal_for(PID, around, placement=placement, order=order).window_rad_s is not None

        assert opened(F(0))
        assert len(needed) > 1 or "resolution" in needed or not opened(F(3, 100))
