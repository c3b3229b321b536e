"""What is drawn as bars: the phase ledger, and the windows of roll-off poles."""

from __future__ import annotations

from collections.abc import Sequence

from matplotlib.figure import Figure

from realize.loop import Ledger
from realize.page.plots.style import DESIGN, INK, LIMIT, SECOND, STORED, canvas, mark_frequency, plain_log
from realize.report.sentences import shape_words
from realize.rolloff import Proposal

#: Height of a bar with its space, and of everything else, in inches.
_BAR_IN, _REST_IN = 0.3, 1.0

#: How far an open end of a window is drawn beyond everything else.
_OPEN = 3.0


def ledger_figure(ledger: Ledger) -> Figure:
    """One bar an item, lags to the left; the sum below."""
    items = [*ledger.items, ("in all", ledger.total_deg)]
    figure = canvas(_REST_IN + _BAR_IN * len(items))
    axes = figure.subplots()
    places = range(len(items) - 1, -1, -1)
    values = [value for _, value in items]
    colors = [STORED if value < 0 else SECOND for value in values[:-1]] + [DESIGN]
    bars = axes.barh(places, values, height=0.7, color=colors)
    axes.bar_label(bars, [f"{value + 0.0:.2f}" for value in (round(v, 2) for v in values)], padding=3, fontsize=9)
    axes.set_yticks(places, [name for name, _ in items])
    axes.axvline(0, color=INK, linewidth=0.8)
    axes.grid(visible=False, axis="y")
    axes.margins(x=0.18)
    axes.set_xlabel("phase in deg, a lag to the left")
    return figure


def window_figure(proposals: Sequence[Proposal], band_rad_s: float | None, nyquist_rad_s: float | None) -> Figure:
    """One bar a proposal from the slowest to the fastest pole that fits, where any does; poles as marks."""
    figure = canvas(_REST_IN + 0.2 + _BAR_IN * len(proposals))
    axes = figure.subplots()
    ends = [end for p in proposals for end in (p.window_rad_s or ()) if end is not None]
    marks = [mark for mark in (band_rad_s, nyquist_rad_s) if mark]
    every_one = [*ends, *marks, *(float(p.pole_rad_s) for p in proposals)]
    low, high = min(every_one) / 2, max(every_one) * _OPEN
    places = range(len(proposals) - 1, -1, -1)
    for place, proposal in zip(places, proposals, strict=True):
        if proposal.window_rad_s is not None:
            first, last = proposal.window_rad_s
            right = high if last is None else last
            axes.barh(place, right - first, left=first, height=0.5, color=SECOND, alpha=0.55)
        shape = "D" if proposal.within_window else "X"
        axes.plot(float(proposal.pole_rad_s), place, shape, color=LIMIT, markersize=7)
    axes.set_yticks(places, [shape_words(p) for p in proposals])
    axes.set_xscale("log")
    plain_log(axes.xaxis)
    axes.set_xlim(low, high)
    axes.set_ylim(-0.7, len(proposals) - 0.1)
    axes.grid(visible=False, axis="y")
    axes.set_xlabel("roll-off pole in rad/s")
    for mark, name in ((band_rad_s, "band edge"), (nyquist_rad_s, "half the rate")):
        if mark:
            mark_frequency(axes, mark, name)
    return figure
