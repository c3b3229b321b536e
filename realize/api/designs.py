"""From what a call may be given to a design: a file, an expression, a transfer function, or tables."""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path
from typing import Any, TypeAlias, TypedDict

from realize.algebra.expression import exact_text, format_transfer
from realize.algebra.expression.tokens import nearest, shown
from realize.api.discrete import period_of, rate_of, transfer_of
from realize.api.entries import Number, Real, Reals, entry, text_of
from realize.api.transfer import TransferFunction
from realize.api.wording import in_keywords
from realize.design import Design, Overrides, load_design
from realize.design.load import STANDARD_INPUT, design_from_document
from realize.errors import RealizeError

#: What stands for a design: the path of a file, an expression in s, a transfer function or the pair of its
#: coefficients, or the tables of a file.
DesignLike: TypeAlias = "str | os.PathLike[str] | TransferFunction | tuple[Reals, Reals] | Mapping[str, Any]"

_ALLOWED = (
    "the path of a design file (.toml), an expression in s, a TransferFunction, a pair of coefficients, or a mapping "
    "of the tables of a design file"
)


class Changes(TypedDict, total=False):
    """What a call says in place of the design; each may be left out."""

    rate: str | None
    period: str | None
    rate_hz: Number | None
    period_s: Number | None
    name: str | None
    method: str | None
    values: Mapping[str, Real] | None


def design_of(
    design: DesignLike,
    *,
    rate: str | None = None,
    period: str | None = None,
    rate_hz: Number | None = None,
    period_s: Number | None = None,
    name: str | None = None,
    method: str | None = None,
    values: Mapping[str, Real] | None = None,
) -> Design:
    """Read a design, with what is said in its place.

    Raises
    ------
    RealizeError
        When it cannot be read or understood.
    Refused
        When a cancellation in it hides a growing mode, or a plant is improper.
    """
    if not isinstance(values or {}, Mapping):
        raise RealizeError("values", repr(values), "a mapping of names to numbers", 'such as values={"kp": 4.2}')
    if not isinstance(name or "", str):
        raise RealizeError("name", repr(name), "a C identifier, as text", 'such as name="roller_gap"')
    numbers = {key: text_of(value, f"values, {key}") for key, value in (values or {}).items()}
    overrides = Overrides(rate_of(rate, rate_hz), period_of(period, period_s), name, method, numbers)
    with in_keywords():
        return _loaded(design, overrides)


def design_for(call: str, design: DesignLike, changes: Changes, *own: str) -> Design:
    """Read a design for a public function, as :func:`design_of`.

    Parameters
    ----------
    call : str
        Name of the function.
    design, changes
        As they were given to it.
    *own : str
        Keywords that it has besides those of a design.

    Raises
    ------
    TypeError
        When it has no such keyword.
    """
    known = (*Changes.__annotations__, *own)
    for key in changes:
        if key not in known:
            like = nearest(key, known)
            advice = f"did you mean {like}?" if like else f"help(realize.{call})"
            raise TypeError(str(RealizeError(call, f"the unknown keyword {shown(key)}", ", ".join(known), advice)))
    return design_of(design, **changes)


def _loaded(design: DesignLike, overrides: Overrides) -> Design:
    if isinstance(design, (TransferFunction, tuple)):
        return design_from_document(_tables_of(transfer_of(design)), "TransferFunction", overrides)
    if isinstance(design, Mapping):
        return design_from_document({key: _table(value, key) for key, value in design.items()}, "design", overrides)
    if isinstance(design, os.PathLike):
        return load_design(_file_name(design), overrides)
    if isinstance(design, str) and design != STANDARD_INPUT:
        return load_design(design, overrides)
    found = repr(design) if isinstance(design, str) else f"an object of type {type(design).__name__}"
    raise RealizeError("design", found, _ALLOWED, 'such as "roller_gap.toml" or "4.2 + 18/s"')


def _file_name(path: os.PathLike[str]) -> str:
    name = os.fspath(path)
    if Path(name).suffix.lower() != ".toml":
        raise RealizeError("design", f"the path {name}", "a design file, whose name ends in .toml", "check the name")
    return name


def _tables_of(transfer: TransferFunction) -> dict[str, object]:
    n, d = ([exact_text(c) for c in p] for p in (transfer.numerator, transfer.denominator))
    return {"design": {"numerator": n, "denominator": d}}


def _table(value: object, where: str) -> object:
    """A table as its file would have it; a transfer function in it as text."""
    if isinstance(value, Mapping):
        return {str(key): _table(below, f"[{where}] {key}") for key, below in value.items()}
    if isinstance(value, (list, tuple)) and any(isinstance(each, Mapping) for each in value):
        return [_table(each, f"{where}, number {i}") for i, each in enumerate(value, 1)]
    if isinstance(value, TransferFunction):
        return format_transfer(value.numerator, value.denominator)
    return entry(value, where)
