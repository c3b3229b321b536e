"""`realize trial`: its screen, its document, its exit status."""

from __future__ import annotations

import json
from fractions import Fraction
from pathlib import Path
from typing import Any

import pytest

from realize.cli import main
from tests.schemas.validation import validated
from tests.trial.by_hand import write

TRIPLE = "(void)state; return 3 * input;"


def _status(*arguments: str) -> int:
    try:
        main(["trial", *arguments])
    except SystemExit as ended:
        return int(ended.code or 0)
    return 0


def _document(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, Any]:
    status = _status(*arguments, "--json")
    return status, validated(json.loads(capsys.readouterr().out))


def test_equal_is_status_0_and_says_yes(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert _status(write(tmp_path, TRIPLE, [(1, 3), (2, 6)]), "--on", "cortex-m0") == 0
    out = capsys.readouterr().out
    assert out.startswith("yes: hand: the compiled code answers the 2 samples of hand_vectors.csv bit for bit.")
    assert "instructions, not cycles" in out
    assert max(map(len, out.splitlines())) <= 100


def test_a_difference_is_status_1_and_says_where(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert _status(write(tmp_path, TRIPLE, [(1, 3), (2, 7)]), "--on", "rv32imac") == 1
    captured = capsys.readouterr()
    assert captured.out.startswith("no: hand: rv32imac -O2 does not answer")
    assert "sample 1, counted from 0, input 2: expected 7, got 6" in captured.out
    assert captured.err == ""


def test_real_numbers_are_shown_in_decimals_too(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = write(tmp_path, "(void)state; return input;", [("0x1.8p+0", "0x1p+1")], ("float", "float"))
    assert _status(record) == 1
    assert "input 0x1.8p+0 (1.5): expected 0x1p+1 (2), got 0x1.8p+0 (1.5)" in " ".join(capsys.readouterr().out.split())


def test_a_file_that_changed_is_noted(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = write(tmp_path, TRIPLE, [(1, 3)])
    (tmp_path / "hand.h").write_text((tmp_path / "hand.h").read_text() + "\n")
    assert _status(record) == 0
    assert "hand.h is not what the record describes" in capsys.readouterr().out


def test_a_column_that_nobody_fills_is_left_out(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert _status(write(tmp_path, TRIPLE, [(1, 3)])) == 0
    out = capsys.readouterr().out
    assert "state" in out
    assert "stack" not in out


def test_the_document_has_every_figure(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = write(tmp_path, TRIPLE, [(1, 3), (2, 6)])
    status, document = _document(capsys, record, "--on", "all", "--clock", "1 MHz")
    assert status == 0
    assert document["schema"] == "realize/1"
    assert document["command"] == "trial"
    assert document["design"] == {"name": "hand", "transfer": "1"}
    assert (document["period_s"], document["clock_hz"], document["samples"]) == ("1/100", 1e6, 2)
    assert document["equal"] is True
    host, *emulated = (each for each in document["trials"] if each["optimization"] == "O2")
    assert host["instructions_per_sample"] is None
    assert host["state_bytes"] == 4
    assert len(emulated) == 5
    for each in emulated:
        counts = each["instructions_per_sample"]
        assert counts["least"] <= counts["median"] <= counts["most"]
        assert each["instructions_per_second"] == 100 * counts["most"]
        assert each["share_of_clock"] == float(Fraction(100 * counts["most"], 10**6))
        assert each["state_bytes"] == 4
        assert each["runtime_bytes"] == each["constant_bytes"] == 0


def test_a_difference_in_the_document(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, document = _document(capsys, write(tmp_path, TRIPLE, [(1, 3), (2, 7)]), "--on", "cortex-m3")
    assert status == 1
    assert document["equal"] is False
    assert document["trials"][0]["first_difference"] == {"sample": 1, "input": "2", "expected": "7", "got": "6"}


@pytest.mark.parametrize(
    ("arguments", "says"),
    [
        (["--on", "z80"], "the unknown processor"),
        (["--clock", "48"], "without a unit"),
        (["--clock", "0 Hz"], "a rate above zero"),
        (["--compiler", "gcc"], "without {sources} and {output}"),
        (["--ON", "host"], "did you mean --on?"),
    ],
)
def test_a_mistake_is_status_2_and_one_message(
    arguments: list[str], says: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert _status(write(tmp_path, TRIPLE, [(1, 3)]), *arguments) == 2
    captured = capsys.readouterr()
    assert captured.out == ""
    assert says in " ".join(captured.err.split())
    assert "Traceback" not in captured.err


def test_an_error_is_json_with_json(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    record = write(tmp_path, "(void)state; if (input) __builtin_trap(); return input;", [(1, 3)])
    status, document = _document(capsys, record, "--on", "cortex-m0")
    assert status == 2
    assert document["command"] == "trial"
    assert "crashed" in document["error"]["found"]


def test_the_argument_has_to_be_there(capsys: pytest.CaptureFixture[str]) -> None:
    assert _status() == 2
    assert "a record that realize emit wrote" in capsys.readouterr().err
