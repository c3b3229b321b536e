"""The names a design may use are those that methods and checks go by."""

from __future__ import annotations

from realize.checks.tolerances import DEFAULTS
from realize.design import CHECK_UNITS, LOOP_METHODS, METHODS, TOLERANCE_KEYS
from realize.methods import METHODS as KNOWN_METHODS


def test_every_method_there_is_can_be_named_and_no_other() -> None:
    assert set(METHODS) == set(KNOWN_METHODS)
    assert not set(METHODS) & set(LOOP_METHODS)


def test_every_tolerance_with_a_default_can_be_set_in_its_unit() -> None:
    assert {key: TOLERANCE_KEYS[key] for key in DEFAULTS} == {key: d.unit for key, d in DEFAULTS.items()}


def test_every_check_with_a_default_can_be_accepted_in_its_unit() -> None:
    assert {d.check: CHECK_UNITS[d.check] for d in DEFAULTS.values()} == {d.check: d.unit for d in DEFAULTS.values()}
