"""Screens and documents of a scheduled design."""

from __future__ import annotations

import json
from dataclasses import replace
from fractions import Fraction
from itertools import pairwise
from pathlib import Path

import pytest

from realize.cli import main
from realize.design import load_design
from realize.design.schedule import Place
from realize.firmware.job import Emitted, emit
from realize.report.documents import emit_document
from realize.report.paragraphs import WIDTH
from realize.report.scheduled import points_rows, points_shown, schedule_rows, scheduled_text

FIXTURE = Path(__file__).parents[2] / "fixtures" / "sheeter_gap.toml"


@pytest.fixture(scope="module")
def emitted() -> Emitted:
    return emit(load_design(str(FIXTURE)))


def test_the_screen_has_each_check_where_it_is_worst(emitted: Emitted) -> None:
    assert emitted.schedule is not None
    text = scheduled_text(emitted.schedule, ["firmware/sheeter_gap.h"])
    assert text.startswith("yes: sheeter_gap is emitted by ")
    assert all(len(line) <= WIDTH for line in text.splitlines())
    assert "not a proof" in text
    assert "let it change slowly" in text.replace("\n    ", " ")
    for each in emitted.schedule.worst:
        line = next(line for line in text.splitlines() if line.startswith(f"  {each.check.check}  "))
        assert each.check.verdict in line
        assert (" mm" in line) == bool(each.check.difference)


def test_the_document_says_the_same_to_scripts(emitted: Emitted) -> None:
    document = json.loads(json.dumps(emit_document(emitted, ["a"]), allow_nan=False))
    entry = document["schedule"]
    assert (entry["variable"], entry["points"], entry["grid"], entry["places_between"]) == ("gap", 4, 8, 21)
    assert emitted.schedule is not None
    assert [each["check"] for each in entry["worst"]] == [each.check.check for each in emitted.schedule.worst]
    assert all(2 <= each["at"] <= 30 for each in entry["worst"])
    assert {each["at"] for each in entry["worst"] if each["between_points"]} <= {3.5, 8.5, 21}
    assert document["record"]["schedule"]["points"][0]["at"] == "2"


def test_each_point_has_a_row_with_its_values_and_what_is_left_in_its_loop(emitted: Emitted) -> None:
    assert emitted.schedule is not None
    rows = points_rows(emitted.schedule)
    assert [" ".join(filter(None, words)) for words in rows.head] == [
        *("gap mm", "kp", "ki", "kd", "phase margin deg", "maximum sensitivity", "step overshoot %"),
        *("worst check", "share %"),
    ]
    points = emitted.record["schedule"]["points"]
    values: dict[str, list[float]] = {
        "kp": [6.6, 5.4, 4.2, 3.6],
        "ki": [30, 24, 18, 15],
        "kd": [0.14, 0.115, 0.09, 0.077],
    }
    entries = emit_document(emitted, [])["schedule"]["at_points"]
    for i, (cells, point, entry) in enumerate(zip(rows.cells, points, entries, strict=True)):
        (case,), worst = point["loop"], point["worst"]
        assert cells[0] == point["at"]
        assert [float(cell) for cell in cells[1:4]] == [numbers[i] for numbers in values.values()]
        assert entry["values"] == {name: numbers[i] for name, numbers in values.items()}
        for cell, key in zip(
            cells[4:7], ("phase_margin_deg", "maximum_sensitivity", "step_overshoot_percent"), strict=True
        ):
            assert float(cell) == pytest.approx(case[key], abs=0.05)
            assert entry[key] == pytest.approx(case[key], rel=1e-4)
        assert cells[7] == worst["check"] == entry["worst"]["check"]
        assert float(cells[8]) == pytest.approx(100 * worst["share_of_tolerance"], rel=5e-3)
    assert all(any(line.split() == " ".join(row).split() for line in screen(emitted)) for row in rows.cells)


def screen(emitted: Emitted) -> list[str]:
    assert emitted.schedule is not None
    return scheduled_text(emitted.schedule, []).splitlines()


def test_of_many_points_the_ends_and_those_where_a_check_is_worst_have_rows(emitted: Emitted) -> None:
    assert emitted.schedule is not None
    few = emitted.schedule
    schedule = few.schedule
    points = tuple(Fraction(2 + k) for k in range(40))
    # The figures are those of the first four points, said to be at forty.
    many = few._replace(
        design=replace(
            few.design, schedule=schedule._replace(points=points, values=(("kp", points),), plant_values=())
        ),
        points=tuple(few.points[k % 4]._replace(place=Place(k)) for k in range(40)),
        worst=tuple(each._replace(place=Place(13 + k)) for k, each in enumerate(few.worst) if each.check.difference),
    )
    shown = points_shown(many)
    assert len(shown) == len(points_rows(many).cells) == 12
    assert {0, 39} | {each.place.point for each in many.worst} <= set(shown)
    assert shown == sorted(set(shown))
    assert "12 of the 40 points" in scheduled_text(many, [])
    assert "28 points are left out" in scheduled_text(many, [])
    evenly = points_shown(many._replace(worst=()))
    gaps = [after - before for before, after in pairwise(evenly)]
    assert max(gaps) <= 2 * min(gaps) + 1


def test_a_difference_is_told_in_the_unit_of_its_tolerance(emitted: Emitted) -> None:
    assert emitted.schedule is not None
    cells = {row[0]: row for row in schedule_rows(emitted.schedule).cells}
    by_name = {each.check.check: each.check for each in emitted.schedule.worst}
    assert cells["loop overshoot"][1].endswith(" points")
    assert cells["loop overshoot"][2] == "2 points"
    sensitivity = by_name["loop sensitivity"]
    assert isinstance(sensitivity.reference, float)
    # What the continuous loop with hold and delay leaves of the limit.
    assert cells["loop sensitivity"][2] == f"{2 - sensitivity.reference:.3g} (at most 2)"
    assert float(cells["loop sensitivity"][1]) == pytest.approx(sensitivity.difference or 0, rel=5e-3)


@pytest.mark.parametrize("command", ["assess", "compare", "words", "rates --points 2 --method bilinear"])
def test_what_looks_at_the_nominal_values_says_so_and_advises_nothing_for_all_points(
    command: str, capsys: pytest.CaptureFixture[str]
) -> None:
    command, *options = command.split()
    main([command, str(FIXTURE), *options])
    said = " ".join(capsys.readouterr().out.split())
    assert "To pin" not in said
    assert "To take" not in said
    assert "there is a [schedule] of 4 points by gap: this is about the nominal values alone, kp = 4.2" in said
    main([command, str(FIXTURE), *options, "--json"])
    assert json.loads(capsys.readouterr().out)["nominal"].startswith("there is a [schedule] of 4 points by gap")


def test_a_value_of_the_command_line_that_the_schedule_changes_is_not_emitted(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    for value in ("kp=4", "v=20"):
        with pytest.raises(SystemExit) as ended:
            main(["emit", str(FIXTURE), "--out", str(tmp_path / "firmware"), "--value", value])
        assert ended.value.code == 2
        said = " ".join(capsys.readouterr().err.split())
        assert f"--value {value.partition('=')[0]}: a value that the schedule changes" in said
    assert not (tmp_path / "firmware").exists()
