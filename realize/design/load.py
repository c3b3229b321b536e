"""From the argument of a command to a design: a file, standard input, or an expression in s."""

from __future__ import annotations

import os.path
import re
import sys
from collections.abc import Mapping
from functools import partial
from typing import BinaryIO

from realize.algebra.expression.tokens import printable, shown
from realize.design.controller import Controller, read_controller
from realize.design.gate import Table, WrittenNumber
from realize.design.model import DEFAULT_LOOP, Design, LoopTable, Overrides, PlantTable
from realize.design.plant import MAX_RESPONSE_BYTES, names_in_plant, read_loop, read_plant
from realize.design.schedule import read_schedule, refuse_inline, written_tables
from realize.design.tables import (
    read_accept,
    read_method,
    read_name,
    read_rolloff,
    read_sampling,
    read_signals,
    read_target,
    read_tolerance,
)
from realize.errors import RealizeError, Refused

#: Largest design file: a schedule of a thousand points with eight values that change, each a dozen characters long.
MAX_FILE_BYTES = 2**17

#: Longest line of a design file: the longest expression (4000 characters) and its key. The reader of TOML takes
#: a time that grows with the square of the dots in a key; so bounded, and in a file of this size, in two seconds.
MAX_LINE = 4500

#: Longest path worth looking for: what the common file systems allow for a name.
MAX_PATH = 255

#: Columns of a line that are quoted with a mistake in its TOML.
_SHOWN_COLUMNS = 80

STANDARD_INPUT = "-"

_DESIGN_KEYS = (
    *("name", "transfer", "numerator", "denominator", "zeros", "poles", "gain"),
    *("about", "revision", "requirement", "author", "values"),
)
_TABLES = (
    *("design", "sampling", "rolloff", "method", "plant", "loop", "schedule"),
    *("signals", "target", "tolerance", "accept"),
)

#: What the reader of TOML says of a name that stands twice.
_SAID_TWICE = re.compile(r"Cannot (?:declare|overwrite|redefine|mutate) |Duplicate inline table key ")

#: The name of a table on a line of its own, of a key in a line of its own, and of a key in braces as that reader quotes
#: it; as much of them as fits a message.
_HEADER = re.compile(r"""\s*(\[\[?[\w."' -]{1,60}\]\]?)""")
_KEY = re.compile(r"""\s*([\w."' -]{1,60}?)\s*=""")
_INLINE_KEY = re.compile(r"Duplicate inline table key '(.{1,60}?)'")

_DESIGN_FILE = "a readable design file in TOML"

_ARGUMENT = "a design file (its name ends in .toml), - for one on standard input, or an expression in s"

#: What looks more like a path than like algebra: a directory in front, a backslash, or an ending behind.
_LIKE_A_PATH = re.compile(r"[~.]{0,2}/.*|.*\\.*|[\w ~./-]*\.[A-Za-z]{1,5}~?", re.DOTALL)


def load_design(argument: str, overrides: Overrides = Overrides()) -> Design:  # noqa: B008 -- immutable
    """Read the design a command was given.

    Parameters
    ----------
    argument : str
        A path that ends in ``.toml``, ``-`` for TOML on standard input, or an expression in s.
    overrides : Overrides
        What the command line says in place of the file.

    Raises
    ------
    RealizeError
        When it cannot be read or understood.
    Refused
        When a cancellation in it hides a growing mode, or a plant is improper.
    """
    if argument == STANDARD_INPUT:
        content = _read(sys.stdin.buffer, MAX_FILE_BYTES)
        return design_from_text(_decoded(content, "standard input", MAX_FILE_BYTES), "standard input", overrides)
    if argument.lower().endswith(".toml"):
        text = _file_text(argument, printable(argument), MAX_FILE_BYTES, _DESIGN_FILE)
        return design_from_text(text, argument, overrides, os.path.dirname(argument))
    return _design_from_expression(argument, overrides)


def design_from_text(
    text: str,
    source: str,
    overrides: Overrides = Overrides(),  # noqa: B008
    folder: str = "",
) -> Design:
    """Read a design file that is already in memory.

    Parameters
    ----------
    text : str
        TOML.
    source : str
        What the user calls it.
    overrides : Overrides
        What the command line says in its place.
    folder : str
        Directory that paths in it start from; empty for the current one.

    Raises
    ------
    RealizeError
        When it cannot be understood.
    Refused
        When a cancellation in it hides a growing mode, or a plant is improper.
    """
    return design_from_document(_parsed(text, source), source, overrides, folder)


def design_from_document(
    document: Mapping[str, object],
    source: str,
    overrides: Overrides = Overrides(),  # noqa: B008
    folder: str = "",
) -> Design:
    """Read a design from the tables of its file."""
    root = Table(document, source)
    root.only(_TABLES)
    table = root.table("design")
    table.only(_DESIGN_KEYS)
    controller = read_controller(table, overrides.values, names_in_plant(root.table("plant"), overrides.values))
    plant = None
    if "plant" in root:
        plant = read_plant(root.table("plant"), overrides.values, partial(_response_text, folder))
    written = None
    if "schedule" in root:
        refuse_inline(root.table("target"))
        written = written_tables(root, controller.values, plant, overrides.values)
    return assemble(root, controller, plant, overrides, written)


def assemble(
    root: Table, controller: Controller, plant: PlantTable | None, overrides: Overrides, written: object = None
) -> Design:
    """Put a design together from controller, plant and all other tables; the first two as written, for a schedule."""
    design = root.table("design")
    sampling = read_sampling(root.table("sampling"), overrides)
    method = read_method(root.table("method"), overrides.method)
    target = read_target(root.table("target"))
    if "schedule" in root:
        target = target._replace(coefficients="table")
    signals = read_signals(root.table("signals"), target)
    name = read_name(design, overrides.name)
    return Design(
        source=root.source,
        name=name,
        transfer=controller.transfer,
        transfer_text=controller.text,
        about=design.text("about"),
        revision=design.text("revision"),
        requirement=design.text("requirement"),
        author=design.text("author"),
        values=controller.values,
        period_s=sampling.period_s,
        band_rad_s=sampling.band_rad_s,
        rolloff=read_rolloff(root.table("rolloff"), controller.transfer) if "rolloff" in root else None,
        method=method.name,
        exact_at_rad_s=method.exact_at_rad_s,
        compensate_delay=method.compensate_delay,
        plant=plant,
        loop=_loop(root, plant),
        input=signals[0],
        output=signals[1],
        target=target,
        tolerance=read_tolerance(root.table("tolerance")),
        accept=read_accept(root.tables("accept")),
        schedule=read_schedule(root, name, controller.values, plant, written),
    )


def _loop(root: Table, plant: PlantTable | None) -> LoopTable:
    if "loop" not in root:
        return DEFAULT_LOOP
    table = root.table("loop")
    if plant is None:
        raise RealizeError(
            f"{table.source}, {table.place}",
            "a loop without a plant",
            "[loop] beside [plant]",
            "add [plant] with the transfer of what the controller drives, or remove [loop]",
        )
    return read_loop(table)


def _design_from_expression(argument: str, overrides: Overrides) -> Design:
    root = Table({}, "expression")
    table = _ArgumentTable({"transfer": argument}, "expression", "[design]")
    try:
        return assemble(root, read_controller(table, overrides.values), None, overrides)
    except Refused:
        raise
    except RealizeError as error:
        advice = _path_advice(argument)
        if advice is None:
            raise
        raise RealizeError(
            error.where,
            f"{shown(argument)}, which is no expression in s ({error.found}) and no name of a design file",
            _ARGUMENT,
            f"{advice}; for an expression: {error.advice}",
            error.excerpt,
        ) from None


def _path_advice(argument: str) -> str | None:
    """What to try with an argument that may be a mistyped path; ``None`` when it cannot be one."""
    with_ending = f"{argument}.toml"
    if len(argument) < MAX_PATH and os.path.isfile(with_ending):
        return f"for the design file, write {printable(with_ending)}"
    return "for a design file, give a name that ends in .toml" if _LIKE_A_PATH.fullmatch(argument) else None


class _ArgumentTable(Table):
    """The table of a design that was given as an expression: there is no file, table or key to name."""

    def where(self, key: str) -> str:
        return self.source


def _response_text(folder: str, path: str, where: str) -> str:
    wanted = "a readable measured response; its path starts from the directory of the design file"
    return _file_text(os.path.join(folder, path), where, MAX_RESPONSE_BYTES, wanted)


def _file_text(path: str, where: str, most_bytes: int, wanted: str) -> str:
    return _decoded(_file_content(path, where, most_bytes, wanted), where, most_bytes)


def _file_content(path: str, where: str, most_bytes: int, wanted: str) -> bytes:
    try:
        with open(path, "rb") as file:
            return _read(file, most_bytes)
    except FileNotFoundError:
        found, advice = "no such file", "check the name and the directory"
    except IsADirectoryError:
        found, advice = "a directory", "give the name of a file in it"
    except PermissionError:
        found, advice = "a file that may not be read", "check its permissions"
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else "its name is not possible"
        found, advice = f"a file that cannot be read: {reason}", "check the name"
    raise RealizeError(where, found, wanted, advice)


def _read(file: BinaryIO, most_bytes: int) -> bytes:
    """No more than is allowed, and one byte to see whether there is more."""
    return file.read(most_bytes + 1)


def _decoded(content: bytes, where: str, most_bytes: int) -> str:
    if len(content) > most_bytes:
        raise RealizeError(
            where, "a file that is too large", f"at most {most_bytes} bytes", "check that it is the right file"
        )
    try:
        return content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        raise RealizeError(
            f"{where}, line {line}", "a byte that is not UTF-8", "text in UTF-8", "save the file as UTF-8"
        ) from None


def _parsed(text: str, source: str) -> dict[str, object]:
    """Tables of a TOML text; its floats stay as written."""
    # An expression on the command line needs no TOML.
    import tomllib

    for number, line in enumerate(text.splitlines(), 1):
        if len(line) > MAX_LINE:
            raise RealizeError(
                f"{source}, line {number}",
                f"a line of {len(line)} characters",
                f"at most {MAX_LINE}",
                "break a list after a comma, or give parts of an expression names under [design.values]",
            )
    try:
        return tomllib.loads(text, parse_float=WrittenNumber)
    except tomllib.TOMLDecodeError as error:
        raise _toml_error(str(error), text, source) from None
    except RecursionError:
        raise RealizeError(source, "lists or tables nested too deeply", "lists of numbers", "flatten it") from None
    except ValueError:
        # The one that is no TOMLDecodeError: an integer beyond what Python converts.
        raise RealizeError(
            source, "an integer of thousands of digits", "numbers that a design needs", "use fewer digits"
        ) from None


def _toml_error(message: str, text: str, source: str) -> RealizeError:
    """Put line and column in front, and quote the line."""
    match = re.fullmatch(r"(.*) \(at (?:line (\d+), column (\d+)|end of document)\)", message, re.DOTALL)
    if match is not None and _SAID_TWICE.match(match[1]):
        return _twice(match[1], int(match[2] or 0), text, source)
    allowed, advice = "TOML: [table], then lines of key = value", "texts and quantities stand in quotes"
    if match is None or match[2] is None:
        return RealizeError(source, printable(message), allowed, advice)
    line, column = int(match[2]), int(match[3])
    quoted = text.split("\n")[line - 1] if line <= text.count("\n") + 1 else ""
    excerpt = f"{printable(quoted[:_SHOWN_COLUMNS])}\n{' ' * (column - 1)}^" if column <= _SHOWN_COLUMNS else ""
    return RealizeError(f"{source}, line {line}, column {column}", printable(match[1]), allowed, advice, excerpt)


def _twice(message: str, line: int, text: str, source: str) -> RealizeError:
    """Name the table or key that stands twice; line 0 is the last one."""
    lines = text.rstrip().split("\n")
    number = line or len(lines)
    quoted = lines[number - 1]
    header, key = _HEADER.match(quoted), _INLINE_KEY.match(message) or _KEY.match(quoted)
    if header:
        found, advice = f"the table {printable(header[1])} stands twice", "join the two"
    else:
        found = f"the key {printable(key[1])} stands twice" if key else "a key stands twice"
        advice = "keep the one that holds"
    allowed = "each table once, and each key once in its table"
    return RealizeError(f"{source}, line {number}", found, allowed, advice, printable(quoted[:_SHOWN_COLUMNS]))
