"""The design in the record: complete, exact, readable, and read back through the same gate."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.design import Design, design_from_resolved, design_from_text, load_design
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

TEXTS = {
    "everything": EVERYTHING,
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


@pytest.mark.parametrize("text", TEXTS.values(), ids=TEXTS)
def test_a_design_comes_back_whole_from_its_record(text: str) -> None:
    design = design_from_text(text, "servo.toml")
    assert design_from_resolved(through_json(design)) == design
    assert design_from_resolved(design.resolved()) == design


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
        (("cancelled",), ["9" * 30000], "record, [design] cancelled", "a number of 30000 characters"),
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
    document = everything()
    inner = document
    for step in path[:-1]:
        inner = inner[step]
    inner[path[-1]] = value
    with pytest.raises(RealizeError) as caught:
        design_from_resolved(document)
    assert caught.value.where == where
    assert found in caught.value.found


json_values = st.recursive(
    st.one_of(st.none(), st.booleans(), st.integers(), st.floats(), st.text(max_size=5), st.just("1/3")),
    lambda inner: st.one_of(st.lists(inner, max_size=3), st.dictionaries(st.text(max_size=5), inner, max_size=3)),
    max_leaves=6,
)


@given(st.data())
def test_any_change_to_a_record_is_read_or_refused(data: st.DataObject) -> None:
    document = everything()
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
