"""From a design file to header and record: what was discretized, in which loop, and what is said about it."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from realize.design import Overrides, design_from_text, load_design
from realize.firmware.job import Emitted, emit

FIXTURES = Path(__file__).parents[2] / "fixtures"

#: An integrating controller whose values take every form; the plant, where there is one, follows.
PLAIN = """
[design]
name = "gap"
transfer = "w/(s + w) + k/s"
[design.values]
w = "2*pi*20.598997"
k = "1/3"
[sampling]
rate = "1 kHz"
[signals.input]
unit = "mm"
per_count = "1/2000"
offset = 2048
"""

MEASURED = "frequency_hz,magnitude_db,phase_deg\n" + "".join(f"{f},-20,-30\n" for f in (0.001, 0.01, 0.1, 1, 10, 100))


def said(emitted: Emitted, name: str) -> str:
    """The header's first comment as running text."""
    text = emitted.files[f"{name}.h"].partition(" */\n")[0]
    return " ".join(text.replace("\n *", " ").split())


@pytest.fixture(scope="module")
def servo() -> Emitted:
    return emit(load_design(str(FIXTURES / "roller_gap.toml")))


@pytest.fixture(scope="module")
def plain() -> Emitted:
    return emit(design_from_text(PLAIN + '[method]\nname = "bilinear-prewarped"\n', "gap.toml"))


def test_the_transfer_after_an_automatic_roll_off_is_recorded_exactly(servo: Emitted) -> None:
    causal = servo.record["causal"]
    assert causal["rolloff"].keys() == {"placement", "order", "damping", "pole_rad_s", "assumed"}
    p = Fraction(causal["rolloff"]["pole_rad_s"])
    kp, ki, kd = Fraction("4.2"), Fraction(18), Fraction("0.09")
    # kp + ki/s + kd s p/(s + p), over s (s + p), by hand
    numerator, denominator = [kp + kd * p, kp * p + ki, ki * p], [Fraction(1), p, Fraction(0)]
    found, below = ([Fraction(c) for c in causal[key]] for key in ("numerator", "denominator"))
    assert [c / below[0] for c in found] == numerator
    assert [c / below[0] for c in below] == denominator
    assert servo.record["design"]["rolloff"]["pole_rad_s"] is None
    assert (causal["rolloff"]["order"], causal["rolloff"]["damping"]) == (1, "1")
    assert causal["rolloff"]["assumed"] is False


def test_a_band_that_the_design_gives_is_exact(servo: Emitted) -> None:
    causal = servo.record["causal"]
    assert causal["band_rad_s"] == servo.record["design"]["sampling"]["band_rad_s"]
    # 40 pi, from memory of pi
    assert causal["band_rad_s_decimal"] == "125.66370614359172954"
    assert causal["band_rests_on"].endswith("given by the design")


def test_a_band_that_is_assumed_is_a_figure(plain: Emitted) -> None:
    causal = plain.record["causal"]
    # 2 pi 1000/30
    assert causal["band_rad_s"] == "209.44"
    assert "1/30 of the rate" in causal["band_rests_on"]
    assert causal["rolloff"] is None
    assert list(causal) == [
        *("numerator", "numerator_decimal", "denominator", "denominator_decimal"),
        *("rolloff", "band_rad_s", "band_rests_on"),
    ]


def test_the_loop_is_recorded_as_it_was_found(servo: Emitted) -> None:
    recorded, found = servo.record["loop"], servo.chosen.loop
    assert found is not None
    assert found.ledger is not None
    assert found.jitter is not None
    assert (recorded["compute_delay_s"], recorded["compute_delay_samples"]) == ("1/2000", "1")
    assert recorded["measured"] is False
    assert [case["case"] for case in recorded["cases"]] == ["nominal", "heavy roller"]
    for kind in ("continuous", "discrete"):
        for case, entry in zip(recorded["cases"], found.entries, strict=True):
            assert case[kind].keys() == entry[kind].keys()
            figures = {key: value for key, value in entry[kind].items() if value is not None}
            assert {key: value for key, value in case[kind].items() if value is not None} == pytest.approx(
                figures, rel=1e-4
            )
    ledger = recorded["phase_ledger_deg"]
    assert ledger == pytest.approx(dict(found.ledger.items) | {"total": found.ledger.total_deg}, rel=1e-4, abs=1e-6)
    assert sum(ledger.values()) - ledger["total"] == pytest.approx(ledger["total"], abs=1e-3)
    assert recorded["jitter_margin_s"] == pytest.approx(found.jitter.jitter_s, rel=1e-4)


def test_the_header_shows_every_case_of_the_record(servo: Emitted) -> None:
    text = said(servo, "roller_gap")
    assert "Loop: checked with the command reaching the actuator 1 sample (500 us) after the input was sampled" in text
    for entry in servo.record["loop"]["cases"]:
        figures = entry["discrete"]
        assert (
            f"case {entry['case']}: stable, phase margin {figures['phase_margin_deg']} deg, gain margin "
            f"{figures['gain_margin_db']} dB, maximum sensitivity {figures['maximum_sensitivity']}, step overshoot "
            f"{figures['step_overshoot_percent']} %"
        ) in text
    assert f"jitter margin {1000 * servo.record['loop']['jitter_margin_s']:.5g} ms (nominal case)" in text


def test_a_loop_with_a_measured_plant_says_that_stability_was_not_judged(tmp_path: Path) -> None:
    (tmp_path / "plant.csv").write_text(MEASURED)
    text = PLAIN + '[plant]\nresponse = "plant.csv"\n[method]\nname = "bilinear"\n[loop]\ncompute_delay = "250 us"\n'
    emitted = emit(design_from_text(text, "gap.toml", Overrides(), str(tmp_path)))
    loop: dict[str, Any] = emitted.record["loop"]
    assert (loop["measured"], loop["phase_ledger_deg"], loop["jitter_margin_s"]) == (True, None, None)
    assert loop["cases"][0]["discrete"]["stable"] is None
    header = said(emitted, "gap")
    assert "0.25 samples (250 us) after the input was sampled" in header
    assert "the plant is a measured response: whether the loop is stable was not judged" in header
    # what the loop has to say stands there, and not once more among the notes of the method
    assert header.count("nothing outside that band is known") == 1


def test_values_are_exact_or_say_that_they_are_not(plain: Emitted) -> None:
    # 2 pi 20.598997 = 129.4273..., by hand
    assert "values w = about 129.43, k = 1/3 band" in said(plain, "gap")


def test_counts_of_the_converter_are_in_the_header(plain: Emitted) -> None:
    text = said(plain, "gap")
    assert "input count 1 count = 1/2000 mm; count 2048 stands for 0; converting is up to the caller" in text
    assert "output count" not in text


def test_what_a_method_has_to_say_is_a_note_and_no_lack_of_protection(plain: Emitted) -> None:
    (note, *_) = plain.chosen.notes
    before, _, after = said(plain, "gap").partition("Method notes: - ")
    assert note in after
    assert note not in before
    assert plain.record["loop"] is None
