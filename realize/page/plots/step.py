"""Step responses, drawn."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from realize.page.curves.step import LoopCurves, StepCurves
from realize.page.plots.style import DESIGN, INK, STORED, canvas

#: Samples up to which every hold can be told in one panel; beyond, a second one shows the first of them.
_TOLD = 60
_FIRST = 16

#: Units of time, by the largest value that is shown in the next smaller one.
_TIME_UNITS = ((1e-3, 1e6, "us"), (1.0, 1e3, "ms"), (float("inf"), 1.0, "s"))


def step_figure(curves: StepCurves, output_unit: str) -> Figure:
    """The design's response and the samples, each held until the next; the first samples by themselves where many."""
    count = len(curves.samples)
    figure = canvas(3.2)
    ends = [float(curves.times_s[-1])]
    if curves.sample_times_s[-1] > _TOLD * curves.period_s:
        ends.append(_FIRST * curves.period_s)
    every_axes = figure.subplots(1, len(ends), squeeze=False)[0]
    for axes, end in zip(every_axes, ends, strict=True):
        _draw_step(axes, curves, end, dots=count <= _TOLD or end < ends[0])
    every_axes[0].set_ylabel(with_unit("controller output", output_unit))
    every_axes[0].legend(loc="best")
    if len(ends) > 1:
        every_axes[1].set_title(f"first {_FIRST} samples")
    return figure


def _draw_step(axes: Axes, curves: StepCurves, end_s: float, *, dots: bool) -> None:
    scale, unit = time_unit(end_s)
    shown = curves.times_s <= end_s * (1 + 1e-9)
    axes.plot(curves.times_s[shown] * scale, curves.design[shown], color=DESIGN, label="design, G(s)")
    held = curves.sample_times_s <= end_s * (1 + 1e-9)
    times = np.append(curves.sample_times_s[held], end_s) * scale
    values = np.append(curves.samples[held], curves.samples[held][-1])
    axes.step(times, values, where="post", color=STORED, linewidth=1.2, label="as stored, held")
    if dots:
        axes.plot(times[:-1], values[:-1], "o", color=STORED, markersize=3.5)
    axes.set_xlabel(f"time after the step in {unit}")


def loop_figure(cases: Sequence[tuple[str, LoopCurves]], output_unit: str) -> Figure:
    """The plant's output, one panel a case of the plant."""
    figure = canvas(3.0 if len(cases) == 1 else 2.5 * len(cases))
    panels = figure.subplots(len(cases), 1, squeeze=False)[:, 0]
    for axes, (name, curves) in zip(panels, cases, strict=True):
        scale, unit = time_unit(curves.settled_s)
        axes.plot(curves.continuous[0] * scale, curves.continuous[1], color=DESIGN, label="continuous")
        sampled = curves.sampled
        axes.plot(sampled[0] * scale, sampled[1], color=STORED, linestyle=(0, (5, 2)), label="sampled, as stored")
        axes.set_xlim(0, curves.settled_s * scale)
        axes.set_ylabel(with_unit("plant output", output_unit))
        axes.set_xlabel(f"time after a unit step of the reference in {unit}")
        if name:
            axes.set_title(name, color=INK)
    panels[0].legend(loc="lower right")
    return figure


def time_unit(longest_s: float) -> tuple[float, str]:
    """Factor from seconds, and the unit a reader wants."""
    return next((factor, unit) for limit, factor, unit in _TIME_UNITS if longest_s < limit)


def with_unit(what: str, unit: str) -> str:
    """Name of an axis."""
    return f"{what} ({unit})" if unit else what
