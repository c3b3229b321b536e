"""The examples of the public functions and classes do what they show."""

from __future__ import annotations

import doctest
import inspect
from importlib import import_module

import pytest

import realize

MODULES = (*(f"realize.api.{name}" for name in ("discrete", "jobs", "results", "transfer")), "realize.errors")


@pytest.mark.parametrize("module", MODULES)
def test_the_examples_run(module: str) -> None:
    found = doctest.testmod(import_module(module))
    assert found.attempted > 0
    assert found.failed == 0


@pytest.mark.parametrize("name", [name for name in realize.__all__ if name != "Check"])
def test_every_public_name_has_an_example_but_checks_which_methods_show(name: str) -> None:
    public = getattr(realize, name)
    assert ">>>" in (inspect.getdoc(public) or "")
    assert public.__module__ in MODULES
