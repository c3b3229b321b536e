"""``NAME_vectors.csv``: inputs from integer arithmetic, and the model's answers to them.

Full scale is the ends of the input range, or -1 and 1. Every input is a value of the format: a fraction ``m/2^15`` of
full scale, times a power of two where the command is to stay within its limits or to be driven beyond them.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import groupby
from math import comb, isfinite
from typing import TYPE_CHECKING

import numpy as np

from realize.arithmetic.recursion import Recursion
from realize.arithmetic.sample import Sample, largest
from realize.firmware.c_text import hexadecimal
from realize.firmware.patterns import IMPULSE, SWEEP, UNIT, impulse, noise, sweep

if TYPE_CHECKING:
    from realize.arithmetic.formats import FloatFormat
    from realize.firmware.emission import Emission

#: Samples of each segment beside the impulse and the sweep: noise within the limits, to compare every rounding where no
#: clamp hides it; a step long enough to see the answer; noise at full scale; each level of the two saturating passes;
#: inputs that are not finite. 1,248 in all, 1,216 where inputs are not guarded.
QUIET, STEP, NOISE, HELD, NONFINITE = 192, 128, 192, 24, 32

#: Where the saturating passes begin.
SATURATING = IMPULSE + QUIET + STEP + SWEEP + NOISE

#: The drive makes this many times what saturates the command.
OVERDRIVE = 4.0

#: Where the second drive does not suffice: how much more each try drives, and how many tries there are.
HARDER, TRIES = 32.0, 6

#: The drive stays this factor below the largest value of the format: room for the gains of the realization.
HEADROOM = 2.0**-40

#: Levels of a saturating pass, as a share of the drive and as parts of full scale: driven to a limit, then back with
#: little, so that the command meets both limits with increments of both signs and leaves them again. The second pass is
#: driven the other way round.
LEVELS = ((1, 0), (0, 512), (-1, 0), (0, -512), (-1, 0), (0, 512), (1, 0), (0, -512))


def vectors_text(emission: Emission, inputs: Sequence[float], outputs: Sequence[float]) -> str:
    """Inputs and outputs as comma-separated C hexadecimal floats; before them the variable of a schedule."""
    columns = [list(inputs), list(outputs)]
    if emission.schedule is not None:
        columns.insert(0, scheduled(emission, len(inputs)))
    rows = [",".join(map(hexadecimal, row)) for row in zip(*columns, strict=True)]
    heading = "input,output" if emission.schedule is None else "variable,input,output"
    return "\n".join([heading, *rows]) + "\n"


def scheduled(emission: Emission, count: int) -> list[float]:
    """The variable of a schedule, for each sample; nothing without one."""
    if emission.schedule is None:
        return []
    # Here, because a design without a schedule does not need it, and its start is short.
    from realize.firmware.schedule.variable import swept

    return swept(emission.schedule, count)


def answers(emission: Emission, model: Recursion, inputs: Sequence[float], variables: Sequence[float]) -> list[float]:
    """The model's answers; with a schedule, to coefficients that it looks up before each sample."""
    if emission.schedule is None:
        return model.run(inputs)
    found = []
    for value, same in groupby(zip(variables, inputs, strict=True), key=lambda pair: hexadecimal(pair[0])):
        model.take(emission.schedule.at(float.fromhex(value)))
        found += model.run([x for _, x in same])
    return found


def vectors(emission: Emission) -> tuple[list[float], list[float]]:
    """Inputs in the order of the segments, and the model's answers from a cleared state.

    Notes
    -----
    Where the past weighs more than the second pass can drive (a chain of integral states that nothing holds), that pass
    is driven harder until the command meets both limits, a few times at most.
    """
    model = emission.recursion()
    target, limits = emission.realization.format, {model.sample.low, model.sample.high}
    low, high = full_scale(emission)
    first, second = _drives(emission, model.sample, max(abs(low), abs(high)))
    quiet = _quiet(emission, model.sample, low, high)
    harder = [second * HARDER**k for k in range(TRIES) if second * HARDER**k < largest(target) * HEADROOM]
    for drive in harder or [second]:
        inputs = in_format(_inputs(emission, quiet, (first, drive), low, high), target)
        model.clear()
        outputs = answers(emission, model, inputs, scheduled(emission, len(inputs)))
        if limits <= {None, *outputs[SATURATING:]}:
            break
    return inputs, outputs


def _inputs(emission: Emission, quiet: float, drives: tuple[float, float], low: float, high: float) -> list[float]:
    """All segments."""
    inputs = [_scaled(m, low, high) for m in (*impulse(), *noise(QUIET), *[UNIT] * STEP, *sweep(), *noise(NOISE))]
    inputs[IMPULSE : IMPULSE + QUIET] = [x * quiet for x in inputs[IMPULSE : IMPULSE + QUIET]]
    for drive in (drives[0], -drives[1]):
        for share, part in LEVELS:
            inputs += [share * drive + _scaled(part, low, high)] * HELD
    return inputs + (_nonfinite(low, high) if emission.guard_nonfinite else [])


def in_format(inputs: list[float], target: FloatFormat) -> list[float]:
    """Each rounded to the format."""
    return inputs if target.name == "float64" else [float(x) for x in np.array(inputs, np.float32)]


def _quiet(emission: Emission, sample: Sample, low: float, high: float) -> float:
    """The largest power of two, at most 1, by which noise is scaled to keep the command within half its limits."""
    if sample.low is None or sample.high is None:
        return 1.0
    loud = [_scaled(m, low, high) for m in noise(QUIET)]
    peak = max(map(abs, Recursion(emission.realization, None, "none").run(loud)))
    within, quiet = max(abs(sample.low), abs(sample.high)) / 2, 1.0
    while isfinite(peak) and peak * quiet > within > 0:
        quiet /= 2
    return quiet


def _drives(emission: Emission, sample: Sample, full: float) -> tuple[float, float]:
    """Amplitudes that saturate the command: through everything, and through the integral states alone."""
    if sample.low is None or sample.high is None:
        return full * OVERDRIVE, full * OVERDRIVE
    limit = max(abs(sample.low), abs(sample.high))
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


def full_scale(emission: Emission) -> tuple[float, float]:
    """Ends of the input range, in the format."""
    target = emission.realization.format
    low, high = emission.input_range or (Fraction(-1), Fraction(1))
    most = Fraction(largest(target))
    ends = target.round(max(low, -most)), target.round(min(high, most))
    return ends if any(ends) else (-1.0, 1.0)


def _scaled(m: int, low: float, high: float) -> float:
    """``m/2^15`` of full scale, towards the high end where m is positive; one rounding at most."""
    return m / UNIT * high if m >= 0 else -m / UNIT * low


def _nonfinite(low: float, high: float) -> list[float]:
    nan, inf = float("nan"), float("inf")
    pattern = [high, nan, low, inf, inf, high, -inf, nan]
    return [pattern[k % len(pattern)] for k in range(NONFINITE)]
