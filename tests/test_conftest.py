"""Groups of tests that share a process are of files that exist."""

from pathlib import Path

from tests.conftest import GROUPS


def test_every_file_of_a_group_is_there() -> None:
    top = Path(__file__).parent.parent
    assert [path for path in GROUPS if not (top / path).is_file()] == []
