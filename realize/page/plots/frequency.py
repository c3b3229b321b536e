"""Frequency responses and their error, drawn."""

from __future__ import annotations

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from realize.loop.response import Real
from realize.page.curves.frequency import FrequencyCurves
from realize.page.plots.style import DESIGN, LIMIT, STORED, canvas, mark_frequency, plain_log

#: How far beyond the design's own range the axis of a response goes at the most, as a share of that range.
_BEYOND = 1.0

#: Error beyond which the axis is cut: nobody reads more than that it is lost, in dB and in deg.
_MOST_ERROR = {"error in dB": 20.0, "error in deg": 180.0}


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
    # A zero on the axis would press everything else flat.
    low, high = float(design.min()), float(design.max())
    bottom, top = axes.get_ylim()
    axes.set_ylim(max(bottom, low - _BEYOND * max(high - low, 1.0)), min(top, high + _BEYOND * max(high - low, 1.0)))


def _error(axes: Axes, curves: FrequencyCurves, error: Real, name: str) -> None:
    axes.plot(curves.frequency_hz, error, color=LIMIT, linewidth=1.2)
    axes.set_ylabel(name)
    bottom, top = axes.get_ylim()
    axes.set_ylim(max(bottom, -_MOST_ERROR[name]), min(top, _MOST_ERROR[name]))
