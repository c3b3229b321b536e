"""The schema of the design file and the loader agree: on every key, every kind of value and every word."""

from __future__ import annotations

import re
import tomllib
from copy import deepcopy
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st
from jsonschema import Draft202012Validator

from realize.design.gate import WrittenNumber
from realize.design.load import design_from_document
from realize.errors import RealizeError
from realize.quantity import Dimension, parse_quantity, quantity_allowed
from realize.schemas import schema
from realize.starter import starter_text
from tests.schemas.validation import complaint, takes

FIXTURES = Path(__file__).parents[2] / "fixtures"

#: Designs that use every key between them; what excludes each other stands in different ones.
WHOLE = """
[design]
name = "gap"
transfer = "kp + ki/s + kd*s"
about = "a"
revision = "b"
requirement = "c"
author = "d"
[design.values]
kp = 4.2
ki = "36/2"
kd = 0.09
[sampling]
rate = "2 kHz"
band = "20 Hz"
[rolloff]
placement = "whole"
order = 2
damping = 0.7071
pole = "1900 rad/s"
phase_budget = "6 deg"
[method]
name = "bilinear-prewarped"
exact_at = "10 Hz"
compensate_delay = false
[plant]
transfer = "v/(s*(tm*s + 1))"
dead_time = "0.4 ms"
sensor = "1/(0.0002*s + 1)"
[plant.values]
v = 22
tm = 0.05
[[plant.case]]
name = "heavy"
values = { tm = 0.08 }
[loop]
compute_delay = "1 sample"
jitter = "20 us"
[signals.input]
range = [-8.0, 8.0]
unit = "mm"
per_count = "0.0005"
offset = 12
type = "int16"
[signals.output]
range = [-1.0, "1"]
per_count = "1/4200"
type = "uint16"
offset = 4200
[target]
arithmetic = "int16"
structure = "delta"
coefficients = "table"
recursion_sign = "add"
anti_windup = "back-calculation"
tracking_time = "0.2 s"
guard_nonfinite = true
[tolerance]
pole_shift = "2 %"
zero_shift = "2 %"
magnitude_in_band = "0.5 dB"
phase_in_band = "5 deg"
low_frequency_gain = "1 %"
step_deviation = "1 %"
step_overshoot = "1 %"
converter_step = "5 %"
round_off = "1 %"
loop_phase_margin_loss = "5 deg"
loop_phase_margin_least = "30 deg"
loop_sensitivity_most = 2
loop_overshoot_rise = "2 %"
[[accept]]
check = "step overshoot"
limit = "4 %"
because = "the reference is ramped"
by = "e"
[[accept]]
check = "stability"
because = "on purpose"
by = "e"
[[accept]]
check = "loop sensitivity"
limit = 2.5
because = "known"
by = "e"
"""
ROOTS = """
[design]
zeros = [-3, [-5, 8.5], [-5, -8.5]]
poles = ["-2*w", -30, -40, -50]
gain = 2
values = { w = 1.5 }
[sampling]
period = "1 ms"
[signals.output]
type = "double"
[target]
arithmetic = "float64"
structure = "cascade"
[method]
name = "frequency-fit"
compensate_delay = true
[plant]
response = "plant.csv"
"""
COEFFICIENTS = '[design]\nnumerator = [1, 2.5]\ndenominator = ["1/3", 4]\n[method]\nexact_at = "3 Hz"\n'
SCHEDULED = """
[design]
transfer = "kp + ki/s"
values = { kp = 4.2, ki = 18 }
[plant]
transfer = "v/(s + 2)"
values = { v = 22 }
[schedule]
variable = "speed"
unit = "m/s"
points = [0.5, "1/1", 2]
grid = 4
[schedule.values]
kp = [5, 4.2, "3"]
[schedule.plant_values]
v = [20.5, 22, 24]
"""
MEASURED = "frequency_hz,magnitude_db,phase_deg\n1,-20,-30\n2,-20,-30\n"

Path_ = tuple[str | int, ...]


@pytest.fixture(scope="module", autouse=True)
def _measured_plant(tmp_path_factory: pytest.TempPathFactory) -> Any:
    """Where the designs find the measurement they name."""
    folder = tmp_path_factory.mktemp("designs")
    (folder / "plant.csv").write_text(MEASURED)
    with pytest.MonkeyPatch.context() as patch:
        patch.chdir(folder)
        yield


def as_json(node: Any) -> Any:
    """As an editor sees a TOML document: decimals are floats."""
    if isinstance(node, dict):
        return {key: as_json(value) for key, value in node.items()}
    if isinstance(node, list):
        return [as_json(each) for each in node]
    return float(node) if isinstance(node, WrittenNumber) else node


def parsed(text: str) -> dict[str, Any]:
    return tomllib.loads(text, parse_float=WrittenNumber)


def loader_takes(document: dict[str, Any]) -> bool:
    try:
        design_from_document(document, "x.toml")
    except RealizeError:
        return False
    return True


def schema_takes(document: dict[str, Any]) -> bool:
    return takes(as_json(document), "design")


def places(node: Any, above: Path_ = ()) -> list[Path_]:
    """Every place in a document."""
    below = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    return [above] * bool(above) + [place for key, value in below for place in places(value, (*above, key))]


def at(document: Any, place: Path_) -> Any:
    for key in place:
        document = document[key]
    return document


def changed(document: dict[str, Any], place: Path_, value: Any) -> dict[str, Any]:
    copy = deepcopy(document)
    at(copy, place[:-1])[place[-1]] = value
    return copy


BASES = {
    "whole": parsed(WHOLE),
    "roots": parsed(ROOTS),
    "coefficients": parsed(COEFFICIENTS),
    "scheduled": parsed(SCHEDULED),
}
PLACES = [(name, place) for name, base in BASES.items() for place in places(base)]
TABLES = [
    (name, place)
    for name, place in [(name, ()) for name in BASES] + PLACES
    if isinstance(at(BASES[name], place), dict) and place[-1:] not in (("values",), ("plant_values",))
]


@pytest.mark.parametrize("path", sorted(FIXTURES.glob("*.toml")), ids=lambda path: path.stem)
def test_every_fixture_is_as_the_schema_says(path: Path) -> None:
    assert complaint(tomllib.loads(path.read_text(encoding="utf-8")), "design") is None


def test_the_starter_is_as_the_schema_says() -> None:
    assert complaint(tomllib.loads(starter_text("gap")), "design") is None


@pytest.mark.parametrize("name", BASES)
def test_the_designs_of_these_tests_are_taken_by_both(name: str) -> None:
    design_from_document(BASES[name], "x.toml")
    assert complaint(as_json(BASES[name]), "design") is None


def test_they_use_every_key_there_is() -> None:
    whole = schema("design")
    used = {place[0] for _, place in PLACES}
    assert used == set(whole["properties"])
    for table, entry in whole["properties"].items():
        if "properties" in entry:
            here = {place[1] for _, place in PLACES if len(place) > 1 and place[0] == table}
            assert here == set(entry["properties"]), table
    for kind, table in (("signal", "signals"), ("accepted", "accept")):
        here = {place[2] for _, place in PLACES if len(place) > 2 and place[0] == table}
        assert here == set(whole["$defs"][kind]["properties"]), kind


@pytest.mark.parametrize(("name", "place"), TABLES, ids=str)
def test_every_table_has_the_keys_that_the_loader_knows_and_no_other(name: str, place: Path_) -> None:
    document = changed(BASES[name], (*place, "not_there"), 1)
    with pytest.raises(RealizeError, match=r'unknown (?:key|table) "not_there"') as caught:
        design_from_document(document, "x.toml")
    assert not schema_takes(document)
    assert set(caught.value.allowed.split(", ")) == known_to_schema(place)


def known_to_schema(place: Path_) -> set[str]:
    whole = schema("design")
    here = whole
    for key in place:
        here = here["items"] if isinstance(key, int) else here["properties"][key]
        here = whole["$defs"][here["$ref"].removeprefix("#/$defs/")] if "$ref" in here else here
    return set(here["properties"])


#: Of every kind that TOML has, and none that any key takes.
OF_NO_KIND = [[[[]]], {"not_there": {"at": {"all": 1}}}]


@pytest.mark.parametrize(("name", "place"), PLACES, ids=str)
def test_a_value_of_another_kind_is_refused_by_both(name: str, place: Path_) -> None:
    for value in OF_NO_KIND:
        document = changed(BASES[name], place, value)
        assert not schema_takes(document), value
        assert not loader_takes(document), value


#: Keys that take one word of several.
WORDS = [
    *(("rolloff", "placement"), ("method", "name"), ("signals", "input", "type"), ("accept", 0, "check")),
    *(("target", key) for key in ("arithmetic", "structure", "coefficients", "recursion_sign", "anti_windup")),
]


@pytest.mark.parametrize("place", WORDS, ids=str)
def test_every_word_that_the_loader_allows_is_one_of_the_schema_and_no_other(place: Path_) -> None:
    """By what the loader lists when it refuses another one."""
    document = changed(BASES["whole"], place, "not-there")
    with pytest.raises(RealizeError) as caught:
        design_from_document(document, "x.toml")
    assert not schema_takes(document)
    words = caught.value.allowed.split(", ")
    assert len(words) > 1
    for word in words:
        assert complaint_at(changed(BASES["whole"], place, word), place) is None, word
    # as in any other capitals
    assert complaint_at(changed(BASES["whole"], place, words[-1].upper()), place) is not None


def complaint_at(document: dict[str, Any], place: Path_) -> str | None:
    """What the schema has against the word at a place, whatever that does to other keys."""
    whole = schema("design")
    here = {"$defs": whole["$defs"], **entry_of(whole, place)}
    error = next(Draft202012Validator(here).iter_errors(at(document, place)), None)
    return None if error is None else error.message


def entry_of(whole: dict[str, Any], place: Path_) -> dict[str, Any]:
    here = whole
    for key in place:
        here = here["items"] if isinstance(key, int) else here["properties"][key]
        here = whole["$defs"][here["$ref"].removeprefix("#/$defs/")] if "$ref" in here and key != place[-1] else here
    return here


#: Places, what stands there, and whether it may: what one key says about another.
BETWEEN = [
    ("whole", ("sampling", "period"), "1 ms", False),
    ("whole", ("design", "gain"), 2, False),
    ("whole", ("design", "numerator"), [1], False),
    ("roots", ("design", "transfer"), "1/s", False),
    ("coefficients", ("design", "zeros"), [], False),
    ("coefficients", ("design",), {"numerator": [1]}, False),
    ("coefficients", ("design",), {"zeros": [], "poles": [-1]}, False),
    ("coefficients", ("design",), {"gain": 2, "poles": [-1]}, True),
    ("coefficients", ("design",), {}, False),
    ("whole", ("method", "name"), "bilinear", False),
    ("whole", ("method", "name"), "auto", True),
    ("roots", ("method", "name"), "step-invariant", False),
    ("whole", ("plant", "response"), "plant.csv", False),
    ("roots", ("plant", "values"), {"v": 1}, False),
    ("roots", ("plant",), {}, False),
    ("coefficients", ("loop",), {"jitter": "1 ms"}, False),
    ("whole", ("plant", "case"), [{"name": "heavy"}], False),
    ("whole", ("plant", "case"), [{"name": "heavy", "values": {}}], False),
    ("whole", ("plant", "case"), [{"name": "nominal", "values": {"v": 2}}], False),
    ("whole", ("target", "anti_windup"), "none", False),
    ("roots", ("target", "anti_windup"), "back-calculation", False),
    ("roots", ("target", "structure"), "error-feedback", False),
    ("whole", ("target", "structure"), "error-feedback", True),
    ("roots", ("signals", "output", "type"), "float", False),
    ("roots", ("signals", "output", "type"), "float64", True),
    ("roots", ("signals", "output", "type"), "int16", False),
    ("coefficients", ("signals",), {"input": {"type": "float"}}, True),
    ("coefficients", ("signals",), {"input": {"type": "double"}}, False),
    ("whole", ("signals", "output", "type"), "float32", False),
    ("whole", ("signals", "input", "range"), [1], False),
    ("whole", ("signals", "input", "per_count"), 0, False),
    ("whole", ("signals", "input", "offset"), 2**31 + 1, False),
    ("whole", ("signals", "input", "offset"), WrittenNumber("1.5"), False),
    ("whole", ("signals", "input", "unit"), "m" * 25, False),
    ("whole", ("rolloff", "order"), 0, False),
    ("whole", ("rolloff", "order"), True, False),
    ("whole", ("rolloff", "damping"), WrittenNumber("1.5"), False),
    ("whole", ("rolloff", "pole"), "auto", True),
    ("whole", ("accept", 0), {"check": "stability", "limit": "2 %", "because": "x", "by": "y"}, False),
    ("whole", ("accept", 0), {"check": "pole shift", "because": "x", "by": "y"}, False),
    ("whole", ("accept", 0), {"check": "saturation recovery", "because": "x", "by": "y"}, True),
    ("whole", ("accept", 0), {"check": "saturation recovery", "limit": "9 %", "because": "x", "by": "y"}, True),
    ("whole", ("accept", 0), {"check": "phase in band", "limit": "2 %", "because": "x", "by": "y"}, False),
    ("whole", ("accept", 0), {"check": "phase in band", "limit": "2 deg", "because": "x", "by": "y"}, True),
    ("whole", ("accept", 0), {"check": "loop stability", "because": "x"}, False),
    ("whole", ("design", "name"), "a__b", False),
    ("whole", ("design", "name"), "x" * 25, False),
    ("whole", ("design", "values", "s"), 1, False),
    ("whole", ("design", "values", "2k"), 1, False),
    ("whole", ("design", "about"), " ", False),
    ("whole", ("design", "about"), "a\nb", False),
    ("scheduled", ("schedule",), {}, False),
    ("scheduled", ("schedule", "points"), [1], False),
    ("scheduled", ("schedule", "grid"), 1, False),
    ("scheduled", ("schedule", "grid"), 1001, False),
    ("scheduled", ("schedule", "values"), {}, False),
    ("scheduled", ("schedule", "plant_values"), {}, True),
    ("scheduled", ("schedule", "variable"), "2speed", False),
    ("coefficients", ("design", "numerator"), [], False),
    ("coefficients", ("design", "denominator"), [1] * 34, False),
    ("roots", ("design", "poles"), [[1, 2, 3]], False),
]


@pytest.mark.parametrize(("name", "place", "value", "allowed"), BETWEEN, ids=str)
def test_what_one_key_says_about_another_is_the_same_to_both(
    name: str, place: Path_, value: Any, allowed: bool
) -> None:
    document = changed(BASES[name], place, value)
    assert schema_takes(document) is allowed
    assert loader_takes(document) is allowed


#: Places of quantities, and what they may be quantities of.
QUANTITIES: list[tuple[str, Path_, tuple[Dimension, ...]]] = [
    ("whole", ("sampling", "rate"), ("rate",)),
    ("whole", ("sampling", "band"), ("angular frequency",)),
    ("whole", ("rolloff", "phase_budget"), ("angle",)),
    ("whole", ("rolloff", "pole"), ("angular frequency",)),
    ("whole", ("plant", "dead_time"), ("time",)),
    ("whole", ("loop", "compute_delay"), ("samples", "time")),
    ("whole", ("tolerance", "pole_shift"), ("percent",)),
    ("whole", ("tolerance", "magnitude_in_band"), ("decibel",)),
    ("roots", ("sampling", "period"), ("time",)),
]

DIMENSIONS = sorted({dimension for _, _, dimensions in QUANTITIES for dimension in dimensions})


def units(dimension: Dimension) -> list[str]:
    """Those that the loader lists where it refuses others."""
    listed = re.search(r"\((.*?)\)", quantity_allowed(dimension))
    assert listed is not None
    return listed[1].split(", ")


@pytest.mark.parametrize(("name", "place", "dimensions"), QUANTITIES, ids=str)
def test_every_unit_of_the_loader_is_one_of_the_schema_and_no_other(
    name: str, place: Path_, dimensions: tuple[Dimension, ...]
) -> None:
    for dimension in DIMENSIONS:
        for unit in units(dimension):
            allowed = any(unit in units(own) for own in dimensions)
            assert schema_takes(changed(BASES[name], place, f"0.75 {unit}")) is allowed, unit


NUMBERS = st.sampled_from(
    ["1", "2.5", ".5", "3.", "1e-3", "4E+1", "5/2", "1 / 20", "+7", "-1", "1.2.3", "", "0x1", "e3"]
)
BLANKS = st.sampled_from(["", " ", "  ", "\t"])


@given(at_place=st.sampled_from(QUANTITIES), number=NUMBERS, blanks=st.tuples(BLANKS, BLANKS, BLANKS), data=st.data())
def test_a_quantity_is_written_alike_for_both(
    at_place: tuple[str, Path_, tuple[Dimension, ...]], number: str, blanks: tuple[str, str, str], data: st.DataObject
) -> None:
    """What the loader has against its size, such as a band beyond half the rate, the schema cannot know."""
    name, place, dimensions = at_place
    unit = data.draw(st.sampled_from([*units(dimensions[0]), "", "HZ"]))
    before, between, behind = blanks
    text = f"{before}{number}{between}{unit}{behind}"
    document = changed(BASES[name], place, text)
    if loader_takes(document):
        assert schema_takes(document)
    if schema_takes(document):
        assert parse_quantity(text, dimensions[0], "here") > 0


ANYTHING = st.one_of(
    st.booleans(),
    st.integers(-3, 3),
    st.sampled_from([WrittenNumber("0.25"), WrittenNumber("-1.5"), WrittenNumber("1e3")]),
    st.sampled_from(["", "auto", "1", "1/3", "2 kHz", "5 ms", "3 %", "3 deg", "s", "kp", "int16", "float", "a b"]),
    st.lists(st.integers(-2, 2), max_size=3),
    st.dictionaries(st.sampled_from(["name", "kp", "range"]), st.integers(0, 2), max_size=2),
)


@given(at_place=st.sampled_from(PLACES), value=ANYTHING)
def test_what_the_loader_takes_the_schema_takes(at_place: tuple[str, Path_], value: Any) -> None:
    name, place = at_place
    document = changed(BASES[name], place, value)
    assert schema_takes(document) or not loader_takes(document)
