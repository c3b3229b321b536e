"""Works compiled designs, apart from the process that judges: takes a library, reads commands, prints bits.

d NAME          take a design           c       clear
u X             update                  o X     output
a X Y           advance, no answer      p X Y   preset, answers 0 or 1
s P G           plant y <- P y + G u    l N R   N samples of the loop u = update(R - y), an answer each
b NAME M        branches of a function of instrumented code; with M = 1 those never taken
"""

from __future__ import annotations

import ctypes
import struct
import sys
from collections.abc import Callable, Iterator

REAL, WHOLE = ctypes.c_double, ctypes.c_int
SIGNATURES = {
    "clear": (None, ()),
    "update": (REAL, (REAL,)),
    "output": (REAL, (REAL,)),
    "advance": (None, (REAL, REAL)),
    "preset": (WHOLE, (REAL, REAL)),
}
LETTERS = {name[0]: name for name in SIGNATURES}


def functions(library: ctypes.CDLL, design: str) -> dict[str, Callable[..., float | int | None]]:
    """The wrapped functions of a design, by the letter of their command."""
    found = {}
    for letter, name in LETTERS.items():
        function = getattr(library, f"{design}_{name}_")
        function.restype, function.argtypes = SIGNATURES[name]
        found[letter] = function
    return found


def answers(library: ctypes.CDLL, commands: list[list[str]]) -> Iterator[str]:
    """Carry out the commands."""
    work: dict[str, Callable[..., float | int | None]] = {}
    pole = gain = level = 0.0
    for letter, *words in commands:
        if letter == "d":
            work = functions(library, words[0])
            continue
        if letter == "b":
            yield printed(branches(library, words[0], int(words[1])))
            continue
        numbers = [float.fromhex(word) for word in words]
        if letter == "s":
            pole, gain = numbers
            level = 0.0
        elif letter == "l":
            for _ in range(int(numbers[0])):
                command = work["u"](numbers[1] - level)
                assert command is not None
                level = pole * level + gain * command
                yield printed(command)
        else:
            answer = work[letter](*numbers)
            if answer is not None:
                yield printed(answer)


def branches(library: ctypes.CDLL, function: str, missed_only: int) -> int:
    """Branches of a function, all or those never taken."""
    library.branches.argtypes = (ctypes.c_size_t, WHOLE)
    address = ctypes.cast(getattr(library, function), ctypes.c_void_p).value
    return int(library.branches(address, missed_only))


def printed(answer: float | int) -> str:
    """A whole number as it is, a real one as its bits."""
    if isinstance(answer, int):
        return str(answer)
    return "nan" if answer != answer else struct.pack(">d", answer).hex()


if __name__ == "__main__":
    lines = [line.split() for line in sys.stdin]
    sys.stdout.write("\n".join(answers(ctypes.CDLL(sys.argv[1]), lines)))
