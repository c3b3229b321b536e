"""Screens: what is left in the loop stands beside the other figures, and agreed deviations say what is left."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import pytest

from realize.design import design_from_text
from realize.report.documents import compare_document
from realize.report.paragraphs import WIDTH, figures_table
from realize.report.terminal import compare_text
from realize.workflow import Comparison, compare

ROLLER_GAP = (Path(__file__).parents[2] / "fixtures" / "roller_gap.toml").read_text(encoding="utf-8")
SLOW = ROLLER_GAP.replace('rate = "2 kHz"', 'rate = "100 Hz"')

#: A lead around an integrator, at a rate at which backward-difference takes part of the lead away.
LEAD = '[design]\ntransfer = "60*(0.012*s + 1)/(0.004*s + 1)"\n[sampling]\nrate = "200 Hz"\n[plant]\ntransfer = "1/s"\n'


@cache
def compared(text: str) -> Comparison:
    return compare(design_from_text(text, "test.toml"))


def loop_rows(comparison: Comparison) -> dict[str, list[str]]:
    """Cells of the table of loops by method, without the yes or no before them."""
    lines = compare_text(comparison).split("\nIn the loop", 1)[1].split("\n\n", 1)[0].splitlines()
    words = [line.removeprefix("  yes ").removeprefix("  no ").split() for line in lines[1:] if line[:1] == " "]
    return {row[0]: row[1:] for row in words}


def test_each_figure_in_the_loop_is_the_worst_over_the_cases() -> None:
    comparison = compared(ROLLER_GAP)
    rows = loop_rows(comparison)
    for method in comparison.methods:
        if method.loop is None:
            assert rows[method.method] == ["-"] * 6
            continue
        discrete = [entry["discrete"] for entry in method.loop.entries]
        assert len(discrete) == 2
        stable, margin, _, sensitivity, overshoot, _ = rows[method.method]
        assert stable == "yes"
        assert float(margin) == pytest.approx(min(d["phase_margin_deg"] for d in discrete), abs=0.0501)
        assert float(sensitivity) == pytest.approx(max(d["maximum_sensitivity"] for d in discrete), abs=0.00501)
        assert float(overshoot) == pytest.approx(max(d["step_overshoot_percent"] for d in discrete), abs=0.0501)


def test_the_table_of_loops_names_the_limits_of_the_design_and_the_continuous_loop() -> None:
    text = ROLLER_GAP + '\n[tolerance]\nloop_phase_margin_least = "41 deg"\nloop_overshoot_rise = "3 %"\n'
    rows = loop_rows(compared(text))
    assert rows["(tolerance)"] == ["yes", ">=41", "<=5", "<=2", "-", "<=3"]
    comparison = compared(text)
    loop = comparison.methods[0].loop
    assert loop is not None
    continuous = [entry["continuous"]["phase_margin_deg"] for entry in loop.entries]
    assert float(rows["(continuous)"][1]) == pytest.approx(min(continuous), abs=0.0501)


def test_a_loop_that_is_lost_has_no_other_figure_and_one_that_is_out_is_marked() -> None:
    rows = loop_rows(compared(SLOW))
    assert rows["step-invariant"] == ["no!", "-", "-", "-", "-", "-"]
    assert rows["ramp-invariant"][1].endswith("!")
    assert rows["ramp-invariant"][3].endswith("!")
    assert rows["ramp-invariant"][5].endswith("!")


def test_a_margin_that_is_lost_above_the_floor_is_marked_where_it_is_lost() -> None:
    rows = loop_rows(compared(LEAD))
    _, margin, lost, *_ = rows["backward-difference"]
    assert float(margin) > 30
    assert lost.endswith("!")
    assert float(lost[:-1]) > 5


def test_an_accepted_deviation_is_marked_as_agreed_to_in_the_loop_too() -> None:
    agreed = '\n[[accept]]\ncheck = "loop phase margin"\nlimit = "20 deg"\nbecause = "short moves"\nby = "MB"\n'
    rows = loop_rows(compared(SLOW + agreed))
    assert rows["bilinear"][1].endswith("*")
    assert rows["backward-difference"][1].endswith("!")


def test_no_line_of_the_comparison_is_wider_than_the_screen_and_without_a_plant_there_is_no_loop() -> None:
    for text in (ROLLER_GAP, SLOW):
        assert max(len(line) for line in compare_text(compared(text)).splitlines()) <= WIDTH
    assert "In the loop" not in compare_text(compared(ROLLER_GAP.split("[plant]")[0]))


def test_figures_are_flush_right_and_a_mark_stands_behind_them() -> None:
    rows = [["one", "12!"], ["two", "3"], ["three", "-"]]
    assert figures_table([["method", "shift"]], rows, first=1).splitlines() == [
        "  method  shift",
        "  one       12!",
        "  two        3",
        "  three      -",
    ]


def test_the_screen_says_the_figure_that_is_left_and_up_to_what_it_was_agreed() -> None:
    agreed = '\n[[accept]]\ncheck = "loop phase margin"\nlimit = "7 deg"\nbecause = "short moves"\nby = "MB"\n'
    named = '[method]\nname = "backward-difference"\n'
    comparison = compared(LEAD + named + agreed)
    (check,) = (c for c, _ in next(m for m in comparison.methods if m.method == "backward-difference").accepted)
    assert isinstance(check.reference, float)
    assert isinstance(check.obtained, float)
    shown = " ".join(compare_text(comparison).split())
    assert (
        f"loop phase margin {check.obtained:.3g} deg, {check.reference - check.obtained:.3g} deg less than the "
        f"{check.reference:.3g} deg of the continuous loop with hold and delay, agreed up to 7 deg: short moves (MB)"
    ) in shown


def checks_of(comparison: Comparison) -> list[str]:
    """Lines of the table of checks."""
    return compare_text(comparison).partition("Checks of ")[2].partition("\n  - ")[0].splitlines()[1:]


#: Poles and zeros of seven digits, in units that are written out, at a rate that their band fits.
FAST = """
[design]
transfer = "(s^2 + 246912*s + 1234567^2)/(s^2 + 469134*s + 2345678^2)"
[sampling]
rate = "10 MHz"
[signals.input]
range = [-1, 1]
unit = "mm"
per_count = "1/2000"
[signals.output]
range = [-1, 1]
unit = "V"
"""


def test_pairs_of_long_poles_and_zeros_leave_the_table_of_checks_within_the_screen() -> None:
    lines = checks_of(compared(FAST))
    assert max(map(len, lines)) <= WIDTH
    # -234567+-2333920j and -123456+-1228379j: sqrt(|p|^2 - (Re p)^2)
    assert any(line.split()[3] == "-2.3e5+-2.33e6j" for line in lines if "pole shift" in line)
    assert any(line.split()[3] == "-1.2e5+-1.23e6j" for line in lines if "zero shift" in line)


def test_values_have_the_unit_of_the_signals_and_one_is_no_plural() -> None:
    lines = checks_of(compared(FAST))
    assert any(line.startswith("  low-frequency gain  V/mm ") for line in lines)
    assert any(line.startswith("  saturation recovery V ") for line in lines)
    integrating = FAST.replace('transfer = "', 'transfer = "1 + 4/s" #').replace("10 MHz", "1 kHz")
    lines = checks_of(compared(integrating))
    assert any(line.startswith("  low-frequency gain   V/mm/s  4 ") for line in lines)
    assert any(line.split()[-3:] == ["1", "point", "undefined"] for line in lines)


def test_limits_of_the_loop_are_told_as_limits() -> None:
    lines = checks_of(compared(ROLLER_GAP))
    assert any(line.startswith("  loop sensitivity ") and "  at most 2 " in line for line in lines)
    near = ROLLER_GAP + '\n[tolerance]\nloop_phase_margin_least = "60 deg"\n'
    lines = checks_of(compared(near))
    assert any(line.startswith("  loop phase margin ") and "  at least 60 deg " in line for line in lines)


def test_round_off_has_no_figure_by_method() -> None:
    integers = (Path(__file__).parents[2] / "fixtures" / "roller_gap_int16.toml").read_text(encoding="utf-8")
    (line,) = (line for line in checks_of(compared(integers)) if line.startswith("  round-off "))
    assert line.split()[3] == "-"


def test_a_band_in_hertz_is_as_the_design_gives_it() -> None:
    text = FAST.replace("10 MHz", '1 kHz"\nband = "30 Hz')
    assert compare_document(compared(text))["band_hz"] == 30
