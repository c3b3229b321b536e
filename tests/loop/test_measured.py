"""A plant known by a measured frequency response: margins within the band, and clear refusals."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction

import numpy as np
import pytest

from realize.errors import RealizeError
from realize.loop import (
    ContinuousLoop,
    MeasuredLoop,
    MeasuredPlant,
    Plant,
    SampledLoop,
    held_plant,
    read_response,
)
from realize.methods import discretize
from tests.loop.loops import ratio, transfer

PLANT = transfer("2", "0.01 0.21 1 0")
CONTROLLER = transfer("1.2 1", "0.02 1")


def _csv(low_hz: float = 0.01, high_hz: float = 100.0, count: int = 600) -> str:
    f = np.geomspace(low_hz, high_hz, count)
    value = ratio(PLANT).at(2j * np.pi * f)
    rows = zip(f, 20 * np.log10(np.abs(value)), np.degrees(np.angle(value)), strict=True)
    return "frequency_hz,magnitude_db,phase_deg\n" + "\n".join(",".join(f"{x:.17g}" for x in row) for row in rows)


def test_margins_of_a_fine_measurement_are_those_of_the_plant() -> None:
    """Straight lines over 150 points a decade: 1e-4 of the figures."""
    found = MeasuredLoop(CONTROLLER, MeasuredPlant(read_response(_csv()), 0.02)).margins
    expected = ContinuousLoop(CONTROLLER, Plant(PLANT, Fraction("0.02"))).margins
    assert found.crossover_rad_s == pytest.approx(expected.crossover_rad_s, rel=1e-4)
    assert found.phase_margin_deg == pytest.approx(expected.phase_margin_deg, rel=1e-4)
    assert found.gain_margin == pytest.approx(expected.gain_margin, rel=1e-3)
    assert found.delay_margin_s == pytest.approx(expected.delay_margin_s, rel=1e-4)
    assert found.maximum_sensitivity == pytest.approx(expected.maximum_sensitivity, rel=1e-3)


def test_a_sampled_loop_differs_by_aliases_only() -> None:
    period = Fraction(1, 50)
    pulse = discretize(CONTROLLER, period, "bilinear").pulse
    loop = MeasuredLoop(pulse, MeasuredPlant(read_response(_csv())), hold_s=0.02, compute_delay_s=0.02)
    expected = SampledLoop(pulse, held_plant(Plant(PLANT), period, period)).margins
    assert loop.margins.phase_margin_deg == pytest.approx(expected.phase_margin_deg, abs=0.05)
    assert any("aliases" in note for note in loop.notes)


def test_columns_come_in_any_order_and_phase_may_be_wrapped() -> None:
    text = _csv(count=100).splitlines()
    turned = [",".join(np.array(line.split(","))[[2, 0, 1]]) for line in text]
    one, other = (MeasuredLoop(CONTROLLER, MeasuredPlant(read_response("\n".join(t)))) for t in (text, turned))
    assert one.margins == other.margins
    assert one.margins.phase_margin_deg is not None


def test_answers_stop_at_the_ends_of_the_band() -> None:
    """Measured below the crossover only: no crossover, and the note says where it was looked for."""
    loop = MeasuredLoop(CONTROLLER, MeasuredPlant(read_response(_csv(high_hz=0.1))))
    assert loop.margins.crossovers_rad_s == ()
    assert loop.margins.phase_margin_deg is None
    assert loop.margins.gain_margin is None
    assert (
        "no gain crossover within the measured band, 0.01 Hz (0.062832 rad/s) to 0.1 Hz (0.62832 rad/s)" in loop.notes
    )


def test_a_band_above_half_the_rate_is_refused() -> None:
    pulse = discretize(CONTROLLER, Fraction(10), "backward-difference").pulse
    with pytest.raises(RealizeError) as refusal:
        MeasuredLoop(pulse, MeasuredPlant(read_response(_csv(low_hz=1.0))), hold_s=10.0)
    assert "above half the sample rate" in str(refusal.value)


_HEAD = "frequency_hz,magnitude_db,phase_deg\n"


@pytest.mark.parametrize(
    ("text", "message"),
    [
        pytest.param("", "the file is empty", id="empty"),
        pytest.param(
            "frequency_hz,magnitude_db\n1,2\n",
            ', line 1: the column phase_deg is missing in "frequency_hz,magnitude_db"',
            id="missing column",
        ),
        pytest.param(
            _HEAD.replace(",", ";") + "1;0;0\n", "name the columns in the first line, with commas", id="semicolons"
        ),
        pytest.param(_HEAD.replace("\n", ",phase_deg\n"), "the column phase_deg is there more than once", id="twice"),
        pytest.param(_HEAD + "1,0,0\n2,-6,-10\n", "it has 2 points", id="too few"),
        pytest.param(_HEAD + "1,0,0\n2,-6\n3,0,0\n", ', line 3: only 2 columns in "2,-6"', id="short line"),
        pytest.param(
            _HEAD + "\n1,0,0\n\n2;-6;3\n", ', line 5: only 1 column in "2;-6;3"', id="line counted with blanks"
        ),
        pytest.param(_HEAD + "1;0;0\n", "try: separate the numbers with commas", id="commas wanted"),
        pytest.param(_HEAD + "x" * 900 + "\n", f'only 1 column in "{"x" * 57}..."\n', id="long line, quoted in part"),
        pytest.param(_HEAD + "1,5,0,2,0,1\n", ', line 2: 6 columns in "1,5,0,2,0,1"', id="decimal commas"),
        pytest.param(_HEAD + "1,0,0\n2,loud,0\n3,0,0\n", ', line 3: magnitude_db is "loud"', id="no number"),
        pytest.param(_HEAD + "1,0,0\n2,nan,0\n3,0,0\n", ', line 3: magnitude_db is "nan"', id="not finite"),
        pytest.param(_HEAD + "0,0,0\n2,0,0\n3,0,0\n", ", line 2: the first frequency is 0 Hz", id="at zero"),
        pytest.param(_HEAD + "1,0,0\n3,0,0\n2,0,0\n", ", line 4: 2 Hz after 3 Hz", id="not ascending"),
        pytest.param(
            _HEAD + "1,0,0\n2,0,170\n3,0,0\n", ", line 3: the phase changes by 170 deg between 1 and 2 Hz", id="coarse"
        ),
    ],
)
def test_what_is_no_measurement_is_refused(text: str, message: str) -> None:
    with pytest.raises(RealizeError) as refusal:
        read_response(text, "plant.csv")
    assert message in str(refusal.value)
    assert str(refusal.value).startswith("plant.csv")


@pytest.mark.parametrize(
    "end", [lambda t: t.replace("\n", "\r\n"), lambda t: "\N{ZERO WIDTH NO-BREAK SPACE}" + t + "\n\n"]
)
def test_line_ends_and_marks_of_other_systems_are_read(end: Callable[[str], str]) -> None:
    text = _csv(count=20)
    assert read_response(end(text)).at(np.array([1.0])) == read_response(text).at(np.array([1.0]))


def test_columns_without_a_number_behind_the_last_name_are_no_columns() -> None:
    text = _csv(count=20)
    trailing = text.replace("\n", ",,\n") + ", "
    assert read_response(trailing).at(np.array([1.0])) == read_response(text).at(np.array([1.0]))
