"""Each figure of the page with the words that stand for it and the numbers behind it."""

from __future__ import annotations

from collections.abc import Sequence
from math import pi
from typing import TYPE_CHECKING

import numpy as np

from realize.page.blocks import Drawing, Table
from realize.page.curves.frequency import FrequencyCurves, frequency_curves
from realize.page.curves.loop_gain import LoopGain, loop_gain
from realize.page.curves.plane import Mapped, Plane, plane
from realize.page.curves.step import LoopCurves, StepCurves, loop_curves, step_curves
from realize.page.known import Known
from realize.quantity import format_engineering
from realize.realizability import Assessment
from realize.report.sentences import shape_words, window_text
from realize.report.tables import Rows, ledger_rows, proposals_rows
from realize.report.values import complex_text, figure, in_hz, with_unit

if TYPE_CHECKING:
    from matplotlib.figure import Figure

    from realize.loop import Ledger
    from realize.words import Bound

#: Rows of a table behind a curve.
_ROWS = 13

#: Word lengths that are looked at, in bits.
_WORDS = range(8, 33, 2)


def drawings(known: Known) -> tuple[Drawing, ...]:
    """Those that the design has, in the order of the page."""
    found = [
        _step(known),
        _loop(known),
        _frequency(known),
        _plane(known),
        _loop_gain(known),
        _ledger(known),
        _words(known),
    ]
    return tuple(drawing for drawing in found if drawing is not None)


def window_drawing(known: Known) -> Drawing:
    """Where the roll-off poles of the proposals may lie."""
    proposals, around = known.assessment.proposals, known.assessment.around
    band = float(around.band_rad_s)
    nyquist = None if around.period_s is None else pi / float(around.period_s)
    words = "; ".join(
        f"{shape_words(p)}: window {window_text(p.window_rad_s)}, pole at {float(p.pole_rad_s):.5g}" for p in proposals
    )

    def draw() -> Figure:
        from realize.page.plots.bars import window_figure

        return window_figure(proposals, band, nyquist)

    return Drawing(
        "window",
        "Where the roll-off pole may lie",
        f"One bar a proposal over frequency in rad/s, {words}. Band edge {band:.5g} rad/s.",
        Table("Roll-off proposals, best first", _proposals(known.assessment)),
        draw,
    )


def _proposals(found: Assessment) -> Rows:
    """The proposals, with what each leaves of the phase margin where there is a plant."""
    rows, margins = proposals_rows(found.proposals), found.phase_margins_deg
    if not margins:
        return rows
    head = (*rows.head, ("phase margin", "before"), ("", "after"))
    return Rows(
        head, [[*row, *(with_unit(m, " deg") for m in pair)] for row, pair in zip(rows.cells, margins, strict=True)]
    )


def _step(known: Known) -> Drawing | None:
    curves = step_curves(known.reference, known.stored)
    if curves is None:
        return None
    unit = known.design.output.unit

    def draw() -> Figure:
        from realize.page.plots.step import step_figure

        return step_figure(curves, unit)

    return Drawing(
        "step",
        "Step response of the controller, each sample held",
        _step_words(curves),
        Table("Step response of the controller", _step_rows(curves)),
        draw,
    )


def _step_words(curves: StepCurves) -> str:
    samples, times_s = curves.whole.samples, curves.whole.sample_times_s
    return (
        f"The design's response to a unit step as a line and the stored samples as steps. The samples start at "
        f"{samples[0]:.4g}, reach at most {samples.max():.4g} and at least {samples.min():.4g}, and are at "
        f"{samples[-1]:.4g} after {format_engineering(float(times_s[-1]), 's')}."
    )


def _step_rows(curves: StepCurves) -> Rows:
    head = (("time",), ("design",), ("as stored",))
    values = zip(curves.listed.times_s, curves.listed.design, curves.listed.samples, strict=True)
    return Rows(head, [[format_engineering(float(t), "s"), _g(y), _g(yd)] for t, y, yd in values])


def _g(value: float) -> str:
    return f"{value + 0.0:.5g}"


def _loop(known: Known) -> Drawing | None:
    cases = [(reference.plant.case, loop_curves(reference, known.stored)) for reference in known.loops]
    shown = [(name, curves) for name, curves in cases if curves is not None]
    if not shown:
        return None

    # Behind a sensor of gain 1 the output is in the unit of the error, which is that of the input.
    alike = all(r.plant.sensor.low_frequency_gain == 1 for r in known.loops)
    unit = known.design.input.unit if alike else ""

    def draw() -> Figure:
        from realize.page.plots.step import loop_figure

        return loop_figure(shown, unit)

    head = (("case",), ("loop",), ("highest",), ("at",), ("final",), ("within 2 % from",))
    rows = [row for name, curves in shown for row in _loop_cells(name, curves)]
    words = "; ".join(f"{row[0]} {row[1]}: highest {row[2]} at {row[3]}, final {row[4]}".strip() for row in rows)
    missing = [name for name, curves in cases if curves is None]
    note = f"Without a step that settles: {', '.join(missing)}." if missing else ""
    return Drawing(
        "loop",
        "Step of the closed loop, between the samples too",
        f"Output of the plant after a unit step of the reference, continuous loop and sampled loop. {words}.",
        Table("Step of the closed loop", Rows(head, rows), note),
        draw,
    )


def _loop_cells(name: str, curves: LoopCurves) -> list[list[str]]:
    cells = []
    for kind, figures in (("continuous", curves.continuous_figures), ("sampled", curves.sampled_figures)):
        highest = figures.final * (1 + figures.overshoot_percent / 100)
        when = "-" if figures.peak_s is None else format_engineering(figures.peak_s, "s")
        settled = "-" if figures.settling_time_s is None else format_engineering(figures.settling_time_s, "s")
        cells.append([name, kind, _g(highest), when, _g(figures.final), settled])
    return cells


def _frequency(known: Known) -> Drawing:
    curves = frequency_curves(known.reference, known.stored)

    def draw() -> Figure:
        from realize.page.plots.frequency import frequency_figure

        return frequency_figure(curves)

    return Drawing(
        "frequency",
        "Frequency response, and its error below it",
        _frequency_words(known, curves),
        Table("Frequency response", _frequency_rows(curves)),
        draw,
    )


def _frequency_words(known: Known, curves: FrequencyCurves) -> str:
    """What is out in the band is said as the checks have it: point by point it has no bound next to a zero."""
    assert known.shown is not None
    apart = {check.check: check.difference for check in known.shown.stored_checks}
    at_end = (
        "the stored numbers have a zero there"
        if any(root.value == -2 for root in known.stored.zeros)
        else f"they differ by {figure(float(curves.error_db[-1]))} dB and {figure(float(curves.error_deg[-1]))} deg"
    )
    return (
        f"Magnitude in dB and phase in deg of the design and of the stored numbers against frequency up to half the "
        f"rate, {in_hz(2 * pi * curves.nyquist_hz)}; {at_end}. Up to the band edge, {in_hz(2 * pi * curves.band_hz)}, "
        f"the stored numbers are {figure(apart['magnitude in band'])} dB and {figure(apart['phase in band'])} deg off "
        "what the design does within 2 % of each frequency."
    )


def _frequency_rows(curves: FrequencyCurves) -> Rows:
    head = (
        ("frequency", ""),
        ("design", "dB"),
        ("as stored", "dB"),
        ("error", "dB"),
        ("design", "deg"),
        ("as stored", "deg"),
        ("error", "deg"),
    )
    wanted = np.append(np.geomspace(curves.frequency_hz[0], curves.frequency_hz[-1], _ROWS - 1), curves.band_hz)
    chosen = np.unique(np.clip(np.searchsorted(curves.frequency_hz, np.sort(wanted)), 0, len(curves.frequency_hz) - 1))
    columns = (
        curves.design_db,
        curves.stored_db,
        curves.error_db,
        curves.design_deg,
        curves.stored_deg,
        curves.error_deg,
    )
    cells = [
        [in_hz(2 * pi * float(curves.frequency_hz[i])), *(f"{round(float(c[i]), 3) + 0.0:.3f}" for c in columns)]
        for i in chosen
    ]
    return Rows(head, cells)


def _plane(known: Known) -> Drawing | None:
    found = plane(known.reference, known.stored)
    if not (found.poles or found.zeros):
        return None

    def draw() -> Figure:
        from realize.page.plots.plane import plane_figure

        return plane_figure(found)

    return Drawing(
        "plane",
        "Poles and zeros in the z-plane, stored and exact",
        _plane_words(found),
        Table("Poles and zeros", _plane_rows(found), "Exact: exp(sT). Both given as z - 1."),
        draw,
    )


def _plane_words(found: Plane) -> str:
    parts = []
    for name, roots in (("pole", found.poles), ("zero", found.zeros)):
        parts += [f"{name} at z - 1 = {_delta(r.delta)}, exact {_delta(r.image)}" for r in roots if _upper(r)]
    return f"The unit circle with {len(found.poles)} poles and {len(found.zeros)} zeros: {'; '.join(parts)}."


def _upper(root: Mapped) -> bool:
    """Whether it stands for itself: of a pair only the member above."""
    return all(place is None or place.imag >= 0 for place in (root.s_rad_s, root.delta))


def _plane_rows(found: Plane) -> Rows:
    head = (("",), ("s in rad/s",), ("exact",), ("as stored",), ("apart",))
    cells = [
        [
            name,
            "-" if root.s_rad_s is None else complex_text(root.s_rad_s),
            _delta(root.image),
            _delta(root.delta),
            "-" if root.image is None or root.delta is None else figure(abs(root.delta - root.image)),
        ]
        for name, roots in (("pole", found.poles), ("zero", found.zeros))
        for root in roots
        if _upper(root)
    ]
    return Rows(head, cells)


def _delta(place: complex | None) -> str:
    return "-" if place is None else complex_text(place)


def _loop_gain(known: Known) -> Drawing | None:
    curves = loop_gain(known.loops[0], known.stored) if known.loops else None
    if curves is None:
        return None

    def draw() -> Figure:
        from realize.page.plots.loop_gain import loop_gain_figure

        return loop_gain_figure(curves)

    case = known.loops[0].plant.case
    at = in_hz(2 * pi * curves.crossover_hz)
    return Drawing(
        "loopgain",
        f"Open loop, with its margin at {at}{f', case {case}' if case else ''}",
        f"Gain in dB and phase in deg of the open loop against frequency, continuous and sampled. The sampled loop's "
        f"gain passes 1 at {at}, where {curves.phase_margin_deg:.4g} deg are left to -180 deg.",
        Table("Open loop", _loop_gain_rows(curves)),
        draw,
    )


def _loop_gain_rows(curves: LoopGain) -> Rows:
    head = (("frequency", ""), ("continuous", "dB"), ("sampled", "dB"), ("continuous", "deg"), ("sampled", "deg"))
    columns = (curves.continuous_db, curves.sampled_db, curves.continuous_deg, curves.sampled_deg)
    wanted = np.append(np.geomspace(curves.frequency_hz[0], curves.frequency_hz[-1], _ROWS - 1), curves.crossover_hz)
    chosen = np.unique(np.clip(np.searchsorted(curves.frequency_hz, np.sort(wanted)), 0, len(curves.frequency_hz) - 1))
    return Rows(
        head,
        [[in_hz(2 * pi * float(curves.frequency_hz[i])), *(f"{float(c[i]):.2f}" for c in columns)] for i in chosen],
    )


def _ledger(known: Known) -> Drawing | None:
    assert known.shown is not None
    loop = known.shown.loop
    if loop is None or loop.ledger is None:
        return None
    ledger = loop.ledger

    def draw() -> Figure:
        from realize.page.plots.bars import ledger_figure

        return ledger_figure(ledger)

    at = in_hz(ledger.w_rad_s)
    return Drawing(
        "ledger",
        f"Where the phase goes, at the crossover of {at}",
        _ledger_words(ledger),
        Table(f"Phase at the crossover, {at}, against controller and plant alone", ledger_rows(loop)),
        draw,
    )


def _ledger_words(ledger: Ledger) -> str:
    items = ", ".join(f"{name} {round(value, 2) + 0.0:.2f}" for name, value in ledger.items)
    return f"Phase in deg as bars, lags to the left: {items}; in all {ledger.total_deg:.2f}."


def _words(known: Known) -> Drawing | None:
    assert known.shown is not None
    assert known.shown.realization is not None
    if known.comparison.chosen is not known.shown or not known.design.target.arithmetic.startswith("int"):
        return None
    from realize.words import bounds_by_word

    structure, bits = known.shown.realization.structure, int(known.design.target.arithmetic[3:])
    bounds = bounds_by_word(known.comparison, structure, _WORDS)
    if all(bound.percent is None for bound in bounds):
        return None

    def draw() -> Figure:
        from realize.page.plots.words import words_figure

        return words_figure(bounds, bits)

    head = (("word", "bits"), ("proven bound", "% of output range"), ("tolerance", "%"))
    return Drawing(
        "words",
        f"What rounding does to the output, against word length ({structure})",
        _words_words(bounds),
        Table(
            "Round-off against word length",
            Rows(head, _words_cells(bounds)),
            "Sums in 64 bits; from a cleared state, while no limit acts; - cannot be stored.",
        ),
        draw,
    )


def _words_words(bounds: Sequence[Bound]) -> str:
    known = ", ".join(f"{b.bits} bits {figure(b.percent)} %" for b in bounds if b.percent is not None)
    return (
        "Proven bound of what rounding moves the output by, from a cleared state and while no limit acts, in % of its "
        f"range: {known}."
    )


def _words_cells(bounds: Sequence[Bound]) -> list[list[str]]:
    return [[str(b.bits), figure(b.percent), figure(b.tolerance_percent)] for b in bounds]
