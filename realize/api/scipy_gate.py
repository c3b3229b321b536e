"""The way to scipy, which is loaded when it is asked for and may be missing."""

from __future__ import annotations

from importlib import import_module
from importlib.util import find_spec
from types import ModuleType

from realize.errors import RealizeError


def scipy_objects() -> ModuleType:
    """The module that exchanges objects with scipy.

    Raises
    ------
    RealizeError
        When scipy is not installed.
    """
    if find_spec("scipy") is None:
        raise RealizeError("scipy", "it is not installed", "scipy 1.11 or later", 'pip install "realize[audit]"')
    return import_module("realize.api.scipy_objects")
