"""The jitter margin against its closed form and a slow alias sum."""

from __future__ import annotations

from fractions import Fraction
from math import pi

import numpy as np
import pytest

from realize.loop import Plant, SampledLoop, held_plant, jitter_margin
from realize.loop.jitter import _alias_size
from realize.methods import discretize
from realize.transfer import TransferFunction
from tests.loop.loops import ratio, transfer


def _loop(gain: str, plant: TransferFunction, period: str, delay: str = "0") -> SampledLoop:
    period_s = Fraction(period)
    controller = discretize(transfer(gain, "1"), period_s, "bilinear").pulse
    return SampledLoop(controller, held_plant(Plant(plant), period_s, Fraction(delay)))


@pytest.mark.parametrize(
    ("gain", "period", "expected_samples"),
    [
        pytest.param("0.5", "1", 1 + 1.25 / 3, id="K T = 0.5: 1.41667 samples"),
        pytest.param("5", "0.1", 1 + 1.25 / 3, id="K T = 0.5 at another rate"),
        pytest.param("0.25", "1", 3 + (3.5**2 - 9) / 7, id="K T = 0.25"),
        pytest.param("1.5", "1", 1 / 36, id="K T = 1.5: less than one sample"),
    ],
)
def test_integrator_has_its_closed_form(gain: str, period: str, expected_samples: float) -> None:
    """Kao & Lincoln, Automatica 40(8), 2004, hybrid form: ``N = (2 - K T)/(2 K T)``, ``N^2 = n^2 + 2 n g + g``.

    Derived: the aliases of ``1/s`` sum to ``T^2/(4 sin^2(wT/2))``, so ``|1 + L|/|L|`` at Nyquist decides.
    """
    found = jitter_margin(_loop(gain, transfer("1", "1 0"), period))
    assert found is not None
    assert found.jitter_s == pytest.approx(expected_samples * float(Fraction(period)), rel=1e-6)
    assert found.w_rad_s == pytest.approx(pi / float(Fraction(period)), rel=1e-12)


@pytest.mark.parametrize(
    "plant",
    [transfer("1", "1 0"), transfer("3 1", "1 2 5"), transfer("400", "1 0.4 400"), transfer("1", "0.01 1 0")],
    ids=["integrator", "lag", "mode at 20 rad/s", "slow and fast"],
)
def test_sum_of_aliases_agrees_with_summing_them_one_by_one(plant: TransferFunction) -> None:
    """200 000 terms on each side; what is left of ``1/k^2`` beyond is its integral, ``2/k``."""
    period, k = 0.1, 200_000
    turn = 2 * pi / period
    w = np.array([0.3, 5.0, 31.0])
    aliases = w[:, None] + turn * np.arange(-k, k + 1)
    near = np.sum(np.abs(ratio(plant).at(1j * aliases)) ** 2, axis=1)
    lead = float(plant.gain) ** 2 * 2 / (turn**2 * k) if plant.relative_degree == 1 else 0.0
    assert _alias_size(plant, w, turn) == pytest.approx(np.sqrt(near + lead), rel=1e-6)


def test_a_constant_delay_leaves_less_room() -> None:
    plant = transfer("1", "0.2 1 0")
    none, one = (jitter_margin(_loop("1", plant, "0.1", delay)) for delay in ("0", "0.1"))
    assert none is not None
    assert one is not None
    assert one.jitter_s < none.jitter_s


def test_there_is_no_margin_without_stability_or_with_an_answer_at_once() -> None:
    assert jitter_margin(_loop("30", transfer("1", "1 0"), "0.1")) is None
    assert jitter_margin(_loop("0.5", transfer("1 3", "1 1"), "0.1")) is None
