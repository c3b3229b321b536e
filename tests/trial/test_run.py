"""A trial: types, the first difference, the user's own compiler, and everything that may be missing or wrong."""

from __future__ import annotations

import json
import os
import sys
from collections.abc import Callable
from pathlib import Path

import pytest

from realize.errors import RealizeError
from realize.trial import native
from realize.trial.outcome import Difference
from realize.trial.run import trial
from tests.trial.by_hand import write

ZIG = f"{sys.executable} -m ziglang cc"
OWN = ZIG + " -O1 -rtlib=none {sources} -o {output}"
INTEGERS = [f"{sign}int{bits}_t" for bits in (8, 16, 32) for sign in ("", "u")]
IDENTITY = "(void)state; return input;"


def _ends(kind: str) -> tuple[int, int]:
    bits = int(kind.strip("uint_"))
    return (0, 2**bits - 1) if kind.startswith("u") else (-(2 ** (bits - 1)), 2 ** (bits - 1) - 1)


@pytest.mark.parametrize("kind", INTEGERS)
@pytest.mark.parametrize("on", ["host", "cortex-m0", "rv32imac"])
def test_integers_of_every_type_pass_through_unharmed(kind: str, on: str, tmp_path: Path) -> None:
    rows = [(x, x) for x in (*_ends(kind), 0, 1, 100)]
    assert trial(write(tmp_path, IDENTITY, rows, (kind, kind)), on).equal


def test_input_and_output_may_be_of_different_types(tmp_path: Path) -> None:
    record = write(
        tmp_path,
        "(void)state; return (uint16_t)(input + 32768);",
        [(-32768, 0), (32767, 65535)],
        ("int16_t", "uint16_t"),
    )
    assert trial(record, "all").equal


@pytest.mark.parametrize("kind", ["float", "double"])
@pytest.mark.parametrize("on", ["host", "cortex-m0", "cortex-m4f"])
def test_real_numbers_keep_their_signs_and_what_is_not_finite(kind: str, on: str, tmp_path: Path) -> None:
    rows = [
        (x, x) for x in ("0x0p+0", "-0x0p+0", "inf", "-inf", "nan", "0x1.8p-149" if kind == "double" else "0x1p-149")
    ]
    assert trial(write(tmp_path, IDENTITY, rows, (kind, kind)), on).equal


def test_zeros_of_the_other_sign_differ(tmp_path: Path) -> None:
    record = write(tmp_path, IDENTITY, [("0x0p+0", "0x0p+0"), ("-0x0p+0", "0x0p+0")], ("float", "float"))
    assert trial(record).attempts[0].difference == Difference(1, "-0x0p+0", "0x0p+0", "-0x0p+0")


@pytest.mark.parametrize("on", ["host", "cortex-m0", "cortex-m3", "cortex-m4f", "rv32imac"])
def test_the_first_difference_has_sample_expected_and_got(on: str, tmp_path: Path) -> None:
    record = write(tmp_path, "return state->last += input;", [(1, 1), (2, 3), (3, 7), (4, 11)])
    found = trial(record, on)
    assert not found.equal
    assert {attempt.difference for attempt in found.attempts} == {Difference(2, "3", "7", "6")}


def test_the_state_starts_cleared_and_is_kept_from_sample_to_sample(tmp_path: Path) -> None:
    record = write(tmp_path, "return state->last += input;", [(1, 1), (2, 3), (3, 6), (-7, -1)])
    assert trial(record, "all").equal


def test_every_level_runs_on_the_host_and_contraction_would_be_seen(tmp_path: Path) -> None:
    # (1 + 2^-12)^2 - 1 in float32: the square rounds to 1 + 2^-11, unless it is fused with the subtraction
    update, off = "(void)state; return input * input - 1.0f;", "#pragma STDC FP_CONTRACT OFF"
    record = write(tmp_path, update, [("0x1.001p+0", "0x1p-11")], ("float", "float"), off)
    found = trial(record, "all")
    assert [attempt.level for attempt in found.attempts[:4]] == ["O0", "O2", "O3", "Os"]
    assert found.equal


def test_the_users_own_compiler_works_for_this_machine(tmp_path: Path) -> None:
    found = trial(write(tmp_path, IDENTITY, [(1, 1)]), "host", OWN)
    assert found.equal
    assert [(attempt.target, attempt.level) for attempt in found.attempts] == [("host", None)]


def test_the_users_own_compiler_works_for_a_processor(tmp_path: Path) -> None:
    command = ZIG + " -target riscv32-freestanding-none -mcpu=generic_rv32+m+a+c -Os {sources} -o {output} -Wl,-e,main"
    command += " -Wl,-T,{script}"
    record = write(tmp_path, "(void)state; return input * 3;", [(1, 3), (5, 15)])
    # Without symbols nothing can be called.
    with pytest.raises(RealizeError, match="without the symbol"):
        trial(record, "rv32imac", command)
    assert trial(record, "rv32imac", command.replace("-Os", "-O2")).equal


def test_a_relative_path_in_the_command_is_the_users(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "options.txt").write_text("-O1")
    monkeypatch.chdir(tmp_path)
    assert trial(write(tmp_path, IDENTITY, [(1, 1)]), "host", OWN.replace("-O1", "@options.txt")).equal


COMMANDS = {
    "gcc -o {output}": "without {sources}",
    "gcc {sources}": "without {output}",
    "gcc x{sources} -o {output}": "a part of a word",
    "gcc '{sources} -o {output}": "closed quotes",
    "no-such-compiler {sources} -o {output}": '"no-such-compiler" cannot be started',
    ZIG + " -fno-such-option {sources} -o {output}": "no-such-option",
    f"{sys.executable} -c pass {{sources}} {{output}}": "made no program",
}


@pytest.mark.parametrize("command", COMMANDS, ids=range(len(COMMANDS)))
def test_a_wrong_command_is_answered(command: str, tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="--compiler") as refused:
        trial(write(tmp_path, IDENTITY, [(1, 1)]), "host", command)
    assert COMMANDS[command] in str(refused.value)
    assert refused.value.exit_status == 2
    # What is quoted is the same on every run: no passing directory.
    assert "realize-" not in refused.value.excerpt


def test_a_program_of_this_machine_is_none_for_a_processor(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="another processor"):
        trial(write(tmp_path, IDENTITY, [(1, 1)]), "cortex-m0", OWN)


def test_a_file_that_is_no_program_is_answered(tmp_path: Path) -> None:
    copy = f"{sys.executable} -c \"import sys; open(sys.argv[1], 'w').write('#!')\" {{output}} {{sources}}"
    record = write(tmp_path, IDENTITY, [(1, 1)])
    with pytest.raises(RealizeError, match="no program in the ELF format"):
        trial(record, "cortex-m0", copy)
    with pytest.raises(RealizeError, match="cannot be started"):
        trial(record, "host", copy)


def test_a_program_of_something_else_is_answered(tmp_path: Path) -> None:
    copy = f"{sys.executable} -c \"import shutil, sys; shutil.copy(shutil.which('true'), sys.argv[1])\""
    with pytest.raises(RealizeError, match="gave no answers"):
        trial(write(tmp_path, IDENTITY, [(1, 1)]), "host", copy + " {output} {sources}")


def test_code_that_does_not_compile_is_answered_with_the_compilers_message(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="compiling for cortex-m3 at -O2") as refused:
        trial(write(tmp_path, "return nowhere;", [(1, 1)]), "cortex-m3")
    assert "hand.c" in refused.value.excerpt
    assert "nowhere" in refused.value.excerpt


def test_a_crash_on_the_host_names_the_sample(tmp_path: Path) -> None:
    record = write(tmp_path, "(void)state; if (input == 7) __builtin_trap(); return input;", [(1, 1), (7, 7)])
    with pytest.raises(RealizeError, match=r"host: the program crashed .* at sample 1"):
        trial(record)


def test_a_loop_without_end_on_the_host_is_ended(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(native, "TIMEOUT_S", 1)
    update = '(void)state; while (input) { __asm__ volatile(""); } return input;'
    with pytest.raises(RealizeError, match="no answer within 1 s, at sample 1"):
        trial(write(tmp_path, update, [(0, 0), (7, 7)]))


def _without(name: str) -> Callable[[Path], None]:
    return lambda directory: (directory / name).unlink()


def _replaced(name: str, old: str, new: str) -> Callable[[Path], None]:
    def replace(directory: Path) -> None:
        text = (directory / name).read_text()
        assert old in text
        (directory / name).write_text(text.replace(old, new))

    return replace


def _written(name: str, content: bytes) -> Callable[[Path], object]:
    return lambda directory: (directory / name).write_bytes(content)


RECORD = "hand.record.json"
DAMAGE: dict[str, tuple[Callable[[Path], object], str]] = {
    "no header": (_without("hand.h"), "hand.h: there is no such file"),
    "no source": (_without("hand.c"), "hand.c: there is no such file"),
    "no vectors": (_without("hand_vectors.csv"), "hand_vectors.csv: there is no such file"),
    "no record": (_without(RECORD), "there is no such file"),
    "not JSON": (_written(RECORD, b"{"), "not JSON"),
    "not text": (_written(RECORD, b"\xff\xfe\x00"), "not JSON"),
    "a list": (_written(RECORD, b"[1]"), "no record: it names no schema"),
    "deep": (_written(RECORD, b"[" * 200_000), "not JSON"),
    "newer schema": (_replaced(RECORD, "realize/1", "realize/2"), 'a record of the newer schema "realize/2"'),
    "other schema": (_replaced(RECORD, "realize/1", "other"), 'the unknown schema "other"'),
    "no name": (_replaced(RECORD, '"name"', '"nome"'), "design.name: nothing"),
    "a path for a name": (_replaced(RECORD, '"hand"', '"../hand"'), "a C identifier"),
    "no period": (_replaced(RECORD, '"1/100"', '"1/0"'), "design.sampling.period_s"),
    "period a number": (_replaced(RECORD, '"1/100"', "5"), "design.sampling.period_s"),
    "no declaration": (_replaced("hand.h", "hand_update", "hand_later"), "no declaration of hand_update"),
    "unknown type": (_replaced("hand.h", "int32_t input);", "long input);"), "no declaration of hand_update"),
    "no heading": (_replaced("hand_vectors.csv", "input,output", "1,1"), "no vectors"),
    "no rows": (_written("hand_vectors.csv", b"input,output\n"), "no vectors"),
    "one column": (_written("hand_vectors.csv", b"input,output\n1,1\n7\n"), 'hand_vectors.csv line 3: "7"'),
    "not a number": (_written("hand_vectors.csv", b"input,output\nx,1\n"), 'line 2: "x,1"'),
    "too large": (_written("hand_vectors.csv", b"input,output\n1,2147483648\n"), "line 2"),
    "a fraction": (_written("hand_vectors.csv", b"input,output\n1.5,1\n"), "line 2"),
    "not ASCII": (_written("hand_vectors.csv", b"input,output\n\xff,1\n"), "line 2"),
}


@pytest.mark.parametrize("damage", DAMAGE)
def test_damage_is_named(damage: str, tmp_path: Path) -> None:
    record = write(tmp_path, IDENTITY, [(1, 1)])
    harm, says = DAMAGE[damage]
    harm(tmp_path)
    with pytest.raises(RealizeError) as refused:
        trial(record)
    assert says in str(refused.value)
    assert refused.value.exit_status == 2


@pytest.mark.parametrize(
    ("row", "kind"),
    [
        ("0x1.0000001p+0,0x1p+0", "float"),
        ("0x1p+0,0x1p+300", "float"),
        ("0x1p+2000,0x0p+0", "double"),
        ("1.5,0x0p+0", "double"),
    ],
)
def test_a_value_that_the_type_does_not_hold_is_named(row: str, kind: str, tmp_path: Path) -> None:
    x, y = row.split(",")
    with pytest.raises(RealizeError, match=r"hand_vectors.csv line 2"):
        trial(write(tmp_path, IDENTITY, [(x, y)], (kind, kind)))


def test_other_files_are_no_record(tmp_path: Path) -> None:
    write(tmp_path, IDENTITY, [(1, 1)])
    with pytest.raises(RealizeError, match=r"not JSON(.|\n)*a record that realize emit wrote"):
        trial(str(tmp_path / "hand.c"))


def test_a_directory_is_no_record(tmp_path: Path) -> None:
    (tmp_path / "a.record.json").mkdir()
    with pytest.raises(RealizeError, match="a directory"):
        trial(str(tmp_path / "a.record.json"))


def test_an_unknown_processor_is_answered_with_those_there_are(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match=r'"cortex-m4"(.|\n)*cortex-m4f, cortex-m7f, rv32imac(.|\n)*did you mean'):
        trial(write(tmp_path, IDENTITY, [(1, 1)]), "cortex-m4")


def test_one_command_does_not_compile_for_all(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="one command for --on all"):
        trial(write(tmp_path, IDENTITY, [(1, 1)]), "all", OWN)


@pytest.mark.parametrize(
    ("missing", "on", "compiler"),
    [("ziglang", "host", None), ("unicorn", "cortex-m0", None), ("elftools", "cortex-m0", OWN)],
)
def test_without_the_packages_the_line_that_installs_them(
    missing: str, on: str, compiler: str | None, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr("realize.extras.find_spec", lambda name: None if name == missing else object())
    with pytest.raises(RealizeError, match=missing) as refused:
        trial(write(tmp_path, IDENTITY, [(1, 1)]), on, compiler)
    assert refused.value.advice == 'pip install "realize[target]"'


def test_an_own_compiler_for_this_machine_needs_no_packages(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("realize.extras.find_spec", lambda name: None)
    assert trial(write(tmp_path, IDENTITY, [(1, 1)]), "host", OWN).equal


def test_a_file_that_changed_since_is_named_and_tried_all_the_same(tmp_path: Path) -> None:
    record = write(tmp_path, IDENTITY, [(1, 1)])
    _replaced("hand.c", "return input;", "return +input;")(tmp_path)
    found = trial(record)
    assert found.equal
    assert found.emitted.changed == ("hand.c",)


def test_nothing_is_left_behind(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    passing, work = tmp_path / "passing", tmp_path / "work"
    passing.mkdir()
    work.mkdir()
    record = write(work, IDENTITY, [(1, 1)])
    before = sorted(os.listdir(work))
    monkeypatch.setattr("tempfile.tempdir", str(passing))
    monkeypatch.chdir(work)
    trial(record, "cortex-m3")
    assert os.listdir(passing) == []
    assert sorted(os.listdir(work)) == before


def test_the_record_need_not_be_in_the_current_directory(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write(tmp_path, IDENTITY, [(1, 1)])
    monkeypatch.chdir(tmp_path)
    assert trial("hand.record.json").equal
    assert json.loads(Path("hand.record.json").read_text())["design"]["name"] == "hand"
