"""The emitted files as they lie beside their record: what is compiled, and the vectors it is held against."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from fractions import Fraction
from hashlib import sha256
from pathlib import Path
from typing import Any, NamedTuple

from realize.algebra.expression.tokens import printable, shown
from realize.errors import RealizeError
from realize.firmware.recorded import read_record, recorded_period_s
from realize.trial.c_types import LETTERS, Value, read

#: What every emission has besides update, which is the one that runs.
FUNCTIONS = ("clear", "update", "output", "advance", "preset")


class Code(NamedTuple):
    """C that a trial can run: a state, ``NAME_clear`` and ``NAME_update``.

    Attributes
    ----------
    name : str
        Prefix of every name.
    files : mapping
        Name and content of the files it is compiled from; those that end in ``.c`` are the sources.
    header : str
        The file that declares it.
    input_type, output_type : str
        Of ``NAME_update``; keys of :data:`realize.trial.c_types.LETTERS`.
    table : bool
        Whether ``NAME_update`` takes a pointer to coefficients; it is given ``NAME_nominal``.
    functions : tuple of str
        Those that are kept in the program, without the prefix.
    scheduled : bool
        Whether coefficients are looked up by a variable, before every sample.
    """

    name: str
    files: Mapping[str, bytes]
    header: str
    input_type: str
    output_type: str
    table: bool = False
    functions: tuple[str, ...] = FUNCTIONS
    scheduled: bool = False

    @property
    def entry(self) -> str:
        """The function that a sample begins with: with a schedule, the lookup."""
        return f"{self.name}_at" if self.scheduled else f"{self.name}_update"


class Vectors(NamedTuple):
    """Inputs, and the answers from a cleared state; with a schedule, the variable of each sample."""

    inputs: Sequence[Value]
    outputs: Sequence[Value]
    variables: Sequence[Value] | None = None

    @property
    def given(self) -> list[Value]:
        """What a program is fed: the inputs, each after its variable if there is one."""
        if self.variables is None:
            return list(self.inputs)
        return [value for pair in zip(self.variables, self.inputs, strict=True) for value in pair]


class Emitted(NamedTuple):
    """What lies beside a record.

    Attributes
    ----------
    code : Code
    vectors : Vectors
    transfer_text : str
        ``G(s)`` as the user wrote it.
    period_s : Fraction
    changed : tuple of str
        Files that are not, byte for byte, those the record describes.
    """

    code: Code
    vectors: Vectors
    transfer_text: str
    period_s: Fraction
    changed: tuple[str, ...]


def read_emitted(path: str) -> Emitted:
    """Read a record and the files beside it.

    Raises
    ------
    RealizeError
        When the record or one of the files is missing, or cannot be understood.
    """
    record = read_record(path)
    name = _name(path, record)
    header, source, table = f"{name}.h", f"{name}.c", f"{name}_vectors.csv"
    compiled = (header, source, *([f"{name}_schedule.h"] if "schedule" in record else []))
    files = {file: _content(Path(path).with_name(file), f"{path} describes it") for file in (*compiled, table)}
    code = code_of(name, {file: files[file] for file in compiled})
    return Emitted(
        code,
        read_vectors(table, files[table], code),
        record["design"]["transfer"],
        recorded_period_s(record, path),
        tuple(file for file, content in files.items() if record["files"].get(file) != sha256(content).hexdigest()),
    )


def _name(path: str, record: Mapping[str, Any]) -> str:
    name = str(record["design"]["name"])
    if not (name.isascii() and name.isidentifier()):
        raise RealizeError(f"{printable(path)}, design.name", shown(name), "a C identifier", "emit the design again")
    return name


def _content(path: Path, what: str) -> bytes:
    try:
        return path.read_bytes()
    except FileNotFoundError:
        raise RealizeError(
            str(path), "there is no such file", what, "emit the design again, or move the files back together"
        ) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise RealizeError(printable(str(path)), f"cannot be read: {reason}", what, "look at its rights") from error


def code_of(name: str, files: Mapping[str, bytes]) -> Code:
    """What a trial needs to know of the emitted C, from the declaration that the compiler will see.

    Parameters
    ----------
    name : str
        Prefix of every name; ``NAME.h`` is among the files.
    files : mapping
        Name and content of header and source.

    Raises
    ------
    RealizeError
        When ``NAME_update`` is not declared as emission declares it.
    """
    header = f"{name}.h"
    pattern = (
        rf"(?P<output>\w+)\s+{name}_update\(\s*{name}_state\s*\*\s*state,"
        rf"(?P<table>\s*const\s+{name}_coefficients\s*\*\s*\w+,)?\s*(?P<input>\w+)\s+input\s*\);"
    )
    found = re.search(pattern, files[header].decode(errors="replace"))
    if found is None or not {found["input"], found["output"]} <= set(LETTERS):
        raise RealizeError(
            header,
            f"no declaration of {name}_update that a trial can call",
            f"TYPE {name}_update({name}_state *state, TYPE input); of {', '.join(LETTERS)}",
            "emit the design again",
        )
    scheduled = f"{name}_schedule.h" in files
    functions = (*FUNCTIONS, "at") if scheduled else FUNCTIONS
    return Code(name, files, header, found["input"], found["output"], found["table"] is not None, functions, scheduled)


def read_vectors(file: str, content: bytes, code: Code) -> Vectors:
    """Read ``NAME_vectors.csv``.

    Raises
    ------
    RealizeError
        When a line is not an input and an output of the types of the code.
    """
    lines = content.decode("ascii", errors="replace").splitlines()
    heading = "variable,input,output" if code.scheduled else "input,output"
    if not lines or lines[0] != heading or len(lines) == 1:
        raise RealizeError(
            file, "no vectors", f"the heading {heading} and a line for each sample", "emit the design again"
        )
    rows = [_row(file, number, line, code) for number, line in enumerate(lines[1:], 2)]
    variables = [row[0] for row in rows] if code.scheduled else None
    return Vectors([row[-2] for row in rows], [row[-1] for row in rows], variables)


def _row(file: str, number: int, line: str, code: Code) -> list[Value]:
    variable = "a variable and " if code.scheduled else ""
    kinds = [*([code.input_type] if code.scheduled else []), code.input_type, code.output_type]
    try:
        return [read(kind, text) for kind, text in zip(kinds, line.split(","), strict=True)]
    except (ValueError, OverflowError):
        raise RealizeError(
            f"{file} line {number}",
            shown(line),
            f"{variable}an input that is a {code.input_type} and an output that is a {code.output_type}",
            "emit the design again",
        ) from None
