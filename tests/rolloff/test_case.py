"""Which filters fit a transfer function, and the refusal of those that do not."""

from __future__ import annotations

from fractions import Fraction
from typing import Any

import pytest

from realize.errors import RealizeError
from realize.rolloff import circumstances, proposal_for
from realize.transfer import TransferFunction
from tests.rolloff.designs import CUBIC, LAG, PID

F = Fraction

DOUBLE = TransferFunction.from_polynomials([1, 0, 0], [1])
STEEP = TransferFunction.from_polynomials([1] * 33, [1] + [0] * 30 + [1])


@pytest.mark.parametrize(
    ("transfer", "asked", "where", "found", "allowed", "advice"),
    [
        (LAG, {}, "[rolloff]", "proper already (relative degree 0)", "for an improper", "remove the table"),
        (DOUBLE, {"order": 1}, "[rolloff] order", "exceeds the denominator's by 2", "at least 2", "order = 2"),
        (PID, {"order": 0}, "[rolloff] order", "exceeds the denominator's by 1", "at least 1", "order = 1"),
        (STEEP, {"order": 2}, "[rolloff] order", "2 poles on top of", "at most 32", "order = 1"),
        (PID, {"placement": "all"}, "[rolloff] placement", '"all"', '"derivative" or "whole"', "derivative"),
        (PID, {"damping": F("0.7")}, "[rolloff] damping", "0.7 with order 1", "a pair", "order = 2, or"),
        (CUBIC, {"damping": F("0.7")}, "[rolloff] damping", "0.7 with order 3", "a pair", "leave damping out"),
        (PID, {"order": 2, "damping": F(0)}, "[rolloff] damping", "0", "above 0", "damping = 0.7071"),
        (PID, {"order": 2, "damping": F(3, 2)}, "[rolloff] damping", "1.5", "at most 1", "damping = 0.7071"),
        (PID, {"pole_rad_s": F(-1, 3)}, "[rolloff] pole", "-1/3 rad/s", "above 0", 'pole = "auto"'),
    ],
)
def test_an_unfit_rolloff_is_refused_by_the_name_of_its_key(
    transfer: TransferFunction, asked: dict[str, Any], where: str, found: str, allowed: str, advice: str
) -> None:
    with pytest.raises(RealizeError) as refusal:
        proposal_for(transfer, circumstances(transfer), **asked)
    error = refusal.value
    assert error.where == where
    assert found in error.found
    assert allowed in error.allowed
    assert advice in error.advice
    assert error.exit_status == 2
