"""Several designs in one run, side by side: each is emitted by itself, all or none, whatever becomes of the others.

Everything is computed before the first file is written, so that a run that is stopped has written nothing.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from functools import partial
from pathlib import Path
from typing import NamedTuple

from realize.algebra.expression.tokens import printable, shown
from realize.design import Overrides, load_design
from realize.design.schedule import refuse_overridden
from realize.errors import RealizeError, internal
from realize.firmware.dependencies import prerequisites, rule_text
from realize.firmware.files import write_all
from realize.firmware.job import emit
from realize.parallel import side_by_side
from realize.workflow import MethodResult

#: The ending of a design file.
_ENDING = ".toml"


class Summary(NamedTuple):
    """What an emission comes to, in a line of a table, and its files.

    Attributes
    ----------
    method, structure, arithmetic : str
        Of what is emitted.
    worst : (str, float) or None
        The check with the largest ratio of difference to tolerance, and that ratio.
    agreed : tuple of str
        Checks that are out, but accepted.
    files : mapping
        File name to text.
    sources : tuple of str
        Files it was made from.
    """

    method: str
    structure: str
    arithmetic: str
    worst: tuple[str, float] | None
    agreed: tuple[str, ...]
    files: Mapping[str, str]
    sources: tuple[str, ...]


class Result(NamedTuple):
    """What became of one design.

    Attributes
    ----------
    path : str
        Its file.
    name : str or None
        Its name, where the file could be understood.
    summary : Summary or None
        What it comes to, where nothing stands in the way.
    error : RealizeError or None
        What stands in the way; then nothing is written.
    written : tuple of str
        Paths of its files.
    """

    path: str
    name: str | None = None
    summary: Summary | None = None
    error: RealizeError | None = None
    written: tuple[str, ...] = ()

    def failed(self, error: RealizeError) -> Result:
        """Return the same design, with what stands in the way."""
        return self._replace(summary=None, error=error)


Follow = Callable[[Iterator[Result]], Iterator[Result]]


def design_files(designs: Sequence[str], folder: str | None) -> tuple[str, ...]:
    """The design files of one run.

    Parameters
    ----------
    designs : sequence of str
        Files by name.
    folder : str or None
        Directory whose design files are meant instead: those that end in ``.toml``, sorted by name, not those of
        directories in it, and none that is hidden.

    Raises
    ------
    RealizeError
        When both are given, one of them is no design file, or the directory has none.
    """
    if folder is None:
        for design in designs:
            _refuse_no_file(design)
        return tuple(designs)
    if designs:
        found = f"a directory of designs, and {shown(designs[0])} beside it"
        raise RealizeError("--all", found, "either --all DIR, or design files by name", "drop one")
    names = sorted(name for name in _listed(folder) if name.lower().endswith(_ENDING) and not name.startswith("."))
    paths = tuple(path for path in (os.path.join(folder, name) for name in names) if os.path.isfile(path))
    if not paths:
        raise RealizeError(
            "--all",
            f"no design file in {printable(folder)}",
            f"a directory with files that end in {_ENDING}; those of directories in it do not count",
            "check the name; realize new NAME starts a design",
        )
    return paths


def emit_all(
    paths: Sequence[str],
    folder: Path,
    overrides: Overrides,
    rule_file: Path | None = None,
    *,
    workers: int | None = None,
    follow: Follow = iter,
) -> tuple[Result, ...]:
    """Emit several designs into one directory.

    Parameters
    ----------
    paths : sequence of str
        Design files.
    folder : Path
        Directory for what is written; made if missing.
    overrides : Overrides
        What the command line says in place of every file.
    rule_file : Path, optional
        Takes the rules that make and ninja read, one for each design that is written.
    workers : int, optional
        Processes; by default as many as there are processors.
    follow : callable
        Passes the results on one by one, to show progress.

    Returns
    -------
    tuple of Result
        In the order of the files, whatever the order they were finished in.
    """
    job = partial(_result, overrides=overrides._replace(values=dict(overrides.values)))
    found = side_by_side(job, paths, workers, follow)
    return _written(_without_collisions(found), folder, rule_file)


def exit_status(results: Iterable[Result]) -> int:
    """The larger problem wins: 2 where one is not understood, else 1 where one is refused, else 0."""
    return max((result.error.exit_status for result in results if result.error), default=0)


def shared_names(results: Iterable[Result]) -> dict[str, list[str]]:
    """Names that several designs have, in small letters, with the paths of their files.

    Names that differ in capitals alone are the same to some file systems.
    """
    paths: dict[str, list[str]] = {}
    for result in results:
        if result.name is not None:
            paths.setdefault(result.name.lower(), []).append(result.path)
    return {name: found for name, found in paths.items() if len(found) > 1}


def _refuse_no_file(design: str) -> None:
    if design.lower().endswith(_ENDING):
        return
    raise RealizeError(
        "DESIGN",
        f"{'standard input' if design == '-' else shown(design)} among several designs",
        f"design files (their names end in {_ENDING}) where there are several",
        "put an expression that has blanks in quotes; emit what is no file by itself",
    )


def _listed(folder: str) -> list[str]:
    try:
        return os.listdir(folder)
    except FileNotFoundError:
        found = "no such directory"
    except NotADirectoryError:
        found = "a file, not a directory"
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or "its name is not possible"
        found = f"a directory that cannot be read: {reason}"
    raise RealizeError(
        "--all", f"{printable(folder) or 'an empty name'}: {found}", "a directory of design files", "check the name"
    )


def _result(path: str, overrides: Overrides) -> Result:
    """One design; nothing is written."""
    result = Result(path)
    try:
        design = load_design(path, overrides)
        result = result._replace(name=design.name)
        refuse_overridden(design, overrides.values)
        emitted = emit(design)
        summary = _summary(emitted.chosen, design.target.arithmetic, emitted.files, prerequisites(path, design))
        return result._replace(summary=summary)
    except RealizeError as error:
        return result.failed(error)
    except Exception as error:  # one design may not stop the others, whatever it does
        return result.failed(internal(error))


def _summary(chosen: MethodResult, arithmetic: str, files: Mapping[str, str], sources: Sequence[str]) -> Summary:
    assert chosen.realization is not None
    worst = None if chosen.worst is None else (chosen.worst[1].check, chosen.worst[0])
    agreed = tuple(dict.fromkeys(check.check for check, _ in chosen.accepted))
    return Summary(chosen.method, chosen.realization.structure, arithmetic, worst, agreed, dict(files), tuple(sources))


def _without_collisions(results: Sequence[Result]) -> list[Result]:
    """Refuse every design whose name another one has: there is one set of files for both."""
    shared = shared_names(results)
    return [
        _refused_name(result, shared[result.name.lower()]) if result.name and result.name.lower() in shared else result
        for result in results
    ]


def _refused_name(result: Result, paths: Sequence[str]) -> Result:
    found, advice = _shared_name(result.name or "", [printable(path) for path in paths])
    allowed = "a name of its own for every design of one run"
    return result.failed(RealizeError(f"{printable(result.path)}, [design] name", found, allowed, advice))


def _shared_name(name: str, paths: Sequence[str]) -> tuple[str, str]:
    """What is said of a name that several have, and what to try."""
    *others, last = dict.fromkeys(paths)
    if not others:
        return f"the name {name} again: the file is given {len(paths)} times", "give it once"
    have = f"{', '.join(others)} and {last} {'both' if len(others) == 1 else 'all'} have"
    return f"the name {name}, which {have} (capitals make no difference)", "rename one, or give each a directory"


def _written(results: Iterable[Result], folder: Path, rule_file: Path | None) -> tuple[Result, ...]:
    """Write each set of files; the rules, so far, are of the same set."""
    rules, done = "", []
    for result in results:
        if result.summary is not None:
            try:
                more = rules + _rule(result.summary, folder) if rule_file else ""
                paths = write_all(folder, result.summary.files, {rule_file: more} if rule_file else {})
                result, rules = result._replace(written=tuple(map(str, paths))), more
            except RealizeError as error:
                result = result.failed(error)
        done.append(result)
    return tuple(done)


def _rule(summary: Summary, folder: Path) -> str:
    return rule_text([str(folder / name) for name in summary.files], summary.sources)
