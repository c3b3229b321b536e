"""A design with a plant: loops in the documents, the crossover as band edge, roll-off that follows it."""

from fractions import Fraction
from math import atan, degrees, log10, pi, sqrt
from pathlib import Path

import pytest

from realize.design import Design, design_from_text
from realize.errors import Refused
from realize.firmware.job import emit
from realize.loop import ContinuousLoop, highest_crossover_rad_s
from realize.loop_design import compute_delay_s, plants_of, transfer_plants
from realize.rates import rates
from realize.report.documents import compare_document
from realize.report.terminal import assess_text, compare_text
from realize.workflow import Comparison, assess_design, compare, make_causal

ROLLER_GAP = (Path(__file__).parent.parent / "fixtures" / "roller_gap.toml").read_text(encoding="utf-8")

LOOP_KEYS = {
    *("stable", "phase_margin_deg", "gain_margin_db", "gain_reduction_margin_db", "delay_margin_s"),
    *("crossover_rad_s", "maximum_sensitivity", "step_overshoot_percent"),
}


def design(text: str, *, without: str = "", more: str = "") -> Design:
    kept = "".join(line for line in text.splitlines(keepends=True) if not without or not line.startswith(without))
    return design_from_text(kept + more, "test.toml")


@pytest.fixture(scope="module")
def comparison() -> Comparison:
    return compare(design(ROLLER_GAP))


def test_every_method_has_every_case_in_its_loop(comparison: Comparison) -> None:
    for method in compare_document(comparison)["methods"]:
        if method["refused"] is None:
            assert [entry["case"] for entry in method["loop"]] == ["nominal", "heavy roller"]
            assert all(set(entry[kind]) == LOOP_KEYS for entry in method["loop"] for kind in ("continuous", "discrete"))


def test_loop_checks_join_the_others(comparison: Comparison) -> None:
    names = [check.check for check in comparison.methods[0].stored_checks]
    assert names[-4:] == ["loop stability", "loop phase margin", "loop sensitivity", "loop overshoot"]


def test_the_ledger_adds_up_to_a_hundredth_of_a_degree(comparison: Comparison) -> None:
    for method in comparison.methods:
        if method.loop is not None and method.loop.ledger is not None:
            ledger = method.loop.ledger
            assert abs(sum(value for _, value in ledger.items) - ledger.total_deg) < 0.01


def test_a_method_without_dead_time_is_refused_with_the_reason(comparison: Comparison) -> None:
    (mapped,) = (m for m in comparison.methods if m.method == "plant-input-mapped")
    assert mapped.refused is not None
    assert "dead time" in mapped.refused


def test_without_a_band_the_crossover_is_the_band_edge_and_the_pole_settles() -> None:
    asked = design(ROLLER_GAP, without="band =")
    causal = make_causal(asked, assume=False)
    found = compare(asked)
    assert causal.note == ""
    assert "crossover" in found.band_rests_on
    assert float(found.band_rad_s) == pytest.approx(
        highest_crossover_rad_s(causal.transfer, plants_of(asked)), rel=1e-12
    )
    assert causal.proposal is not None
    # The pole keeps the budget at the crossover that it has moved itself.
    assert causal.proposal.phase_lost_deg is not None
    assert causal.proposal.phase_lost_deg <= 6 + 1e-9


@pytest.mark.parametrize(
    ("loop", "delay_s"),
    [('compute_delay = "1 sample"', "1/2000"), ('compute_delay = "100 us"', "1/10000"), ("", "1/2000")],
)
def test_the_compute_delay_is_a_time_or_so_many_samples(loop: str, delay_s: str) -> None:
    asked = design(ROLLER_GAP.replace('compute_delay = "1 sample"', loop))
    assert compute_delay_s(asked, Fraction(1, 2000)) == Fraction(delay_s)


def test_a_loop_that_sampling_makes_unstable_is_refused() -> None:
    # The crossover is near 50 Hz: at 200 Hz hold and compute delay take 135 deg there.
    text = '[design]\ntransfer = "300"\n[sampling]\nrate = "200 Hz"\n[plant]\ntransfer = "1/s"\n'
    with pytest.raises(Refused, match="loop "):
        emit(design(text))


def test_the_same_loop_at_a_higher_rate_is_emitted() -> None:
    text = '[design]\ntransfer = "300"\n[sampling]\nrate = "20 kHz"\n[plant]\ntransfer = "1/s"\n'
    assert emit(design(text)).chosen.acceptable


#: An integrator, which a measurement holds exactly: its gain in dB is a straight line over the logarithm of frequency.
MEASURED = "frequency_hz,magnitude_db,phase_deg\n"


def integrator(gain: float, low_hz: float, high_hz: float) -> str:
    """``gain/s``, measured at three frequencies."""
    frequencies = (low_hz, (low_hz * high_hz) ** 0.5, high_hz)
    return MEASURED + "".join(f"{f:.17g},{20 * log10(gain / (2 * pi * f)):.17g},-90\n" for f in frequencies)


def around(measurement: str, tmp_path: Path, transfer: str = "0.5", more: str = "") -> Design:
    (tmp_path / "plant.csv").write_text(measurement, encoding="utf-8")
    text = f'[design]\ntransfer = "{transfer}"\n[sampling]\nrate = "2 kHz"\n{more}[plant]\nresponse = "plant.csv"\n'
    return design_from_text(text, "test.toml", folder=str(tmp_path))


def test_the_measured_crossover_is_the_band_edge(tmp_path: Path) -> None:
    """0.5*200/s crosses over at 100 rad/s."""
    found = compare(around(integrator(200, 1, 100), tmp_path))
    assert float(found.band_rad_s) == pytest.approx(100, rel=1e-9)
    assert "the crossover of controller, plant and sensor" in found.band_rests_on


def test_a_roll_off_settles_at_the_measured_crossover_that_it_moves(tmp_path: Path) -> None:
    asked = around(integrator(200, 1, 300), tmp_path, transfer="0.5 + 0.002*s")
    causal = make_causal(asked, assume=True)
    assert causal.note == ""
    assert causal.proposal is not None
    assert causal.proposal.phase_lost_deg is not None
    assert 5 < causal.proposal.phase_lost_deg <= 6 + 1e-9
    pole, edge = float(causal.proposal.pole_rad_s), float(compare(asked).band_rad_s)
    controller = 0.5 + 0.002j * edge / (1 + 1j * edge / pole)
    assert abs(controller) * 200 / edge == pytest.approx(1, rel=1e-9)


def test_the_price_of_a_roll_off_around_a_measured_plant_is_told_in_phase_margin(tmp_path: Path) -> None:
    """0.5 + 0.002 s around 200/s: |L| = 1 at 100/sqrt(1 - 0.16) rad/s, where the controller leads by atan(0.004 w)."""
    assessment = assess_design(around(integrator(200, 1, 300), tmp_path, transfer="0.5 + 0.002*s"))
    before = 90 + degrees(atan(0.004 * 100 / sqrt(1 - 0.16)))
    assert assessment.phase_margins_deg[0][0] == pytest.approx(before, abs=1e-6)
    assert assessment.phase_margins_deg[0][1] is not None
    assert before - 8 < assessment.phase_margins_deg[0][1] < before


@pytest.mark.parametrize(
    ("measurement", "why"),
    [
        (integrator(200, 1, 10), "still above 1 at 10 Hz (62.832 rad/s), the last frequency"),
        (integrator(200, 20, 100), "below 1 from 20 Hz (125.66 rad/s) to 100 Hz (628.32 rad/s)"),
        # It falls below 1 and rises above it again: the highest crossover was not measured.
        (MEASURED + "1,20,-90\n10,-20,-90\n100,20,-90\n", "still above 1 at 100 Hz (628.32 rad/s), the last frequency"),
    ],
)
def test_without_a_measured_crossover_the_band_is_assumed_and_the_screens_say_so(
    measurement: str, why: str, tmp_path: Path
) -> None:
    asked = around(measurement, tmp_path)
    found = compare(asked)
    assert found.band_rests_on.endswith("assumed, 1/30 of the rate")
    assert why in " ".join(compare_text(found).split())
    assert why in rates(asked, points=2, only="bilinear").rests_on
    improper = around(measurement, tmp_path, transfer="0.5 + 0.00001*s")
    assert why in " ".join(assess_text(improper, assess_design(improper)).split())


def test_a_band_that_the_design_names_needs_no_measured_crossover(tmp_path: Path) -> None:
    asked = around(integrator(200, 1, 10), tmp_path, more='band = "5 Hz"\n')
    found = compare(asked)
    assert "given by the design" in found.band_rests_on
    assert "assumed" not in compare_text(found)


def test_a_measured_plant_gives_margins_only(tmp_path: Path) -> None:
    rows = ["frequency_hz,magnitude_db,phase_deg"]
    loop = ContinuousLoop(
        design('[design]\ntransfer = "1"\n').transfer,
        transfer_plants(design('[design]\ntransfer = "1"\n[plant]\ntransfer = "300/(s*(0.001*s + 1))"\n'))[0],
    )
    import numpy as np

    for w in np.geomspace(10, 6000, 200):
        log_gain, phase = loop.response(np.array([w]))
        rows.append(f"{w / (2 * np.pi):.12g},{log_gain[0] * 20 / np.log(10):.12g},{np.degrees(phase[0]):.12g}")
    (tmp_path / "plant.csv").write_text("\n".join(rows) + "\n", encoding="utf-8")
    common = '[design]\ntransfer = "(s + 30)/s"\n[sampling]\nrate = "20 kHz"\n[method]\nname = "bilinear"\n[plant]\n'
    measured = compare(design_from_text(common + 'response = "plant.csv"\n', "t", folder=str(tmp_path))).methods[5]
    modelled = compare(design_from_text(common + 'transfer = "300/(s*(0.001*s + 1))"\n', "t")).methods[5]
    assert measured.loop is not None
    assert modelled.loop is not None
    found, wanted = measured.loop.entries[0]["discrete"], modelled.loop.entries[0]["discrete"]
    # 200 points over three decades: interpolation errs by less than (3.2 % of the frequency)^2/8.
    assert found["phase_margin_deg"] == pytest.approx(wanted["phase_margin_deg"], abs=0.05)
    assert found["crossover_rad_s"] == pytest.approx(wanted["crossover_rad_s"], rel=1e-3)
    assert found["stable"] is None
