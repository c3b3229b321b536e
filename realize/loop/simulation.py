"""The step of the sampled loop, between the samples too.

Plant and sensor are moved exactly from one change of the held input to the next; the controller, the samples of delay
and the plant make one linear map per sample. The plant's output is then looked at on a grid within every period that
follows its poles, and its highest point refined. Figures are measured to rounding at what is looked at.
"""

from __future__ import annotations

from math import inf, log
from typing import NamedTuple

import numpy as np

from realize.checks.modes import every, logarithm
from realize.loop.between import WithinPeriod, figures_between, within_period
from realize.loop.figures import StepFigures, final_value
from realize.loop.response import Complex, Whole
from realize.loop.sampled import SampledLoop
from realize.loop.states import States, moved, product, sequence, states
from realize.transfer import PulseTransferFunction

#: Decay that ends the simulation: exp(-18) = 1.5e-8 of a step, a hundredth of 1e-4 points.
_LIFETIME = 18.0

#: Up to here every sample is looked at; beyond, times in this ratio.
_ALL_SAMPLES = 4096
_TIME_RATIO = 1.002

#: Samples beyond which a loop is not followed: the modes left are slower than 1e8 samples.
_MOST_SAMPLES = 2**40

#: Samples of delay up to which they are states of one map for each sample; beyond, a whole block goes at once, which
#: may be as long as the delay.
_DENSE_DELAY = 8
_MOST_BLOCK = 64

#: Blocks followed at the most, and change of the controller's output, in units of its greatest, below which it rests.
_MOST_BLOCKS = 1 << 14
_AT_REST = 1e-9


def step_figures(loop: SampledLoop) -> StepFigures | None:
    """Figures of the step; None where the loop is not stable or has no final value but 0.

    Parameters
    ----------
    loop : SampledLoop
    """
    final = final_value(loop.controller, loop.held.plant)
    if final is None or not loop.verdict.is_stable:
        return None
    within = within_period(loop.held)
    samples, moving = _run(loop, within)
    return figures_between(loop.held, within, samples, moving, final)


def _pulse_states(g: PulseTransferFunction) -> States:
    gain = g.low_frequency_gain / g.period_s**g.zeros_minus_poles_at_one
    return states(float(gain), every(g.zeros), every(g.poles))


class _Map(NamedTuple):
    """One sample as a linear map: ``next = state + change state``, and rows that read plant states and input."""

    change: Complex
    start: Complex
    rows: Complex


def _run(loop: SampledLoop, within: WithinPeriod) -> tuple[Whole, Complex]:
    """Samples, and for each the plant's states and input at the change of the input that follows it by the delay."""
    if loop.held.whole > _DENSE_DELAY:
        return _in_blocks(loop, within)
    change, start, rows = _dense(loop, within)
    last = _last_sample(change[:-1, :-1])
    first = sequence(change, start, min(last, _ALL_SAMPLES) + 1)
    samples = np.arange(first.shape[1])
    if last > _ALL_SAMPLES:
        count = int(log(last / _ALL_SAMPLES) / log(_TIME_RATIO)) + 1
        later = np.unique(np.floor(_ALL_SAMPLES * _TIME_RATIO ** np.arange(1, count + 1)).astype(np.int64))
        samples = np.concatenate([samples, later])
        first = np.concatenate([first, moved(change, start, later)], axis=1)
    return samples, product(rows, first)


def _last_sample(change: Complex) -> int:
    """Samples until the slowest mode has died."""
    rates = [-logarithm(complex(delta)).real for delta in np.linalg.eigvals(change)]
    slowest = min(rates, default=inf)
    return int(min(_LIFETIME / slowest, _MOST_SAMPLES)) + 2 if slowest > 0 else _MOST_SAMPLES


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
    return _Map(change, _start(control, n, d), rows)


def _start(control: States, n: int, d: int) -> Complex:
    """Everything at rest until the first change of the input arrives; the controller has seen a constant error of 1."""
    state = np.zeros(control.order, complex)
    line = np.zeros(d, complex)
    for i in range(d):
        line[i] = control.c @ state + control.d
        state = state + control.a @ state + control.b
    return np.concatenate([np.zeros(n, complex), line, state, [1.0]])


def _in_blocks(loop: SampledLoop, within: WithinPeriod) -> tuple[Whole, Complex]:
    """Long delays: the inputs of a whole block are known before it begins."""
    control, n, d = _pulse_states(loop.controller), len(within.measured) - 1, loop.held.whole
    start = _start(control, n, d)
    length = min(d, _MOST_BLOCK)
    lifted = _lifted(*_one_sample(control, within), n, length)
    state, pending = np.concatenate([start[:n], start[n + d :]]), start[n : n + d]
    blocks: list[Complex] = []
    quiet, reference, size = 0, 0.0, 0.0
    for _ in range(_MOST_BLOCKS):
        block, pending = pending[:length], pending[length:]
        out = (lifted.from_state @ state + lifted.from_input @ block).reshape(length, n + 1)
        state = lifted.power @ state + lifted.reach @ block
        blocks.append(np.vstack([out[:, :n].T, block]))
        pending = np.concatenate([pending, out[:, n]])
        # At rest when no input has moved from one and the same value for longer than the delay.
        size = max(size, float(np.abs(out[:, n]).max()))
        if float(np.abs(out[:, n] - reference).max()) > _AT_REST * size:
            quiet, reference = 0, out[-1, n]
        quiet += length
        if quiet > 3 * d + _MOST_BLOCK:
            break
    moving = np.concatenate(blocks, axis=1)
    return np.arange(moving.shape[1]), moving


class _Lifted(NamedTuple):
    """A block of samples as one map from the state before it and its inputs."""

    from_state: Complex
    from_input: Complex
    power: Complex
    reach: Complex


def _one_sample(control: States, within: WithinPeriod) -> tuple[Complex, Complex, Complex, complex]:
    """``next = F state + g input``, ``command = h state + j input``: plant and sensor, controller, the constant 1."""
    n, m = len(within.measured) - 1, control.order
    plant, own, one = slice(0, n), slice(n, n + m), n + m
    f = np.eye(n + m + 1, dtype=complex)
    f[plant, plant] += within.to_end[:n, :n]
    f[own, own] += control.a
    f[own, plant], f[own, one] = -np.outer(control.b, within.measured[:n]), control.b
    g = np.concatenate([within.to_end[:n, n], -control.b * within.measured[n], [0]])
    h = np.concatenate([-control.d * within.measured[:n], control.c, [control.d]])
    return f, g, h, -control.d * within.measured[n]


def _lifted(f: Complex, g: Complex, h: Complex, j: complex, n: int, length: int) -> _Lifted:
    """Plant states and commands of a block, sample by sample."""
    read = np.vstack([np.eye(len(g), dtype=complex)[:n], h])
    at_once = np.append(np.zeros(n, complex), j)
    power = np.eye(len(g), dtype=complex)
    from_state, answers, reach = [], [at_once], []
    for _ in range(length):
        from_state.append(read @ power)
        reach.append(power @ g)
        answers.append(read @ reach[-1])
        power = f @ power
    from_input = np.zeros((length, n + 1, length), complex)
    for i in range(length):
        from_input[i, :, : i + 1] = np.array(answers[i::-1]).T
    return _Lifted(
        np.concatenate(from_state), from_input.reshape(-1, length), power, np.array(reach[::-1]).T
    )
