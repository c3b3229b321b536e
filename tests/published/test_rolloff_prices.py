"""What a roll-off pole costs, against published rules for filtered derivatives.

Sources: K. J. Astrom, T. Hagglund, PID Controllers, 1995 (filtered derivative, its gain and largest lead);
V. Romero Segovia, T. Hagglund, K. J. Astrom, Journal of Process Control 24(4):299-313, 2014 (second-order
measurement filter 1/(1 + s Tf + s^2 Tf^2/2)). Figures from memory, recomputed.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import asin, atan, degrees, pi, radians, sqrt, tan
from typing import Any

import pytest

from realize.algebra.irrational import square_root
from realize.realizability import improper_terms
from realize.rolloff import Proposal, apply_rolloff, circumstances, proposal_for, samples_per_band_period
from realize.transfer import TransferFunction

Make = Callable[..., TransferFunction]

#: Angles pass through a handful of operations in doubles.
_FEW_ROUNDINGS = 1e-12


def _whole(transfer: TransferFunction, order: int, damping: Fraction, pole_rad_s: Fraction) -> Proposal:
    """Roll-off of everything by poles at ``pole_rad_s``, judged at ``w Tf = 0.1`` with Tf = 1."""
    around = circumstances(transfer, period_s=Fraction(1, 1000), band_rad_s=Fraction(1, 10))
    return proposal_for(transfer, around, placement="whole", order=order, damping=damping, pole_rad_s=pole_rad_s)


def test_one_pole_costs_5_711_deg_and_a_pair_5_739_deg(transfer: Make, agrees: Callable[..., bool]) -> None:
    """The pair of the measurement filter has natural frequency sqrt(2)/Tf and damping ratio 1/sqrt(2)."""
    controller = transfer("1 + s")
    root = square_root(Fraction(2))
    assert agrees(_whole(controller, 1, Fraction(1), Fraction(1)).phase_lost_deg, "5.711")
    assert agrees(_whole(controller, 2, root / 2, root).phase_lost_deg, "5.739")


@pytest.mark.parametrize("n", [2, 8, 20])
def test_filtered_derivative_has_gain_1_plus_n_and_its_largest_lead_where_published(
    n: int, transfer: Make, response: Callable[..., complex]
) -> None:
    """``1 + s Td/(1 + s Td/N)``: lead asin(N/(N + 2)) at w = N/(Td sqrt(N + 1)); Td = 1."""
    lead = apply_rolloff(transfer("1 + s"), "derivative", 1, Fraction(1), Fraction(n))
    assert lead.feed_through == 1 + n

    def phase(w: float) -> float:
        value = response(lead, w / (2 * pi))
        return atan(value.imag / value.real)

    at = n / sqrt(n + 1)
    assert phase(at) == pytest.approx(asin(n / (n + 2)), abs=_FEW_ROUNDINGS)
    assert max(phase(at * factor) for factor in (0.9, 0.99, 1.01, 1.1)) < phase(at)


@pytest.mark.parametrize(("budget_deg", "printed"), [(5, "0.175"), (10, "0.353"), (15, "0.536")])
def test_window_opens_at_the_published_product_of_band_and_period(
    budget_deg: int, printed: str, transfer: Make, agrees: Callable[..., bool]
) -> None:
    """A pole at 2/T costs atan(w T/2): there is room while ``w T <= 2 tan(budget)``."""
    controller = transfer("1 + s")
    around = circumstances(
        controller, period_s=Fraction(1, 1000), phase_budget_deg=Fraction(budget_deg), method="bilinear"
    )
    samples = samples_per_band_period(1, Fraction(1), around)
    assert samples is not None
    assert 2 * pi / samples == pytest.approx(2 * tan(radians(budget_deg)), rel=_FEW_ROUNDINGS)
    assert agrees(2 * pi / samples, printed)


@pytest.mark.parametrize(
    ("tau", "corner_hz", "at_15_khz_db", "at_1_khz_db"),
    [("50e-6", "3183.099", "13.656", "0.409"), ("75e-6", "2122.066", "17.073", "0.871")],
)
def test_broadcast_emphasis_is_improper_and_has_the_known_corner_and_gains(
    tau: str,
    corner_hz: str,
    at_15_khz_db: str,
    at_1_khz_db: str,
    transfer: Make,
    agrees: Callable[..., bool],
    gain_db: Callable[[Any, float], float],
) -> None:
    """``1 + s tau``, 50 us in Europe and 75 us in the Americas: ITU-R BS.450, from memory, recomputed."""
    emphasis = transfer("1 + s*tau", tau=tau)
    assert improper_terms(emphasis) == ((1, Fraction(tau)),)
    assert agrees(-emphasis.zeros[0].value.real / (2 * pi), corner_hz)
    assert agrees(gain_db(emphasis, 15000), at_15_khz_db)
    assert agrees(gain_db(emphasis, 1000), at_1_khz_db)


@pytest.mark.parametrize("tau", ["50e-6", "75e-6"])
def test_rolled_off_emphasis_loses_what_the_pole_takes(
    tau: str, transfer: Make, gain_db: Callable[[Any, float], float]
) -> None:
    """A pole at 60 kHz on everything: 1/sqrt(1 + (15/60)^2) at 15 kHz, 0.263 dB, and atan(15/60) of phase."""
    emphasis = transfer("1 + s*tau", tau=tau)
    band, pole = Fraction(2 * pi * 15000), Fraction(2 * pi * 60000)
    around = circumstances(emphasis, period_s=Fraction(1, 10**6), band_rad_s=band)
    proposal = proposal_for(emphasis, around, placement="whole", pole_rad_s=pole)
    lost_db = gain_db(emphasis, 15000) - gain_db(proposal.transfer, 15000)
    assert 10 ** (lost_db / 10) == pytest.approx(1 + 1 / 16, rel=_FEW_ROUNDINGS)
    assert proposal.phase_lost_deg == pytest.approx(degrees(atan(1 / 4)), abs=_FEW_ROUNDINGS * 90)
