"""How slow and how fast a roll-off pole may be, what sets either end, and the pole that is taken in between."""

from __future__ import annotations

from decimal import ROUND_CEILING
from fractions import Fraction
from math import inf, isfinite, pi
from typing import NamedTuple

from realize.band import frequency_text, highest_frequency_rad_s
from realize.quantity import round_significant
from realize.rolloff.case import Case
from realize.rolloff.converter import step_interval
from realize.rolloff.criteria import Circumstances
from realize.rolloff.figures import decimal_or_quotient
from realize.rolloff.phase import affordable_frequency, slowest_within_budget

#: Fastest roll-off pole times the period. Bilinear takes a pole at -p to z = (2 - pT)/(2 + pT), forward
#: difference to z = 1 - pT; below z = 0 the answer alternates in sign. Backward difference, 1/(1 + pT), and
#: the methods that use exp(-pT) never get there. Every other method is held to bilinear's limit.
_FASTEST_POLE: dict[str, int | None] = {
    "forward-difference": 1,
    "backward-difference": None,
    "step-invariant": None,
    "ramp-invariant": None,
    "impulse-invariant": None,
    "pole-zero-mapped": None,
}
_FASTEST_POLE_OTHERWISE = 2

#: Relative slack in comparing window ends: they are computed to about 1e-12 (a bisection to the last bit of a
#: double behind a complex ratio), and a pole written in a few digits must not fail by less than that.
_SLACK = 1e-9

#: Digits of an automatic pole; more, up to a double's, only where three would jump out of a narrow window.
AUTO_DIGITS = 3
_MOST_AUTO_DIGITS = 15


class Bound(NamedTuple):
    """One end of a window, and what sets it."""

    pole_rad_s: float
    reason: str


class Window(NamedTuple):
    """The bounds that bind: ``low`` is the slowest pole allowed, ``high`` the fastest."""

    low: Bound
    high: Bound

    @property
    def is_open(self) -> bool:
        """Whether any pole lies in the window."""
        return self.low.pole_rad_s * (1 - _SLACK) <= self.high.pole_rad_s

    @property
    def ends_rad_s(self) -> tuple[float, float | None] | None:
        """Slowest and fastest pole (``None`` for no limit); ``None`` when the window is empty."""
        if not self.is_open:
            return None
        return self.low.pole_rad_s, self.high.pole_rad_s if isfinite(self.high.pole_rad_s) else None

    def holds(self, pole: Fraction) -> bool:
        """Whether a pole lies in the window."""
        low, high = self.low.pole_rad_s * (1 - _SLACK), self.high.pole_rad_s * (1 + _SLACK)
        return self.is_open and low <= pole <= high


def window_of(case: Case) -> Window:
    """Draw the window of a case; of equal bounds, the first named binds."""
    lows, highs = _low_bounds(case), _high_bounds(case)
    interval = step_interval(case)
    if interval is not None:
        slowest, fastest = interval
        lows.append(Bound(slowest, _step_reason(case, "below")))
        highs.append(Bound(fastest, _step_reason(case, "above")))
    return Window(
        max(lows, key=lambda bound: bound.pole_rad_s),
        min(highs, key=lambda bound: bound.pole_rad_s),
    )


def automatic_pole(low: float, high: float) -> Fraction:
    """The low end rounded up to three digits, or to as many more as a narrow window needs."""
    exact = Fraction(low * (1 - _SLACK))
    rounded = [round_significant(exact, n, ROUND_CEILING) for n in range(AUTO_DIGITS, _MOST_AUTO_DIGITS)]
    return next((p for p in rounded if p <= high * (1 + _SLACK)), rounded[0])


def reasons(case: Case, window: Window, pole: Fraction) -> tuple[str, ...]:
    """What sets either end of the window, and what is odd about the pole."""
    low, high = window
    top = f" {frequency_text(high.pole_rad_s)}" if isfinite(high.pole_rad_s) else ""
    found = [
        f"slowest pole {frequency_text(low.pole_rad_s)}: {low.reason}",
        f"fastest pole{top}: {high.reason}",
    ]
    if case.share is None:
        found.append("the transfer function is zero at the band edge and has no phase there to lose")
    if pole < case.around.band_rad_s:
        found.append("the pole lies below the band edge: the band is filtered, not only what lies above it")
    return tuple(found)


def fastest_pole(method: str) -> int | None:
    """Fastest roll-off pole times the period that a method bears; ``None`` where it sets no limit."""
    return _FASTEST_POLE.get(method, _FASTEST_POLE_OTHERWISE)


def samples_per_band_period(order: int, damping: Fraction, around: Circumstances) -> float | None:
    """Rate over band that a filter on the whole needs to have a window at all.

    Parameters
    ----------
    order, damping : int, Fraction
        Shape of the filter.
    around : Circumstances
        Its phase budget and method count.

    Returns
    -------
    float or None
        ``None`` where the method sets no limit.

    Notes
    -----
    The pole must be at least ``w/x``, where the filter loses the budget at the relative frequency x, and at
    most ``c/T``: so ``2 pi/(w T) >= 2 pi/(c x)``. One pole, 6 deg, c = 2: x = tan(6 deg), pi/x = 29.9.
    """
    fastest = fastest_pole(around.method)
    return None if fastest is None else 2 * pi / (fastest * affordable_frequency(order, damping, around))


def _low_bounds(case: Case) -> list[Bound]:
    """What keeps the pole from being slower, whatever the converters are."""
    edge = float(case.around.band_rad_s)
    zero = highest_frequency_rad_s(case.transfer.zeros)
    budget = f"below it more than {decimal_or_quotient(case.around.phase_budget_deg)} deg are lost at the band edge"
    return [
        Bound(slowest_within_budget(case, max(edge, zero)), budget),
        Bound(edge, "the band edge"),
        Bound(zero, "the highest zero"),
    ]


def _high_bounds(case: Case) -> list[Bound]:
    """What keeps the pole from being faster, whatever the converters are."""
    method, period_s = case.around.method, case.around.period_s
    fastest = fastest_pole(method)
    if period_s is None:
        return [Bound(inf, "no limit without a rate")]
    if fastest is None:
        return [Bound(inf, f"no limit under {method}")]
    return [Bound(float(fastest / period_s), _method_reason(fastest, method))]


def _method_reason(fastest: int, method: str) -> str:
    if method == "auto":
        return f"{fastest}/T, above which it rings every sample under bilinear, which auto may choose"
    return f"{fastest}/T, the limit for {method}, above which it may ring every sample"


def _step_reason(case: Case, side: str) -> str:
    limit = decimal_or_quotient(case.around.converter_step_tolerance_percent)
    return f"{side} it one input count moves the output at once by more than {limit} % of its range"
