"""Running a program on an emulated processor, and counting the instructions of each sample.

The whole vector runs inside the emulated program. What is followed from outside are its blocks, stretches of
instructions without a branch: their lengths add up to the instructions. A conditional slot that a block skips (Thumb's
IT) is counted, as a core issues it.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import unicorn
from unicorn import arm_const, riscv_const

from realize.errors import RealizeError
from realize.trial.c_types import packed, size, unpacked
from realize.trial.emitted import Code, Vectors
from realize.trial.harness import RUN
from realize.trial.image import Image, Symbol
from realize.trial.outcome import Run
from realize.trial.targets import Target

#: Memory of the trial's own, away from where programs for these processors lie: the address that the program returns
#: to, the stack with nothing around it, inputs and answers.
_RETURN, _STACK, _DATA = 0x1F00_0000, 0x6100_0000, 0x6200_0000

_PAGE = 0x1000
_STACK_BYTES = 0x1_0000

#: What the stack is painted with, to see how deep it was used.
_PAINT = b"\xa5"

#: Most blocks of one sample. A float64 product on a core without the hardware takes about a hundred; a thousand of them
#: in one sample would be far beyond the highest order that can be designed.
MOST_BLOCKS = 200_000

#: Coprocessors 10 and 11, the floating-point unit, with full access; and its enable bit.
_FPU_ACCESS, _FPU_ENABLE = 0xF << 20, 1 << 30


class _Registers(NamedTuple):
    """Numbers of the registers that a call needs."""

    arguments: tuple[int, int, int]
    stack: int
    link: int
    counter: int


_REGISTERS = {
    "thumb": _Registers(
        (arm_const.UC_ARM_REG_R0, arm_const.UC_ARM_REG_R1, arm_const.UC_ARM_REG_R2),
        arm_const.UC_ARM_REG_SP,
        arm_const.UC_ARM_REG_LR,
        arm_const.UC_ARM_REG_PC,
    ),
    "riscv": _Registers(
        (riscv_const.UC_RISCV_REG_A0, riscv_const.UC_RISCV_REG_A1, riscv_const.UC_RISCV_REG_A2),
        riscv_const.UC_RISCV_REG_SP,
        riscv_const.UC_RISCV_REG_RA,
        riscv_const.UC_RISCV_REG_PC,
    ),
}


class _Lengths(dict[tuple[int, int], int]):
    """Instructions of a block, by its address and bytes; none for the harness."""

    def __init__(self, core: unicorn.Uc, thumb: bool, harness: Symbol) -> None:
        super().__init__()
        self._core, self._thumb = core, thumb
        self._harness = range(harness.address, harness.address + harness.size)

    def __missing__(self, block: tuple[int, int]) -> int:
        address, length = block
        counted = 0 if address in self._harness else instructions_in(self._core.mem_read(address, length), self._thumb)
        self[block] = counted
        return counted


def instructions_in(content: bytes | bytearray, thumb: bool) -> int:
    """Instructions in a stretch of code: each is 2 or 4 bytes long, as its first half says.

    Notes
    -----
    Thumb: 4 bytes when the upper five bits are 11101, 11110 or 11111 (Arm v7-M Architecture Reference Manual, A5.1).
    RISC-V: 4 bytes when the lower two bits are 11 (The RISC-V Instruction Set Manual, volume I, section 1.5).
    Both references from memory.
    """
    count = position = 0
    while position < len(content):
        half = content[position] | content[position + 1] << 8
        position += 4 if (half >> 11 >= 0b11101 if thumb else half & 3 == 3) else 2
        count += 1
    return count


class _Meter:
    """Follows the blocks of a program, and gathers those of each sample."""

    def __init__(self, lengths: _Lengths) -> None:
        self.counts: list[int] = []
        self.started = False
        self.stuck = False
        self._lengths = lengths
        self._blocks: list[tuple[int, int]] = []

    def block(self, core: unicorn.Uc, address: int, length: int, _data: Any) -> None:
        """Take note of a block."""
        self._blocks.append((address, length))
        if len(self._blocks) > MOST_BLOCKS:
            self.stuck = True
            core.emu_stop()

    def sample(self) -> None:
        """Begin a sample, which ends the one before it."""
        if self.started:
            self.counts.append(sum(map(self._lengths.__getitem__, self._blocks)))
        self._blocks.clear()
        self.started = True


def emulate(image: Image, target: Target, code: Code, vectors: Vectors) -> Run:
    """Feed the vectors to a program with the harness for a target.

    Parameters
    ----------
    image : Image
        The program.
    target : Target
        The processor.
    code : Code
        What is on trial in it.
    vectors : Vectors
        Its inputs; the answers are the caller's to compare.

    Raises
    ------
    RealizeError
        When the program does something the processor cannot do, or does not return.
    """
    core, registers = _core(target), _REGISTERS[target.architecture]
    _load(core, image)
    _enable_fpu(core, target)
    meter = _Meter(_Lengths(core, target.architecture == "thumb", image.symbols[RUN]))
    top: list[int] = []
    entry = image.symbols[code.entry].address

    def enter(_core: unicorn.Uc, _address: int, _length: int, _data: Any) -> None:
        top[:] = top or [core.reg_read(registers.stack)]
        meter.sample()

    # In this order: the block that a sample starts with is its first.
    core.hook_add(unicorn.UC_HOOK_BLOCK, enter, begin=entry, end=entry)
    core.hook_add(unicorn.UC_HOOK_BLOCK, meter.block)
    answers = _start(core, registers, target, image, code, vectors, meter)
    return Run(
        unpacked(code.output_type, bytes(core.mem_read(answers, size(code.output_type) * len(vectors.inputs))), "<"),
        image.sizes(code.name).state,
        image.sizes(code.name),
        max(0, top[0] - _lowest_used(core)),
        tuple(meter.counts),
    )


def _core(target: Target) -> unicorn.Uc:
    if target.architecture == "thumb":
        core = unicorn.Uc(unicorn.UC_ARCH_ARM, unicorn.UC_MODE_THUMB)
        core.ctl_set_cpu_model(getattr(arm_const, target.model))
    else:
        core = unicorn.Uc(unicorn.UC_ARCH_RISCV, unicorn.UC_MODE_RISCV32)
        core.ctl_set_cpu_model(getattr(riscv_const, target.model))
    return core


def _load(core: unicorn.Uc, image: Image) -> None:
    try:
        for first, beyond in _pages(image):
            core.mem_map(first * _PAGE, (beyond - first) * _PAGE)
        for address, content in image.segments:
            core.mem_write(address, content)
        core.mem_map(_RETURN, _PAGE)
        core.mem_map(_STACK, _STACK_BYTES)
    except unicorn.UcError as error:
        raise RealizeError(
            "the program",
            f"it cannot be loaded: {error}",
            "code and data below 0x60000000",
            "use another linker script",
        ) from None
    core.mem_write(_STACK, _PAINT * _STACK_BYTES)


def _pages(image: Image) -> list[tuple[int, int]]:
    """Stretches of pages that a program takes: the first, and the one beyond the last."""
    stretches: list[tuple[int, int]] = []
    for address, content in sorted(image.segments):
        first, beyond = address // _PAGE, -(-(address + len(content)) // _PAGE)
        if stretches and first <= stretches[-1][1]:
            first, former = stretches.pop()
            beyond = max(beyond, former)
        stretches.append((first, beyond))
    return stretches


def _enable_fpu(core: unicorn.Uc, target: Target) -> None:
    if target.floating_point:
        access = core.reg_read(arm_const.UC_ARM_REG_C1_C0_2)
        core.reg_write(arm_const.UC_ARM_REG_C1_C0_2, access | _FPU_ACCESS)
        core.reg_write(arm_const.UC_ARM_REG_FPEXC, _FPU_ENABLE)


def _start(
    core: unicorn.Uc,
    registers: _Registers,
    target: Target,
    image: Image,
    code: Code,
    vectors: Vectors,
    meter: _Meter,
) -> int:
    """Call ``trial_run``; the address of the answers."""
    content = packed(code.input_type, vectors.given, "<")
    answers = _DATA + _whole_pages(len(content))
    core.mem_map(_DATA, answers - _DATA + _whole_pages(len(vectors.inputs) * size(code.output_type)))
    core.mem_write(_DATA, content)
    for register, value in zip(registers.arguments, (_DATA, answers, len(vectors.inputs)), strict=True):
        core.reg_write(register, value)
    mark = int(target.architecture == "thumb")
    core.reg_write(registers.stack, _STACK + _STACK_BYTES)
    core.reg_write(registers.link, _RETURN | mark)
    if "__global_pointer$" in image.symbols:
        core.reg_write(riscv_const.UC_RISCV_REG_GP, image.symbols["__global_pointer$"].address)
    try:
        core.emu_start(image.symbols[RUN].address | mark, _RETURN)
    except unicorn.UcError as error:
        raise _failed("it crashed", _crash(error), core, registers, target, meter) from None
    if meter.stuck:
        raise _failed("it does not return", f"{MOST_BLOCKS} branches", core, registers, target, meter)
    if core.reg_read(registers.counter) != _RETURN:
        raise _failed("it stopped", "halted", core, registers, target, meter)
    meter.sample()
    return answers


def _failed(
    found: str, why: str, core: unicorn.Uc, registers: _Registers, target: Target, meter: _Meter
) -> RealizeError:
    where = f"at sample {len(meter.counts)}" if meter.started else "before the first sample"
    return RealizeError(
        target.name,
        f"{found} {where} ({why}, at address 0x{core.reg_read(registers.counter):08x})",
        "code for this processor that returns from every sample",
        "see that the compiler's options are those of the processor; is the C as it was emitted?",
    )


def _crash(error: unicorn.UcError) -> str:
    """What the emulator calls an error, without its name for it."""
    return str(error).partition(" (")[0].lower()


def _whole_pages(length: int) -> int:
    return -(-max(length, 1) // _PAGE) * _PAGE


def _lowest_used(core: unicorn.Uc) -> int:
    """Address of the lowest byte of the stack that was written; what was reserved alone leaves no trace."""
    content = bytes(core.mem_read(_STACK, _STACK_BYTES))
    return _STACK + len(content) - len(content.lstrip(_PAINT))
