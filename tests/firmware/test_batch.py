"""Several designs in one run: the bytes of each alone, and none that stops the others."""

from __future__ import annotations

import json
import os
import pickle
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from types import MappingProxyType

import pytest

from realize.design import Overrides, load_design
from realize.errors import RealizeError, Refused
from realize.firmware.batch import Result, design_files, emit_all, exit_status
from realize.firmware.files import write_all
from realize.firmware.job import emit

ROOT = Path(__file__).parents[2]

LAG = """
[design]
name = "NAME"
transfer = "k/(0.1*s + 1)"
values = { k = 5 }
[sampling]
rate = "1 kHz"
[method]
name = "bilinear"
"""

BROKEN = {
    "broken": "[design\n",
    "unknown": '[design]\ntransfr = "1/s"\n',
    "empty": "",
    "latin": "[design] # \udcb5\n",
}


def lag(folder: Path, name: str, text: str = LAG) -> str:
    path = folder / f"{name}.toml"
    path.write_text(text.replace("NAME", name), encoding="utf-8", errors="surrogateescape")
    return str(path)


def contents(folder: Path) -> dict[str, bytes]:
    return {path.name: path.read_bytes() for path in folder.iterdir()} if folder.exists() else {}


def alone(path: str, folder: Path, overrides: Overrides = Overrides()) -> dict[str, bytes]:  # noqa: B008
    write_all(folder, emit(load_design(path, overrides)).files)
    return contents(folder)


@pytest.mark.parametrize("workers", [1, 2])
def test_each_design_has_the_bytes_it_has_alone_whatever_stands_beside_it(tmp_path: Path, workers: int) -> None:
    good = [lag(tmp_path, "first"), str(ROOT / "fixtures" / "proofing_room.toml"), lag(tmp_path, "last")]
    bad = [lag(tmp_path, name, text) for name, text in BROKEN.items()]
    refused = lag(tmp_path, "refused", LAG.replace("k/(0.1*s + 1)", "k*s"))
    paths = [good[0], *bad, good[1], refused, str(tmp_path / "nowhere.toml"), good[2]]
    found = emit_all(paths, tmp_path / "out", Overrides(), workers=workers)
    assert [result.path for result in found] == paths
    assert [result.path for result in found if result.error is None] == good
    wanted: dict[str, bytes] = {}
    for i, path in enumerate(good):
        wanted |= alone(path, tmp_path / f"alone{i}")
    assert contents(tmp_path / "out") == wanted
    assert [Path(path).name for result in found for path in result.written] == list(
        dict.fromkeys(name for result in found if result.summary for name in result.summary.files)
    )


def test_what_stands_in_the_way_is_what_it_is_alone(tmp_path: Path) -> None:
    paths = [lag(tmp_path, name, text) for name, text in BROKEN.items()]
    paths.append(lag(tmp_path, "refused", LAG.replace("k/(0.1*s + 1)", "k*s")))
    for result in emit_all(paths, tmp_path / "out", Overrides(), workers=2):
        with pytest.raises(RealizeError) as caught:
            emit(load_design(result.path))
        assert result.error is not None
        assert type(result.error) is type(caught.value)
        assert result.error.args == caught.value.args
    assert not (tmp_path / "out").exists()


@pytest.mark.parametrize("kind", [RealizeError, Refused])
def test_an_error_travels_between_processes_whole(kind: type[RealizeError]) -> None:
    error = kind("where", "found", "allowed", "advice", "excerpt")
    copy = pickle.loads(pickle.dumps(error))
    assert type(copy) is kind
    assert vars(copy) == vars(error)


def test_the_larger_problem_is_the_exit_status() -> None:
    good = Result("a")
    refused, wrong = good.failed(Refused("w", "f", "", "")), good.failed(RealizeError("w", "f", "", ""))
    assert exit_status([good, good]) == 0
    assert exit_status([good, refused]) == 1
    assert exit_status([refused, wrong, good]) == 2


def test_overrides_hold_for_every_design(tmp_path: Path) -> None:
    overrides = Overrides(rate="2 kHz", method="step-invariant", values=MappingProxyType({"k": "7"}))
    paths = [lag(tmp_path, "first"), lag(tmp_path, "second")]
    found = emit_all(paths, tmp_path / "out", overrides, workers=2)
    assert exit_status(found) == 0
    wanted = alone(paths[0], tmp_path / "a", overrides) | alone(paths[1], tmp_path / "b", overrides)
    assert contents(tmp_path / "out") == wanted


@pytest.mark.parametrize("other", ["gap", "GAP"])
def test_designs_of_one_name_are_refused_by_both_paths_and_the_others_written(tmp_path: Path, other: str) -> None:
    first, second = lag(tmp_path, "one", LAG.replace("NAME", "gap")), lag(tmp_path, "two", LAG.replace("NAME", other))
    found = emit_all([first, lag(tmp_path, "lone"), second], tmp_path / "out", Overrides(), workers=1)
    assert [result.error is None for result in found] == [False, True, False]
    for result, own in ((found[0], first), (found[2], second)):
        assert result.error is not None
        assert result.error.exit_status == 2
        assert result.error.where.startswith(own)
        assert f"which {first} and {second} both have (capitals make no difference)" in result.error.found
        assert result.error.advice == "rename one, or give each a directory"
    assert {name.split(".")[0].split("_")[0] for name in contents(tmp_path / "out")} == {"lone"}


def test_the_same_file_twice_is_refused(tmp_path: Path) -> None:
    path = lag(tmp_path, "one")
    found = emit_all([path, path], tmp_path / "out", Overrides(), workers=1)
    assert exit_status(found) == 2
    assert {result.error and result.error.found for result in found} == {
        "the name one again: the file is given 2 times"
    }
    assert contents(tmp_path / "out") == {}


def test_three_of_one_name_are_all_listed(tmp_path: Path) -> None:
    paths = [lag(tmp_path, name, LAG.replace("NAME", "gap")) for name in ("a", "b", "c")]
    found = emit_all(paths, tmp_path / "out", Overrides(), workers=1)
    for result in found:
        assert result.error is not None
        assert f"which {paths[0]}, {paths[1]} and {paths[2]} all have" in result.error.found


def test_the_rules_of_all_that_is_written_stand_in_one_file(tmp_path: Path) -> None:
    rule = tmp_path / "build" / "all.d"
    paths = [lag(tmp_path, "a"), lag(tmp_path, "bad", BROKEN["empty"]), lag(tmp_path, "c")]
    emit_all(paths, tmp_path / "out", Overrides(), rule, workers=1)
    rules = [line.split(": ") for line in rule.read_text(encoding="utf-8").replace("\\\n", "").splitlines()]
    assert [sources.split() for _, sources in rules] == [[paths[0]], [paths[2]]]
    targets = [set(each.split()) for each, _ in rules]
    assert targets[0] | targets[1] == {str(path) for path in (tmp_path / "out").iterdir()}
    assert not targets[0] & targets[1]


def test_a_rule_file_that_cannot_be_written_leaves_nothing(tmp_path: Path) -> None:
    (tmp_path / "all.d").mkdir()
    found = emit_all([lag(tmp_path, "a"), lag(tmp_path, "b")], tmp_path / "out", Overrides(), tmp_path / "all.d")
    assert exit_status(found) == 2
    assert contents(tmp_path / "out") == {}


def test_one_set_of_files_that_cannot_be_written_does_not_keep_the_others_from_it(tmp_path: Path) -> None:
    (tmp_path / "out" / "a.c").mkdir(parents=True)
    found = emit_all([lag(tmp_path, "a"), lag(tmp_path, "b")], tmp_path / "out", Overrides(), workers=1)
    assert [result.error is None for result in found] == [False, True]
    assert {name[0] for name in contents_of_files(tmp_path / "out")} == {"b"}


def contents_of_files(folder: Path) -> list[str]:
    return [path.name for path in folder.iterdir() if path.is_file()]


def test_a_mistake_of_our_own_in_one_design_does_not_stop_the_others(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def load(path: str, overrides: Overrides) -> object:
        if "bad" in path:
            raise ZeroDivisionError("no such luck")
        return load_design(path, overrides)

    monkeypatch.setattr("realize.firmware.batch.load_design", load)
    found = emit_all([lag(tmp_path, "bad"), lag(tmp_path, "good")], tmp_path / "out", Overrides(), workers=1)
    assert found[0].error is not None
    assert found[0].error.found == "an error of realize itself, ZeroDivisionError: no such luck"
    assert found[1].error is None


def test_progress_sees_every_result_in_order(tmp_path: Path) -> None:
    seen: list[str] = []

    def follow(results: Iterator[Result]) -> Iterator[Result]:
        for result in results:
            seen.append(result.path)
            assert not (tmp_path / "out").exists()
            yield result

    paths = [lag(tmp_path, name) for name in ("b", "a", "c")]
    emit_all(paths, tmp_path / "out", Overrides(), workers=2, follow=follow)
    assert seen == paths


# ---------------------------------------------------------------- which files


def test_the_designs_of_a_directory_are_its_toml_files_sorted(tmp_path: Path) -> None:
    for name in ("b.toml", "a.TOML", "C.toml", "note.txt", ".hidden.toml"):
        (tmp_path / name).write_text("")
    (tmp_path / "folder.toml").mkdir()
    (tmp_path / "deeper").mkdir()
    (tmp_path / "deeper" / "d.toml").write_text("")
    assert design_files((), str(tmp_path)) == tuple(str(tmp_path / name) for name in ("C.toml", "a.TOML", "b.toml"))


@pytest.mark.parametrize(
    ("designs", "folder", "where", "found"),
    [
        (("a.toml", "1/s"), None, "DESIGN", '"1/s" among several designs'),
        (("-", "a.toml"), None, "DESIGN", "standard input among several designs"),
        (("a.toml",), "designs", "--all", 'a directory of designs, and "a.toml" beside it'),
        ((), "empty", "--all", "no design file in empty"),
        ((), "nowhere", "--all", "nowhere: no such directory"),
        ((), "file", "--all", "file: a file, not a directory"),
        ((), "", "--all", "an empty name: no such directory"),
        ((), "a\0b", "--all", "a directory that cannot be read"),
    ],
)
def test_what_is_no_list_of_designs_is_refused(
    designs: tuple[str, ...],
    folder: str | None,
    where: str,
    found: str,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("empty").mkdir()
    Path("file").write_text("")
    with pytest.raises(RealizeError) as caught:
        design_files(designs, folder)
    assert caught.value.where == where
    assert found in caught.value.found
    assert caught.value.exit_status == 2


# ---------------------------------------------------------------- stopped


@pytest.mark.parametrize("whom", ["all", "one"])
def test_an_interrupt_ends_every_process_at_once_and_nothing_is_written(tmp_path: Path, whom: str) -> None:
    """From a terminal it comes to every process, from elsewhere to the first alone."""
    for i in range(40):
        lag(tmp_path, f"lag{i}")
    process = subprocess.Popen(
        [sys.executable, "-m", "realize", "emit", "--all", str(tmp_path), "--out", str(tmp_path / "out")],
        cwd=ROOT,
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        start_new_session=True,
    )
    assert process.stderr is not None
    assert process.stderr.readline() == "emit: 4 of 40\n"
    (os.killpg if whom == "all" else os.kill)(process.pid, signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert process.returncode == 130
    assert out == ""
    assert [line for line in err.split("\n") if line and not line.startswith("emit: ")] == [
        "stopped: nothing was written"
    ]
    assert not (tmp_path / "out").exists()
    with pytest.raises(ProcessLookupError):
        wait_for_the_end_of(process.pid)


def wait_for_the_end_of(group: int) -> None:
    """Until no process of the group is left, which is an error that says so."""
    for _ in range(200):
        os.killpg(group, 0)
        time.sleep(0.01)


# ---------------------------------------------------------------- as JSON


def test_the_summary_holds_the_record_that_is_written(tmp_path: Path) -> None:
    (result,) = emit_all([lag(tmp_path, "a")], tmp_path / "out", Overrides())
    assert result.summary is not None
    record = json.loads((tmp_path / "out" / "a.record.json").read_text(encoding="utf-8"))
    assert (result.summary.method, result.summary.structure) == (record["method"], record["structure"])
    assert result.summary.arithmetic == record["arithmetic"]
    ratios = {
        c["check"]: c["difference"] / c["tolerance"] for c in record["checks"] if c["tolerance"] and c["difference"]
    }
    check, ratio = result.summary.worst or ("", 0.0)
    assert ratio == pytest.approx(max(ratios.values()), rel=1e-4)
    assert ratio == pytest.approx(ratios[check], rel=1e-4)
