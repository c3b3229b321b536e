"""A document held against its schema, by a library."""

from __future__ import annotations

import json
from functools import cache
from typing import Any

from jsonschema import Draft202012Validator
from jsonschema.exceptions import best_match

from realize.schemas import schema


@cache
def validator(name: str) -> Draft202012Validator:
    return Draft202012Validator(schema(name))


def complaint(document: object, name: str) -> str | None:
    """What the schema has against a document; None for nothing."""
    error = best_match(validator(name).iter_errors(document))
    return None if error is None else f"{error.json_path}: {error.message}"


def takes(document: object, name: str) -> bool:
    """Whether the schema has nothing against a document; stops at the first it has."""
    return bool(validator(name).is_valid(document))


def validated(document: dict[str, Any]) -> dict[str, Any]:
    """The document, which its own schema must take as it goes out: NaN is none of JSON."""
    sent = json.loads(json.dumps(document, allow_nan=False))
    name = "error" if "error" in sent else sent.get("command", "record")
    assert complaint(sent, name) is None
    return document
