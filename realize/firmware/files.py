"""Writing a set of files: all of them or none.

Every text is first written beside its place; only when all are there do they take their names. When anything fails,
what stood there before stands there again.
"""

from __future__ import annotations

import os
from collections.abc import Mapping
from pathlib import Path

from realize.errors import RealizeError

#: What is being written, and what it replaces, until all is done; hidden from listings.
FRESH, FORMER = ".{}.fresh", ".{}.former"


def write_all(directory: Path | str, texts: Mapping[str, str]) -> list[Path]:
    """Write every text into a directory, or leave everything as it was.

    Parameters
    ----------
    directory : Path or str
        Made if missing, with its parents.
    texts : mapping
        Plain file name and text; lines end in a newline everywhere.

    Returns
    -------
    list of Path
        What was written, in the order given.

    Raises
    ------
    RealizeError
        When the directory or a file cannot be written; nothing has changed then.
    """
    folder = Path(directory)
    made: list[Path] = []
    try:
        made = _make(folder)
        _place(folder, texts)
    except OSError as error:
        _remove_empty(made)
        raise RealizeError(
            str(folder),
            f"cannot be written: {error.strerror or error}" + _culprit(folder, error),
            "a directory in which files can be made",
            "name another directory with --out; nothing was written",
        ) from error
    return [folder / name for name in texts]


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


def _place(folder: Path, texts: Mapping[str, str]) -> None:
    """Write all beside their places, then rename all."""
    fresh = {name: folder / FRESH.format(name) for name in texts}
    try:
        for name, text in texts.items():
            if (folder / name).is_dir():
                raise IsADirectoryError(21, "a directory has the name of a file", str(folder / name))
            _write(fresh[name], text)
        _exchange(folder, fresh)
    finally:
        for path in fresh.values():
            path.unlink(missing_ok=True)


def _write(path: Path, text: str) -> None:
    """Into a new file: whatever carries the passing name is left from an interrupted run."""
    path.unlink(missing_ok=True)
    with path.open("x", encoding="utf-8", newline="\n") as file:
        file.write(text)


def _exchange(folder: Path, fresh: Mapping[str, Path]) -> None:
    """Give every fresh file its name; on failure put back what was there."""
    done: list[str] = []
    try:
        for name, path in fresh.items():
            done.append(name)
            if (folder / name).exists():
                os.replace(folder / name, folder / FORMER.format(name))
            os.replace(path, folder / name)
    except OSError:
        _restore(folder, done, fresh)
        raise
    for name in done:
        (folder / FORMER.format(name)).unlink(missing_ok=True)


def _restore(folder: Path, done: list[str], fresh: Mapping[str, Path]) -> None:
    for name in reversed(done):
        former = folder / FORMER.format(name)
        if former.exists():
            os.replace(former, folder / name)
        elif not fresh[name].exists():
            (folder / name).unlink(missing_ok=True)


def _culprit(folder: Path, error: OSError) -> str:
    """Which file, where it is another than the directory itself."""
    name = error.filename
    return f" ({name})" if name and str(name) != str(folder) else ""
