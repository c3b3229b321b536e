"""The record: exact, hashed, and the same on every machine."""

from __future__ import annotations

import json
from fractions import Fraction
from hashlib import sha256
from typing import Any

import pytest

from realize.firmware import Emission, render_firmware
from realize.firmware.record import record
from realize.version import VERSION
from tests.firmware.bench import rendered
from tests.firmware.designs import UNIT_RANGE, grid

DESIGNS = list(grid())


def recorded(emission: Emission) -> dict[str, Any]:
    return dict(json.loads(rendered(emission)[f"{emission.name}.record.json"]))


def test_its_keys_are_those_others_rely_on() -> None:
    assert list(recorded(DESIGNS[0])) == [
        *("schema", "design", "causal", "method", "structure", "arithmetic", "integral", "sections", "checks"),
        *("accepted", "loop", "files", "tool"),
    ]
    assert recorded(DESIGNS[0])["schema"] == "realize/1"


@pytest.mark.parametrize("emission", DESIGNS, ids=lambda e: e.name)
def test_every_coefficient_is_recorded_twice_exactly_and_for_subtraction(emission: Emission) -> None:
    said, realization = recorded(emission), emission.realization
    assert said["arithmetic"] == realization.format.name
    assert said["structure"] == realization.structure
    groups = [(said["integral"], realization.integral)]
    for section, stored in zip(said["sections"], realization.sections, strict=True):
        assert section.get("operator") == ("delta" if said["structure"] == "delta" else None)
        section = section.get("coefficients", section)
        groups += [(section["b"], stored.b), (section["a"], stored.a)]
    for entries, values in groups:
        assert [Fraction(entry["value"]) for entry in entries] == list(map(Fraction, values))
        assert [float.fromhex(entry["stored"]) for entry in entries] == list(values)
        assert all(entry["fraction_bits"] is None for entry in entries)


@pytest.mark.parametrize("emission", [e for e in DESIGNS if e.realization.structure == "delta"], ids=lambda e: e.name)
def test_a_section_in_delta_is_recorded_in_z_too_where_it_is_exact_but_not_stored(emission: Emission) -> None:
    sections = recorded(emission)["sections"]
    assert len(sections) == len(emission.realization.sections)
    for said, stored in zip(sections, emission.realization.sections, strict=True):
        assert list(said) == ["b", "a", "operator", "coefficients"]
        assert all((c["stored"], c["fraction_bits"]) == (None, None) for c in (*said["b"], *said["a"]))
        values = {"b": [Fraction(c["value"]) for c in said["b"]], "a": [Fraction(c["value"]) for c in said["a"]]}
        # both are the same ratio, at three points more than fit by chance
        for z in (Fraction(2), Fraction(-3), Fraction(7, 2), Fraction(11)):
            in_z = ratio(values["b"], values["a"], z)
            assert in_z == ratio([Fraction(c) for c in stored.b], [Fraction(c) for c in stored.a], z - 1)


def ratio(b: list[Fraction], a: list[Fraction], x: Fraction) -> Fraction:
    """``sum b_i x^-i / (1 + sum a_i x^-i)``."""
    above = sum((c / x**i for i, c in enumerate(b)), Fraction(0))
    return above / (1 + sum((c / x**i for i, c in enumerate(a, 1)), Fraction(0)))


def test_the_hashes_are_those_of_the_files() -> None:
    files = render_firmware(DESIGNS[0])
    said = recorded(DESIGNS[0])["files"]
    assert list(said) == [name for name in files if not name.endswith(".json")]
    assert all(sha256(files[name].encode()).hexdigest() == digest for name, digest in said.items())


def test_the_version_is_recorded_and_nowhere_in_what_is_hashed() -> None:
    files = render_firmware(DESIGNS[0])
    assert recorded(DESIGNS[0])["tool"] == {"name": "realize", "version": VERSION}
    assert all(VERSION not in text for name, text in files.items() if name.endswith((".h", ".c")))


def test_figures_are_rounded_and_what_is_not_finite_is_null() -> None:
    check = {
        "check": "pole shift",
        "reference": complex(-1.23456789, 2.0),
        "obtained": float("nan"),
        "difference": 0.123456789,
        "tolerance": 2.0,
        "worst": [1.0 / 3.0, float("inf")],
    }
    emission = DESIGNS[0]._replace(checks=[check], accepted=[{"check": "pole shift", "limit": Fraction(5, 2)}])
    said = recorded(emission)
    assert said["checks"] == [
        {
            "check": "pole shift",
            "reference": {"re": -1.2346, "im": 2.0},
            "obtained": None,
            "difference": 0.12346,
            "tolerance": 2.0,
            "worst": [0.33333, None],
        }
    ]
    assert said["accepted"] == [{"check": "pole shift", "limit": "5/2"}]


def test_figures_of_the_loop_are_rounded_and_its_delay_is_exact() -> None:
    loop = {"compute_delay_s": Fraction(1, 3), "cases": ({"case": "a", "discrete": {"phase_margin_deg": 200 / 3}},)}
    assert record(DESIGNS[0]._replace(loop=loop), {})["loop"] == {
        "compute_delay_s": "1/3",
        "cases": [{"case": "a", "discrete": {"phase_margin_deg": 66.667}}],
    }
    assert recorded(DESIGNS[0])["loop"] is None


def test_the_design_is_recorded_as_it_was_given() -> None:
    design = {"name": "g0", "values": {"kp": "21/5"}, "about": "\u00b5", "signals": {"output": {"range": ["-1", "1"]}}}
    assert recorded(DESIGNS[0]._replace(design=design))["design"] == design


def test_rendering_twice_gives_the_same_bytes_in_the_same_order() -> None:
    for emission in DESIGNS[:12]:
        first, second = render_firmware(emission), render_firmware(emission._replace(output_range=UNIT_RANGE))
        ends = (".h", ".c", "_selftest.c", "_vectors.csv", ".record.json")
        assert list(first) == [f"{emission.name}{end}" for end in ends]
        assert list(render_firmware(emission).items()) == list(first.items())
        assert first.keys() == second.keys()
        assert all(text.isascii() and text.endswith("\n") and "\r" not in text for text in first.values())
