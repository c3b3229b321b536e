"""The packages that only a trial needs, and what to say where they are not installed."""

from __future__ import annotations

from importlib.util import find_spec

from realize.errors import RealizeError

INSTALL = 'pip install "realize[target]"'


def require(*packages: str) -> None:
    """Refuse to go on without the packages, named as they are imported.

    Raises
    ------
    RealizeError
        When one of them is missing.
    """
    missing = [name for name in packages if find_spec(name) is None]
    if missing:
        raise RealizeError(
            "realize trial",
            f"{' and '.join(missing)} not installed",
            "the compiler (ziglang), the emulator (unicorn) and the reader of its programs (pyelftools)",
            INSTALL,
        )
