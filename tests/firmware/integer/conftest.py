"""One place to compile integer code in, for the whole session."""

from __future__ import annotations

import pytest

from tests.firmware.integer.bench import IntegerBench


@pytest.fixture(scope="session")
def integer_bench(tmp_path_factory: pytest.TempPathFactory) -> IntegerBench:
    return IntegerBench(tmp_path_factory.mktemp("integer"))
