"""One place to compile in, for the whole session."""

from __future__ import annotations

import pytest

from tests.firmware.bench import Bench


@pytest.fixture(scope="session")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Bench:
    return Bench(tmp_path_factory.mktemp("firmware"))
