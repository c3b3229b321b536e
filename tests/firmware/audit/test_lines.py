"""The first line that differs."""

from __future__ import annotations

import pytest

from realize.firmware.audit.lines import first_difference


@pytest.mark.parametrize(
    ("content", "text"),
    [
        ("one\ntwo\n", None),
        ("one\nTWO\n", 'line 2 is "TWO", where "two" is emitted today'),
        ("one\n", "it ends before line 2"),
        ("", 'line 1 is "", where "one" is emitted today'),
        ("one\ntwo", "it ends before line 3"),
        ("one\ntwo\nthree\n", "it goes on at line 3, where what is emitted today ends"),
        ("one\r\ntwo\r\n", "its lines end in CR LF, where LF is emitted"),
        ("one\ntwo\r\n", "its lines end in CR LF, where LF is emitted"),
        ("one\nt\x1bwo\n", 'line 2 is "t?wo", where "two" is emitted today'),
    ],
)
def test_the_first_line_that_differs_is_told(content: str, text: str | None) -> None:
    found = first_difference(content.encode(), "one\ntwo\n")
    assert (found and found.text) == text


def test_bytes_that_are_no_text_are_told_too() -> None:
    found = first_difference(b"one\n\xff\n", "one\ntwo\n")
    assert found is not None
    assert found.text.startswith("line 2 is ")


def test_long_lines_are_quoted_around_the_difference() -> None:
    found = first_difference(b"a" * 200 + b"X" + b"b" * 200, "a" * 200 + "Y" + "b" * 200)
    assert found is not None
    assert found.found == "..." + "a" * 30 + "X" + "b" * 29 + "..."
    assert found.wanted == "..." + "a" * 30 + "Y" + "b" * 29 + "..."
