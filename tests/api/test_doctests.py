"""The examples of the public functions and classes do what they show."""

from __future__ import annotations

import doctest
import inspect
from importlib import import_module

import pytest

import realize

MODULES = ("discrete", "jobs", "results", "transfer")

#: Classes whose use shows in the examples of what makes them.
MADE_ELSEWHERE = ("Check", "MethodResult", "Proposal", "RealizeError", "Refused")


@pytest.mark.parametrize("module", MODULES)
def test_the_examples_run(module: str) -> None:
    found = doctest.testmod(import_module(f"realize.api.{module}"))
    assert found.attempted > 0
    assert found.failed == 0


@pytest.mark.parametrize("name", [name for name in realize.__all__ if name not in MADE_ELSEWHERE])
def test_every_public_name_has_an_example(name: str) -> None:
    public = getattr(realize, name)
    assert ">>>" in (inspect.getdoc(public) or "")
    assert public.__module__.removeprefix("realize.api.") in MODULES
