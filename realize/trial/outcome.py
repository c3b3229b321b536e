"""What a trial found."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

from realize.trial.c_types import Value
from realize.trial.emitted import Emitted


class Sizes(NamedTuple):
    """Bytes of a program, by what they are for.

    Attributes
    ----------
    code, constants : int
        Of the emitted functions, all of them; numbers that lie between instructions count as code.
    state : int
        Of one instance.
    runtime : int
        Of what the compiler's own library adds, shared by everything in the firmware.
    """

    code: int
    constants: int
    state: int
    runtime: int


class Run(NamedTuple):
    """One program that ran over the vectors.

    Attributes
    ----------
    outputs : sequence
        Its answers.
    state_bytes : int
    sizes : Sizes or None
        Where the program could be taken apart.
    stack_bytes : int or None
        How far below the caller's it was written, measured.
    instructions : sequence of int
        Retired per sample, from the call to the return; empty on the host.
    """

    outputs: Sequence[Value]
    state_bytes: int
    sizes: Sizes | None = None
    stack_bytes: int | None = None
    instructions: Sequence[int] = ()


def least_median_most(counts: Sequence[int]) -> tuple[int, int, int]:
    """Of the instructions per sample; the median is one that occurred."""
    ordered = sorted(counts)
    return ordered[0], ordered[(len(ordered) - 1) // 2], ordered[-1]


class Difference(NamedTuple):
    """The first answer that is not the vectors'. Samples count from 0; texts as in the vectors."""

    sample: int
    given: str
    expected: str
    got: str


class Attempt(NamedTuple):
    """One processor and optimisation level.

    Attributes
    ----------
    target : str
    level : str or None
        None where the user's own command compiled.
    run : Run
    difference : Difference or None
        None when every answer has the bits of the vectors.
    """

    target: str
    level: str | None
    run: Run
    difference: Difference | None


class Trial(NamedTuple):
    """All attempts with one emission."""

    emitted: Emitted
    attempts: Sequence[Attempt]

    @property
    def equal(self) -> bool:
        """Whether every answer of every attempt has the bits of the vectors."""
        return all(attempt.difference is None for attempt in self.attempts)
