"""What would open an empty window: a higher rate, a finer converter, or a larger phase budget."""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_FLOOR
from fractions import Fraction
from math import inf, pi

from realize.quantity import round_significant
from realize.rolloff.case import Case
from realize.rolloff.converter import step_percent
from realize.rolloff.criteria import LARGEST_BUDGET_DEG, Circumstances
from realize.rolloff.figures import decimal_or_quotient
from realize.rolloff.phase import most_phase_lost_deg
from realize.rolloff.window import AUTO_DIGITS, Window, automatic_pole, fastest_pole, window_of


def ways_out(case: Case, window: Window) -> tuple[str, ...]:
    """Say that a window is empty and what would open it, each tried before it is named.

    Parameters
    ----------
    case : Case
        What the window was drawn for.
    window : Window
        Empty.
    """
    candidates = [_faster_or_finer(case, window.low.pole_rad_s), *_looser(case, window.high.pole_rad_s)]
    opened = [f"way out: {text}" for text, around in candidates if window_of(case._replace(around=around)).is_open]
    return ("the window is empty: the slowest pole allowed is above the fastest", *opened)


def _faster_or_finer(case: Case, low: float) -> tuple[str, Circumstances]:
    """A higher rate where the method's limit binds, a finer converter where its step does, or both."""
    around, needed = case.around, []
    pole = automatic_pole(low, inf)
    fastest = fastest_pole(around.method)
    if around.period_s is not None and fastest is not None and fastest / around.period_s < pole:
        rate_hz = round_significant(pole / fastest, AUTO_DIGITS, ROUND_CEILING)
        around = around._replace(period_s=1 / rate_hz)
        band_hz = float(around.band_rad_s) / (2 * pi)
        needed.append(f"a rate of at least {decimal_or_quotient(rate_hz)} Hz, the band staying at {band_hz:.5g} Hz")
    step = step_percent(case._replace(around=around), pole)
    limit = around.converter_step_tolerance_percent
    if step is not None and step > limit:
        assert around.input_per_count is not None
        resolution = round_significant(around.input_per_count * limit / step, AUTO_DIGITS, ROUND_FLOOR)
        around = around._replace(input_per_count=resolution)
        needed.append(f"an input resolution of {decimal_or_quotient(resolution)} per count or finer")
    return " together with ".join(needed), around


def _looser(case: Case, high: float) -> list[tuple[str, Circumstances]]:
    """A budget that covers the phase lost with the fastest pole allowed, and with any faster one."""
    edge = float(case.around.band_rad_s)
    if high < edge:
        return []
    lost_deg = Fraction(most_phase_lost_deg(case, edge / high))
    budget = round_significant(lost_deg, AUTO_DIGITS, ROUND_CEILING)
    if not case.around.phase_budget_deg < budget < LARGEST_BUDGET_DEG:
        return []
    text = f"a phase budget of at least {decimal_or_quotient(budget)} deg"
    return [(text, case.around._replace(phase_budget_deg=budget))]
