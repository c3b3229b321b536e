"""Rounding noise of the compiled C: what is measured is what the noise gains say, within bounds of the statistics.

The model: every rounding adds an error of its own, independent of all others and uniform over a step. Its output has
the autocovariance ``r_k = sum_i sum_n h_i[n] h_i[n + k]/12``, the variance ``r_0``. Over N samples, the mean of the
error has the variance ``sum_k (1 - |k|/N) r_k/N``, and the mean of its square at most ``2 sum_k r_k^2/N``, since the
fourth cumulant of a uniform error is negative (the moments of a linear process; Bartlett 1946, from memory).
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.signal import lfilter

from realize.arithmetic.integer.program import COMMAND, linear
from realize.arithmetic.state_space import paths
from realize.firmware.integer import IntegerEmission
from tests.firmware.bench import ZIG
from tests.firmware.integer.bench import IntegerBench
from tests.firmware.integer.designs import INPUTS, OUTPUTS, WIDTHS, emission

Floats = NDArray[np.float64]

#: Bounds in standard deviations: a fair sample is outside once in 5e8.
DEVIATIONS = 6

SAMPLES, SETTLED, RESPONSE = 400_000, 4_000, 4_000
MEASURED = SAMPLES - SETTLED

STRUCTURES = ("cascade", "error-feedback", "delta", "normal")


def designs() -> list[IntegerEmission]:
    """A slow pole and a lightly damped pair, 16-bit words; an output wide enough never to be limited."""
    ends = INPUTS["int16"], OUTPUTS["int32"]
    return [emission(f"s{k}", "three", structure, WIDTHS[0], ends) for k, structure in enumerate(STRUCTURES)]


class Noise(NamedTuple):
    """To expect: variance, those of the means of the error and of its square, and the bias of halves rounded upward."""

    variance: float
    of_mean: float
    of_square: float
    bias: float


def expected(one: IntegerEmission) -> Noise:
    """From the impulse responses of the rounding errors to the command."""
    program = one.realization.program
    system, sources, targets = linear(program)
    row = paths(system)[targets.index(COMMAND)][1:]
    shifts = {each.target: each.shift for each in program.sums}
    covariance, bias = np.zeros(2 * RESPONSE - 1), 0.0
    for source, path in zip(sources, row, strict=True):
        below = [float(value) for value in path.denominator]
        above = [0.0] * (len(below) - len(path.numerator)) + [float(value) for value in path.numerator]
        response = lfilter(above, below, np.eye(1, RESPONSE)[0])
        spectrum = np.fft.rfft(response, 2 * RESPONSE)
        covariance += np.roll(np.fft.irfft(np.abs(spectrum) ** 2), RESPONSE - 1)[: 2 * RESPONSE - 1] / 12
        bias += abs(response.sum()) * 2.0 ** -shifts[source] / 2
    weights = 1 - np.abs(np.arange(2 * RESPONSE - 1) - (RESPONSE - 1)) / MEASURED
    of_mean, of_square = (weights * covariance).sum() / MEASURED, 2 * (covariance**2).sum() / MEASURED
    return Noise(covariance[RESPONSE - 1], of_mean, of_square, bias)


def exact(one: IntegerEmission, inputs: NDArray[Any]) -> Floats:
    """Response of the stored sections in double precision: in error by some 1e-9 counts."""
    signal: Floats = inputs.astype(float)
    for b, a in one.realization.sections:
        signal = np.asarray(lfilter([float(v) for v in b], [1.0, *(float(v) for v in a)], signal))
    return signal


@pytest.fixture(scope="module")
def inputs() -> NDArray[Any]:
    return np.random.default_rng(20).integers(-16000, 16001, SAMPLES).astype(np.int32)


@pytest.fixture(scope="module")
def measured(integer_bench: IntegerBench, inputs: NDArray[Any]) -> dict[str, NDArray[Any]]:
    """What the compiled C answers."""
    emissions = designs()
    where = integer_bench.emitted_integers(emissions)
    inputs.tofile(where / "inputs")
    text = "".join(f'#include "{one.name}.c"\n' for one in emissions) + "#include <stdio.h>\n"
    text += f'static int32_t x[{SAMPLES}], y[{SAMPLES}];\nint main(void) {{\nint k; FILE *f = fopen("inputs", "rb");\n'
    text += f"if (fread(x, 4, {SAMPLES}, f) != {SAMPLES}) return 1;\nfclose(f);\n"
    for one in emissions:
        n = one.name
        text += (
            f"{{ {n}_state s; {n}_clear(&s); for (k = 0; k < {SAMPLES}; ++k) y[k] = {n}_update(&s, (int16_t)x[k]); }}\n"
        )
        text += f'f = fopen("{n}.answers", "wb"); fwrite(y, 4, {SAMPLES}, f); fclose(f);\n'
    (where / "main.c").write_text(text + "return 0; }\n")
    integer_bench.compile((*ZIG, "cc", "-std=c99", "-O2", "main.c", "-o", "main"), where)
    integer_bench.compile((str(where / "main"),), where)
    offset = OUTPUTS["int32"].offset
    return {one.name: np.fromfile(where / f"{one.name}.answers", np.int32) - offset for one in emissions}


@pytest.mark.parametrize("one", designs(), ids=lambda one: one.realization.structure)
def test_measured_noise_is_the_expected_noise(
    one: IntegerEmission, measured: dict[str, NDArray[Any]], inputs: NDArray[Any]
) -> None:
    found, noise = measured[one.name], expected(one)
    assert np.abs(found).max() < one.realization.program.interface.output.high
    error = (found - exact(one, inputs))[SETTLED:]
    assert np.abs(error).max() <= one.realization.proof.output_error
    mean, square = error.mean(), (error**2).mean()
    assert abs(mean) <= DEVIATIONS * noise.of_mean**0.5 + noise.bias
    assert abs(square - noise.variance) <= DEVIATIONS * noise.of_square**0.5 + noise.bias**2
    assert one.realization.proof.rms_error == pytest.approx(noise.variance**0.5, rel=1e-6)


@pytest.mark.parametrize("one", designs(), ids=lambda one: one.realization.structure)
def test_the_bounds_are_narrow_enough_to_tell_the_structures_apart(one: IntegerEmission) -> None:
    noise = expected(one)
    assert DEVIATIONS * noise.of_square**0.5 < noise.variance / 4
