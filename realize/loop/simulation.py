"""The step of the sampled loop, between the samples too.

Plant and sensor are moved exactly from one change of the held input to the next; the controller, the samples of delay
and the plant make one linear map per sample. The plant's output is then looked at on a grid within every period that
follows its poles, and its highest point refined. Figures are measured to rounding at what is looked at.
"""

from __future__ import annotations

from math import ceil, log
from typing import NamedTuple

import numpy as np

from realize.checks.modes import every, logarithm
from realize.loop.between import WithinPeriod, figures_between, times_between, within_period
from realize.loop.blocks import moved_in_blocks, starting
from realize.loop.figures import StepFigures, final_value, highest_peaks
from realize.loop.response import Complex, Real, Whole
from realize.loop.sampled import SampledLoop
from realize.loop.states import States, moved, product, sequence, states
from realize.transfer import PulseTransferFunction

#: Decay that ends the simulation: exp(-18) = 1.5e-8 of a step, a hundredth of 1e-4 points.
_LIFETIME = 18.0

#: Samples that are all looked at.
_FIRST_SAMPLES = 64

#: Turn, in radians of the fastest live mode, from one sample that is looked at to the next: the parabola through three
#: then misses a peak by less than 1e-5 of the mode.
_TURN = 0.25

#: Samples looked at in this way at the most; beyond, times in this ratio.
_MOST_LOOKED_AT = 16384
_TIME_RATIO = 1.005

#: Highest peaks that are closed in on, and parts into which the stretch around each is divided, until it is down to
#: neighbouring samples.
_PEAKS = 4
_BETWEEN = 32

#: Points that are drawn at the most, those between samples included.
_MOST_DRAWN = 400_000

#: Samples beyond which a loop is not followed: the modes left are slower than 1e8 samples.
_MOST_SAMPLES = 2**40

#: Samples of delay up to which they are states of one map for each sample; beyond, a whole block goes at once.
_DENSE_DELAY = 8


def step_figures(loop: SampledLoop) -> StepFigures | None:
    """Figures of the step.

    None where the loop is not stable, has no final value but 0, or, with more than 8 samples of delay, is not at rest
    after a quarter of a million samples.

    Parameters
    ----------
    loop : SampledLoop
    """
    run = _run_of(loop)
    return None if run is None else figures_between(loop.held, *run)


def step_curve(loop: SampledLoop, end_s: float) -> tuple[Real, Real] | None:
    """The plant's output after a unit step of the reference, up to a time; None where :func:`step_figures` is.

    Returns
    -------
    times_s, values : array
        Ascending from the first change of the plant's input on; every sample, and between them as dense as the plant's
        poles ask for. Before it the output is 0. Of more than 400,000 points, and with more than 8 samples of delay
        of more samples than are followed one by one, the first.
    """
    run = _run_of(loop)
    if run is None:
        return None
    count = max(2, min(ceil(end_s / float(loop.period_s)) + 1, _MOST_DRAWN // len(run.within.times)))
    if loop.held.whole > _DENSE_DELAY:
        consecutive = int(np.argmax(np.append(np.diff(run.samples), 2) > 1)) + 1
        samples, moving = run.samples[: min(count, consecutive)], run.moving[:, : min(count, consecutive)]
    else:
        mapped = _dense(loop, run.within)
        samples, moving = np.arange(count), product(mapped.rows, sequence(mapped.change, mapped.start, count))
    # The end of a period is the start of the next.
    values = product(run.within.read[0] @ run.within.moved[:-1], moving).real.T
    return times_between(loop.held, run.within, samples)[:, :-1].ravel(), values.ravel()


class _Run(NamedTuple):
    """How the plant moves within a period, and from where at each change of its input; the final value."""

    within: WithinPeriod
    samples: Whole
    moving: Complex
    final: float


def _run_of(loop: SampledLoop) -> _Run | None:
    final = final_value(loop.controller, loop.held.plant)
    if final is None or not loop.verdict.is_stable:
        return None
    within = within_period(loop.held)
    followed = _run(loop, within, final)
    return None if followed is None else _Run(within, *followed, final)


def _pulse_states(g: PulseTransferFunction) -> States:
    gain = g.low_frequency_gain / g.period_s**g.zeros_minus_poles_at_one
    return states(float(gain), every(g.zeros), every(g.poles))


class _Map(NamedTuple):
    """One sample as a linear map: ``next = state + change state``, and rows that read plant states and input."""

    change: Complex
    start: Complex
    rows: Complex


def _run(loop: SampledLoop, within: WithinPeriod, final: float) -> tuple[Whole, Complex] | None:
    """Samples, and for each the plant's states and input at the change of the input that follows it by the delay.

    None where the output is not followed until it rests.
    """
    if loop.held.whole > _DENSE_DELAY:
        control = _pulse_states(loop.controller)
        return moved_in_blocks(control, within, starting(control, loop.held.whole), final)
    mapped = _dense(loop, within)
    samples = _looked_at(np.asarray(np.linalg.eigvals(mapped.change[:-1, :-1]), complex))
    consecutive = int(np.argmax(np.append(np.diff(samples), 2) > 1)) + 1
    moving = product(mapped.rows, sequence(mapped.change, mapped.start, consecutive))
    if consecutive == len(samples):
        return samples, moving
    start = samples[:consecutive], moving
    return _closed_in(mapped, *_merged(mapped, *start, samples[consecutive:]), within.read[0] / final)


def _looked_at(deltas: Complex) -> Whole:
    """Samples to look at, by the modes of the closed loop, given as ``z - 1``: each as long as it lives."""
    logs = [logarithm(complex(delta)) for delta in deltas]
    lives = sorted((min(_LIFETIME / max(-x.real, 1e-300), _MOST_SAMPLES), abs(x)) for x in logs)
    looked_at, last = [np.arange(_FIRST_SAMPLES + 1)], _FIRST_SAMPLES
    for i, (life, _) in enumerate(lives):
        end = int(life) + 2
        if end > last:
            stride = max(1, int(_TURN / max(speed for _, speed in lives[i:])))
            looked_at.append(_spread(last, end, stride))
            last = end
    return np.unique(np.concatenate(looked_at))


def _spread(first: int, last: int, stride: int) -> Whole:
    """Samples in equal strides as long as there are not too many, then in equal ratios."""
    even = min(last, first + stride * _MOST_LOOKED_AT)
    samples = np.arange(first, even + stride, stride)
    if even == last:
        return samples
    count = int(log(last / even) / log(_TIME_RATIO)) + 1
    return np.concatenate([samples, np.floor(even * _TIME_RATIO ** np.arange(1, count + 1)).astype(np.int64)])


def _merged(mapped: _Map, samples: Whole, moving: Complex, added: Whole) -> tuple[Whole, Complex]:
    every_one = np.concatenate([samples, added])
    order = np.argsort(every_one, kind="stable")
    columns = product(mapped.rows, moved(mapped.change, mapped.start, added))
    return every_one[order], np.concatenate([moving, columns], axis=1)[:, order]


def _closed_in(mapped: _Map, samples: Whole, moving: Complex, height: Complex) -> tuple[Whole, Complex]:
    """Add samples around the highest peaks until each has both its neighbours."""
    while True:
        value = product(height[None], moving)[0].real
        around = [
            np.linspace(samples[k - 1], samples[k + 1], _BETWEEN + 1).astype(np.int64)
            for k in highest_peaks(value, _PEAKS)
        ]
        added = np.setdiff1d(np.concatenate(around), samples) if around else samples[:0]
        if not len(added):
            return samples, moving
        samples, moving = _merged(mapped, samples, moving, added)


def _dense(loop: SampledLoop, within: WithinPeriod) -> _Map:
    """States in order: plant and sensor, inputs under way, controller, the constant 1."""
    control, held = _pulse_states(loop.controller), loop.held
    n, d, m = len(within.measured) - 1, held.whole, control.order
    size = n + d + m + 1
    plant, line, own = slice(0, n), n, slice(n + d, n + d + m)
    # The input in force: the oldest under way, or what the controller answers at once.
    now = np.zeros(size, complex)
    error = np.zeros(size, complex)
    error[-1], error[plant] = 1, -within.measured[:n]
    if d:
        now[line] = 1
        error[line] = -within.measured[n]
    else:
        error /= 1 + control.d * within.measured[n]
        error[own] = -control.c * within.measured[n] / (1 + control.d * within.measured[n])
    command = control.d * error
    command[own] += control.c
    now = now if d else command
    change = np.zeros((size, size), complex)
    change[plant, plant] = within.to_end[:n, :n]
    change[plant] += np.outer(within.to_end[:n, n], now)
    change[own, own] = control.a
    change[own] += np.outer(control.b, error)
    for i in range(d):
        change[line + i, line + i] -= 1
        change[line + i] += np.eye(size)[line + i + 1] if i + 1 < d else command
    rows = np.vstack([np.eye(size, dtype=complex)[plant], now])
    state, under_way = starting(control, d)
    return _Map(change, np.concatenate([np.zeros(n, complex), under_way, state, [1.0]]), rows)
