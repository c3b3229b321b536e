"""How a screen is set: paragraphs, lists and tables, at most 100 columns wide."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from textwrap import fill

WIDTH = 100

#: The space between a number and its unit.
_UNIT_AFTER_NUMBER = re.compile(r"([0-9]) (?=(?:%|Hz|kHz|MHz|rad/s|deg|dB|s|ms|us)(?![A-Za-z]))")

#: What stands behind a figure that is out, and behind one that is out but agreed to.
OUT, AGREED = "!", "*"


def heading(text: str) -> str:
    """A line above a block."""
    return f"{text}\n"


def bullets(items: Iterable[str]) -> str:
    """One item a line, wrapped."""
    return "".join(wrapped(item, indent="  - ", rest="    ") for item in items)


def wrapped(text: str, indent: str = "", rest: str | None = None) -> str:
    """A paragraph within the width; a number stays with its unit."""
    follow = indent if rest is None else rest
    whole = _UNIT_AFTER_NUMBER.sub("\\1\0", text)
    lines = fill(whole, WIDTH, initial_indent=indent, subsequent_indent=follow, break_on_hyphens=False)
    return lines.replace("\0", " ") + "\n"


def table(rows: Sequence[Sequence[str]], *, right_from: int | None = None) -> str:
    """Columns flush left, each as wide as its widest cell, two spaces apart, or one where room is short.

    Parameters
    ----------
    rows : sequence of sequence of str
        All of one length.
    right_from : int, optional
        First of the columns that are flush right.
    """
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    gap = 2 if sum(widths) + 2 * len(widths) <= WIDTH else 1
    left = len(widths) if right_from is None else right_from
    padded = ([f"{cell:{'<' if i < left else '>'}{widths[i]}}" for i, cell in enumerate(row)] for row in rows)
    lines = map((" " * gap).join, padded)
    return "".join(f"  {line.rstrip()}\n" for line in lines)


def figures_table(head: Sequence[Sequence[str]], rows: Sequence[Sequence[str]], *, first: int) -> str:
    """A table whose columns from ``first`` on are figures: flush right, a mark standing behind its figure."""
    marked = [any(row[i].endswith((OUT, AGREED)) for row in rows) for i in range(len(rows[0]))]
    beside = [[_beside_marks(*pair) for pair in zip(row, marked, strict=True)] for row in rows]
    return table([*head, *beside], right_from=first)


def _beside_marks(cell: str, marked: bool) -> str:
    return cell if not marked or cell.endswith((OUT, AGREED)) else f"{cell} "
