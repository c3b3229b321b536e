"""Small designs, emitted, to be spoiled in one place each."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from realize.design import design_from_text
from realize.firmware import write_all
from realize.firmware.job import emit

LEAD = """
[design]
name = "lead"
transfer = "k*(0.2*s + 1)/(0.02*s + 1)"
[design.values]
k = 5
[sampling]
rate = "2 kHz"
[method]
name = "bilinear"
"""

COUNTED = """
[signals.input]
range = [-8, 8]
per_count = "1/200"
[signals.output]
range = [-400, 400]
per_count = "1/40"
[target]
arithmetic = "int16"
"""


def written(folder: Path, text: str = LEAD) -> Path:
    """The record of a design, its files beside it."""
    paths = write_all(folder, emit(design_from_text(text, "lead.toml")).files)
    return next(path for path in paths if path.name.endswith(".record.json"))


def document(record: Path) -> dict[str, Any]:
    return dict(json.loads(record.read_text(encoding="utf-8")))


def rewrite(record: Path, content: dict[str, Any]) -> None:
    """As emission writes a record."""
    record.write_text(json.dumps(content, indent=2) + "\n", encoding="utf-8")
