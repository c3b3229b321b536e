"""Roll-off poles that make an improper transfer function causal, and what each of them costs.

An improper ``C(s)`` is split exactly into ``P(s) + q0 + R(s)/D(s)``, where ``P`` holds the first power of
s and higher ones. A filter ``F(s)`` of unit gain at s = 0 multiplies ``P`` alone (placement "derivative") or
all of ``C`` (placement "whole"). Transfer functions stay exact; phases, gains and windows are figures.
Polynomials are in descending powers of s, frequencies and poles in rad/s, phases in degrees.
"""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_FLOOR, Context, Decimal
from fractions import Fraction
from math import atan, atan2, degrees, exp2, inf, isfinite, log, log2, pi, radians, sin, sqrt, tan
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from realize.algebra import polynomial as poly
from realize.algebra.expression.printing import exact_text
from realize.band import band_edge, frequency_text, highest_frequency_rad_s
from realize.errors import RealizeError
from realize.transfer import TransferFunction

#: Phase a roll-off may take at the band edge, in degrees: of the 30 deg margin a loop must keep at the least,
#: a fifth. Common practice, no source.
PHASE_BUDGET_DEG = Fraction(6)

#: A roll-off that may take a quarter turn at the band edge is no budget: the derivative it filters is gone.
_LARGEST_BUDGET_DEG = 90

#: What one input count may do to the output at once, in % of the output span: twenty counts of noise then
#: already drive it from end to end. Common practice, no source.
CONVERTER_STEP_PERCENT = Fraction(5)

#: Damping ratio offered for a pair: 1/sqrt(2), the largest bandwidth without a resonance peak, to the four
#: digits a design file would hold.
PAIR_DAMPING = Fraction(7071, 10000)

#: Highest degree a transfer function may reach with its roll-off poles: the bound on what is read.
MOST_DEGREE = 32

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
_AUTO_DIGITS = 3
_MOST_AUTO_DIGITS = 15

#: Search steps per e-fold of the pole: the phase of a ratio of low degree crosses the budget and comes back
#: within a step of 1 % only where it grazes it, and then exceeds it by a step squared, 1e-4 of a radian.
_STEPS_PER_FOLD = 100

#: |1 - F(jx)| is at most this times x, or order times x, the larger, for x up to 1/2: n poles give, by their
#: slope, n x; a pair gives x |2 damping + jx| / |1 - x^2 + 2j damping x| <= x sqrt(4.25) / 0.75 = 2.75 x.
_LEAST_REACH = 3
_REACH_HOLDS_TO = 0.5

#: Halvings of a search step of 1 %: 0.01 * 2**-47 is below the last bit of a double.
_HALVINGS = 47

#: Frequencies per e-fold in the search for the highest gain; four refinements of 64 steps follow around the
#: best one.
_GAINS_PER_FOLD = 100
_REFINEMENTS = 4
_REFINED_POINTS = 65

#: The gain search ends a thousand times above the bound on all poles and zeros, where the gain differs from
#: its asymptote by at most the degree times 1e-6.
_BEYOND_ROOTS = 1e3

#: Room for every decimal a design file can hold.
_WIDE = Context(prec=1000)

Complexes = npt.NDArray[np.complex128]
Floats = npt.NDArray[np.float64]


class Split(NamedTuple):
    """``C(s) = P(s) + constant + remainder(s)/denominator(s)``, exactly; all in descending powers of s.

    Attributes
    ----------
    improper : tuple of Fraction
        ``P``, its constant term zero; empty for a proper transfer function.
    constant : Fraction
        ``q0``: gain that remains in ``C - P`` for s to infinity.
    remainder, denominator : tuple of Fraction
        The strictly proper rest.
    """

    improper: poly.Rationals
    constant: Fraction
    remainder: poly.Rationals
    denominator: poly.Rationals


class Circumstances(NamedTuple):
    """What a roll-off is judged by; build it with :func:`circumstances`.

    Attributes
    ----------
    period_s : Fraction or None
        Sample period.
    band_rad_s : Fraction
        Band edge.
    band_rests_on : str
        The sentence that says where the band edge comes from.
    phase_budget_deg : Fraction
        Phase the roll-off may take at the band edge.
    converter_step_tolerance_percent : Fraction
        What one input count may do to the output at once, in % of ``output_span``.
    input_per_count, output_span : Fraction or None
        Physical size of one input count, and of the whole output range.
    method : str
        Name of the method the design asks for, or "auto".
    """

    period_s: Fraction | None
    band_rad_s: Fraction
    band_rests_on: str
    phase_budget_deg: Fraction
    converter_step_tolerance_percent: Fraction
    input_per_count: Fraction | None
    output_span: Fraction | None
    method: str


class Proposal(NamedTuple):
    """One way to make a transfer function proper, and its price.

    Attributes
    ----------
    placement : str
        "derivative": the filter acts on the improper part alone; "whole": on everything.
    order : int
        Number of roll-off poles.
    damping : Fraction
        Damping ratio of a pair; 1 for equal real poles.
    pole_rad_s : Fraction
        Natural frequency of the roll-off poles.
    phase_budget_deg : Fraction
        The budget the window was drawn with.
    transfer : TransferFunction
        The proper result, exactly.
    phase_lost_deg : float or None
        Phase of ``C`` minus phase of the result at the band edge, positive where the roll-off lags; ``None``
        where ``C`` is zero there and has no phase.
    high_frequency_gain : float or None
        Supremum of the result's gain from the band edge up, which is its limit at infinity where the gain
        rises towards it; ``None`` where an undamped pair makes it infinite.
    converter_step_percent : float or None
        What one input count does to the output at once, in % of the output span. With just enough poles to
        be proper: the limit of the gain at infinity. With more: the gain at s = 2/T, which is what bilinear
        feeds through. ``None`` without the signals, or without the rate it needs.
    window_rad_s : tuple or None
        Slowest and fastest pole (``None`` for no limit); ``None`` when the window is empty.
    within_window : bool
        Whether the pole lies in the window.
    reasons : tuple of str
        What sets either end of the window; the ways out when it is empty.
    """

    placement: str
    order: int
    damping: Fraction
    pole_rad_s: Fraction
    phase_budget_deg: Fraction
    transfer: TransferFunction
    phase_lost_deg: float | None
    high_frequency_gain: float | None
    converter_step_percent: float | None
    window_rad_s: tuple[float, float | None] | None
    within_window: bool
    reasons: tuple[str, ...]

    @property
    def relative_degree(self) -> int:
        """Degree of the result's denominator minus that of its numerator."""
        return self.transfer.relative_degree


class _Case(NamedTuple):
    """An improper transfer function with a filter of given shape, its pole still open.

    ``share`` is ``P/C`` at the band edge: the part of ``C`` that a filter on the derivative reaches; ``None``
    where ``C`` is zero there.
    """

    transfer: TransferFunction
    split: Split
    around: Circumstances
    share: complex | None
    placement: str
    order: int
    damping: Fraction

    @property
    def strictly(self) -> bool:
        """Whether the filtered part falls off at high frequency."""
        return self.order > -self.transfer.relative_degree


class _Bound(NamedTuple):
    """One end of a window, and what sets it."""

    pole_rad_s: float
    reason: str


def split(transfer: TransferFunction) -> Split:
    """Divide the polynomial part off, exactly.

    Parameters
    ----------
    transfer : TransferFunction
        Proper or improper.
    """
    denominator = _rationals(transfer.denominator)
    quotient, remainder = poly.divide(_rationals(transfer.numerator), denominator)
    constant = quotient[-1] if quotient else Fraction(0)
    return Split(poly.subtract(quotient, poly.trimmed((constant,))), constant, remainder, denominator)


def apply_rolloff(
    transfer: TransferFunction, placement: str, order: int, damping: Fraction, pole_rad_s: Fraction
) -> TransferFunction:
    """Multiply the improper part, or everything, by a filter of unit gain at s = 0.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)``.
    placement : str
        "derivative" or "whole".
    order : int
        Number of poles.
    damping : Fraction
        Damping ratio of two poles; 1 for any other number.
    pole_rad_s : Fraction
        Natural frequency ``p`` of the poles.

    Returns
    -------
    TransferFunction
        Exact, in lowest terms.

    Notes
    -----
    Two poles: ``p^2/(s^2 + 2 damping p s + p^2)``; n poles: ``(1/(s/p + 1))^n``.
    """
    p = pole_rad_s
    if order == 2:
        lag: poly.Rationals = (1 / p**2, 2 * damping / p, Fraction(1))
    else:
        lag = poly.power((1 / p, Fraction(1)), order)
    parts = split(transfer)
    if placement == "whole":
        return TransferFunction.from_polynomials(transfer.numerator, poly.multiply(lag, parts.denominator))
    kept = poly.add(poly.scale(parts.denominator, parts.constant), parts.remainder)
    filtered = poly.multiply(parts.improper, parts.denominator)
    return TransferFunction.from_polynomials(
        poly.add(poly.multiply(kept, lag), filtered), poly.multiply(lag, parts.denominator)
    )


def circumstances(
    transfer: TransferFunction,
    *,
    period_s: Fraction | None = None,
    band_rad_s: Fraction | None = None,
    phase_budget_deg: Fraction = PHASE_BUDGET_DEG,
    converter_step_tolerance_percent: Fraction = CONVERTER_STEP_PERCENT,
    input_per_count: Fraction | None = None,
    output_span: Fraction | None = None,
    method: str = "auto",
) -> Circumstances:
    """Collect what a roll-off of ``transfer`` is judged by; the band edge is assumed where none is given.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)`` as the user wrote it.
    period_s, band_rad_s, phase_budget_deg : Fraction
    converter_step_tolerance_percent, input_per_count, output_span : Fraction
    method : str
        As in :class:`Circumstances`.

    Raises
    ------
    RealizeError
        When the phase budget is not above 0 and below 90 deg.
    """
    if not 0 < phase_budget_deg < _LARGEST_BUDGET_DEG:
        raise RealizeError(
            "[rolloff] phase_budget",
            f"{decimal_or_quotient(phase_budget_deg)} deg",
            f"more than 0 deg and less than {_LARGEST_BUDGET_DEG} deg",
            f'phase_budget = "{PHASE_BUDGET_DEG} deg", the default',
        )
    edge, rests_on = band_edge(transfer, period_s, band_rad_s)
    return Circumstances(
        period_s,
        edge,
        rests_on,
        phase_budget_deg,
        converter_step_tolerance_percent,
        input_per_count,
        output_span,
        method,
    )


def proposals(transfer: TransferFunction, around: Circumstances) -> tuple[Proposal, ...]:
    """Every roll-off worth considering, best first.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)`` as the user wrote it.
    around : Circumstances
        What the proposals are judged by.

    Returns
    -------
    tuple of Proposal
        Empty for a proper transfer function. Else both placements, with as many poles as make it proper and
        one more, and every two poles also as a pair of damping ratio 0.7071. First those within their window;
        then fewer poles, the derivative alone, equal poles.
    """
    excess = -transfer.relative_degree
    if excess <= 0:
        return ()
    shapes = [(order, Fraction(1)) for order in (excess, excess + 1)]
    shapes += [(2, PAIR_DAMPING)] if excess <= 2 else []
    found = [
        _proposal(case, None)
        for placement in ("derivative", "whole")
        for case in _cases(transfer, around, placement, shapes)
    ]
    return tuple(sorted(found, key=_rank))


def proposal_for(
    transfer: TransferFunction,
    around: Circumstances,
    *,
    placement: str = "derivative",
    order: int | None = None,
    damping: Fraction = Fraction(1),
    pole_rad_s: Fraction | None = None,
) -> Proposal:
    """Price the roll-off a design asks for.

    Parameters
    ----------
    transfer : TransferFunction
        ``C(s)`` as the user wrote it.
    around : Circumstances
        What it is judged by.
    placement : str
        "derivative" or "whole".
    order : int or None
        Number of poles; ``None`` for as many as make it proper.
    damping : Fraction
        Damping ratio of two poles, above 0 and at most 1.
    pole_rad_s : Fraction or None
        Natural frequency of the poles; ``None`` for the low end of the window, rounded up to three digits.
        Outside the window it is priced all the same.

    Raises
    ------
    RealizeError
        When the transfer function is proper already, or a key of ``[rolloff]`` does not fit it.
    """
    excess = -transfer.relative_degree
    if excess <= 0:
        raise RealizeError(
            "[rolloff]",
            f"the transfer function is proper already (relative degree {-excess})",
            "a [rolloff] table for an improper transfer function only",
            "remove the table, or write the extra poles into the transfer itself",
        )
    order = excess if order is None else order
    _check_shape(transfer, placement, order, damping)
    if pole_rad_s is not None and pole_rad_s <= 0:
        raise _refusal("pole", f"{decimal_or_quotient(pole_rad_s)} rad/s", "a frequency above 0", 'pole = "auto"')
    (case,) = _cases(transfer, around, placement, [(order, damping)])
    return _proposal(case, pole_rad_s)


def rolloff_toml(proposal: Proposal) -> str:
    """Lines for the design file that reproduce a proposal.

    Parameters
    ----------
    proposal : Proposal
        Its pole is written exactly.
    """
    lines = ["[rolloff]", f'placement = "{proposal.placement}"', f"order = {proposal.order}"]
    lines += [f"damping = {decimal_or_quotient(proposal.damping)}"] if proposal.order == 2 else []
    lines += [f'pole = "{decimal_or_quotient(proposal.pole_rad_s)} rad/s"']
    if proposal.phase_budget_deg != PHASE_BUDGET_DEG:
        lines += [f'phase_budget = "{decimal_or_quotient(proposal.phase_budget_deg)} deg"']
    return "\n".join(lines) + "\n"


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
    fastest = _fastest_pole(around.method)
    return None if fastest is None else 2 * pi / (fastest * _affordable_frequency(order, damping, around))


# ---- shapes ------------------------------------------------------------------------------------------------


def _cases(
    transfer: TransferFunction, around: Circumstances, placement: str, shapes: list[tuple[int, Fraction]]
) -> list[_Case]:
    parts = split(transfer)
    share = _share_at(transfer, parts.improper, around.band_rad_s) if placement == "derivative" else 1 + 0j
    return [_Case(transfer, parts, around, share, placement, order, damping) for order, damping in shapes]


def _share_at(transfer: TransferFunction, improper: poly.Rationals, w: Fraction) -> complex | None:
    """``P(jw)/C(jw)`` from exact values; ``None`` where ``C(jw)`` is 0, or too near it for a double."""
    part = _at_imaginary(improper, w)
    n, d = (_at_imaginary(_rationals(p), w) for p in (transfer.numerator, transfer.denominator))
    top = (part[0] * d[0] - part[1] * d[1], part[0] * d[1] + part[1] * d[0])
    size = n[0] ** 2 + n[1] ** 2
    try:
        return complex(float((top[0] * n[0] + top[1] * n[1]) / size), float((top[1] * n[0] - top[0] * n[1]) / size))
    except (ZeroDivisionError, OverflowError):
        return None


def _at_imaginary(p: poly.Rationals, w: Fraction) -> tuple[Fraction, Fraction]:
    """Real and imaginary part of ``p(jw)``, exactly."""
    even, odd = (poly.evaluate(p[::-1][i::2][::-1], -w * w) for i in (0, 1))
    return even, odd * w


def _rationals(p: poly.Integers) -> poly.Rationals:
    return tuple(Fraction(c) for c in p)


def _check_shape(transfer: TransferFunction, placement: str, order: int, damping: Fraction) -> None:
    excess = -transfer.relative_degree
    if placement not in ("derivative", "whole"):
        raise _refusal("placement", f'"{placement}"', '"derivative" or "whole"', 'placement = "derivative"')
    if order < excess:
        raise _refusal(
            "order",
            f"{order}, but the numerator's degree exceeds the denominator's by {excess}",
            f"at least {excess}, so that the result is proper",
            f"order = {excess}, or leave the key out",
        )
    if order + transfer.order > MOST_DEGREE:
        raise _refusal(
            "order",
            f"{order} poles on top of the transfer function's {transfer.order}",
            f"a degree of at most {MOST_DEGREE} together",
            f"order = {excess}",
        )
    if not 0 < damping <= 1:
        raise _refusal(
            "damping",
            decimal_or_quotient(damping),
            "above 0, at most 1",
            f"damping = {decimal_or_quotient(PAIR_DAMPING)}",
        )
    if damping != 1 and order != 2:
        raise _refusal(
            "damping",
            f"{decimal_or_quotient(damping)} with order {order}",
            "a damping ratio other than 1 for a pair of poles only",
            "order = 2, or leave damping out" if excess <= 2 else "leave damping out",
        )


def _refusal(key: str, found: str, allowed: str, advice: str) -> RealizeError:
    return RealizeError(f"[rolloff] {key}", found, allowed, advice)


# ---- prices ------------------------------------------------------------------------------------------------


def _proposal(case: _Case, pole_rad_s: Fraction | None) -> Proposal:
    lows, highs = _low_bounds(case), _high_bounds(case)
    low = max(lows, key=lambda bound: bound.pole_rad_s)
    high = min(highs, key=lambda bound: bound.pole_rad_s)
    open_window = low.pole_rad_s * (1 - _SLACK) <= high.pole_rad_s
    pole = _auto_pole(low.pole_rad_s, high.pole_rad_s) if pole_rad_s is None else pole_rad_s
    transfer = apply_rolloff(case.transfer, case.placement, case.order, case.damping, pole)
    top = high.pole_rad_s if isfinite(high.pole_rad_s) else None
    step = _step_percent(case, pole)
    return Proposal(
        case.placement,
        case.order,
        case.damping,
        pole,
        case.around.phase_budget_deg,
        transfer,
        _phase_lost_deg(case, float(case.around.band_rad_s / pole)),
        _highest_gain(transfer, case, pole),
        None if step is None else finite_figure(step),
        (low.pole_rad_s, top) if open_window else None,
        open_window and low.pole_rad_s * (1 - _SLACK) <= pole <= high.pole_rad_s * (1 + _SLACK),
        _reasons(case, low, high, pole) + (() if open_window else _ways_out(case, lows, highs)),
    )


def _rank(proposal: Proposal) -> tuple[bool, int, bool, bool]:
    return (
        not proposal.within_window,
        proposal.order,
        proposal.placement != "derivative",
        proposal.damping != 1,
    )


def _auto_pole(low: float, high: float) -> Fraction:
    """The low end rounded up to three digits, or to as many more as a narrow window needs."""
    rounded = [_rounded(low * (1 - _SLACK), n, ROUND_CEILING) for n in range(_AUTO_DIGITS, _MOST_AUTO_DIGITS)]
    return next((p for p in rounded if p <= high * (1 + _SLACK)), rounded[0])


def _phase_lost_deg(case: _Case, x: float) -> float | None:
    """Phase lost at the band edge, which lies at ``x`` times the pole; on the whole it may exceed 180 deg."""
    if case.placement == "whole" and case.order == 2:
        return degrees(atan2(2 * float(case.damping) * x, 1 - x * x))
    if case.placement == "whole":
        return case.order * degrees(atan(x))
    losses = _derivative_losses_deg(case, np.array([x]))
    return None if losses is None else float(losses[0])


def _derivative_losses_deg(case: _Case, x: Floats) -> Floats | None:
    """Phase lost when ``P`` alone is filtered: of ``C_rolled/C = 1 - (P/C)(1 - F)``, in (-180, 180]."""
    if case.share is None:
        return None
    losses: Floats = -np.degrees(np.angle(1 - case.share * _missing(case.order, float(case.damping), x)))
    return losses


def _missing(order: int, damping: float, x: Floats) -> Complexes:
    """``1 - F(jx)`` without cancellation for small x, the pole at 1."""
    s = 1j * x
    if order == 2:
        missing: Complexes = s * (s + 2 * damping) / (1 + s * (s + 2 * damping))
    else:
        missing = s * sum(np.power(1 / (1 + s), m) for m in range(1, order + 1))
    return missing


def _step_percent(case: _Case, pole: Fraction) -> Fraction | None:
    """What one input count does at once, in % of the output span."""
    around, parts = case.around, _immediate(case)
    if parts is None or around.input_per_count is None or around.output_span is None:
        return None
    kept, filtered = parts
    gain = abs(kept + filtered * _immediate_filter(case, pole))
    return 100 * gain * around.input_per_count / around.output_span


def _immediate(case: _Case) -> tuple[Fraction, Fraction] | None:
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


def _immediate_filter(case: _Case, pole: Fraction) -> Fraction:
    """The ``f(pole)`` of :func:`_immediate`."""
    if not case.strictly or case.around.period_s is None:
        return pole**case.order
    s = 2 / (case.around.period_s * pole)
    return 1 / (s * (s + 2 * case.damping) + 1) if case.order == 2 else 1 / (1 + s) ** case.order


def _highest_gain(transfer: TransferFunction, case: _Case, pole: Fraction) -> float | None:
    """Supremum of the gain from the band edge up; ``None`` where it is infinite or no double holds it."""
    edge = float(case.around.band_rad_s)
    p, damping = float(pole), float(case.damping)
    poles = [root.value for root in case.transfer.poles] + [complex(-damping * p, p * sqrt(1 - damping**2))]
    if any(value.real == 0 and value.imag >= edge for value in poles):
        return None
    peaks = [peak for value in poles for peak in _resonances(value) if peak > edge]
    try:
        highest = _supremum(transfer, edge, peaks)
    except OverflowError:
        return None
    return highest if isfinite(highest) else None


def _supremum(transfer: TransferFunction, edge: float, peaks: list[float]) -> float:
    """Supremum of ``|C(jw)|``, w from ``edge`` up: a search on a fine grid that holds the likely peaks."""
    top = _BEYOND_ROOTS * max(edge, _root_bound(transfer.numerator), _root_bound(transfer.denominator))
    w = np.unique(np.append(np.geomspace(edge, top, 2 + int(_GAINS_PER_FOLD * log(top / edge))), peaks))
    gains = _gains(transfer, w)
    highest = max(abs(float(transfer.feed_through)), float(gains.max()))
    for _ in range(_REFINEMENTS):
        best = int(gains.argmax())
        w = np.geomspace(w[max(best - 1, 0)], w[min(best + 1, len(w) - 1)], _REFINED_POINTS)
        gains = _gains(transfer, w)
        highest = max(highest, float(gains.max()))
    return highest


def _resonances(pole: complex) -> tuple[float, float]:
    """Where a lightly damped pair peaks, alone and beside a derivative."""
    return pole.imag, sqrt(max(pole.imag**2 - pole.real**2, 0.0))


def _gains(transfer: TransferFunction, w: Floats) -> Floats:
    """``|C(jw)|`` in floating point, s in units of a power of two amid ``w`` so that powers stay in range."""
    exponent = round((log2(w[0]) + log2(w[-1])) / 2)
    top, n = _scaled(transfer.numerator, exponent)
    bottom, d = _scaled(transfer.denominator, exponent)
    s = 1j * w / exp2(exponent)
    far = w > exp2(exponent)
    near, inverse = s[~far], 1 / s[far]
    with np.errstate(all="ignore"):  # what leaves a double's range is caught as not finite
        below = np.polyval(n, near) / np.polyval(d, near)
        beyond = np.polyval(n[::-1], inverse) / np.polyval(d[::-1], inverse) * inverse**transfer.relative_degree
    gains: Floats = np.abs(np.concatenate([below, beyond])) * float(top / bottom)
    return gains


def _scaled(p: poly.Integers, exponent: int) -> tuple[Fraction, Floats]:
    """Coefficients for s in units of ``2**exponent``: the largest magnitude, and all divided by it."""
    unit = Fraction(2) ** exponent
    exact = [c * unit ** (len(p) - 1 - i) for i, c in enumerate(p)]
    largest = max(abs(c) for c in exact)
    return largest, np.array([float(c / largest) for c in exact])


def _root_bound(p: poly.Integers) -> float:
    """No root is larger: ``2 max |c_i/c_0|^(1/i)`` (Fujiwara, Tohoku Mathematical Journal 10, 1916)."""
    logs = [(log2(abs(c)) - log2(abs(p[0]))) / i for i, c in enumerate(p) if i and c]
    return 2 * exp2(max(logs)) if logs else 0.0


# ---- windows -----------------------------------------------------------------------------------------------


def _low_bounds(case: _Case) -> list[_Bound]:
    """What keeps the pole from being slower."""
    edge = float(case.around.band_rad_s)
    zero = highest_frequency_rad_s(case.transfer.zeros)
    budget = f"below it more than {decimal_or_quotient(case.around.phase_budget_deg)} deg are lost at the band edge"
    bounds = [
        _Bound(_slowest_within_budget(case, max(edge, zero)), budget),
        _Bound(edge, "the band edge"),
        _Bound(zero, "the highest zero"),
    ]
    step = _step_interval(case)
    return bounds + ([_Bound(step[0], _step_reason(case, "below"))] if step else [])


def _high_bounds(case: _Case) -> list[_Bound]:
    """What keeps the pole from being faster."""
    fastest, period = _fastest_pole(case.around.method), case.around.period_s
    bounds = [_Bound(inf, "no limit without a rate" if period is None else f"no limit under {case.around.method}")]
    if fastest is not None and period is not None:
        bounds += [_Bound(float(fastest / period), _method_reason(fastest, case.around.method))]
    step = _step_interval(case)
    return bounds + ([_Bound(step[1], _step_reason(case, "above"))] if step else [])


def _fastest_pole(method: str) -> int | None:
    return _FASTEST_POLE.get(method, _FASTEST_POLE_OTHERWISE)


def _method_reason(fastest: int, method: str) -> str:
    if method == "auto":
        return f"{fastest}/T, above which it rings every sample under bilinear, which auto may choose"
    return f"{fastest}/T, the limit for {method}, above which it may ring every sample"


def _step_reason(case: _Case, side: str) -> str:
    limit = decimal_or_quotient(case.around.converter_step_tolerance_percent)
    return f"{side} it one input count moves the output at once by more than {limit} % of its range"


def _slowest_within_budget(case: _Case, floor: float) -> float:
    """Smallest pole such that it and all faster ones keep the budget; 0 where all above ``floor`` do."""
    edge, budget = float(case.around.band_rad_s), float(case.around.phase_budget_deg)
    if case.placement == "whole":
        return edge / _affordable_frequency(case.order, case.damping, case.around)
    x = _relative_frequencies(case, edge / floor)
    losses = _derivative_losses_deg(case, x)
    if losses is None or not (losses > budget).any():
        return 0.0
    first = int((losses > budget).argmax())
    within, beyond = float(x[max(first - 1, 0)]), float(x[first])
    for _ in range(_HALVINGS):
        middle = (within + beyond) / 2
        loss = _phase_lost_deg(case, middle)
        within, beyond = (within, middle) if loss is None or loss > budget else (middle, beyond)
    return edge / within


def _relative_frequencies(case: _Case, top: float) -> Floats:
    """Band edge over pole, from where the budget holds for certain up to ``top``."""
    certain = sin(radians(float(case.around.phase_budget_deg)))
    reach = max(_LEAST_REACH, case.order) * abs(case.share or 0)
    start = min(_REACH_HOLDS_TO, certain / reach if reach else inf, top)
    return np.geomspace(start, top, 2 + int(_STEPS_PER_FOLD * log(top / start)))


def _affordable_frequency(order: int, damping: Fraction, around: Circumstances) -> float:
    """Frequency over pole at which a filter on the whole loses the budget."""
    budget = radians(float(around.phase_budget_deg))
    if order != 2:
        return tan(budget / order)
    z, t = float(damping), tan(budget)
    return t / (z + sqrt(z * z + t * t))


def _step_interval(case: _Case) -> tuple[float, float] | None:
    """Slowest and fastest pole at which one count stays within tolerance; ``(0, 0)`` where none does."""
    around, parts = case.around, _immediate(case)
    if parts is None or around.input_per_count is None or around.output_span is None:
        return None
    limit = around.converter_step_tolerance_percent * around.output_span / (100 * around.input_per_count)
    kept, filtered = parts
    if filtered == 0:
        return 0.0, (inf if abs(kept) <= limit else 0.0)
    low, high = sorted((signed - kept) / filtered for signed in (-limit, limit))
    slowest, fastest = _pole_at(case, low), _pole_at(case, high)
    return (slowest, fastest) if isfinite(slowest) else (0.0, 0.0)


def _pole_at(case: _Case, share: Fraction) -> float:
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


def _reasons(case: _Case, low: _Bound, high: _Bound, pole: Fraction) -> tuple[str, ...]:
    """What sets either end of the window, and what is odd about the pole."""
    top = f" {frequency_text(high.pole_rad_s)}" if isfinite(high.pole_rad_s) else ""
    reasons = [
        f"slowest pole {frequency_text(low.pole_rad_s)}: {low.reason}",
        f"fastest pole{top}: {high.reason}",
    ]
    if case.share is None:
        reasons.append("the transfer function is zero at the band edge and has no phase there to lose")
    if pole < case.around.band_rad_s:
        reasons.append("the pole lies below the band edge: the band is filtered, not only what lies above it")
    return tuple(reasons)


def _ways_out(case: _Case, lows: list[_Bound], highs: list[_Bound]) -> tuple[str, ...]:
    """What would open an empty window, each tried before it is named."""
    candidates = [_faster_or_finer(case, lows), *_looser(case, highs)]
    opened = [f"way out: {text}" for text, around in candidates if _opens(case._replace(around=around))]
    return ("the window is empty: the slowest pole allowed is above the fastest", *opened)


def _opens(case: _Case) -> bool:
    low = max(bound.pole_rad_s for bound in _low_bounds(case))
    return low * (1 - _SLACK) <= min(bound.pole_rad_s for bound in _high_bounds(case))


def _faster_or_finer(case: _Case, lows: list[_Bound]) -> tuple[str, Circumstances]:
    """A higher rate where the method's limit binds, a finer converter where its step does, or both."""
    around, needed = case.around, []
    pole = _auto_pole(max(bound.pole_rad_s for bound in lows), inf)
    fastest = _fastest_pole(around.method)
    if around.period_s is not None and fastest is not None and fastest / around.period_s < pole:
        rate_hz = _rounded(pole / fastest, _AUTO_DIGITS, ROUND_CEILING)
        around = around._replace(period_s=1 / rate_hz)
        band_hz = float(around.band_rad_s) / (2 * pi)
        needed.append(f"a rate of at least {decimal_or_quotient(rate_hz)} Hz, the band staying at {band_hz:.5g} Hz")
    step = _step_percent(case._replace(around=around), pole)
    limit = around.converter_step_tolerance_percent
    if step is not None and step > limit:
        assert around.input_per_count is not None
        resolution = _rounded(around.input_per_count * limit / step, _AUTO_DIGITS, ROUND_FLOOR)
        around = around._replace(input_per_count=resolution)
        needed.append(f"an input resolution of {decimal_or_quotient(resolution)} per count or finer")
    return " together with ".join(needed), around


def _looser(case: _Case, highs: list[_Bound]) -> list[tuple[str, Circumstances]]:
    """A budget that covers the phase lost with the fastest pole allowed, and with any faster one."""
    edge, high = float(case.around.band_rad_s), min(bound.pole_rad_s for bound in highs)
    if high < edge:
        return []
    losses = [_phase_lost_deg(case, float(x)) for x in _relative_frequencies(case, edge / high)]
    budget = _rounded(max(loss or 0.0 for loss in losses), _AUTO_DIGITS, ROUND_CEILING)
    if not case.around.phase_budget_deg < budget < _LARGEST_BUDGET_DEG:
        return []
    text = f"a phase budget of at least {decimal_or_quotient(budget)} deg"
    return [(text, case.around._replace(phase_budget_deg=budget))]


# ---- numbers -----------------------------------------------------------------------------------------------


def decimal_or_quotient(x: Fraction) -> str:
    """Write a number exactly: as the decimal it is, or as ``"p/q"`` where none ends within 1000 digits.

    Parameters
    ----------
    x : Fraction
        Any number.
    """
    quotient = _WIDE.divide(Decimal(x.numerator), Decimal(x.denominator))
    return f"{quotient:f}" if Fraction(quotient) == x else exact_text(x)


def _rounded(x: Fraction | float, digits: int, rounding: str) -> Fraction:
    """A number to so many significant digits in the direction given, exactly decimal."""
    exact = Fraction(x)
    context = Context(prec=digits, rounding=rounding)
    return Fraction(context.divide(Decimal(exact.numerator), Decimal(exact.denominator)))


def finite_figure(x: Fraction) -> float | None:
    """The nearest double, or ``None`` beyond their range.

    Parameters
    ----------
    x : Fraction
        Any number.
    """
    try:
        return float(x)
    except OverflowError:
        return None
