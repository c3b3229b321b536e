"""The designs of fixtures/, emitted once."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from realize.design import load_design
from realize.firmware import write_all
from realize.firmware.job import emit

FIXTURES = Path(__file__).parent.parent.parent / "fixtures"


@pytest.fixture(scope="session")
def emitted(tmp_path_factory: pytest.TempPathFactory) -> Callable[[str], Path]:
    """The record of a design in fixtures/, with its files beside it."""
    records: dict[str, Path] = {}

    def record_of(fixture: str) -> Path:
        if fixture not in records:
            files = emit(load_design(str(FIXTURES / f"{fixture}.toml"))).files
            paths = write_all(tmp_path_factory.mktemp(fixture), files)
            records[fixture] = next(path for path in paths if path.name.endswith(".record.json"))
        return records[fixture]

    return record_of
