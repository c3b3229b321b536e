"""What a type checker sees: every line here is checked by mypy, and runs."""

from __future__ import annotations

from fractions import Fraction
from pathlib import Path
from typing import Any, assert_type

import numpy as np
import numpy.typing as npt

import realize


def test_transfer_functions_are_typed() -> None:
    lag = realize.TransferFunction(np.array([1.0]), [Fraction(1, 20), 1])
    assert_type(lag, realize.TransferFunction)
    assert_type(2 * lag + 1 / lag - lag**2 * np.float64(0.5), realize.TransferFunction)
    assert_type(realize.TransferFunction.parse("kp/s", kp=4.2), realize.TransferFunction)
    assert_type(lag.numerator, tuple[int, ...])
    assert_type(lag.numerator_array, npt.NDArray[np.float64])
    assert_type(lag.poles, npt.NDArray[np.complex128])
    assert_type(lag.response([1.0, 2.0]), npt.NDArray[np.complex128])
    assert_type(lag.feedback(), realize.TransferFunction)


def test_discretization_is_typed() -> None:
    found = realize.discretize(([1], [0.05, 1]), rate="2 kHz")
    assert_type(found, realize.PulseTransferFunction)
    assert_type(found.period_s, Fraction)
    assert_type(found.step(3), npt.NDArray[np.float64])
    assert_type(found.to_scipy_sections(), npt.NDArray[np.float64])


def test_results_are_typed() -> None:
    found = realize.compare("1/s", rate_hz=np.float64(100))
    assert_type(found, realize.Comparison)
    assert_type(found.methods["bilinear"], realize.MethodResult)
    assert_type(found.methods["bilinear"].checks["stability"], realize.Check)
    assert_type(found.recommended, str | None)
    assert_type(found.document(), dict[str, Any])
    assessment = realize.assess("s", period_s=1)
    assert_type(assessment.proposals, tuple[realize.Proposal, ...])
    assert_type(assessment.proposals[0].transfer, realize.TransferFunction)
    emission = realize.emit("1/s", rate="100 Hz")
    assert_type(emission.files["controller.c"], str)
    assert_type(emission.paths, tuple[Path, ...])


def test_errors_are_typed() -> None:
    try:
        realize.emit("s", rate="1 Hz")
    except realize.Refused as refusal:
        assert_type(refusal.advice, str)
        assert isinstance(refusal, realize.RealizeError)
