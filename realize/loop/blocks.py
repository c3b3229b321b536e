"""The step of a sampled loop with many samples of delay, a block of samples at a time.

What the plant receives during a block was computed before it begins, as long as a block is no longer than the delay:
so a block is one linear map of the state before it and the inputs under way.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from realize.loop.between import WithinPeriod
from realize.loop.response import Complex
from realize.loop.states import States, product

#: Samples in a block at the most, and blocks that are followed.
_MOST_SAMPLES = 64
_MOST_BLOCKS = 4096

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


def moved_in_blocks(control: States, within: WithinPeriod, delay: int, start: tuple[Complex, Complex]) -> Complex:
    """Plant states and input at every change of the input, until all is at rest.

    Parameters
    ----------
    start : pair of array
        As from :func:`starting`.

    Returns
    -------
    array, (order + 1, samples)
    """
    n, length = len(within.measured) - 1, min(delay, _MOST_SAMPLES)
    block = _block(*_one_sample(control, within), n, length)
    state, pending = np.concatenate([np.zeros(n, complex), start[0], [1.0]]), start[1]
    before: list[Complex] = []
    inputs: list[Complex] = []
    quiet, reference, size = 0, 0.0 + 0j, 0.0
    while len(inputs) < _MOST_BLOCKS and quiet <= 3 * delay + _MOST_SAMPLES:
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
    states, received = np.array(before).T, np.array(inputs).T
    plant = (product(block.plant[0], states) + product(block.plant[1], received)).reshape(length, n, -1)
    return np.vstack([np.moveaxis(plant, 0, 2).reshape(n, -1), received.T.ravel()])


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
