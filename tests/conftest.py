"""For the whole suite: one hypothesis profile, reproducible and without a clock; and what shares a process.

Most tests go to whichever process is free. Those of some modules share what is costly to make, designs and compiled
programs: each group of such modules stays in one process.
"""

from __future__ import annotations

from typing import Any

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile(
    "fixed",
    deadline=None,
    derandomize=True,
    max_examples=60,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.filter_too_much],
)
settings.load_profile("fixed")

_SHARING = {
    "floats": ("branches", "c_header", "c_source", "compiled", "record", "selftest"),
    "integers": ("c_halves", "c_header", "c_text", "compiled", "record", "selftest", "vectors"),
}
_PLACES = {"floats": "tests/firmware", "integers": "tests/firmware/integer"}

#: Group of a file; those of one fixture are a group by themselves.
GROUPS = {
    **{f"{_PLACES[group]}/test_{name}.py": group for group, names in _SHARING.items() for name in names},
    **{
        path: path
        for path in (
            "tests/firmware/test_calls.py",
            "tests/firmware/test_static_analysis.py",
            "tests/firmware/integer/test_noise.py",
            "tests/firmware/integer/test_small_inputs.py",
        )
    },
}


@pytest.hookimpl(optionalhook=True)
def pytest_xdist_make_scheduler(config: pytest.Config, log: Any) -> Any:
    """Tests one by one, but for groups."""
    from xdist.scheduler import LoadScopeScheduling

    class Grouped(LoadScopeScheduling):  # type: ignore[misc]
        def _split_scope(self, nodeid: str) -> str:
            return GROUPS.get(nodeid.partition("::")[0], nodeid)

    return Grouped(config, log)
