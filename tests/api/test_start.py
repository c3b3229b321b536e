"""``import realize`` is cheap, and still offers everything by name."""

from __future__ import annotations

import subprocess
import sys

import pytest

import realize

HEAVY = ("numpy", "scipy", "click", "realize.api", "realize.transfer")


def loaded_after(statement: str) -> set[str]:
    """Modules of a fresh interpreter after one statement."""
    code = f"import sys\n{statement}\nprint(' '.join(sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    return set(done.stdout.split())


def test_importing_the_package_loads_nothing_heavy() -> None:
    assert loaded_after("import realize").isdisjoint(HEAVY)


def test_what_is_asked_for_is_loaded_without_scipy_and_click() -> None:
    modules = loaded_after("import realize; realize.TransferFunction, realize.discretize, realize.emit")
    assert "realize.api.transfer" in modules
    assert modules.isdisjoint({"scipy", "click"})


@pytest.mark.parametrize("name", realize.__all__)
def test_every_name_is_there_and_documented(name: str) -> None:
    assert (getattr(realize, name).__doc__ or "").strip()
    assert name in dir(realize)
    # Found without asking again.
    assert name in vars(realize)


def test_a_name_that_is_not_there_is_told_as_python_tells_it_with_those_that_are() -> None:
    with pytest.raises(AttributeError, match=r"module 'realize' has no attribute 'disctretize'; it has .*, emit"):
        realize.__getattr__("disctretize")


def test_the_names_it_lists_are_those_it_offers() -> None:
    assert [name for name in dir(realize) if not name.startswith("__")] == sorted(realize.__all__)
    assert {"__doc__", "__name__", "__all__"} <= set(dir(realize))
