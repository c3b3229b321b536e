"""The step of a sampled loop with many samples of delay, a block of samples at a time.

What the plant receives during a block was computed before it begins, as long as a block is no longer than the delay:
so a block is one linear map of the state before it and the inputs under way.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from realize.loop.between import WithinPeriod
from realize.loop.figures import highest_peaks
from realize.loop.response import Complex, Whole
from realize.loop.states import States, product

#: Samples in a block at the most, and samples that are followed.
_MOST_SAMPLES = 64
_MOST_FOLLOWED = 1 << 18

#: Samples that are looked at, one in several of them where there are more; all of them in the first blocks, and in
#: those around the highest peaks.
_LOOKED_AT = 16384
_MOST_STRIDE = 16
_FIRST_BLOCKS = 64
_PEAKS = 4

#: Change of the controller's output, in units of its greatest, below which it rests.
_AT_REST = 1e-9


class _Block(NamedTuple):
    """Maps from the state before a block (plant and sensor, controller, the constant 1) and its inputs.

    Attributes
    ----------
    commands : pair of array
        To the controller's outputs, sample by sample.
    plant : pair of array
        To the states of plant and sensor, ``(samples, order)`` flattened.
    onward : pair of array
        To the state before the next block.
    """

    commands: tuple[Complex, Complex]
    plant: tuple[Complex, Complex]
    onward: tuple[Complex, Complex]


def starting(control: States, delay: int) -> tuple[Complex, Complex]:
    """State and outputs of a controller that has seen an error of 1 for as many samples as the delay has."""
    state, outputs = np.zeros(control.order, complex), np.zeros(delay, complex)
    for i in range(delay):
        outputs[i] = control.c @ state + control.d
        state = state + control.a @ state + control.b
    return state, outputs


def moved_in_blocks(
    control: States, within: WithinPeriod, start: tuple[Complex, Complex], final: float
) -> tuple[Whole, Complex] | None:
    """Plant states and input at changes of the input, until all is at rest; None where that takes too long.

    Parameters
    ----------
    start : pair of array
        As from :func:`starting`; the delay is that of its outputs.
    final : float
        Final value of the plant's output.

    Returns
    -------
    samples : array of int, (count,)
        Which changes: all of them, or beyond the first blocks one in several, and all around the highest outputs.
    moving : array, (order + 1, count)
    """
    n, length = len(within.measured) - 1, min(len(start[1]), _MOST_SAMPLES)
    block = _block(*_one_sample(control, within), n, length)
    followed = _followed(block, np.concatenate([np.zeros(n, complex), start[0], [1.0]]), start[1], length)
    if followed is None:
        return None
    states, inputs = followed
    stride = min(_MOST_STRIDE, -(-inputs.size // _LOOKED_AT))
    every_one = _placed(block, states, inputs, np.arange(len(inputs)), stride)
    if stride == 1:
        return every_one
    value = (within.read[0] @ every_one[1]).real / final
    highest = every_one[0][highest_peaks(value, _PEAKS)] // length
    near = np.concatenate([np.arange(_FIRST_BLOCKS), highest, highest + 1, np.maximum(highest, 1) - 1])
    full = _placed(block, states, inputs, np.unique(near[near < len(inputs)]), 1)
    samples, first = np.unique(np.concatenate([full[0], every_one[0]]), return_index=True)
    return samples, np.concatenate([full[1], every_one[1]], axis=1)[:, first]


def _followed(block: _Block, state: Complex, pending: Complex, length: int) -> tuple[Complex, Complex] | None:
    """States before each block, and its inputs; None where all is not at rest after the last one."""
    before: list[Complex] = []
    inputs: list[Complex] = []
    delay, quiet, reference, size = len(pending), 0, 0.0 + 0j, 0.0
    while quiet <= 3 * delay + _MOST_SAMPLES:
        if len(inputs) * length > _MOST_FOLLOWED:
            return None
        now, pending = pending[:length], pending[length:]
        commands = _mapped(block.commands, state, now)
        before.append(state)
        inputs.append(now)
        state = _mapped(block.onward, state, now)
        pending = np.concatenate([pending, commands])
        # At rest when no output has left one and the same value for three times the delay.
        size = max(size, float(np.abs(commands).max()))
        if float(np.abs(commands - reference).max()) > _AT_REST * size:
            quiet, reference = 0, complex(commands[-1])
        quiet += length
    return np.array(before), np.array(inputs)


def _placed(block: _Block, states: Complex, inputs: Complex, chosen: Whole, stride: int) -> tuple[Whole, Complex]:
    """Plant states and input at every ``stride``-th sample of some blocks."""
    length = inputs.shape[1]
    at = np.arange(0, length, stride)
    n = len(block.plant[0]) // length
    from_state, from_input = (m.reshape(length, n, -1)[at].reshape(len(at) * n, -1) for m in block.plant)
    plant = product(from_state, states[chosen].T) + product(from_input, inputs[chosen].T)
    placed = np.moveaxis(plant.reshape(len(at), n, -1), 0, 2).reshape(n, -1)
    samples = (chosen[:, None] * length + at).ravel()
    return samples, np.vstack([placed, inputs[chosen][:, at].ravel()])


def _mapped(maps: tuple[Complex, Complex], state: Complex, inputs: Complex) -> Complex:
    # Not by the library's product, as in :func:`realize.loop.states.product`.
    mapped: Complex = (maps[0] * state).sum(axis=1) + (maps[1] * inputs).sum(axis=1)
    return mapped


def _one_sample(control: States, within: WithinPeriod) -> tuple[Complex, Complex, Complex, complex]:
    """``next = F state + g input``, ``command = h state + j input``."""
    n, m = len(within.measured) - 1, control.order
    plant, own, one = slice(0, n), slice(n, n + m), n + m
    f = np.eye(n + m + 1, dtype=complex)
    f[plant, plant] += within.to_end[:n, :n]
    f[own, own] += control.a
    f[own, plant], f[own, one] = -np.outer(control.b, within.measured[:n]), control.b
    g = np.concatenate([within.to_end[:n, n], -control.b * within.measured[n], [0]])
    h = np.concatenate([-control.d * within.measured[:n], control.c, [control.d]])
    return f, g, h, -control.d * within.measured[n]


def _block(f: Complex, g: Complex, h: Complex, j: complex, n: int, length: int) -> _Block:
    """Powers of one sample's map."""
    powers = [np.eye(len(g), dtype=complex)]
    for _ in range(length):
        powers.append(f @ powers[-1])
    reached = np.array([power @ g for power in powers])
    commands = _toeplitz(np.concatenate([[[j]], (reached[:-2] @ h)[:, None]]))
    plant = _toeplitz(np.concatenate([np.zeros((1, n)), reached[:-2, :n]]))
    return _Block(
        (np.array([h @ power for power in powers[:-1]]), commands),
        (np.concatenate([power[:n] for power in powers[:-1]]), plant),
        (powers[-1], reached[-2::-1].T),
    )


def _toeplitz(answers: Complex) -> Complex:
    """``(samples, outputs)``, flattened, from each input: what an input answers k samples later, k from 0."""
    length, outputs = answers.shape
    matrix = np.zeros((length, outputs, length), complex)
    for i in range(length):
        matrix[i, :, : i + 1] = answers[i::-1].T
    return matrix.reshape(length * outputs, length)
