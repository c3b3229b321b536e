"""Packages that only one command needs, and what to say where they are not installed."""

from __future__ import annotations

from importlib.util import find_spec

from realize.errors import RealizeError


def require(command: str, packages: tuple[str, ...], purpose: str, extra: str) -> None:
    """Refuse to go on without some packages.

    Parameters
    ----------
    command : str
        Which needs them.
    packages : tuple of str
        As they are imported.
    purpose : str
        What each is for.
    extra : str
        Of this project, with which they come.

    Raises
    ------
    RealizeError
        When one of them is missing.
    """
    missing = [name for name in packages if find_spec(name) is None]
    if missing:
        found = f"{' and '.join(missing)} not installed"
        raise RealizeError(command, found, purpose, f'pip install "realize[{extra}]"')
