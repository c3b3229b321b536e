"""Writing: all files or none, nothing else left behind, and nothing touched that stays as it is."""

from __future__ import annotations

import os
from pathlib import Path

import pytest

from realize.errors import RealizeError
from realize.firmware.files import left_over, write_all, write_new

TEXTS = {"a.h": "header\n", "a.c": "source \u00b5\n", "a.record.json": "{}\n"}


def content(folder: Path) -> dict[str, str]:
    """Everything in a directory, hidden files too."""
    return {path.name: path.read_bytes().decode() for path in folder.iterdir()}


def test_every_text_is_written_as_it_is_into_a_new_directory(tmp_path: Path) -> None:
    folder = tmp_path / "firmware" / "servo"
    assert write_all(folder, TEXTS) == [folder / name for name in TEXTS]
    assert content(folder) == TEXTS


def test_what_was_there_is_replaced_and_other_files_are_kept(tmp_path: Path) -> None:
    (tmp_path / "a.h").write_text("old")
    (tmp_path / "other").write_text("mine")
    write_all(str(tmp_path), TEXTS)
    assert content(tmp_path) == TEXTS | {"other": "mine"}


def test_an_interrupted_run_before_does_no_harm(tmp_path: Path) -> None:
    (tmp_path / ".a.h.fresh").write_text("half a hea")
    write_all(tmp_path, TEXTS)
    assert content(tmp_path) == TEXTS


@pytest.mark.parametrize("moves", range(6))
def test_a_failure_at_any_moment_leaves_everything_as_it_was(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, moves: int
) -> None:
    before = {"a.h": "old header", "a.record.json": "old record", "other": "mine"}
    for name, text in before.items():
        (tmp_path / name).write_text(text)
    replace, done = os.replace, []

    def replace_until(source: Path, target: Path) -> None:
        done.append(source)
        if len(done) == moves + 1:
            raise OSError(28, "No space left on device", str(target))
        replace(source, target)

    monkeypatch.setattr(os, "replace", replace_until)
    if moves == 5:  # three new files, two of them in the place of old ones
        write_all(tmp_path, TEXTS)
        assert content(tmp_path) == TEXTS | {"other": "mine"}
        return
    with pytest.raises(RealizeError, match="No space left on device"):
        write_all(tmp_path, TEXTS)
    assert content(tmp_path) == before


def test_a_failure_while_writing_leaves_no_directory_either(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="cannot be written"):
        write_all(tmp_path / "new" / "deep", TEXTS | {"x" * 300: "a name no file system takes\n"})
    assert content(tmp_path) == {}


@pytest.mark.parametrize(
    ("place", "found"),
    [
        ("file", "it is a file, not a directory"),
        ("file/below", "cannot be written"),
        ("taken", r"a directory has the name of a file \(.*a\.c\)"),
    ],
)
def test_a_place_that_takes_no_files_is_refused_and_untouched(tmp_path: Path, place: str, found: str) -> None:
    (tmp_path / "file").write_text("mine")
    (tmp_path / "taken" / "a.c").mkdir(parents=True)
    with pytest.raises(RealizeError, match=found) as refusal:
        write_all(tmp_path / place, TEXTS)
    assert refusal.value.where == str(tmp_path / place)
    assert "nothing was written" in refusal.value.advice
    assert list((tmp_path / "taken").iterdir()) == [tmp_path / "taken" / "a.c"]
    assert (tmp_path / "file").read_text() == "mine"


def test_a_new_file_is_written_once_and_never_over_another(tmp_path: Path) -> None:
    path = tmp_path / "design.toml"
    assert write_new(path, "first\n") == path
    with pytest.raises(RealizeError, match=r"design\.toml: it exists already"):
        write_new(path, "second\n")
    assert path.read_text() == "first\n"


def test_a_new_file_where_none_can_be_is_refused(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="cannot be written: No such file or directory"):
        write_new(tmp_path / "missing" / "design.toml", "text\n")


def aged(path: Path) -> int:
    """Make a file an hour older; its time of change in ns."""
    os.utime(path, ns=(path.stat().st_atime_ns, path.stat().st_mtime_ns - 3600 * 10**9))
    return path.stat().st_mtime_ns


def test_a_file_whose_bytes_stay_the_same_keeps_its_time_of_change(tmp_path: Path) -> None:
    before = {path.name: aged(path) for path in write_all(tmp_path, TEXTS)}
    assert write_all(tmp_path, TEXTS | {"a.c": "other\n"}) == [tmp_path / name for name in TEXTS]
    after = {name: (tmp_path / name).stat().st_mtime_ns for name in TEXTS}
    assert {name for name in TEXTS if after[name] != before[name]} == {"a.c"}
    assert content(tmp_path) == TEXTS | {"a.c": "other\n"}


def test_line_ends_count_as_bytes(tmp_path: Path) -> None:
    write_all(tmp_path, TEXTS)
    (tmp_path / "a.h").write_bytes(b"header\r\n")
    write_all(tmp_path, TEXTS)
    assert (tmp_path / "a.h").read_bytes() == b"header\n"


def test_a_file_beside_is_of_the_same_set(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    rule, replace, done = tmp_path / "build" / "a.d", os.replace, []

    def fail_at_the_last(source: Path, target: Path) -> None:
        done.append(source)
        if len(done) == len(TEXTS) + 1:
            raise OSError(28, "No space left on device", str(target))
        replace(source, target)

    with monkeypatch.context() as patched:
        patched.setattr(os, "replace", fail_at_the_last)
        with pytest.raises(RealizeError, match=r"No space left on device \(.*a\.d\)"):
            write_all(tmp_path / "out", TEXTS, {rule: "rule\n"})
    assert content(tmp_path) == {}
    assert write_all(tmp_path / "out", TEXTS, {rule: "rule\n"}) == [tmp_path / "out" / name for name in TEXTS]
    assert rule.read_text() == "rule\n"
    before = aged(rule)
    write_all(tmp_path / "out", TEXTS, {rule: "rule\n"})
    assert rule.stat().st_mtime_ns == before


def test_the_table_of_an_earlier_schedule_is_left_over_where_it_is_and_was_not_written(tmp_path: Path) -> None:
    assert left_over(tmp_path, "gap", ["gap.h"]) is None
    (tmp_path / "gap_schedule.h").touch()
    assert left_over(tmp_path, "gap", ["gap.h"]) == tmp_path / "gap_schedule.h"
    assert left_over(tmp_path, "gap", ["gap.h", "gap_schedule.h"]) is None
