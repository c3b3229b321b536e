"""Writing a set of files: all of them or none.

Everything is first written beside its place; only when all are there do they take their names. When anything fails,
what stood there before stands there again. A file that holds its text already is left alone, time of change included,
so that a build does not compile it again.
"""

from __future__ import annotations

import os
from collections.abc import Iterable, Mapping
from pathlib import Path

from realize.errors import RealizeError

#: What is being written, and what it replaces, until all is done; hidden from listings.
FRESH, FORMER = ".{}.fresh", ".{}.former"


def write_all(
    directory: Path | str, contents: Mapping[str, str | bytes], beside: Mapping[Path, str | bytes] | None = None
) -> list[Path]:
    """Write every content into a directory, or leave everything as it was.

    Parameters
    ----------
    directory : Path or str
        Made if missing, with its parents.
    contents : mapping
        Plain file name and text, whose lines end in a newline everywhere, or bytes.
    beside : mapping, optional
        Path and content of files elsewhere that are of the same set; their directories are made too.

    Returns
    -------
    list of Path
        What the directory now holds, in the order given, whether it had to be written or not.

    Raises
    ------
    RealizeError
        When the directory or a file cannot be written; nothing has changed then.
    """
    folder = Path(directory)
    named = {folder / name: content for name, content in contents.items()} | dict(beside or {})
    wanted = {path: c.encode() if isinstance(c, str) else c for path, c in named.items()}
    made: list[Path] = []
    try:
        for place in dict.fromkeys((folder, *(path.parent for path in wanted))):
            made += _make(place)
        _place({path: content for path, content in wanted.items() if not _holds(path, content)})
    except OSError as error:
        _remove_empty(made)
        raise RealizeError(
            str(folder),
            f"cannot be written: {error.strerror or error}" + _culprit(folder, error),
            "a directory in which files can be made",
            "name another directory with --out; nothing was written",
        ) from error
    return [folder / name for name in contents]


def left_over(directory: Path | str, name: str, written: Iterable[str]) -> Path | None:
    """Find the table of an earlier emission, whose design had a schedule; it is nobody's any more.

    Parameters
    ----------
    directory : Path or str
        Where the files of the design were written.
    name : str
        Name of the design.
    written : iterable of str
        Names of its files.
    """
    path = Path(directory) / f"{name}_schedule.h"
    return path if path.name not in written and path.is_file() else None


def write_new(path: Path | str, text: str) -> Path:
    """Write a file that does not exist yet.

    Raises
    ------
    RealizeError
        When it exists, or cannot be written.
    """
    try:
        with Path(path).open("x", encoding="utf-8", newline="\n") as file:
            file.write(text)
    except FileExistsError:
        raise RealizeError(
            str(path), "it exists already", "a name that is not taken: nothing is overwritten", "choose another name"
        ) from None
    except OSError as error:
        raise RealizeError(
            str(path), f"cannot be written: {error.strerror or error}", "a place where files can be made", "move there"
        ) from error
    return Path(path)


def _make(folder: Path) -> list[Path]:
    """Make a directory and what it stands in; what was made, outermost first."""
    missing = [path for path in (folder, *folder.parents) if not path.exists()]
    made: list[Path] = []
    try:
        for path in reversed(missing):
            path.mkdir()
            made.append(path)
        if not folder.is_dir():
            raise NotADirectoryError(20, "it is a file, not a directory", str(folder))
    except OSError:
        _remove_empty(made)
        raise
    return made


def _remove_empty(made: list[Path]) -> None:
    for path in reversed(made):
        path.rmdir()


def _holds(path: Path, content: bytes) -> bool:
    """Whether a file is there with these very bytes."""
    try:
        return path.read_bytes() == content
    except OSError:
        return False


def _place(contents: Mapping[Path, bytes]) -> None:
    """Write all beside their places, then rename all."""
    fresh = {path: path.with_name(FRESH.format(path.name)) for path in contents}
    try:
        for path, content in contents.items():
            if path.is_dir():
                raise IsADirectoryError(21, "a directory has the name of a file", str(path))
            _write(fresh[path], content)
        _exchange(fresh)
    finally:
        for path in fresh.values():
            path.unlink(missing_ok=True)


def _write(path: Path, content: bytes) -> None:
    """Into a new file: whatever carries the passing name is left from an interrupted run."""
    path.unlink(missing_ok=True)
    with path.open("xb") as file:
        file.write(content)


def _former(path: Path) -> Path:
    return path.with_name(FORMER.format(path.name))


def _exchange(fresh: Mapping[Path, Path]) -> None:
    """Give every fresh file its name; on failure put back what was there."""
    done: list[Path] = []
    try:
        for path, written in fresh.items():
            done.append(path)
            if path.exists():
                os.replace(path, _former(path))
            os.replace(written, path)
    except OSError:
        _restore(done, fresh)
        raise
    for path in done:
        _former(path).unlink(missing_ok=True)


def _restore(done: list[Path], fresh: Mapping[Path, Path]) -> None:
    for path in reversed(done):
        if _former(path).exists():
            os.replace(_former(path), path)
        elif not fresh[path].exists():
            path.unlink(missing_ok=True)


def _culprit(folder: Path, error: OSError) -> str:
    """Which file, where it is another than the directory itself."""
    name = error.filename
    return f" ({name})" if name and str(name) != str(folder) else ""
