"""The open loop, drawn."""

from __future__ import annotations

from matplotlib.figure import Figure

from realize.page.curves.loop_gain import LoopGain
from realize.page.plots.style import DESIGN, LIMIT, MARK, STORED, canvas, mark_frequency, plain_log

#: Decibels and degrees around the crossover that are shown at the most.
_MOST_DB, _MOST_DEG = 80.0, 360.0


def loop_gain_figure(curves: LoopGain) -> Figure:
    """Gain above phase, the crossover marked, and the phase margin as a bar down to -180 deg."""
    figure = canvas(4.6)
    panels = figure.subplots(2, 1, sharex=True)
    kinds = (
        (curves.continuous_db, curves.continuous_deg, DESIGN, "-", "continuous"),
        (curves.sampled_db, curves.sampled_deg, STORED, (0, (5, 2)), "sampled, as stored"),
    )
    for size_db, phase_deg, color, dash, name in kinds:
        panels[0].plot(curves.frequency_hz, size_db, color=color, linestyle=dash, label=name)
        panels[1].plot(curves.frequency_hz, phase_deg, color=color, linestyle=dash)
    panels[0].axhline(0, color=MARK, linewidth=1)
    # Whole turns do not matter: the one is marked from which the margin is counted.
    at = curves.crossover_hz
    turn = 180 + 360 * round((_at(curves, at) - curves.phase_margin_deg - 180) / 360)
    panels[1].axhline(turn, color=MARK, linewidth=1)
    panels[1].plot([at, at], [turn, turn + curves.phase_margin_deg], color=LIMIT, linewidth=3)
    words = f"  {curves.phase_margin_deg:.3g} deg"
    panels[1].annotate(words, (at, turn + curves.phase_margin_deg / 2), fontsize=9, va="center")
    panels[0].set(ylabel="loop gain in dB", xscale="log")
    panels[1].set(ylabel="phase in deg", xlabel="frequency in Hz")
    panels[0].set_ylim(max(panels[0].get_ylim()[0], -_MOST_DB), min(panels[0].get_ylim()[1], _MOST_DB))
    panels[1].set_ylim(max(panels[1].get_ylim()[0], turn - _MOST_DEG), min(panels[1].get_ylim()[1], turn + _MOST_DEG))
    plain_log(panels[1].xaxis)
    for i, axes in enumerate(panels):
        mark_frequency(axes, at, "" if i else "crossover")
    panels[0].legend(loc="lower left")
    figure.align_ylabels(panels)
    return figure


def _at(curves: LoopGain, frequency_hz: float) -> float:
    """Phase of the sampled loop next to a frequency."""
    return float(curves.sampled_deg[int(abs(curves.frequency_hz - frequency_hz).argmin())])
