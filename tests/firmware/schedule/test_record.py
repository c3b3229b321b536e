"""A scheduled design's record: what it says of each point, what an audit finds in it, what a review is told."""

from __future__ import annotations

import json
import re
import shutil
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from realize.design import load_design
from realize.design.schedule import Place, design_at
from realize.firmware import write_all
from realize.firmware.audit import audit
from realize.firmware.differ import differ
from realize.firmware.job import Emitted, emit

FIXTURE = Path(__file__).parents[3] / "fixtures" / "sheeter_gap.toml"
NAME = "sheeter_gap"


@pytest.fixture(scope="module")
def emitted() -> Emitted:
    return emit(load_design(str(FIXTURE)))


@pytest.fixture(scope="module")
def written(emitted: Emitted, tmp_path_factory: pytest.TempPathFactory) -> Path:
    return next(
        path for path in write_all(tmp_path_factory.mktemp(NAME), emitted.files) if path.name.endswith(".record.json")
    )


def test_every_point_stands_in_it_with_what_is_stored_and_its_checks(emitted: Emitted) -> None:
    record = emitted.record
    schedule = record["schedule"]
    assert (schedule["variable"], schedule["unit"], schedule["grid"]) == ("gap", "mm", 8)
    assert [point["at"] for point in schedule["points"]] == ["2", "5", "12", "30"]
    assert [float.fromhex(point["stored"]) for point in schedule["points"]] == [2, 5, 12, 30]
    assert [middle["at"] for middle in schedule["middles"]] == ["7/2", "17/2", "21"]
    assert "not a proof" in schedule["says"]
    first = schedule["points"][0]
    assert (record["sections"], record["integral"]) == (first["sections"], first["integral"])
    table = emitted.files[f"{NAME}_schedule.h"]
    for point in schedule["points"]:
        for section in point["sections"]:
            for entry in (*section["b"], *section["a"]):
                assert Fraction(entry["value"]) == Fraction(float.fromhex(entry["stored"]))
                assert f"/* {entry['stored']} section1_" in table


def test_the_checks_at_its_root_are_the_worst_of_all_places_and_say_where(emitted: Emitted) -> None:
    record = emitted.record
    places = [*record["schedule"]["points"], *record["schedule"]["middles"]]
    for check in record["checks"]:
        found = [place["checks"][check["check"]]["difference"] for place in places]
        assert check["difference"] == max(found, key=lambda each: -1.0 if each is None else each)
        assert re.match(r"at gap = [0-9.]+ mm(: |$)", check["reason"])
    for place in places:
        assert place["worst"]["check"] in place["checks"]
        assert 0 < place["worst"]["share_of_tolerance"] < 1


def test_the_loops_of_every_point_are_those_of_a_design_of_that_point_alone(emitted: Emitted) -> None:
    design = load_design(str(FIXTURE))
    schedule = emitted.record["schedule"]
    for number in (0, 2):
        alone = emit(replace(design_at(design, Place(number)), method=emitted.record["method"])).record["loop"]
        (case,) = schedule["points"][number]["loop"]
        assert case == {"case": "", **alone["cases"][0]["discrete"]}
        for key in ("compute_delay_s", "compute_delay_samples", "measured"):
            assert schedule["loop"][key] == alone[key]


def test_each_figure_of_the_loops_is_named_where_it_is_worst_in_record_and_header(emitted: Emitted) -> None:
    schedule = emitted.record["schedule"]
    header = " ".join(emitted.files[f"{NAME}.h"].replace("\n *", "").split())
    assert "Loop: checked with the command reaching the actuator 1 sample (500 us) after" in header
    assert "stable at every point, and in the middle of every interval" in header
    places = [*schedule["points"], *schedule["middles"]]
    names = {"phase_margin_deg": "phase margin", "gain_margin_db": "gain margin"} | {
        "maximum_sensitivity": "maximum sensitivity",
        "step_overshoot_percent": "step overshoot",
    }
    for key, worst in schedule["loop"]["worst"].items():
        values = [place["loop"][0][key] for place in places]
        if worst is None:
            assert set(values) == {None}
            continue
        assert worst["value"] == (min if "margin" in key else max)(values)
        at = next(place for place in places if place["at"] == worst["at"])
        assert at["loop"][0][key] == worst["value"]
        assert worst["between_points"] == (at in schedule["middles"])
        between = ", between two points" if worst["between_points"] else ""
        said = rf"{names[key]} {worst['value']:.5g}( \S+)?, worst at gap = {float(Fraction(at['at'])):g} mm{between}"
        assert re.search(said, header)


def test_the_same_design_has_the_same_bytes(emitted: Emitted) -> None:
    assert emit(load_design(str(FIXTURE))).files == emitted.files


def test_an_audit_of_what_was_left_alone_finds_nothing(written: Path) -> None:
    found = audit(str(written), str(FIXTURE))
    assert (found.findings, found.notes) == ((), ("the second opinion is about the first point of the schedule alone",))
    assert found.opinion is not None
    assert found.coefficients == 5 * 4  # four numbers at the root, and at each of four points


def spoiled(written: Path, tmp_path: Path, *place: str | int, to: Any) -> list[str]:
    """Sentences of the audit where something else stands at a place of the record."""
    for path in written.parent.iterdir():
        shutil.copy(path, tmp_path)
    record = tmp_path / written.name
    document = json.loads(record.read_text())
    entry = document
    for key in place[:-1]:
        entry = entry[key]
    entry[place[-1]] = to
    record.write_text(json.dumps(document, indent=2) + "\n")
    return [finding.text for finding in audit(str(record)).findings]


SECOND = ("schedule", "points", 1)


@pytest.mark.parametrize(
    ("place", "to", "said"),
    [
        ((*SECOND, "sections", 0, "b", 0, "value"), "7", "point 2, section 1 b0: 7 ("),
        ((*SECOND, "checks", "phase in band", "difference"), 0.1, "phase in band.difference: 0.1 in the record"),
        ((*SECOND, "at"), "6", "schedule.points.2.at: 6 in the record, 5 today"),
        (("schedule", "middles"), [], "schedule.middles.1"),
        (("schedule",), None, "schedule"),
    ],
)
def test_an_audit_finds_what_was_changed(
    written: Path, tmp_path: Path, place: tuple[str | int, ...], to: Any, said: str
) -> None:
    assert any(said in text for text in spoiled(written, tmp_path, *place, to=to))


def test_an_audit_finds_a_number_of_the_table_that_was_changed(written: Path, tmp_path: Path) -> None:
    for path in written.parent.iterdir():
        shutil.copy(path, tmp_path)
    table = tmp_path / f"{NAME}_schedule.h"
    table.write_text(table.read_text().replace("3.00000000e+01f", "3.10000000e+01f"))
    (finding,) = audit(str(tmp_path / written.name)).findings
    assert finding.text.startswith(f"{NAME}_schedule.h: has changed since it was written")


def test_a_review_is_told_which_values_and_which_coefficients_changed(written: Path, tmp_path: Path) -> None:
    text = FIXTURE.read_text(encoding="utf-8")
    (tmp_path / f"{NAME}.toml").write_text(text.replace("kp = [6.6, 5.4, 4.2, 3.6]", "kp = [6.6, 5.4, 4.3, 3.6]"))
    files = emit(load_design(str(tmp_path / f"{NAME}.toml"))).files
    new = next(path for path in write_all(tmp_path, files) if path.name.endswith(".record.json"))
    rows = differ(str(written), str(new)).rows
    assert ("Design", "schedule.values.kp.3", "21/5", "43/10") in [tuple(row) for row in rows]
    told = [row.what for row in rows if row.group == "Schedule"]
    assert "point 3, section 1 b0" in told
    assert not any(what.startswith("point 2") for what in told)


def test_a_review_is_told_of_figures_by_place_and_name_with_their_units(written: Path, tmp_path: Path) -> None:
    document = json.loads(written.read_text())
    points = document["schedule"]["points"]
    name, found = "converter step", points[0]["checks"]["converter step"]["difference"]
    points[0]["checks"][name]["difference"] = 2.5
    points[1]["checks"]["loop overshoot"]["verdict"] = "out"
    points[2]["loop"][0]["phase_margin_deg"] *= 1 + 1e-7
    points[3]["loop"][0]["phase_margin_deg"] = 45.5
    document["schedule"]["middles"][0]["checks"][name]["difference"] = None
    document["schedule"]["loop"]["worst"]["maximum_sensitivity"] |= {"value": 1.5, "at": "5"}
    document["schedule"]["more"] = 1
    new = tmp_path / written.name
    new.write_text(json.dumps(document))
    told = {row.what: (row.old, row.new) for row in differ(str(written), str(new)).rows}
    assert told.pop("point 1, gap 2 mm: converter step") == (f"{found:.5g} % off", "2.5 % off")
    old, now = told.pop("point 2, gap 5 mm: loop overshoot")
    assert now == f"out {old}"
    assert old.endswith(" points off")
    assert told.pop("point 4, gap 30 mm: in the loop, phase margin")[1] == "45.5 deg"
    assert told.pop("middle 1, gap 3.5 mm: converter step")[1] == "within"
    assert told.pop("worst maximum sensitivity")[1] == "1.5 at 5 mm"
    assert told.pop("schedule.more") == ("nothing", "1")
    assert told == {}


def test_a_schedule_that_cannot_be_understood_is_told_by_its_keys(written: Path, tmp_path: Path) -> None:
    document = json.loads(written.read_text())
    document["schedule"]["points"][1]["checks"] = 7
    new = tmp_path / written.name
    new.write_text(json.dumps(document))
    (row,) = differ(str(written), str(new)).rows
    assert (row.what, row.new) == ("schedule.points.2.checks", "7")


def test_a_review_is_told_of_points_that_moved_or_came(written: Path, tmp_path: Path) -> None:
    text = FIXTURE.read_text(encoding="utf-8")
    longer = text.replace("[2, 5, 12, 30]", "[2, 6, 12, 30, 31]").replace("3.6]", "3.6, 3.6]").replace("15]", "15, 15]")
    longer = longer.replace("0.077]", "0.077, 0.077]").replace("22, 26]", "22, 26, 26]")
    (tmp_path / f"{NAME}.toml").write_text(longer)
    files = emit(load_design(str(tmp_path / f"{NAME}.toml"))).files
    new = next(path for path in write_all(tmp_path, files) if path.name.endswith(".record.json"))
    told = {row.what: (row.old, row.new) for row in differ(str(written), str(new)).rows}
    assert told["point 2: gap"] == ("5 mm", "6 mm")
    assert told["point 5, gap 31 mm"] == ("none", "there")
    assert told["middle 4, gap 30.5 mm"] == ("none", "there")


def test_a_review_of_a_design_that_got_a_schedule_is_told(written: Path, tmp_path: Path) -> None:
    text = FIXTURE.read_text(encoding="utf-8")
    before = text[: text.index("\n[schedule]\n")] + "\n" + text[text.index("[signals.input]") :]
    (tmp_path / f"{NAME}.toml").write_text(before)
    files = emit(load_design(str(tmp_path / f"{NAME}.toml"))).files
    old = next(path for path in write_all(tmp_path, files) if path.name.endswith(".record.json"))
    for records in ((old, written), (written, old)):
        rows = differ(*map(str, records)).rows
        assert any(row.what.startswith("schedule") for row in rows)
