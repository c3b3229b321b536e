"""The packages that only the page needs, and what to say where they are not installed."""

from __future__ import annotations

from importlib.util import find_spec

from realize.errors import RealizeError

INSTALL = 'pip install "realize[report]"'


def require() -> None:
    """Refuse to go on without the library that draws and the one that fills templates.

    Raises
    ------
    RealizeError
        When one of them is missing.
    """
    missing = [name for name in ("matplotlib", "jinja2") if find_spec(name) is None]
    if missing:
        raise RealizeError(
            "realize report",
            f"{' and '.join(missing)} not installed",
            "the library that draws (matplotlib) and the one that fills the page (jinja2)",
            INSTALL,
        )
