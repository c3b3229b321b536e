"""The packages that only a trial needs."""

from __future__ import annotations

from realize.extras import require as require_packages

_PURPOSE = "the compiler (ziglang), the emulator (unicorn) and the reader of its programs (pyelftools)"


def require(*packages: str) -> None:
    """Refuse to go on without the packages, named as they are imported.

    Raises
    ------
    RealizeError
        When one of them is missing.
    """
    require_packages("realize trial", packages, _PURPOSE, "target")
