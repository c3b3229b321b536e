"""The design in the record: complete, exact, readable, and read back through the same gate."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.design import Design, Overrides, design_from_resolved, design_from_text, load_design
from realize.errors import RealizeError

F = Fraction
FIXTURES = sorted((Path(__file__).parents[2] / "fixtures").glob("*.toml"))

EVERYTHING = """
[design]
name = "roller_gap"
transfer = "kp + ki/s + kd*s + 0*(s + w)/(s + w)"
about = "one line"
revision = "A"
requirement = "R-1"
author = "bk"
[design.values]
kp = 4.2
ki = 18
kd = "9/100"
w = "2*pi*50"
[sampling]
rate = "2 kHz"
band = "20 Hz"
[rolloff]
placement = "whole"
order = 2
damping = 0.7071
pole = "300 Hz"
phase_budget = "5.5 deg"
[method]
name = "bilinear-prewarped"
exact_at = "40 Hz"
[signals.input]
range = [-8.0, "25/3"]
unit = "mm"
per_count = "0.0005"
offset = 2048
type = "float"
[signals.output]
range = [-1.0, "1/sqrt(2)"]
per_count = "1/4200"
[target]
structure = "cascade"
coefficients = "table"
recursion_sign = "add"
anti_windup = "back-calculation"
tracking_time = "1/3 s"
guard_nonfinite = false
[tolerance]
step_overshoot = "1 %"
pole_shift = "2/3 %"
[[accept]]
check = "magnitude in band"
limit = "4 dB"
because = "b"
by = "x"
[[accept]]
check = "stability"
because = "b"
by = "x"
"""

SMALL = '[design]\ntransfer = "1"\n'
PLANT = (
    SMALL
    + """
[method]
name = "frequency-fit"
compensate_delay = true
[plant]
transfer = "k/(J*s^2 + s)"
dead_time = "1/3 ms"
sensor = "exp(-td*s)*(s + w)/((s + w)*(tf*s + 1))"
[plant.values]
k = 2
J = 0.05
td = 0.001
tf = "1/5000"
w = "2*pi*50"
[[plant.case]]
name = "light"
values = { J = "1/30", td = "pi/1000" }
[[plant.case]]
name = "soft"
values = { k = 1 }
[loop]
compute_delay = "1.5 samples"
jitter = "20 us"
[tolerance]
loop_sensitivity_most = 1.8
[[accept]]
check = "loop sensitivity"
limit = 2.2
because = "b"
by = "x"
"""
)

TEXTS = {
    "everything": EVERYTHING,
    "plant and loop": PLANT,
    "one case": SMALL + '[plant]\ntransfer = "1/s"',
    "a delay in seconds": SMALL + '[plant]\ntransfer = "1/s"\n[loop]\ncompute_delay = "1/3 ms"',
    "no delay": SMALL + '[plant]\ntransfer = "1/s"\n[loop]\ncompute_delay = "0 s"\njitter = "0 s"',
    "compensation by choice": SMALL + "[method]\ncompensate_delay = true",
    "a value of twice the longest digits": '[design]\ntransfer = "k"\n[design.values]\nk = "(pi+1)^40/(pi+2)^40"',
    "only a transfer": '[design]\ntransfer = "2*s"',
    "automatic roll-off": '[design]\ntransfer = "2*s"\n[rolloff]',
    "zeros and poles": "[design]\ngain = 2\nzeros = [[-1, 2], [-1, -2]]\npoles = [-3, -4, -5]",
    "long coefficients": '[design]\nnumerator = ["pi^11"]\ndenominator = [1, "sqrt(2)", "pi^11"]',
    "one name after another": '[design]\ntransfer = "b/a"\n[design.values]\nb = "2*a"\na = 3',
}


def through_json(design: Design) -> Any:
    return json.loads(json.dumps(design.resolved(), allow_nan=False))


def everything() -> Any:
    return through_json(design_from_text(EVERYTHING, "servo.toml"))


def plant_document() -> Any:
    return through_json(design_from_text(PLANT, "servo.toml"))


def changed(document: Any, path: tuple[Any, ...], value: object) -> Any:
    inner = document
    for step in path[:-1]:
        inner = inner[step]
    inner[path[-1]] = value
    return document


@pytest.mark.parametrize("text", TEXTS.values(), ids=TEXTS)
def test_a_design_comes_back_whole_from_its_record(text: str) -> None:
    design = design_from_text(text, "servo.toml")
    assert design_from_resolved(through_json(design)) == design
    assert design_from_resolved(design.resolved()) == design


def test_a_measured_plant_comes_back_whole_without_its_file(tmp_path: Path) -> None:
    (tmp_path / "plant.csv").write_text("frequency_hz,magnitude_db,phase_deg\n1,0,-10\n", newline="\r\n")
    text = '[plant]\nresponse = "plant.csv"\ndead_time = "1 ms"\nsensor = "exp(-s)/(s+1)"'
    design = design_from_text(SMALL + text, "servo.toml", Overrides(), str(tmp_path))
    document = through_json(design)
    assert design_from_resolved(document) == design
    assert document["plant"]["response_text"] == "frequency_hz,magnitude_db,phase_deg\n1,0,-10\n"
    assert str(tmp_path) not in json.dumps(document)


def test_a_plant_is_exact_in_the_record_case_by_case() -> None:
    plant = plant_document()["plant"]
    assert (plant["transfer"], plant["response"]) == ("k/(J*s^2 + s)", None)
    nominal, light, soft = plant["cases"]
    assert [case["name"] for case in plant["cases"]] == ["nominal", "light", "soft"]
    assert (nominal["numerator"], nominal["denominator"]) == (["40"], ["1", "20", "0"])
    assert (light["numerator"], light["denominator"]) == (["60"], ["1", "30", "0"])
    assert (soft["numerator"], soft["denominator"]) == (["20"], ["1", "20", "0"])
    assert nominal["dead_time_s"] == "1/750"  # 1/3 ms and 1 ms
    # 1/3 ms and pi = 3.14159 26535 89793 23846 264 ms, added by hand.
    assert light["dead_time_s_decimal"] == "0.0034749259869231265718"
    assert nominal["sensor"]["denominator"] == ["1", "5000"]
    assert len(nominal["sensor"]["cancelled"]) == 2
    assert light["values"][1] == {"name": "J", "value": "1/30"}


def test_the_delay_of_the_loop_is_in_one_unit_and_stands_beside_a_plant() -> None:
    loop = {"compute_delay_samples": "3/2", "compute_delay_s": None, "jitter_s": "1/50000"}
    assert plant_document()["loop"] == loop
    assert (everything()["plant"], everything()["loop"]) == (None, None)


def test_where_nothing_cancelled_there_is_nothing_in_the_record() -> None:
    # in the controller s + 100 pi cancels; in the plant nothing does
    assert len(everything()["cancelled"]) == 2
    nominal = plant_document()["plant"]["cases"][0]
    assert (nominal["cancelled"], len(nominal["sensor"]["cancelled"])) == ([], 2)
    one_case = through_json(design_from_text(TEXTS["one case"], "servo.toml"))
    assert (one_case["cancelled"], one_case["plant"]["cases"][0]["sensor"]["cancelled"]) == ([], [])


def test_a_common_factor_of_1_is_none() -> None:
    design = design_from_text(TEXTS["one case"], "servo.toml")
    assert design_from_resolved(changed(through_json(design), ("cancelled",), ["1"])) == design


def test_there_are_fixtures() -> None:
    assert len(FIXTURES) >= 7


@pytest.mark.parametrize("path", FIXTURES, ids=lambda path: path.stem)
def test_a_fixture_comes_back_whole_from_its_record(path: Path) -> None:
    design = load_design(str(path))
    assert design_from_resolved(through_json(design)) == design


def test_the_order_of_keys_in_the_json_does_not_matter() -> None:
    design = design_from_text(EVERYTHING, "servo.toml")
    shuffled = json.loads(json.dumps(design.resolved(), sort_keys=True))
    assert design_from_resolved(shuffled) == design


def test_the_record_does_not_tell_where_the_file_was() -> None:
    one, other = (design_from_text(EVERYTHING, source) for source in ("/home/a/servo.toml", "b.toml"))
    assert one == other
    assert one.resolved() == other.resolved()
    assert design_from_resolved(one.resolved()).source == "record"


def test_numbers_are_exact_strings_in_lowest_terms() -> None:
    document = everything()
    # (4.2 s + 18 + 0.09 s^2)/s, with the factor s + 100 pi that cancels
    assert document["numerator"] == ["9", "420", "1800"]
    assert document["denominator"] == ["100", "0"]
    assert [entry["value"] for entry in document["values"][:3]] == ["21/5", "18", "9/100"]
    assert document["sampling"]["period_s"] == "1/2000"
    assert document["rolloff"]["damping"] == "7071/10000"
    assert document["signals"]["input"]["range"] == ["-8", "25/3"]
    assert document["tolerance"] == {"pole_shift": "2/3", "step_overshoot": "1"}
    assert document["accept"][0]["limit"] == "4"
    assert document["accept"][1]["limit"] is None


def test_what_comes_from_pi_or_a_root_has_a_twin_of_20_digits() -> None:
    document = everything()
    assert document["values"][3]["value_decimal"] == "314.15926535897932385"
    assert document["sampling"]["band_rad_s_decimal"] == "125.66370614359172954"
    assert document["signals"]["output"]["range_decimal"] == ["-1", "0.70710678118654752440"[:-1]]
    assert F(document["sampling"]["band_rad_s"]) == design_from_text(EVERYTHING, "s").band_rad_s
    assert "value_decimal" not in document["values"][0]


def test_the_keys_are_the_same_for_every_design() -> None:
    small = through_json(design_from_text(TEXTS["only a transfer"], "servo.toml"))

    def keys(document: Any) -> set[str]:
        return {key for key in document if not key.endswith("_decimal")}

    full = everything()
    assert keys(small) == keys(full)
    for table in ("sampling", "method", "target"):
        assert keys(small[table]) == keys(full[table])
    assert keys(small["signals"]["input"]) == keys(full["signals"]["output"])
    assert small["rolloff"] is None


@pytest.mark.parametrize(
    ("path", "value", "where", "found"),
    [
        (("name",), "x; y", "record, [design] name", "the name"),
        (("name",), 3, "record, [design] name", "the number 3"),
        (("extra",), 3, "record", "the unknown table"),
        (("transfer",), None, "record, [design] transfer", "nothing"),
        (("transfer",), "a\nb", "record, [design] transfer", "control characters"),
        (("numerator",), [], "record, [design] numerator", "a list of 0"),
        (("numerator",), ["1"] * 40, "record, [design] numerator", "a list of 40"),
        (("numerator",), ["0"], "record, [design] numerator", "that is zero"),
        (("denominator",), ["1.5", None], "record, [design] denominator", "nothing"),
        (("denominator",), [1.5], "record, [design] denominator", "a binary number"),
        (("denominator",), "1", "record, [design] denominator", '"1"'),
        (("cancelled",), "1", "record, [design] cancelled", '"1"'),
        (("cancelled",), ["0"], "record, [design] denominator", "a denominator of zero"),
        (("cancelled",), ["9" * 50000], "record, [design] cancelled", "a number of 50000 characters"),
        (("values",), {"kp": "1"}, "record, [[values]]", "a table"),
        (("values", 0, "name"), "s", "record, [[values]] number 1, name", "a meaning of its own"),
        (("values", 0, "value"), "1/0", "record, [[values]] number 1, value", "a denominator of zero"),
        (("values", 0, "value"), None, "record, [[values]] number 1, value", "an entry without"),
        (("sampling", "period_s"), 0.5, "record, [sampling] period_s", "a binary number"),
        (("sampling", "period_s"), "-1", "record, [sampling] period", '"-1 s"'),
        (("sampling",), 3, "record, [sampling]", "the number 3"),
        (("method", "name"), "magic", "record, [method] name", '"magic"'),
        (("target", "arithmetic"), "int99", "record, [target] arithmetic", '"int99"'),
        (("signals", "third"), {}, "record, [signals]", "the unknown key"),
        (("accept", 0, "unit"), "%", "record, [[accept]] number 1, limit", "belongs to a percentage"),
        (("accept", 0, "limit"), 4, "record, [[accept]] number 1, limit", "the number 4"),
        (("tolerance", "pole_shift"), 2, "record, [tolerance] pole_shift", "the number 2"),
    ],
)
def test_a_record_that_was_tampered_with_is_refused(
    path: tuple[Any, ...], value: object, where: str, found: str
) -> None:
    with pytest.raises(RealizeError) as caught:
        design_from_resolved(changed(everything(), path, value))
    assert caught.value.where == where
    assert found in caught.value.found


CASE = ("plant", "cases", 1)


@pytest.mark.parametrize(
    ("path", "value", "where", "found"),
    [
        (("plant",), None, "record, [loop]", "a loop without a plant"),
        (("plant",), {}, "record, [plant] cases", "0 cases"),
        (("plant",), [], "record, [plant]", "a list"),
        (("plant", "extra"), 1, "record, [plant]", "the unknown key"),
        (("plant", "cases"), [], "record, [plant] cases", "0 cases"),
        (("plant", "cases"), {}, "record, [[plant.cases]]", "a table"),
        (("plant", "transfer"), None, "record, [plant] transfer", "nothing"),
        (("plant", "transfer"), 3, "record, [plant] transfer", "the number 3"),
        (("plant", "response"), "p.csv", "record, [plant] cases", "3 cases named nominal, light, soft"),
        (("plant", "response_text"), "1,2", "record, [plant] response_text", '"1,2"'),
        ((*CASE, "name"), "nominal", "record, [plant] cases", "named nominal, nominal, soft"),
        ((*CASE, "name"), "a\nb", "record, [[plant.cases]] number 2, name", "control characters"),
        ((*CASE, "extra"), 1, "record, [[plant.cases]] number 2", "the unknown key"),
        ((*CASE, "numerator"), ["0"], "record, [[plant.cases]] number 2, numerator", "that is zero"),
        ((*CASE, "denominator"), ["0"], "record, [[plant.cases]] number 2, denominator", "a denominator of zero"),
        ((*CASE, "dead_time_s"), "-1/3", "record, [[plant.cases]] number 2, dead_time_s", '"-1/3 s"'),
        ((*CASE, "dead_time_s"), None, "record, [[plant.cases]] number 2, dead_time_s", "nothing"),
        ((*CASE, "dead_time_s"), 0.5, "record, [[plant.cases]] number 2, dead_time_s", "a binary number"),
        ((*CASE, "sensor"), None, "record, [[plant.cases]] number 2, sensor, numerator", "a list of 0"),
        (
            (*CASE, "sensor", "numerator"),
            ["1", "2", "3"],
            "record, [[plant.cases]] number 2, sensor, numerator",
            "improper",
        ),
        ((*CASE, "values", 0, "name"), "s", "record, [[plant.cases]] number 2, values number 1, name", "a meaning"),
        (("loop", "compute_delay_s"), "1", "record, [loop] compute_delay_s", "a second compute_delay"),
        (("loop", "jitter_s"), "-1", "record, [loop] jitter", '"-1 s"'),
        (("loop", "delay"), "-1", "record, [loop]", "the unknown key"),
        (("method", "compensate_delay"), "yes", "record, [method] compensate_delay", '"yes"'),
        (("method", "name"), "bilinear", "record, [method] compensate_delay", "with the method bilinear"),
    ],
)
def test_a_plant_that_was_tampered_with_is_refused(
    path: tuple[Any, ...], value: object, where: str, found: str
) -> None:
    with pytest.raises(RealizeError) as caught:
        design_from_resolved(changed(plant_document(), path, value))
    assert caught.value.where == where
    assert found in caught.value.found


@pytest.mark.parametrize(
    ("key", "value", "found"),
    [
        ("response_text", None, "nothing"),
        ("response_text", 3, "the number 3"),
        ("response_text", "", "nothing but blanks"),
        ("response_text", "1" * 200000, "a text of 200000 characters"),
        ("response_text", "\ud800", "the character U+D800"),
        ("transfer", "1/s", '"1/s"'),
        ("response", "", "an empty text"),
    ],
)
def test_a_measured_plant_that_was_tampered_with_is_refused(
    tmp_path: Path, key: str, value: object, found: str
) -> None:
    (tmp_path / "p.csv").write_text("1,2")
    design = design_from_text(SMALL + '[plant]\nresponse = "p.csv"', "servo.toml", Overrides(), str(tmp_path))
    with pytest.raises(RealizeError) as caught:
        design_from_resolved(changed(through_json(design), ("plant", key), value))
    assert caught.value.where.startswith(f"record, [plant] {key}")
    assert found in caught.value.found


json_values = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=5), st.just("1/3")),
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(st.text(max_size=5), inner, max_size=3)),
    max_leaves=6,
)


@given(st.data())
def test_any_change_to_a_record_is_read_or_refused(data: st.DataObject) -> None:
    document = data.draw(st.sampled_from([everything, plant_document]))()
    key = data.draw(st.sampled_from(sorted(document)))
    inner = document
    while data.draw(st.booleans()) and isinstance(inner[key], dict | list) and inner[key]:
        inner = inner[key]
        key = data.draw(st.sampled_from(sorted(inner) if isinstance(inner, dict) else range(len(inner))))
    inner[key] = data.draw(json_values)
    outcome: object
    try:
        outcome = design_from_resolved(document)
    except RealizeError as error:
        outcome = error
    assert isinstance(outcome, Design | RealizeError)
