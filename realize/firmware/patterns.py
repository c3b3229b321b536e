"""Inputs of the test vectors as parts of full scale, from integer arithmetic alone: the same everywhere."""

from __future__ import annotations

#: Samples of an impulse with its rest, and of a sweep.
IMPULSE, SWEEP = 64, 256

#: One part of full scale.
UNIT = 1 << 15


def impulse() -> list[int]:
    """Full scale once, then zero."""
    return [UNIT, *[0] * (IMPULSE - 1)]


def sweep() -> list[int]:
    """A triangle wave of rising rate, from an integer phase that makes one turn in 2^16."""
    parts = []
    phase = 0
    for k in range(SWEEP):
        folded = abs((phase + UNIT // 2) % (2 * UNIT) - UNIT)
        parts.append(2 * (UNIT // 2 - folded))
        phase += UNIT * k // SWEEP
    return parts


def noise(count: int) -> list[int]:
    """High halves of ``s <- 1664525 s + 1013904223 mod 2^32`` from 1 (Knuth and Lewis; constants from memory)."""
    parts = []
    state = 1
    for _ in range(count):
        state = (1664525 * state + 1013904223) % (1 << 32)
        parts.append((state >> 16) - UNIT)
    return parts
