"""Emulated processors: what they refuse, what is counted, and code that does not come back."""

from __future__ import annotations

import sys
from pathlib import Path

import pytest

from realize.errors import RealizeError
from realize.trial.emulate import instructions_in
from realize.trial.outcome import Run, least_median_most
from realize.trial.run import trial
from tests.trial.by_hand import write

EMULATED = ["cortex-m0", "cortex-m3", "cortex-m4f", "cortex-m7f", "rv32imac"]

#: A function without prologue: the input is in r1, the answer in r0.
NAKED = "__attribute__((naked))"

OWN_M3 = (
    f"{sys.executable} -m ziglang cc -target thumb-freestanding-eabi -mcpu=cortex_m3 -O2 -fno-sanitize=undefined "
    "{sources} -o {output} -Wl,-e,main -Wl,-T,{script}"
)


def _run(record: str, on: str, compiler: str | None = None) -> Run:
    found = trial(record, on, compiler)
    assert found.equal
    return found.attempts[0].run


def test_slots_of_an_it_block_that_are_skipped_are_counted(tmp_path: Path) -> None:
    # cmp, itte, three slots, movw (four bytes), add, bx: eight, whichever way the condition goes
    assembly = (
        '__asm__("cmp r1, #0\\n itte gt\\n addgt r1, #1\\n addgt r1, #1\\n suble r1, #1\\n"'
        ' " movw r0, #1000\\n add r0, r1\\n bx lr");'
    )
    rows = [(5, 1007), (-3, 996), (0, 999), (1, 1003)]
    record = write(tmp_path, assembly, rows, before=NAKED)
    assert _run(record, "cortex-m3").instructions == (8, 8, 8, 8)


def test_what_is_called_counts_up_to_the_return(tmp_path: Path) -> None:
    # push, bl, pop; movs, adds, bx
    before = f'{NAKED} int32_t hand_inner(void) {{ __asm__("movs r0, #7\\n adds r0, r0, r1\\n bx lr"); }}\n{NAKED}'
    assembly = '__asm__("push {r4, lr}\\n bl hand_inner\\n pop {r4, pc}");'
    record = write(tmp_path, assembly, [(1, 8), (2, 9)], before=f"int32_t hand_inner(void);\n{before}")
    run = _run(record, "cortex-m0")
    assert run.instructions == (6, 6)
    assert run.stack_bytes == 8


def test_a_branch_not_taken_and_a_loop_are_counted_as_they_go(tmp_path: Path) -> None:
    # li, then two instructions a turn, then mv and ret
    assembly = '__asm__("li a0, 0\\n1: addi a0, a0, 1\\n bne a0, a1, 1b\\n ret");'
    record = write(tmp_path, assembly, [(1, 1), (4, 4), (100, 100)], before=NAKED)
    assert _run(record, "rv32imac").instructions == (4, 10, 202)


@pytest.mark.parametrize("on", EMULATED)
def test_sizes_are_those_of_the_emitted_code(on: str, tmp_path: Path) -> None:
    update = "volatile char room[200]; room[input] = (char)input; return room[input] + hand_table[input & 3];"
    before = "static const volatile int32_t hand_table[4] = {5, 6, 7, 8};"
    run = _run(write(tmp_path, update, [(1, 7), (2, 9)], before=before), on)
    assert run.sizes is not None
    assert (run.sizes.constants, run.sizes.state, run.sizes.runtime) == (16, 4, 0)
    # Of five functions, the shortest return is two bytes; update alone takes more than ten.
    assert 20 < run.sizes.code < 200
    # The array from where it is written, and at most what a frame has besides.
    assert run.stack_bytes is not None
    assert 196 <= run.stack_bytes < 232


def test_a_cortex_m0_refuses_thumb_2(tmp_path: Path) -> None:
    record = write(tmp_path, '__asm__("movw r0, #1000\\n bx lr");', [(0, 1000)], before=NAKED)
    assert _run(record, "cortex-m3", OWN_M3).instructions == (2,)
    with pytest.raises(RealizeError, match=r"cortex-m0: it crashed .*\(invalid instruction"):
        trial(record, "cortex-m0", OWN_M3)


def test_a_cortex_m3_refuses_floating_point_instructions(tmp_path: Path) -> None:
    # vmov.f32 s0, #1.0 (encoding from memory of the Arm v7-M Architecture Reference Manual)
    record = write(tmp_path, '__asm__(".inst.w 0xeeb70a00\\n movs r0, #1\\n bx lr");', [(0, 1)], before=NAKED)
    assert _run(record, "cortex-m4f").instructions == (3,)
    with pytest.raises(RealizeError, match="cortex-m3: it crashed"):
        trial(record, "cortex-m3")


@pytest.mark.parametrize("on", EMULATED)
def test_a_fault_is_a_message_that_names_the_sample(on: str, tmp_path: Path) -> None:
    update = "return input == 2 ? *(volatile int32_t *)0x70000000 : input;"
    with pytest.raises(RealizeError, match=f"{on}: it crashed at sample 2"):
        trial(write(tmp_path, update, [(0, 0), (1, 1), (2, 2)]), on)


@pytest.mark.parametrize("on", EMULATED)
def test_a_trap_is_a_message(on: str, tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="at sample 1"):
        trial(write(tmp_path, "if (input) __builtin_trap(); return input;", [(0, 0), (1, 1)]), on)


@pytest.mark.parametrize("on", EMULATED)
def test_a_loop_without_end_is_a_message(on: str, tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match=r"it does not return at sample 1"):
        trial(write(tmp_path, 'while (input) { __asm__ volatile(""); } return input;', [(0, 0), (1, 1)]), on)


def test_recursion_without_end_is_a_message(tmp_path: Path) -> None:
    update = "volatile int32_t deep = hand_update(state, input + 1); return deep + 1;"
    with pytest.raises(RealizeError, match=r"it crashed at sample"):
        trial(write(tmp_path, update, [(0, 0)]), "cortex-m0")


@pytest.mark.parametrize(
    ("content", "thumb", "count"),
    [
        ("7047", True, 1),  # bx lr
        ("00f000f8 7047", True, 2),  # bl, bx lr
        ("40f2e830 08bf 0844", True, 3),  # movw, it eq, add
        ("efe7 7047", True, 2),  # b (1110 0...), bx lr
        ("8280", False, 1),  # ret, compressed
        ("13050500 8280", False, 2),  # addi, ret
        ("", True, 0),
    ],
)
def test_instructions_are_two_or_four_bytes(content: str, thumb: bool, count: int) -> None:
    assert instructions_in(bytes.fromhex(content), thumb) == count


def test_the_median_is_one_that_occurred() -> None:
    assert least_median_most((9, 1, 4, 2)) == (1, 2, 9)
    assert least_median_most((3,)) == (3, 3, 3)
