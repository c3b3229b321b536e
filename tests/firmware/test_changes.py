"""Differences of two documents, their places, and values in words."""

from __future__ import annotations

import json
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.firmware.changes import (
    MISSING,
    Change,
    changes,
    checks_by_name,
    named_place_text,
    place_text,
    telling,
    value_text,
    value_texts,
)

leaves = st.none() | st.booleans() | st.integers(-2, 2) | st.sampled_from(["", "a", "b"])
documents = st.recursive(
    leaves,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(st.sampled_from(["x", "y", "z"]), inner, max_size=3),
    max_leaves=12,
)


def put(document: Any, change: Change) -> Any:
    """The document with the new value at the place of a change."""
    if not change.place:
        return change.new
    key, deeper = change.place[0], Change(change.place[1:], change.old, change.new)
    if isinstance(key, int):
        inner = put(document[key] if key < len(document) else None, deeper)
        return [*document[:key], *([] if inner is MISSING else [inner]), *document[key + 1 :]]
    inner = put(document.get(key), deeper)
    rest = {k: v for k, v in document.items() if k != key}
    return rest if inner is MISSING else {**document, key: inner}


@given(documents, documents)
def test_the_changes_turn_the_old_document_into_the_new(old: Any, new: Any) -> None:
    found = list(changes(old, new))
    for change in reversed(found):  # what is missing goes from the end of a list
        if not (change.old is MISSING and isinstance(change.place[-1], int)):
            old = put(old, change)
    for change in found:
        if change.old is MISSING and isinstance(change.place[-1], int):
            old = put(old, change)
    assert json.dumps(old, sort_keys=True) == json.dumps(new, sort_keys=True)


@given(documents)
def test_a_document_does_not_differ_from_itself(document: Any) -> None:
    assert list(changes(document, document)) == []


def test_true_is_not_1_and_1_is_not_1_point_0() -> None:
    assert [c.place for c in changes([True, 1, 2], [1, 1.0, 2])] == [(0,), (1,)]


COEFFICIENT = {"value": "1/3", "stored": "0x1p-2", "fraction_bits": None}


def test_a_coefficient_is_one_place() -> None:
    other = {**COEFFICIENT, "value": "1/4", "stored": "0x1p-3"}
    assert [c.place for c in changes({"b": [COEFFICIENT]}, {"b": [other]})] == [("b", 0)]


@pytest.mark.parametrize(
    ("place", "text"),
    [
        (("integral", 0), "integral gain 1"),
        (("sections", 1, "b", 0), "section 2 b0"),
        (("sections", 0, "a", 0), "section 1 a1"),
        (("sections", 0, "coefficients", "c1"), "section 1 c1"),
        (("sections", 0, "coefficients", "b", 0), "section 1 b0 in 1/delta"),
        (("sections", 0, "coefficients", "a", 1), "section 1 a2 in 1/delta"),
        (("sections", 0, "operator"), "section 1, operator"),
        (("sections", 2), "section 3"),
        (("direct_gain",), "direct gain"),
        (("loop", "cases", 0, "x"), "loop.cases.1.x"),
        ((), "the whole"),
    ],
)
def test_places_are_called_as_everywhere_else(place: tuple[str | int, ...], text: str) -> None:
    assert place_text(place) == text


def test_entries_with_a_name_are_called_by_it() -> None:
    old, new = {"values": [{"name": "kp", "value": "1"}]}, {"values": [{"name": "kp", "value": "2"}]}
    assert named_place_text(("values", 0, "value"), old, new) == "values.kp"
    new["values"][0]["name"] = "ki"
    assert named_place_text(("values", 0, "name"), old, new) == "values.1.name"


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (MISSING, "nothing"),
        (None, "nothing"),
        (True, "true"),
        (2.5, "2.5"),
        ("", "an empty text"),
        ("a\x1bb", "a?b"),
        ("1/3", "1/3"),
        ("1" + "0" * 80 + "/3", "3.33333333E+79"),
        ("x" * 80, "x" * 57 + "..."),
        (["1", "2"], "[1, 2]"),
        (["1" * 40] * 2, "a list of 2 entries"),
        ({"re": 1.5, "im": -2.0}, "1.5-2.0j"),
        ({"re": 1.5, "im": 0.0}, "1.5"),
        ({"re": 1.5, "im": None}, "a table of 2 entries"),
        ({"bits": 16, "fraction_bits": 3}, "16 bits, 3 of them fraction bits"),
        (COEFFICIENT, "0.333333333 (0x1p-2)"),
        ({**COEFFICIENT, "stored": 7, "fraction_bits": 9}, "0.333333333 (7, 9 fraction bits)"),
        ({**COEFFICIENT, "stored": None}, "0.333333333"),
        ({**COEFFICIENT, "value": "third"}, "third (0x1p-2)"),
    ],
)
def test_values_are_told_in_one_line(value: Any, text: str) -> None:
    assert value_text(value) == text


def test_values_that_look_alike_get_the_digits_that_tell_them_apart() -> None:
    near = {**COEFFICIENT, "value": "33333333333/100000000000"}
    assert value_texts(COEFFICIENT, near) == ("0.33333333333333333 (0x1p-2)", "0.33333333333 (0x1p-2)")
    assert value_texts(MISSING, None) == ("no entry", "null")
    old, new = value_texts("x" * 100 + "old", "x" * 100 + "new")
    assert (old, new) == ("..." + "x" * 30 + "old", "..." + "x" * 30 + "new")
    assert value_texts("1", 1) == ("1", "1")


def test_what_follows_from_a_change_is_not_told_beside_it() -> None:
    found = [
        Change(("design", "numerator", 0), "1", "2"),
        Change(("design", "numerator_decimal", 0), "1.0", "2.0"),
        Change(("design", "values", 0, "value"), "1", "2"),
    ]
    assert telling(found) == found[2:]
    assert telling(found[:2]) == found[:1]


def test_checks_are_found_by_name_and_numbers() -> None:
    check = {"check": "pole shift", "of": "stored"}
    assert checks_by_name([check, {**check, "of": "exact"}, check, None]) == {
        "pole shift (stored)": check,
        "pole shift (exact)": {**check, "of": "exact"},
        "pole shift (stored), number 3": check,
        "number 4": None,
    }
