"""The packages that only the page needs."""

from __future__ import annotations

from realize.extras import require as require_packages


def require() -> None:
    """Refuse to go on without the library that draws and the one that fills templates.

    Raises
    ------
    RealizeError
        When one of them is missing.
    """
    purpose = "the library that draws (matplotlib) and the one that fills the page (jinja2)"
    require_packages("realize report", ("matplotlib", "jinja2"), purpose, "report")
