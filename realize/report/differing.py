"""The answer of `realize differ`, for people and for scripts."""

from __future__ import annotations

from itertools import groupby

from realize.algebra.expression.tokens import printable
from realize.firmware.differ import Difference, Row
from realize.report.documents import SCHEMA, Document
from realize.report.paragraphs import WIDTH, bullets, heading, table, wrapped

#: What a table adds to its cells: an indent, and two gaps.
_FRAME = 6


def differ_text(found: Difference) -> str:
    """The screen of `realize differ`: a block for each group of changes."""
    name = printable(found.record["design"]["name"])
    counted = len(found.rows)
    if not counted:
        return wrapped(f"yes: {name}: nothing differs") + bullets(found.notes)
    blocks = [wrapped(f"no: {name}: {counted} {'change' if counted == 1 else 'changes'}.")]
    blocks += [heading(group) + _block(list(rows)) for group, rows in groupby(found.rows, key=lambda row: row.group)]
    blocks += [heading("Notes") + bullets(found.notes)] if found.notes else []
    return "\n".join(blocks)


def _block(rows: list[Row]) -> str:
    """A table where it fits, else a sentence for each change."""
    cells = [["", "before", "now"], *([row.what, row.old, row.new] for row in rows)]
    if sum(max(map(len, column)) for column in zip(*cells, strict=True)) + _FRAME <= WIDTH:
        return table(cells)
    return bullets(f"{row.what}: {row.old} before, {row.new} now" for row in rows)


def differ_document(found: Difference, old: str, new: str) -> Document:
    """The answer of `realize differ` for scripts; ``design`` is that of the new record."""
    design = found.record["design"]
    return {
        "schema": SCHEMA,
        "command": "differ",
        "design": {"name": design["name"], "transfer": design["transfer"]},
        "old": old,
        "new": new,
        "equal": not found.rows,
        "changes": [row._asdict() for row in found.rows],
        "notes": list(found.notes),
    }
