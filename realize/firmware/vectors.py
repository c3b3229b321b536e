"""``NAME_vectors.csv``: inputs from integer arithmetic, and the model's answers to them.

Full scale is the ends of the input range, or -1 and 1. Every input is a value of the format: a fraction ``m/2^15`` of
full scale, times a power of two in the saturating steps.
"""

from __future__ import annotations

from fractions import Fraction
from math import comb
from typing import TYPE_CHECKING

import numpy as np

from realize.arithmetic.recursion import Recursion
from realize.arithmetic.sample import largest
from realize.firmware.c_text import hexadecimal

if TYPE_CHECKING:
    from realize.arithmetic.formats import FloatFormat
    from realize.firmware.emission import Emission

#: Samples of each segment: an impulse and a step long enough to see the answer, a sweep up to half the rate, noise to
#: exercise every rounding, each level of the two saturating passes, and inputs that are not finite. 1,056 in all,
#: 1,024 where inputs are not guarded.
IMPULSE, STEP, SWEEP, NOISE, HELD, NONFINITE = 64, 128, 256, 192, 24, 32

#: One part of full scale.
UNIT = 1 << 15

#: The drive makes this many times what saturates the command.
OVERDRIVE = 4.0

#: Step of the second drive where it does not suffice.
HARDER = 32.0

#: The drive stays this factor below the largest value of the format: room for the gains of the realization.
HEADROOM = 2.0**-40

#: Levels of a saturating pass, as a share of the drive and as parts of full scale: driven to a limit, then back with
#: little, so that the command meets both limits with increments of both signs and leaves them again. The second pass is
#: driven the other way round.
LEVELS = ((1, 0), (0, 512), (-1, 0), (0, -512), (-1, 0), (0, 512), (1, 0), (0, -512))


def vectors_text(emission: Emission) -> str:
    """Inputs and outputs as comma-separated C hexadecimal floats."""
    rows = [f"{hexadecimal(x)},{hexadecimal(y)}" for x, y in zip(*vectors(emission), strict=True)]
    return "\n".join(["input,output", *rows]) + "\n"


def vectors(emission: Emission) -> tuple[list[float], list[float]]:
    """Inputs in the order of the segments, and the model's answers from a cleared state.

    Notes
    -----
    Where the past weighs more than the second pass can drive (a chain of integral states that nothing holds), that pass
    is driven harder until the command meets both limits, or the format has no room.
    """
    model = emission.recursion()
    low, high = _full_scale(emission)
    first, second = _drives(emission, max(abs(low), abs(high)))
    room = largest(emission.realization.format) * HEADROOM
    while True:
        inputs = _in_format(_inputs(emission, (first, second), low, high), emission.realization.format)
        model.clear()
        outputs = model.run(inputs)
        met = {model.sample.low, model.sample.high} <= {None, *outputs}
        if met or second * HARDER > room:
            return inputs, outputs
        second *= HARDER


def _inputs(emission: Emission, drives: tuple[float, float], low: float, high: float) -> list[float]:
    """All segments."""
    parts = [*_impulse(), *[UNIT] * STEP, *_sweep(), *_noise()]
    inputs = [_scaled(m, low, high) for m in parts]
    for drive in (drives[0], -drives[1]):
        for share, part in LEVELS:
            inputs += [share * drive + _scaled(part, low, high)] * HELD
    return inputs + (_nonfinite(low, high) if emission.guard_nonfinite else [])


def _in_format(inputs: list[float], target: FloatFormat) -> list[float]:
    return inputs if target.name == "float64" else [float(x) for x in np.array(inputs, np.float32)]


def _drives(emission: Emission, full: float) -> tuple[float, float]:
    """Amplitudes that saturate the command: through everything, and through the integral states alone."""
    if emission.output_range is None:
        return full * OVERDRIVE, full * OVERDRIVE
    limit = float(max(map(abs, emission.output_range)))
    realization = emission.realization
    answers = Recursion(realization, None, "none").run([full] * HELD)
    peak = max(map(abs, answers)) / full
    reaches = [abs(gain) * comb(HELD, i) for i, gain in enumerate(realization.integral, 1) if gain]
    room = largest(realization.format) * HEADROOM
    return _drive(limit, [peak], full, room), _drive(limit, [peak, *reaches], full, room)


def _drive(limit: float, responses: list[float], full: float, room: float) -> float:
    """Full scale times the least power of two (from 1) with which every response passes the limit well."""
    drive = full
    while drive < room and any(r > 0 and r * drive < OVERDRIVE * limit for r in responses):
        drive *= 2
    return drive


def _full_scale(emission: Emission) -> tuple[float, float]:
    target = emission.realization.format
    low, high = emission.input_range or (Fraction(-1), Fraction(1))
    ends = target.round(low), target.round(high)
    return ends if any(ends) else (-1.0, 1.0)


def _scaled(m: int, low: float, high: float) -> float:
    """``m/2^15`` of full scale, towards the high end where m is positive; one rounding at most."""
    return m / UNIT * high if m >= 0 else -m / UNIT * low


def _impulse() -> list[int]:
    return [UNIT, *[0] * (IMPULSE - 1)]


def _sweep() -> list[int]:
    """A triangle wave of rising rate, from an integer phase that makes one turn in 2^16."""
    parts = []
    phase = 0
    for k in range(SWEEP):
        folded = abs((phase + UNIT // 2) % (2 * UNIT) - UNIT)
        parts.append(2 * (UNIT // 2 - folded))
        phase += UNIT * k // SWEEP
    return parts


def _noise() -> list[int]:
    """High halves of ``s <- 1664525 s + 1013904223 mod 2^32`` from 1 (Knuth and Lewis; constants from memory)."""
    parts = []
    state = 1
    for _ in range(NOISE):
        state = (1664525 * state + 1013904223) % (1 << 32)
        parts.append((state >> 16) - UNIT)
    return parts


def _nonfinite(low: float, high: float) -> list[float]:
    nan, inf = float("nan"), float("inf")
    pattern = [high, nan, low, inf, inf, high, -inf, nan]
    return [pattern[k % len(pattern)] for k in range(NONFINITE)]
