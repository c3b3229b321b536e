"""Frequency responses and their error, drawn."""

from __future__ import annotations

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from realize.loop.response import Real
from realize.page.curves.frequency import FrequencyCurves
from realize.page.plots.style import DESIGN, LIMIT, STORED, canvas, mark_frequency, plain_log


def frequency_figure(curves: FrequencyCurves) -> Figure:
    """Magnitude and phase, each with its error below it, over one axis of frequency."""
    figure = canvas(6.2)
    panels = figure.subplots(4, 1, sharex=True, gridspec_kw={"height_ratios": (3, 1.5, 3, 1.5)})
    _pair(panels[0], curves, curves.design_db, curves.stored_db, "magnitude in dB")
    _error(panels[1], curves, curves.error_db, "error in dB")
    _pair(panels[2], curves, curves.design_deg, curves.stored_deg, "phase in deg")
    _error(panels[3], curves, curves.error_deg, "error in deg")
    panels[0].legend(loc="best")
    panels[0].set_xscale("log")
    plain_log(panels[3].xaxis)
    panels[3].set_xlabel("frequency in Hz")
    for i, axes in enumerate(panels):
        mark_frequency(axes, curves.band_hz, "" if i else "band edge")
        mark_frequency(axes, curves.nyquist_hz, "" if i else "half the rate")
    figure.align_ylabels(panels)
    return figure


def _pair(axes: Axes, curves: FrequencyCurves, design: Real, stored: Real, name: str) -> None:
    axes.plot(curves.frequency_hz, design, color=DESIGN, label="design, G(s)")
    axes.plot(curves.frequency_hz, stored, color=STORED, linestyle=(0, (5, 2)), label="as stored, Gd(z)")
    axes.set_ylabel(name)


def _error(axes: Axes, curves: FrequencyCurves, error: Real, name: str) -> None:
    axes.plot(curves.frequency_hz, error, color=LIMIT, linewidth=1.2)
    axes.set_ylabel(name)
