"""What the roll-off tests share: an invented servo, exact values by another road, and what they draw from."""

from __future__ import annotations

from fractions import Fraction
from math import inf
from typing import Any

import numpy as np
import pytest
from hypothesis import assume
from hypothesis import strategies as st

from realize.errors import RealizeError
from realize.rolloff import PAIR_DAMPING, Circumstances, Proposal, circumstances
from realize.transfer import TransferFunction

F = Fraction

#: An invented servo for a roller gap: 4.2 + 18/s + 0.09 s.
PID = TransferFunction.from_polynomials([F("0.09"), F("4.2"), 18], [1, 0])
BAND_RAD_S = F(126)

#: Phases are compared after a handful of float operations on numbers of order one.
PHASE_TOLERANCE_DEG = 1e-9

#: What its converters are: half a thousandth a count at the input, an output from -1 to 1.
SIGNALS: dict[str, Any] = {"band_rad_s": BAND_RAD_S, "input_per_count": F("0.0005"), "output_span": F(2)}

CUBIC = TransferFunction.from_polynomials([1, 0, 0, 0], [1])
LAG = TransferFunction.from_polynomials([1, 2], [1, 3])


def value(p: tuple[int, ...], s: Fraction) -> Fraction:
    return sum((F(c) * s ** (len(p) - 1 - i) for i, c in enumerate(p)), start=F(0))


def at(transfer: TransferFunction, s: Fraction) -> Fraction:
    return value(transfer.numerator, s) / value(transfer.denominator, s)


def response(transfer: TransferFunction, w: float) -> complex:
    s = 1j * w
    return complex(np.polyval(transfer.numerator, s) / np.polyval(transfer.denominator, s))


def lost_deg(transfer: TransferFunction, rolled: TransferFunction, w: float) -> float:
    return float(np.degrees(np.angle(response(transfer, w) / response(rolled, w))))


def tight(figure: float) -> Any:
    return pytest.approx(figure, rel=1e-9)


@st.composite
def improper(draw: st.DrawFn) -> TransferFunction:
    """An improper ratio of small integers, excess degree 1 to 3, poles and zeros anywhere but hidden ones."""
    excess = draw(st.integers(1, 3))
    d = draw(st.lists(st.integers(-20, 20), min_size=1, max_size=3).filter(lambda c: c[0] != 0))
    length = len(d) + excess
    n = draw(st.lists(st.integers(-20, 20), min_size=length, max_size=length).filter(lambda c: c[0] != 0))
    try:
        transfer = TransferFunction.from_polynomials(n, d)
    except RealizeError:
        assume(False)
    return transfer


poles = st.fractions(F(1, 50), 1000, max_denominator=50)
dampings = st.sampled_from([F(1), PAIR_DAMPING, F(1, 5)])
placements = st.sampled_from(["derivative", "whole"])


@st.composite
def settings_around(draw: st.DrawFn, transfer: TransferFunction) -> Circumstances:
    known = draw(st.booleans())
    return circumstances(
        transfer,
        period_s=draw(st.none() | st.fractions(F(1, 10**5), 1, max_denominator=10**5).filter(bool)),
        band_rad_s=draw(st.none() | st.fractions(F(1, 100), 100, max_denominator=100)),
        phase_budget_deg=F(draw(st.integers(1, 60))),
        input_per_count=draw(st.fractions(F(1, 10**5), F(1, 10), max_denominator=10**5)) if known else None,
        output_span=F(draw(st.integers(1, 100))) if known else None,
        method=draw(st.sampled_from(["auto", "bilinear", "forward-difference", "ramp-invariant"])),
    )


def window(proposal: Proposal) -> tuple[float, float]:
    assert proposal.window_rad_s is not None
    low, high = proposal.window_rad_s
    return low, inf if high is None else high


def ways_out(price: Proposal) -> list[str]:
    return [reason.removeprefix("way out: ") for reason in price.reasons if reason.startswith("way out: ")]
