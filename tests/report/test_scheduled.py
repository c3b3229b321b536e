"""Screens and documents of a scheduled design."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from realize.cli import main
from realize.design import load_design
from realize.firmware.job import Emitted, emit
from realize.report.documents import emit_document
from realize.report.paragraphs import WIDTH
from realize.report.scheduled import scheduled_text

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


@pytest.mark.parametrize("command", ["assess", "compare"])
def test_what_looks_at_the_nominal_values_says_so(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    main([command, str(FIXTURE)])
    said = " ".join(capsys.readouterr().out.split())
    assert "there is a [schedule] of 4 points by gap: this is about the nominal values alone, kp = 4.2" in said
    main([command, str(FIXTURE), "--json"])
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
