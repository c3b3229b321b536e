"""The processors: how to compile for each, and what emulates it.

A model chosen with the mode for Thumb alone keeps each emulated processor to its own instructions: a cortex-m0 refuses
32-bit Thumb-2, a cortex-m3 the floating-point unit. The mode for M profiles would silently take another model.
"""

from __future__ import annotations

from typing import NamedTuple

from realize.errors import RealizeError

HOST = "host"
ALL = "all"


class Target(NamedTuple):
    """One processor.

    Attributes
    ----------
    name : str
        As the user names it.
    flags : tuple of str
        What tells the compiler.
    architecture : str
        ``thumb``, ``riscv``, or ``host`` for the machine this runs on.
    model : str
        Name of the emulator's constant for the core.
    floating_point : bool
        Whether a floating-point unit is to be switched on.
    """

    name: str
    flags: tuple[str, ...] = ()
    architecture: str = HOST
    model: str = ""
    floating_point: bool = False


def _thumb(name: str, core: str, model: str, floating_point: bool = False) -> Target:
    abi = "eabihf" if floating_point else "eabi"
    return Target(name, ("-target", f"thumb-freestanding-{abi}", f"-mcpu={core}"), "thumb", model, floating_point)


#: Every processor, in the order of the report.
TARGETS = (
    Target(HOST),
    _thumb("cortex-m0", "cortex_m0", "UC_CPU_ARM_CORTEX_M0"),
    _thumb("cortex-m3", "cortex_m3", "UC_CPU_ARM_CORTEX_M3"),
    _thumb("cortex-m4f", "cortex_m4+vfp4d16sp", "UC_CPU_ARM_CORTEX_M4", floating_point=True),
    _thumb("cortex-m7f", "cortex_m7+fp_armv8d16sp", "UC_CPU_ARM_CORTEX_M7", floating_point=True),
    Target(
        "rv32imac",
        ("-target", "riscv32-freestanding-none", "-mcpu=generic_rv32+m+a+c"),
        "riscv",
        "UC_CPU_RISCV32_SIFIVE_E31",
    ),
)

NAMES = tuple(target.name for target in TARGETS)


def targets_named(name: str) -> tuple[Target, ...]:
    """The processor of a name, or all of them.

    Raises
    ------
    RealizeError
        When no processor has that name.
    """
    if name == ALL:
        return TARGETS
    found = tuple(target for target in TARGETS if target.name == name)
    if found:
        return found
    from realize.algebra.expression.tokens import nearest, shown

    like = nearest(name, (*NAMES, ALL))
    advice = f"did you mean {like}?" if like else f"--on {ALL} tries every one"
    raise RealizeError("--on", f"the unknown processor {shown(name)}", ", ".join((*NAMES, ALL)), advice)
