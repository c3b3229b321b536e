"""What one input count does to the output at once, and which poles keep it within tolerance.

With just enough poles to be proper, the answer at once is the limit of the gain at infinity; with more, the
gain at s = 2/T, which is what bilinear feeds through. Either is ``A + B f(pole)``, exactly.
"""

from __future__ import annotations

from fractions import Fraction
from math import inf, isfinite, sqrt

from realize.algebra import polynomial as poly
from realize.rolloff.case import Case
from realize.rolloff.figures import finite_figure


def step_percent(case: Case, pole: Fraction) -> Fraction | None:
    """What one input count does at once, in % of the output span; ``None`` without the signals or the rate."""
    count, parts = case.around.count_percent, _immediate(case)
    if parts is None or count is None:
        return None
    kept, filtered = parts
    return count * abs(kept + filtered * _immediate_filter(case, pole))


def step_interval(case: Case) -> tuple[float, float] | None:
    """Slowest and fastest pole at which one count stays within tolerance; ``(0, 0)`` where none does."""
    count, parts = case.around.count_percent, _immediate(case)
    if parts is None or count is None:
        return None
    limit = case.around.converter_step_tolerance_percent / count
    kept, filtered = parts
    if filtered == 0:
        return 0.0, (inf if abs(kept) <= limit else 0.0)
    low, high = sorted((signed - kept) / filtered for signed in (-limit, limit))
    slowest, fastest = _pole_at(case, low), _pole_at(case, high)
    return (slowest, fastest) if isfinite(slowest) else (0.0, 0.0)


def _immediate(case: Case) -> tuple[Fraction, Fraction] | None:
    """``A, B`` of the immediate answer ``A + B f(pole)``; ``None`` without a rate that it needs.

    Just proper: the limit at infinity, where ``F`` times the highest power s^k becomes ``f = pole^k``.
    Otherwise the value at s = 2/T, with ``f = F(2/T)``.
    """
    improper, constant, remainder, denominator = case.split
    if not case.strictly:
        return (constant if case.placement == "derivative" else Fraction(0)), improper[0]
    if case.around.period_s is None:
        return None
    s = 2 / case.around.period_s
    below = poly.evaluate(denominator, s)
    if below == 0:
        return None
    kept = constant + poly.evaluate(remainder, s) / below
    filtered = poly.evaluate(improper, s)
    return (kept, filtered) if case.placement == "derivative" else (Fraction(0), kept + filtered)


def _immediate_filter(case: Case, pole: Fraction) -> Fraction:
    """The ``f(pole)`` of :func:`_immediate`."""
    if not case.strictly or case.around.period_s is None:
        return pole**case.order
    s = 2 / (case.around.period_s * pole)
    return 1 / (s * (s + 2 * case.damping) + 1) if case.order == 2 else 1 / (1 + s) ** case.order


def _pole_at(case: Case, share: Fraction) -> float:
    """Inverse of :func:`_immediate_filter`, which rises with the pole: 0 below its range, infinite above."""
    f = finite_figure(max(share, Fraction(0)))
    if f is None or (case.strictly and f >= 1):
        return inf
    if not case.strictly or f == 0:
        return float(f ** (1 / case.order))
    assert case.around.period_s is not None
    z = float(case.damping)
    s = sqrt(z * z - 1 + 1 / f) - z if case.order == 2 else f ** (-1 / case.order) - 1
    return float(2 / case.around.period_s) / s if s > 0 else inf
