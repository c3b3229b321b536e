"""The first line in which a file is not what it should be."""

from __future__ import annotations

from itertools import zip_longest
from typing import NamedTuple

from realize.firmware.changes import excerpts


class Line(NamedTuple):
    """What stands there, what should (None where there is no such line), and both in a sentence."""

    found: str | None
    wanted: str | None
    text: str


def first_difference(content: bytes, wanted: str) -> Line | None:
    """The first line that differs from what is emitted today; None where none does."""
    if content == wanted.encode():
        return None
    text = content.decode("utf-8", errors="replace")
    if text.replace("\r\n", "\n") == wanted:
        return Line("CR LF", "LF", "its lines end in CR LF, where LF is emitted")
    if text.endswith("\n") and wanted.endswith("\n"):
        text, wanted = text[:-1], wanted[:-1]
    lines = enumerate(zip_longest(text.split("\n"), wanted.split("\n")), 1)
    number, (found, should) = next((i, pair) for i, pair in lines if pair[0] != pair[1])
    if found is None:
        return Line(None, should, f"it ends before line {number}")
    if should is None:
        return Line(found, None, f"it goes on at line {number}, where what is emitted today ends")
    here, there = excerpts(found, should)
    return Line(here, there, f'line {number} is "{here}", where "{there}" is emitted today')
