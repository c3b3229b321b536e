"""Objects of scipy come in exactly, go out correctly rounded, and mean the same there."""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from importlib.util import find_spec
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from scipy import signal

from realize import RealizeError, Refused, TransferFunction, discretize
from realize.algebra import polynomial as poly
from realize.api import scipy_gate

#: Coefficients that are doubles, and read back as themselves.
doubles = st.floats(1e-20, 1e20) | st.floats(-1e20, -1e-20)


@given(st.lists(doubles, min_size=1, max_size=4), st.lists(doubles, min_size=1, max_size=4))
def test_coefficients_that_are_doubles_make_the_round_trip(above: list[float], below: list[float]) -> None:
    transfer = TransferFunction(above, [1, *below])
    system = transfer.to_scipy()
    assert isinstance(system, signal.lti)
    assert TransferFunction.from_scipy(system) == transfer
    assert system.num.tolist() == transfer.numerator_array.tolist()


@given(
    st.lists(st.integers(-20, 20), min_size=9, max_size=9),
    st.lists(st.sampled_from((0.0, 1.0, -0.5, 0.3)), min_size=7, max_size=7),
)
def test_a_state_space_is_what_its_matrices_say_exactly(quarters: list[int], rest: list[float]) -> None:
    a = np.array(quarters).reshape(3, 3) / 4
    # Poles left of the axis by Gershgorin's discs, so that nothing that cancels grows.
    a -= np.diag(np.abs(a).sum(axis=1) + np.diag(a) + 1)
    b, c, d = rest[:3], rest[3:6], rest[6]
    x = Fraction(7, 3)
    resolvent = solved([[x * (i == j) - Fraction(float(a[i, j])) for j in range(3)] for i in range(3)], b)
    wanted = Fraction(repr(d)) + sum(Fraction(repr(ci)) * ri for ci, ri in zip(c, resolvent, strict=True))
    system = signal.StateSpace(a, np.array(b)[:, None], np.array([c]), np.array([[d]]))
    try:
        found = TransferFunction.from_scipy(system)
    except RealizeError as refusal:
        assert refusal.found == "a transfer function that is zero"
        assert wanted == 0
        return
    above, below = (poly.evaluate(poly.rationals(p), x) for p in (found.numerator, found.denominator))
    assert above / below == wanted


def solved(matrix: list[list[Fraction]], right: list[float]) -> list[Fraction]:
    """Solution of a linear system by Gauss and Jordan, in fractions."""
    rows = [[*line, Fraction(repr(r))] for line, r in zip(matrix, right, strict=True)]
    for i in range(len(rows)):
        pivot = next(k for k in range(i, len(rows)) if rows[k][i])
        rows[i], rows[pivot] = rows[pivot], rows[i]
        rows[i] = [v / rows[i][i] for v in rows[i]]
        rows = [
            row if k == i else [v - row[i] * w for v, w in zip(row, rows[i], strict=True)] for k, row in enumerate(rows)
        ]
    return [row[-1] for row in rows]


def test_every_kind_of_continuous_system_comes_in() -> None:
    wanted = TransferFunction([3, 1.5], [1, 2, 5])
    by_roots = signal.ZerosPolesGain([-0.5], [-1 + 2j, -1 - 2j], 3)
    by_states = signal.StateSpace([[0, 1], [-5, -2]], [[0], [1]], [[1.5, 3]], [[0]])
    for system in (signal.TransferFunction([6, 3], [2, 4, 10]), by_roots, by_states):
        assert TransferFunction.from_scipy(system) == wanted
    assert TransferFunction.from_scipy(signal.StateSpace([[-1, 0], [0, -2]], [[1], [0]], [[1, 1]], [[0]])) == (
        TransferFunction([1], [1, 1])
    )


def test_a_small_leading_coefficient_is_kept() -> None:
    lead = TransferFunction([1e-15, 1], [1, 1])
    assert lead.to_scipy().num.tolist() == [1e-15, 1.0]
    assert TransferFunction.from_scipy(lead.to_scipy()) == lead


def test_a_discrete_result_goes_out_with_its_period() -> None:
    found = discretize("1/(s^2 + 0.2*s + 1)", rate="10 Hz", method="step-invariant")
    system = found.to_scipy()
    assert isinstance(system, signal.dlti)
    assert (system.dt, len(system.num), len(system.den)) == (0.1, 2, 3)
    _, (samples,) = signal.dstep(system, n=30)
    # The filter's rounding: 30 samples of order 2, whose poles are 0.1 apart: far below 1e-12.
    assert samples.ravel() == pytest.approx(found.step(30), abs=1e-12)


@pytest.mark.parametrize(
    ("method", "theirs"),
    [
        ("bilinear", "bilinear"),
        ("step-invariant", "zoh"),
        ("backward-difference", "backward_diff"),
        ("ramp-invariant", "foh"),
    ],
)
def test_scipy_discretizes_to_the_same_coefficients(method: str, theirs: str) -> None:
    transfer = TransferFunction([2, 3], [1, 1.4, 4])
    above, below, _ = signal.cont2discrete((transfer.numerator_array, transfer.denominator_array), 0.25, method=theirs)
    found = discretize(transfer, period_s=0.25, method=method)
    # Matrices of order 2 with entries up to 4, of condition below 100: 1e-13 is ten times what their rounding can do.
    assert np.atleast_1d(above.ravel()) == pytest.approx(found.numerator, abs=1e-13)
    assert below == pytest.approx(found.denominator, abs=1e-13)


@pytest.mark.parametrize(
    ("make", "found"),
    [
        (lambda: signal.TransferFunction([1], [1, 0.5], dt=0.1), "a discrete system with dt = 0.1"),
        (lambda: signal.StateSpace(np.eye(2), np.eye(2), np.eye(2), np.eye(2)), "a system with 2 inputs and 2 outputs"),
        (lambda: signal.TransferFunction([[1, 2], [3, 4]], [1, 5]), "a system with 2 outputs"),
        (lambda: signal.StateSpace(-np.eye(40), np.ones((40, 1)), np.ones((1, 40)), [[0]]), "40 states"),
        (lambda: ([1], [1, 1]), "an object of type tuple"),
    ],
)
def test_what_is_no_single_continuous_system_is_refused(make: Callable[[], Any], found: str) -> None:
    with pytest.raises(RealizeError) as refusal:
        TransferFunction.from_scipy(make())
    assert (refusal.value.where, refusal.value.found) == ("TransferFunction.from_scipy", found)


def test_a_growing_mode_that_no_output_sees_is_refused() -> None:
    with pytest.raises(Refused, match="hides a growing mode at s = 2"):
        TransferFunction.from_scipy(signal.StateSpace([[-1, 0], [0, 2]], [[1], [1]], [[1, 0]], [[0]]))


def test_without_scipy_the_line_to_install_it_is_told(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(scipy_gate, "find_spec", lambda name: None if name == "scipy" else find_spec(name))
    for ask in (
        lambda: TransferFunction.from_scipy(None),
        TransferFunction([1], [1, 1]).to_scipy,
        discretize("1/s", rate="1 Hz").to_scipy,
    ):
        with pytest.raises(RealizeError, match=r'scipy: it is not installed(.|\n)*pip install "realize\[audit\]"'):
            ask()
