"""The phase ledger adds up, and each of its items has its closed form."""

from __future__ import annotations

from fractions import Fraction
from math import atan, degrees, pi

import numpy as np
import pytest

from realize.algebra.rounding import FLOAT32
from realize.arithmetic.realization import realization, stored_pulse
from realize.loop import Ledger, Plant, SampledLoop, held_plant, phase_ledger
from realize.loop.ledger import ITEMS
from realize.methods import discretize
from realize.transfer import TransferFunction
from tests.loop.independent import sampled
from tests.loop.loops import LOOPS, Case, ratio, transfer

PID = transfer("0.09 4.2 18", "1 0")
CAUSAL = TransferFunction.from_polynomials([Fraction(c) for c in ("0.09", "4.2", "18")], [Fraction("0.005"), 1, 0])
PLANT = Plant(transfer("2", "0.05 1 0"), Fraction("0.004"), transfer("1", "0.002 1"))
PERIOD = Fraction(1, 500)


def _ledger(w: float) -> Ledger:
    exact = discretize(CAUSAL, PERIOD, "bilinear").pulse
    stored = stored_pulse(realization(exact, FLOAT32))
    return phase_ledger(w, (PID, CAUSAL, exact, stored), held_plant(PLANT, PERIOD, PERIOD))


@pytest.mark.parametrize("w", [3.0, 20.0, 150.0, 1500.0])
def test_items_have_their_closed_forms(w: float) -> None:
    item = dict(_ledger(w).items)
    assert tuple(item) == ITEMS
    assert item["hold"] == pytest.approx(degrees(-w / 1000), rel=1e-12)
    assert item["compute delay"] == pytest.approx(degrees(-w / 500), rel=1e-12)
    assert item["dead time"] == pytest.approx(degrees(-w * 0.004), rel=1e-12)
    assert item["sensor"] == pytest.approx(-degrees(atan(0.002 * w)), rel=1e-12)
    assert item["roll-off"] == pytest.approx(-degrees(atan(0.005 * w)), rel=1e-12)


def test_the_method_costs_what_warping_says() -> None:
    """Bilinear answers at w as the controller at ``(2/T) tan(wT/2)``."""
    w = 400.0
    warped = 1000 * np.tan(w / 1000)
    response = ratio(CAUSAL)
    expected = np.degrees(np.angle(response.at(1j * warped) / response.at(1j * w)))
    assert dict(_ledger(w).items)["method"] == pytest.approx(expected, rel=1e-9)


@pytest.mark.parametrize("case", LOOPS, ids=[case.name for case in LOOPS])
def test_items_add_up_to_the_angle_of_the_sampled_loop(case: Case) -> None:
    """The total from a state-space model on the second road, up to whole turns."""
    pulse = discretize(case.controller, case.period_s, "bilinear").pulse
    held = held_plant(case.plant, case.period_s, case.compute_delay_s)
    w = SampledLoop(pulse, held).margins.crossover_rad_s
    assert w is not None
    ledger = phase_ledger(w, (case.controller, case.controller, pulse, pulse), held)
    z = np.exp([1j * w * float(case.period_s)])
    model = sampled(case.seen_ratio, float(case.period_s), float(held.delay_s))
    loop = complex(model.at(z)[0] * ratio(pulse).at(z)[0])
    bare = complex(ratio(case.controller).at(1j * w) * ratio(case.plant.transfer).at(1j * w))
    expected = np.degrees(np.angle(loop / bare))
    listed = sum(value for _, value in ledger.items)
    assert abs(listed - ledger.total_deg) < 1e-9
    assert (listed - expected + 180) % 360 == pytest.approx(180, abs=1e-6)


def test_number_format_and_aliases_cost_next_to_nothing_well_below_the_rate() -> None:
    item = dict(_ledger(2 * pi).items)
    assert abs(item["number format"]) < 1e-4
    assert abs(item["sampling of the plant"]) < 1e-3
