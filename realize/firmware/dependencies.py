"""The rule that make and ninja read: which files an emission makes, and which files it is made from."""

from __future__ import annotations

import os.path
from collections.abc import Sequence

from realize.algebra.expression.tokens import printable, shown
from realize.design import Design
from realize.errors import RealizeError
from realize.firmware.recorded import ENDING

#: What stands before these in a path, for make and ninja alike.
_ESCAPES = {" ": "\\ ", "#": "\\#", "$": "$$"}

#: What make would act on, and has no spelling that ninja shares.
_UNWRITABLE = "%*?[];|=\t\r\n"


def prerequisites(argument: str, design: Design) -> list[str]:
    """The files a design was read from: the design file, and the measured response of its plant.

    Parameters
    ----------
    argument : str
        What the command was given.
    design : Design
        What was read from it.

    Raises
    ------
    RealizeError
        When it was no file.
    """
    if not argument.lower().endswith(".toml"):
        raise RealizeError(
            "--dependencies",
            "standard input" if argument == "-" else f"the expression {shown(argument)}",
            "a design file, which a build can watch",
            "write the design into a file; realize new NAME starts one",
        )
    response = design.plant.response if design.plant else None
    return [argument] + ([os.path.join(os.path.dirname(argument), response)] if response else [])


def rule_text(targets: Sequence[str], sources: Sequence[str]) -> str:
    """``targets: sources`` as make and ninja read it.

    Parameters
    ----------
    targets, sources : sequence of str
        Paths as the build names them: both programs compare texts. The record is written first, because ninja wants
        the first output of a step to be the first target here, and every emission has one.

    Raises
    ------
    RealizeError
        When a path holds a character that make acts on and that cannot be written for both.
    """
    ordered = sorted(targets, key=lambda path: not path.endswith(ENDING))
    left, right = (" \\\n  ".join(map(_escaped, paths)) for paths in (ordered, sources))
    return f"{left}: \\\n  {right}\n"


def _escaped(path: str) -> str:
    found = next((c for c in path if c in _UNWRITABLE), None)
    if found is not None:
        raise RealizeError(
            "--dependencies",
            f"the path {printable(path)}, in which make would act on {found!r}",
            f"paths without any of {printable(_UNWRITABLE.strip())} and without line ends",
            "name the file otherwise",
        )
    return "".join(_ESCAPES.get(c, c) for c in path)
