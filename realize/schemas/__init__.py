"""The schemas of the design file and of every JSON document, which lie beside this file.

They are JSON Schema, draft 2020-12. What several of them share stands once, in ``shared.schema.json``; a schema that is
handed out has its own copy of it, so that every editor and validator can read it without finding another file.
"""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator, Mapping
from importlib.resources import files
from typing import Any

from realize.algebra.expression.tokens import listed, nearest, shown
from realize.errors import RealizeError

#: What has a schema, in the order of the work.
NAMES = (
    "design",
    "assess",
    "compare",
    "rates",
    "words",
    "emit",
    "record",
    "report",
    "trial",
    "audit",
    "differ",
    "error",
)

_SHARED = "urn:realize:1:shared#/$defs/"
_OWN = "#/$defs/"

Schema = dict[str, Any]


def title(name: str) -> str:
    """What a schema describes, in a few words."""
    return str(_read(name)["title"])


def schema(name: str) -> Schema:
    """Return one schema, whole: it refers to nothing outside itself.

    Raises
    ------
    RealizeError
        When there is no schema of that name.
    """
    if name not in NAMES:
        like = nearest(name, NAMES)
        advice = f"did you mean {like}?" if like else "realize schema lists them"
        raise RealizeError("NAME", f"the unknown document {shown(name)}", listed(NAMES), advice)
    document = _read(name)
    used = _used(document, _read("shared")["$defs"])
    whole: Schema = _with_references(document, _own)
    own = whole.pop("$defs", {})
    return {**whole, "$defs": own | used} if own or used else whole


def schema_text(name: str) -> str:
    """Return one schema as text; see :func:`schema`."""
    return json.dumps(schema(name), indent=2) + "\n"


def _read(name: str) -> Schema:
    text = files(__name__).joinpath(f"{name}.schema.json").read_text(encoding="utf-8")
    return dict(json.loads(text))


def _used(document: Schema, shared: Mapping[str, Schema]) -> dict[str, Schema]:
    """The shared definitions that a schema refers to, directly or through others, in the order they stand in."""
    waiting = [ref.removeprefix(_SHARED) for ref in _references(document) if ref.startswith(_SHARED)]
    found: set[str] = set()
    while waiting:
        name = waiting.pop()
        if name not in found:
            found.add(name)
            waiting += [ref.removeprefix(_OWN) for ref in _references(shared[name])]
    return {name: shared[name] for name in shared if name in found}


def _references(node: object) -> Iterator[str]:
    if isinstance(node, dict):
        for key, value in node.items():
            yield from [value] if key == "$ref" else _references(value)
    elif isinstance(node, list):
        for each in node:
            yield from _references(each)


def _own(reference: str) -> str:
    return reference.replace(_SHARED, _OWN)


def _with_references(node: Any, change: Callable[[str], str]) -> Any:
    """A copy with every reference changed."""
    if isinstance(node, dict):
        return {k: change(v) if k == "$ref" else _with_references(v, change) for k, v in node.items()}
    return [_with_references(each, change) for each in node] if isinstance(node, list) else node
