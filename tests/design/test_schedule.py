"""The table ``[schedule]``: what is understood, what is refused and how, and the design anywhere in it."""

from __future__ import annotations

import json
import re
import subprocess
from fractions import Fraction
from pathlib import Path

import pytest

from realize.design import Design, Overrides, design_from_resolved, design_from_text
from realize.design.schedule import LOOKUP_NAMES, Place, design_at, nominal_note, place_text, values_at, variable_at
from realize.errors import RealizeError, Refused
from tests.firmware.bench import ZIG

BASE = """[design]
name = "web"
transfer = "kp + ki/s"
[design.values]
kp = 4.2
ki = "2*kp"
[sampling]
rate = "1 kHz"
[plant]
transfer = "1/(J*s^2 + s)"
[plant.values]
J = 0.05
"""

SCHEDULE = """[schedule]
variable = "web_speed"
unit = "m/s"
points = [0.2, "1/2", 1]
[schedule.values]
kp = [5, 4.2, "pi"]
[schedule.plant_values]
J = [0.01, 0.02, 0.08]
"""


def read(text: str = BASE + SCHEDULE, **overrides: str) -> Design:
    return design_from_text(text, "web.toml", Overrides(values=overrides))


def refusal(old: str, new: str) -> RealizeError:
    text = BASE + SCHEDULE
    assert old in text
    with pytest.raises(RealizeError) as caught:
        read(text.replace(old, new))
    return caught.value


def test_points_and_values_are_exact() -> None:
    schedule = read().schedule
    assert schedule is not None
    assert (schedule.variable, schedule.unit, schedule.grid) == ("web_speed", "m/s", 8)
    assert schedule.points == (Fraction(1, 5), Fraction(1, 2), 1)
    ((name, values),) = schedule.values
    assert (name, values[:2]) == ("kp", (5, Fraction(21, 5)))
    assert abs(values[2] - Fraction("3.14159265358979323846264338327950288")) < Fraction(1, 10**34)
    assert schedule.plant_values == (("J", (Fraction(1, 100), Fraction(1, 50), Fraction(2, 25))),)


def test_without_the_table_there_is_no_schedule_and_the_nominal_design_is_the_same() -> None:
    with_it, without = read(), read(BASE)
    assert without.schedule is None
    assert nominal_note(without) == ()
    assert (with_it.transfer, with_it.values, with_it.plant) == (without.transfer, without.values, without.plant)


def test_what_depends_on_a_scheduled_value_follows_it() -> None:
    there = design_at(read(), Place(0))
    assert there.transfer.numerator == (5, 10)
    assert dict(there.values) == {"kp": 5, "ki": 10}
    assert there.schedule is None
    assert there.plant is not None
    assert there.plant.cases[0].transfer.denominator == (Fraction(1), 100, 0)


def test_between_two_points_values_are_interpolated_exactly() -> None:
    design, place = read(), Place(0, Fraction(1, 8))
    assert design.schedule is not None
    own, of_plant = values_at(design.schedule, place)
    assert own == {"kp": 5 - Fraction(1, 10)}
    assert of_plant == {"J": Fraction(1, 100) + Fraction(1, 800)}
    assert variable_at(design.schedule, place) == Fraction(1, 5) + Fraction(3, 80)
    assert design_at(design, place).transfer == read(kp="49/10").transfer
    assert place_text(design.schedule, place) == "web_speed = 0.2375 m/s (between points 1 and 2)"
    assert place_text(design.schedule, Place(2)) == "web_speed = 1 m/s (point 3)"


def test_a_value_of_the_command_line_holds_at_every_point_unless_it_is_scheduled() -> None:
    design = read(ki="7", kp="100")
    assert dict(design.values) == {"kp": 100, "ki": 7}
    assert dict(design_at(design, Place(1)).values) == {"kp": Fraction(21, 5), "ki": 7}


@pytest.mark.parametrize(
    "controller",
    [
        'transfer = "kp + ki/s"',
        'numerator = ["kp", "ki"]\ndenominator = [1.0, 0]',
        'zeros = [[-1, 2.5], [-1, -2.5]]\npoles = ["-ki"]\ngain = "kp"',
    ],
)
def test_a_schedule_comes_back_whole_from_the_record(controller: str) -> None:
    design = read((BASE + SCHEDULE).replace('transfer = "kp + ki/s"', controller))
    again = design_from_resolved(json.loads(json.dumps(design.resolved())))
    assert again == design
    for place in (Place(0), Place(1, Fraction(1, 3)), Place(2)):
        assert design_at(again, place) == design_at(design, place)


def test_a_measured_plant_is_measured_at_every_point(tmp_path: Path) -> None:
    response = "frequency_hz,gain,phase_deg\n1,1,-10\n2,0.9,-20\n5,0.5,-60\n"
    text = BASE.partition("[plant]")[0] + '[plant]\nresponse = "plant.csv"\n' + SCHEDULE.partition("[schedule.plant")[0]
    (tmp_path / "plant.csv").write_text(response)
    design = design_from_text(text, "web.toml", folder=str(tmp_path))
    for there in (design_at(design, Place(0)), design_at(design_from_resolved(design.resolved()), Place(1))):
        assert there.plant == design.plant


REFUSED = [
    ('variable = "web_speed"\n', "", "web.toml, [schedule] variable", "nothing", "C identifier", "write variable ="),
    ("web_speed", "web-speed", "web.toml, [schedule] variable", "web-speed", "C identifier", "such as"),
    ("web_speed", "float", "web.toml, [schedule] variable", "kept word", "C identifier", "float_control"),
    ("web_speed", "web_at", "web.toml, [schedule] variable", "the code uses itself", "functions", "what it measures"),
    ("unit =", "units =", "web.toml, [schedule]", "the unknown key \"units\"", "variable", "did you mean unit?"),
    ('[0.2, "1/2", 1]', "[1]", "web.toml, [schedule] points", "a list of 1", "2 to 4096", "points = ["),
    ('points = [0.2, "1/2", 1]\n', "", "web.toml, [schedule] points", "nothing", "2 to 4096", "points = ["),
    ('"1/2", 1]', "0.2, 1]", "web.toml, [schedule] points", "0.2 after 0.2, at entry 2", "larger", "sort them"),
    ('"1/2", 1]', '"1/2", 0.3]', "web.toml, [schedule] points", "0.3 after 0.5, at entry 3", "larger", "sort them"),
    ('"1/2", 1]', '"1 m", 1]', "web.toml, [schedule] points, entry 2, column 3", "", "", ""),
    ('kp = [5, 4.2, "pi"]', "kp = [5]", "web.toml, [schedule.values] kp", "a list of 1", "a list of 3", "points"),
    ('kp = [5, 4.2, "pi"]', "kp = 5", "web.toml, [schedule.values] kp", "the number 5", "a list", "brackets"),
    ('kp = [5, 4.2, "pi"]', "kq = [1, 2, 3]", "web.toml, [schedule.values] kq", "[design.values]", "kp, ki", "nominal"),
    ('kp = [5, 4.2, "pi"]', "", "web.toml, [schedule] values", "no value that changes", "kp, ki", "[schedule.values]"),
    ("J = [0.01,", "K = [0.01,", "web.toml, [schedule.plant_values] K", "[plant.values]", "J", "nominal number"),
    ("J = [0.01, 0.02,", "J = [0.01,", "web.toml, [schedule.plant_values] J", "a list of 2", "a list of 3", "points"),
    ('unit = "m/s"', "grid = 1", "web.toml, [schedule] grid", "the number 1", "from 2 to 1000", "grid = 2"),
]  # fmt: skip


@pytest.mark.parametrize(("old", "new", "where", "found", "allowed", "advice"), REFUSED)
def test_a_mistake_is_named_with_what_is_allowed_and_what_to_try(
    old: str, new: str, where: str, found: str, allowed: str, advice: str
) -> None:
    error = refusal(old, new)
    assert error.where == where
    assert found in error.found
    assert allowed in error.allowed
    assert advice in error.advice
    assert type(error) is RealizeError


@pytest.mark.parametrize("name", LOOKUP_NAMES)
def test_a_name_that_the_lookup_has_for_itself_is_refused(name: str) -> None:
    assert "the code uses itself" in refusal("web_speed", name).found


@pytest.mark.parametrize("target", ["x86_64-linux-gnu", "mips-linux-musleabi"])
def test_a_name_that_a_compiler_has_for_a_macro_is_refused(target: str) -> None:
    macros = subprocess.run(
        (*ZIG, "cc", "-target", target, "-std=gnu11", "-include", "float.h", "-dM", "-E", "-x", "c", "-"),
        input="",
        capture_output=True,
        text=True,
        check=True,
    )
    names = [line.split()[1] for line in macros.stdout.splitlines()]
    own = [name for name in names if re.fullmatch(r"[A-Za-z][A-Za-z0-9]*(_[A-Za-z0-9]+)*", name)]
    assert {"FLT_MAX", "linux", "unix"} <= set(own)
    for name in own:
        assert "macro" in refusal("web_speed", name).found
    text = (BASE + SCHEDULE).replace("web_speed", "FLT_MAX_speed")
    assert read(text).schedule is not None


def test_coefficients_in_the_code_are_refused_beside_a_schedule() -> None:
    error = refusal("[schedule]\n", '[target]\ncoefficients = "inline"\n[schedule]\n')
    assert error.where == "web.toml, [target] coefficients"
    assert "[schedule]" in error.found
    assert read().target.coefficients == "table"
    assert read().resolved()["target"]["coefficients"] == "table"
    assert read(BASE).target.coefficients == "inline"


def test_a_schedule_of_plant_values_needs_a_plant() -> None:
    with pytest.raises(RealizeError, match=r"none: \[plant.values\] has no values that are used"):
        read(BASE.partition("[plant]")[0] + SCHEDULE)


def test_what_is_wrong_at_one_point_names_the_point() -> None:
    design = read((BASE + SCHEDULE).replace('"2*kp"', '"kp - 5"').replace('"kp + ki/s"', '"ki/s"'))
    with pytest.raises(RealizeError, match="a transfer function that is zero") as caught:
        design_at(design, Place(0))
    assert caught.value.where.startswith("[schedule] web_speed = 0.2 m/s (point 1), web.toml, [design] transfer")
    growing = read((BASE + SCHEDULE).replace('"kp + ki/s"', '"(s - kp)/((s - 5)*(s + ki))"'))
    with pytest.raises(Refused) as hidden:
        design_at(growing, Place(0))
    assert "(point 1)" in hidden.value.where
    assert design_at(growing, Place(1)).transfer.zeros[0].value.real == pytest.approx(4.2)


@pytest.mark.parametrize("written", [None, 3, [], {"design": 1}, {"plant": []}, {}, {"design": {"transfer": 7}}])
def test_kept_tables_that_were_tampered_with_are_refused(written: object) -> None:
    document = json.loads(json.dumps(read().resolved()))
    document["schedule"]["written"] = written
    with pytest.raises(RealizeError):
        design_at(design_from_resolved(document), Place(0))


def test_the_note_says_which_values_are_looked_at() -> None:
    (note,) = nominal_note(read())
    assert "3 points by web_speed" in note
    assert note.endswith("kp = 4.2")
