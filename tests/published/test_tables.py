"""The tables themselves: each says what it holds and where it comes from."""

from __future__ import annotations

import json
from pathlib import Path

_FIXTURES = Path(__file__).parents[2] / "fixtures"


def test_every_table_names_its_content_and_source() -> None:
    tables = sorted((_FIXTURES / "published").glob("*.json"))
    assert len(tables) >= 6
    for path in tables:
        table = json.loads(path.read_text(encoding="utf-8"))
        assert table["what"], path.name
        assert table["source"], path.name


def test_every_fixture_is_listed_with_its_source() -> None:
    listed = (_FIXTURES / "SOURCES.md").read_text(encoding="utf-8")
    files = [path.relative_to(_FIXTURES).as_posix() for path in _FIXTURES.rglob("*.*") if path.name != "SOURCES.md"]
    assert len(files) >= 18
    assert [name for name in files if f"`{name}`" not in listed] == []
