"""What stands below the options of each command's help: exit status, files, environment, what to read next."""

from __future__ import annotations

from collections.abc import Mapping

#: What an exit status says, where a command has nothing more to say about it.
_GOOD, _REFUSED, _UNREADABLE = (
    "done",
    "the answer is no: see the command's own help",
    "the input is not understood",
)


def _manual(
    *,
    good: str = _GOOD,
    refused: str = _REFUSED,
    unreadable: str = _UNREADABLE,
    more: Mapping[str, str] | None = None,
    see: str,
) -> str:
    """Sections as paragraphs; a command that refuses nothing has no exit status 1."""
    status = ["\b", "Exit status:", f"  0  {good}", *([f"  1  {refused}"] if refused else []), f"  2  {unreadable}"]
    sections = [f"{title}: {text}" for title, text in (more or {}).items()]
    return "\n\n".join(["\n".join(status), *sections, f"See also: {see}"])


#: Of all commands together.
GROUP = _manual(
    good="good",
    more={
        "Environment": "NO_COLOR drops colours; COLUMNS sets the width of errors.",
        "Caution": (
            "controllers move machines. Check on the bench with the actuator limited before closing the loop; this "
            "replaces neither a functional-safety process nor local codes nor the judgement of a licensed engineer."
        ),
    },
    see="realize COMMAND --help; README.md for the design file, the methods, the checks and the files.",
)

#: Of each command, by name.
MANUALS = {
    "assess": _manual(
        good="it could be read, realizable or not",
        refused="refused: it hides a growing mode, or is zero",
        see="compare, for what each method makes of it; emit, which does the whole job.",
    ),
    "compare": _manual(
        good="the named or the recommended method is within every tolerance",
        refused="none is, or the named one is not",
        see="rates, for the lowest rate; words, for integers; report, for figures.",
    ),
    "rates": _manual(
        good="the range was looked at, whether or not a method has such a rate",
        refused="",
        unreadable="the design has an error that no rate mends, or is not understood",
        see="compare, for one rate in full.",
    ),
    "words": _manual(
        good="there is a structure within every tolerance",
        refused="there is none, or no method suits even unrounded",
        see="emit, which takes the cheapest; trial, for what it costs on a processor.",
    ),
    "emit": _manual(
        good="written; of several designs, all of them",
        refused="refused: improper without roll-off, unstable, or out of tolerance; of several, one or more",
        more={
            "Files": (
                "NAME.h and NAME.c, the code; NAME_selftest.c, for your own compiler or board; "
                "NAME_vectors.csv, inputs and outputs; NAME.record.json, how they came to be; with a schedule "
                "NAME_schedule.h, its table."
            ),
        },
        see="trial, which runs what was written; audit, for a build; report, for a review.",
    ),
    "report": _manual(
        good="written, whether the design can be emitted or not",
        refused="refused: it hides a growing mode, or is zero",
        see="compare, for the same in the terminal; emit, for the files.",
    ),
    "new": _manual(
        good="written",
        refused="",
        unreadable="the name is none, or the file exists already",
        see="schema, for editors; emit, which takes the file as it is.",
    ),
    "schema": _manual(
        refused="",
        unreadable="there is no such document",
        see="new, whose files name the schema of the design file.",
    ),
    "trial": _manual(
        good="bit for bit equal",
        refused="a sample differs",
        unreadable="the record, the files or the command of the compiler are not as they should be",
        more={
            "Environment": (
                "ZIG_GLOBAL_CACHE_DIR, where the compiler keeps its runtime for each processor; the first "
                "trial builds it."
            ),
        },
        see="emit, which writes the files; audit.",
    ),
    "audit": _manual(
        good="nothing differs",
        refused="something does",
        unreadable="the record is not understood, or from a newer schema",
        see="differ, for two records; trial, for the code on its processor.",
    ),
    "differ": _manual(
        good="nothing differs",
        refused="something does",
        unreadable="a record is not understood",
        see="audit.",
    ),
}
