"""Data flows one way: no module imports from a layer above its own, and the core stays light."""

import ast
import sys
from pathlib import Path

import pytest

import realize

PACKAGE = Path(realize.__file__).parent

#: From the bottom up; modules of one layer may import each other.
LAYERS = (
    ("errors", "extras", "parallel", "version"),
    ("algebra",),
    ("transfer", "quantity", "schemas"),
    ("design", "starter"),
    ("band", "rolloff", "realizability"),
    ("methods",),
    ("checks",),
    ("loop",),
    ("arithmetic",),
    ("loop_design",),
    ("workflow",),
    ("schedule",),
    ("firmware", "rates", "words"),
    ("trial",),
    ("report",),
    ("page",),
    ("api",),
    ("cli", "__main__", "__init__"),
)
RANK = {name: rank for rank, names in enumerate(LAYERS) for name in names}
CORE = ("algebra", "methods", "checks", "arithmetic")
MODULES = sorted(path.relative_to(PACKAGE) for path in PACKAGE.rglob("*.py"))


def _imports(path: Path) -> set[str]:
    tree = ast.parse((PACKAGE / path).read_text(encoding="utf-8"))
    names = {alias.name for node in ast.walk(tree) if isinstance(node, ast.Import) for alias in node.names}
    return names | {node.module for node in ast.walk(tree) if isinstance(node, ast.ImportFrom) and node.module}


def _layer(path: Path) -> str:
    return path.parts[0].removesuffix(".py")


def test_every_module_has_a_layer() -> None:
    assert {_layer(path) for path in MODULES} <= set(RANK)


@pytest.mark.parametrize("path", MODULES, ids=str)
def test_nothing_lower_knows_anything_higher(path: Path) -> None:
    used = {name.split(".")[1] for name in _imports(path) if name.startswith("realize.")}
    assert {name for name in used if RANK[name] > RANK[_layer(path)]} == set()


@pytest.mark.parametrize("path", [path for path in MODULES if _layer(path) in CORE], ids=str)
def test_the_core_imports_numpy_and_the_standard_library_only(path: Path) -> None:
    outside = {name.split(".")[0] for name in _imports(path)} - set(sys.stdlib_module_names)
    assert outside <= {"numpy", "realize"}


def test_scipy_is_loaded_for_the_second_opinion_and_to_exchange_objects_with_it() -> None:
    using = [str(path) for path in MODULES if any(name.split(".")[0] == "scipy" for name in _imports(path))]
    assert using == ["api/scipy_objects.py", "firmware/audit/scipy_roads.py"]
    name = "realize.firmware.audit.scipy_roads"
    assert [str(path) for path in MODULES if name in _imports(path)] == ["firmware/audit/second_opinion.py"]
    # Loaded by name, when it is asked for.
    assert not [str(path) for path in MODULES if "realize.api.scipy_objects" in _imports(path)]
    named = [path for path in MODULES if "realize.api.scipy_objects" in (PACKAGE / path).read_text(encoding="utf-8")]
    assert list(map(str, named)) == ["api/scipy_gate.py"]
