"""Which rate a design really needs: every method over a range of rates, judged by the same checks.

Rates are on a logarithmic grid, three significant digits each, so what is found is right to one step of the grid: a
measurement, not a proof.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace
from fractions import Fraction
from math import pi
from typing import Any, NamedTuple

from realize.arithmetic.formats import FORMATS
from realize.band import SAMPLES_PER_BAND_PERIOD, band_edge
from realize.design import Design, design_from_resolved
from realize.errors import RealizeError
from realize.quantity import format_engineering, round_significant
from realize.workflow import MethodResult, choose, compare, make_causal, methods_for

#: Grid of the default range: sixty rates over a factor of 50 are 6.9 % apart.
POINTS = 60

#: Ends of the default range, as multiples of the band edge or crossover: below four samples per period of it nothing
#: sensible is left, above two hundred rounding is what grows.
LOWEST_MULTIPLE, HIGHEST_MULTIPLE = 4, 200

#: Most rates of one run.
MOST_POINTS = 1000

_DIGITS = 3

#: Begins what binds where a method does not apply.
REFUSED = "refused: "

#: Stands for all methods where a rate cannot be used by any.
_EVERY_METHOD = "every method"


class Outcome(NamedTuple):
    """One method at one rate.

    Attributes
    ----------
    acceptable : bool
        Whether it may be emitted.
    out : tuple of str
        Checks in the way, the worst first.
    refused : str or None
        Why it does not apply.
    """

    acceptable: bool
    out: tuple[str, ...]
    refused: str | None


class MethodRates(NamedTuple):
    """One method over the range.

    Attributes
    ----------
    method : str
        Its name.
    lowest_hz : Fraction or None
        Lowest rate of the grid from which all higher ones are acceptable; None where the highest is not.
    binding : str or None
        What fails at the next rate below (or at the highest, where ``lowest_hz`` is None).
    outcomes : tuple of Outcome
        In the order of the rates.
    """

    method: str
    lowest_hz: Fraction | None
    binding: str | None
    outcomes: tuple[Outcome, ...]


class Rates(NamedTuple):
    """What a range of rates does to a design.

    Attributes
    ----------
    design : Design
        As the user wrote it; its own rate does not matter.
    rates_hz : tuple of Fraction
        Ascending.
    methods : tuple of MethodRates
        In the order of the tables.
    rests_on : str
        What the range was taken from.
    rules : tuple of str
        Rules of thumb beside the computed answer.
    hindrance : str
        What no rate mends, where no method has one; may be empty.
    """

    design: Design
    rates_hz: tuple[Fraction, ...]
    methods: tuple[MethodRates, ...]
    rests_on: str
    rules: tuple[str, ...]
    hindrance: str = ""


def rates(
    design: Design,
    *,
    low_hz: Fraction | None = None,
    high_hz: Fraction | None = None,
    points: int = POINTS,
    only: str | None = None,
    workers: int = 2,
    follow: Callable[[Iterator[dict[str, Outcome]]], Iterator[dict[str, Outcome]]] = iter,
) -> Rates:
    """Run every method, or a named one, at every rate of a range.

    Parameters
    ----------
    design : Design
        Its rate is replaced.
    low_hz, high_hz : Fraction, optional
        Ends of the range; by default from 4 to 200 times the crossover or band edge.
    points : int
        Rates on the logarithmic grid.
    only : str, optional
        The one method to look at; by default every method, whichever the design names.
    workers : int
        Processes.
    follow : callable
        Passes the results on one by one, to show progress.

    Raises
    ------
    RealizeError
        When the range is empty or the grid too fine, or the signals do not suit integer arithmetic.
    """
    _check_signals(design)
    edge, sentence = _edge(design)
    base_hz = Fraction(edge) / Fraction(2 * pi)
    grid = _grid(low_hz or LOWEST_MULTIPLE * base_hz, high_hz or HIGHEST_MULTIPLE * base_hz, points)
    with ProcessPoolExecutor(workers, initializer=_load, initargs=(design.resolved(), only)) as pool:
        try:
            found = list(follow(pool.map(_outcomes, grid)))
        except BaseException:
            pool.shutdown(cancel_futures=True)
            raise
    names = methods_for(design) if only is None else (only,)
    methods = tuple(_summary(name, grid, [_of(name, outcomes) for outcomes in found]) for name in names)
    able = any(method.lowest_hz is not None for method in methods)
    lacking = not able and all(_lacks_margin(method.outcomes[-1]) for method in methods)
    hindrance = _hindrance(design, grid[-1]) if lacking else ""
    return Rates(design, grid, methods, sentence, _rules(design, float(base_hz)), hindrance)


def answer(found: Rates) -> str:
    """The answer in one line: the lowest rate of every method that has one, and what binds the first."""
    able = sorted((m for m in found.methods if m.lowest_hz is not None), key=lambda m: m.lowest_hz or 0)
    if not able and len(found.methods) == 1:
        (only,) = found.methods
        reason = f"{only.method} is not acceptable at {_hz(found.rates_hz[-1])}, the highest rate: {only.binding}"
        return reason + found.hindrance
    if not able:
        return "no method is acceptable up to the highest rate of the range" + found.hindrance
    names = "; ".join(f"{m.method} from {lowest_text(m)}" for m in able)
    binding = able[0].binding
    if binding is None:
        return f"{names}; the lowest rate of the range is good enough for {able[0].method}"
    return f"{names}; below {_hz(able[0].lowest_hz)} {binding} binds"


def lowest_text(method: MethodRates) -> str:
    """The lowest rate of a method; where that is the lowest of the range, nothing is known below it."""
    if method.lowest_hz is None:
        return "-"
    return _hz(method.lowest_hz) + (" or lower" if method.binding is None else "")


def _hz(rate: Fraction | None) -> str:
    return format_engineering(rate or Fraction(0), "Hz")


def _lacks_margin(outcome: Outcome) -> bool:
    """Whether it is out on phase margin, or does not apply."""
    return outcome.refused is not None or "loop phase margin" in outcome.out


def _hindrance(design: Design, rate_hz: Fraction) -> str:
    """Whether the loop lacks phase margin before it is sampled at all."""
    if design.plant is None:
        return ""
    from realize.loop import LOOP_DEFAULTS
    from realize.loop_design import phase_margins_deg

    key = "loop_phase_margin_least"
    least_deg = float(dict(design.tolerance).get(key, LOOP_DEFAULTS[key].tolerance))
    controller = make_causal(replace(design, period_s=1 / rate_hz), assume=True).transfer
    margins = [after for _, after in phase_margins_deg(design, [controller]) if after is not None]
    if not margins or margins[0] >= least_deg:
        return ""
    return (
        f"; the continuous loop itself has a phase margin of {margins[0]:.3g} deg, below the least of {least_deg:.3g} "
        "deg, which no rate mends: change the controller, or [tolerance] loop_phase_margin_least"
    )


def _edge(design: Design) -> tuple[Fraction, str]:
    """What rates are multiples of: the band, or the crossover, or the corners."""
    if design.plant is not None and design.band_rad_s is None:
        from realize.loop_design import loop_band

        found = loop_band(design, design.transfer)
        if found is not None:
            return found
    edge, sentence = band_edge(design.transfer, None, design.band_rad_s)
    return edge, sentence + _why_assumed(design) + _where_judged(design)


def _why_assumed(design: Design) -> str:
    """For the sentence on the band: why it is not the crossover of a measured plant."""
    if design.plant is None:
        return ""
    from realize.loop_design import unmeasured_crossover

    reason = unmeasured_crossover(design, design.transfer)
    return f"; {reason}" if reason else ""


def _where_judged(design: Design) -> str:
    """For the sentence on the band: where none is given, it goes with the rate."""
    if design.band_rad_s is not None:
        return ""
    return (
        f"; each rate is judged in its own band, at most 1/{SAMPLES_PER_BAND_PERIOD} of it, so that compare at the "
        "design's rate may assume another; [sampling] band sets one for all"
    )


def _grid(low_hz: Fraction, high_hz: Fraction, points: int) -> tuple[Fraction, ...]:
    """A logarithmic grid of numbers with three significant digits, without repetitions."""
    if not 0 < low_hz < high_hz:
        raise RealizeError(
            "--from and --to",
            f"{float(low_hz):.5g} Hz to {float(high_hz):.5g} Hz",
            "a range that rises",
            "exchange them",
        )
    if not 2 <= points <= MOST_POINTS:
        raise RealizeError("--points", str(points), f"2 to {MOST_POINTS}", f"--points {POINTS}")
    ratio = float(high_hz / low_hz)
    exact = [low_hz * Fraction(ratio ** (i / (points - 1))) for i in range(points)]
    return tuple(sorted({round_significant(rate, _DIGITS) for rate in exact}))


_design: Design | None = None
_only: str | None = None


def _check_signals(design: Design) -> None:
    """Find once what no rate can mend, instead of every method refusing it at every rate."""
    if design.target.arithmetic not in FORMATS:
        from realize.arithmetic.integer import interface_of

        interface_of(design.input, design.output, design.target.arithmetic)


def _load(resolved: dict[str, Any], only: str | None) -> None:
    """Give a worker process its design: roots found so far do not travel between processes."""
    global _design, _only
    _design, _only = design_from_resolved(resolved), only


def _outcomes(rate_hz: Fraction) -> dict[str, Outcome]:
    assert _design is not None
    try:
        results = _results(replace(_design, method=_only or "auto", period_s=1 / rate_hz))
    except RealizeError as error:
        return {_EVERY_METHOD: Outcome(False, (), f"{error.where}: {error.found}")}
    return {result.method: _outcome(result) for result in results}


def _results(design: Design) -> tuple[MethodResult, ...]:
    """The named method alone, or every method; an assumed roll-off comes with every method only."""
    assumed = design.transfer.relative_degree < 0 and design.rolloff is None
    return (compare if design.method == "auto" or assumed else choose)(design).methods


def _of(name: str, outcomes: dict[str, Outcome]) -> Outcome:
    return outcomes[name] if name in outcomes else outcomes[_EVERY_METHOD]


def _outcome(result: MethodResult) -> Outcome:
    worst = sorted(result.blocking, key=lambda c: -(c.difference or 0) / (c.tolerance or 1))
    return Outcome(result.acceptable, tuple(dict.fromkeys(c.check for c in worst)), result.refused)


def _summary(name: str, grid: Sequence[Fraction], outcomes: Sequence[Outcome]) -> MethodRates:
    first = len(outcomes)
    while first and outcomes[first - 1].acceptable:
        first -= 1
    binding = _what_failed(outcomes[first - 1]) if first else None
    return MethodRates(name, grid[first] if first < len(grid) else None, binding, tuple(outcomes))


def _what_failed(outcome: Outcome) -> str:
    return f"{REFUSED}{outcome.refused}" if outcome.refused else outcome.out[0]


def _rules(design: Design, base_hz: float) -> tuple[str, ...]:
    """Rules of thumb, both from memory: the books were not at hand."""
    rules = [
        f"20 to 40 times the bandwidth (Franklin, Powell & Workman): {_span(20 * base_hz, 40 * base_hz)}, "
        "the band edge or crossover standing in for the bandwidth"
    ]
    rise_s = _rise_time_s(design)
    if rise_s:
        rules.append(f"4 to 10 samples per rise time (Astrom & Wittenmark): {_span(4 / rise_s, 10 / rise_s)}")
    return tuple(rules)


def _span(low_hz: float, high_hz: float) -> str:
    """Both ends, the unit once where it is the same: ``1.2 to 2.4 kHz``."""
    low, high = (_hz(round_significant(Fraction(end), _DIGITS)) for end in (low_hz, high_hz))
    unit = high.rpartition(" ")[1:]
    return f"{low.removesuffix(''.join(unit))} to {high}"


def _rise_time_s(design: Design) -> float | None:
    """Rise time of the continuous loop, for a proper controller; None without a loop that settles."""
    if design.plant is None or design.transfer.relative_degree < 0:
        return None
    from realize.loop import ContinuousLoop, continuous_step
    from realize.loop_design import transfer_plants

    plants = transfer_plants(design)
    step = continuous_step(ContinuousLoop(design.transfer, plants[0])) if plants else None
    return step.rise_time_s if step else None
