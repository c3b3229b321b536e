"""Errors in the words of a call: what the command line names as options are keywords here."""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager

from realize.errors import RealizeError

#: An option with its value in quotes, or without one.
_OPTION = re.compile(r'--([a-z]+)(?: (?="))?')

#: What the message on an unknown name advises.
_DEFINE = re.compile(r"define (\w+) under \[design\.values\], or give it with --value")

#: Options whose keyword has another name.
_KEYWORDS = {"value": "values"}


@contextmanager
def in_keywords() -> Iterator[None]:
    """Pass on every error of the block with its options called keywords."""
    try:
        yield
    except RealizeError as error:
        where = _said(error.where).replace("=", "") if error.where.startswith("--") else error.where
        found, allowed, advice = (_said(text) for text in (error.found, error.allowed, error.advice))
        raise type(error)(where, found, allowed, advice, error.excerpt) from None


def _said(text: str) -> str:
    named = _DEFINE.sub(r"give \1 a number among the values", text)
    return _OPTION.sub(lambda option: f"{_KEYWORDS.get(option[1], option[1])}=", named).replace(
        "to the command", "to the call"
    )
