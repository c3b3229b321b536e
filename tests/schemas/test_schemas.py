"""The schemas themselves: valid, whole, in the package, and in the words of the model."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Iterator
from fnmatch import fnmatch
from fractions import Fraction
from importlib.resources import files
from pathlib import Path
from typing import Any

import pytest
from jsonschema import Draft202012Validator

from realize.checks.tolerances import DEFAULTS
from realize.cli import commands
from realize.design.model import (
    CHECK_UNITS,
    COUNT_TYPES,
    DEFAULT_LOOP,
    DEFAULT_TARGET,
    FLOAT_STRUCTURES,
    INTEGER_STRUCTURES,
    LOOP_METHODS,
    METHODS,
    TOLERANCE_KEYS,
    Rolloff,
)
from realize.errors import RealizeError
from realize.loop.checks import LOOP_DEFAULTS
from realize.report.documents import SCHEMA
from realize.schemas import NAMES, schema, schema_text, title

ROOT = Path(__file__).parents[2]
SHARED = json.loads(files("realize.schemas").joinpath("shared.schema.json").read_text(encoding="utf-8"))["$defs"]

#: Commands whose answer is no JSON document.
WITHOUT_DOCUMENT = {"new", "schema"}


def nodes(node: object) -> Iterator[dict[str, Any]]:
    """Every object in a schema."""
    if isinstance(node, dict):
        yield node
    for each in node.values() if isinstance(node, dict) else node if isinstance(node, list) else ():
        yield from nodes(each)


@pytest.mark.parametrize("name", NAMES)
def test_a_schema_is_valid_against_the_schema_of_schemas(name: str) -> None:
    Draft202012Validator.check_schema(schema(name))
    assert schema(name)["$schema"] == Draft202012Validator.META_SCHEMA["$id"]


@pytest.mark.parametrize("name", NAMES)
def test_a_schema_is_named_without_an_address_and_refers_to_nothing_outside_itself(name: str) -> None:
    document = json.loads(schema_text(name))
    assert document["$id"] == f"urn:realize:1:{name}"
    references = {node["$ref"] for node in nodes(document) if "$ref" in node}
    assert references <= {f"#/$defs/{key}" for key in document.get("$defs", {})}


@pytest.mark.parametrize("name", [*NAMES, "shared"])
def test_a_schema_is_in_the_package_and_in_what_is_built_of_it(name: str) -> None:
    assert files("realize.schemas").joinpath(f"{name}.schema.json").is_file()
    settings = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    patterns = settings["tool"]["setuptools"]["package-data"]["realize"]
    assert any(fnmatch(f"schemas/{name}.schema.json", pattern) for pattern in patterns)


def test_every_schema_in_the_package_has_a_name_and_every_document_a_schema() -> None:
    there = {each.name for each in files("realize.schemas").iterdir() if each.name.endswith(".json")}
    assert there == {f"{name}.schema.json" for name in (*NAMES, "shared")}
    assert set(commands.commands) - WITHOUT_DOCUMENT <= set(NAMES)
    assert all(title(name) for name in NAMES)


def test_what_is_shared_stands_once_and_is_used() -> None:
    used = set[str]()
    for name in NAMES:
        own = json.loads(files("realize.schemas").joinpath(f"{name}.schema.json").read_text(encoding="utf-8"))
        assert not set(own.get("$defs", {})) & set(SHARED)
        used |= set(schema(name).get("$defs", {})) & set(SHARED)
    assert used == set(SHARED)


def test_an_unknown_document_is_refused_with_the_nearest_name() -> None:
    with pytest.raises(RealizeError, match="did you mean design") as caught:
        schema("desing")
    assert caught.value.exit_status == 2


# ---------------------------------------------------------------- words


def test_the_words_are_those_of_the_model() -> None:
    assert SHARED["schema_version"]["const"] == SCHEMA
    assert tuple(SHARED["method_name"]["enum"]) == (*METHODS, *LOOP_METHODS)
    assert tuple(SHARED["check_name"]["enum"]) == tuple(CHECK_UNITS)
    assert tuple(SHARED["float_structure"]["enum"]) == FLOAT_STRUCTURES
    assert tuple(SHARED["integer_structure"]["enum"]) == INTEGER_STRUCTURES
    assert set(SHARED["check_fields"]["properties"]["unit"]["enum"]) == {unit or "" for unit in CHECK_UNITS.values()}
    types = schema("design")["$defs"]["signal"]["properties"]["type"]["enum"]
    assert set(COUNT_TYPES) < set(types)
    tolerance = SHARED["resolved_design"]["properties"]["tolerance"]["properties"]
    assert [key for key in tolerance if not key.endswith("_decimal")] == list(TOLERANCE_KEYS)


@pytest.mark.parametrize("table", [key for key in schema("design")["properties"] if key != "accept"])
def test_every_key_of_the_design_file_is_described_with_what_holds_without_it(table: str) -> None:
    whole = schema("design")
    here = whole["properties"][table]
    assert here["description"]
    below = [*here["properties"].items(), *whole["$defs"]["signal"]["properties"].items()]
    for key, entry in below:
        assert entry["description"], key
        if "default" in entry:
            said = entry["default"]
            shown = str(said).lower() if isinstance(said, bool) else str(said)
            assert f"Default: {shown}" in entry["description"], key


def test_what_holds_without_a_key_is_what_the_model_says() -> None:
    tables = schema("design")["properties"]
    target = {key: entry["default"] for key, entry in tables["target"]["properties"].items() if "default" in entry}
    assert target == {key: value for key, value in DEFAULT_TARGET._asdict().items() if value is not None}
    rolloff = {key: entry["default"] for key, entry in tables["rolloff"]["properties"].items() if "default" in entry}
    asked = Rolloff()
    assert rolloff == {
        "placement": asked.placement,
        "damping": asked.damping,
        "pole": "auto",
        "phase_budget": f"{asked.phase_budget_deg} deg",
    }
    assert tables["loop"]["properties"]["compute_delay"]["default"] == f"{DEFAULT_LOOP.compute_delay_samples} sample"


def test_the_tolerances_that_hold_without_a_key_are_those_of_the_checks() -> None:
    defaults = {**DEFAULTS, **LOOP_DEFAULTS}
    said = schema("design")["properties"]["tolerance"]["properties"]
    assert said.keys() == defaults.keys() == TOLERANCE_KEYS.keys()
    for key, entry in said.items():
        figure = re.search(r"Default: ([0-9]+(?:\.[0-9]+)?)", entry["description"])
        assert figure is not None, key
        assert Fraction(figure[1]) == defaults[key].tolerance, key
        unit = TOLERANCE_KEYS[key]
        assert f"({unit})" in entry["description"] or not unit, key
