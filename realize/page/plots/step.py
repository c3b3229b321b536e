"""Step responses, drawn."""

from __future__ import annotations

from collections.abc import Sequence

from matplotlib.axes import Axes
from matplotlib.figure import Figure

from realize.page.curves.step import FIRST_SAMPLES, LoopCurves, StepCurves, Stretch
from realize.page.plots.style import DESIGN, INK, STORED, canvas

#: Samples up to which every hold can be told in one panel; beyond, a second one shows the first of them.
_TOLD = 60

#: Units of time, by the largest value that is shown in the next smaller one.
_TIME_UNITS = ((1e-3, 1e6, "us"), (1.0, 1e3, "ms"), (float("inf"), 1.0, "s"))


def step_figure(curves: StepCurves, output_unit: str) -> Figure:
    """The design's response and the samples, each held until the next; the first samples by themselves where many."""
    told = len(curves.whole.samples) <= _TOLD
    figure = canvas(3.2)
    panels = figure.subplots(1, 1 if told else 2, squeeze=False)[0]
    _draw_step(panels[0], curves.whole, dots=told)
    panels[0].set_ylabel(with_unit("controller output", output_unit))
    panels[0].legend(loc="best")
    if not told:
        _draw_step(panels[1], curves.first, dots=True)
        panels[1].set_title(f"first {FIRST_SAMPLES} samples")
    return figure


def _draw_step(axes: Axes, curves: Stretch, *, dots: bool) -> None:
    scale, unit = time_unit(float(curves.times_s[-1]))
    axes.plot(curves.times_s * scale, curves.design, color=DESIGN, label="design, G(s)")
    times = curves.sample_times_s * scale
    axes.step(times, curves.samples, where="post", color=STORED, linewidth=1.2, label="as stored, held")
    if dots:
        axes.plot(times, curves.samples, "o", color=STORED, markersize=3.5)
    axes.set_xlabel(f"time after the step in {unit}")


def loop_figure(cases: Sequence[tuple[str, LoopCurves]], output_unit: str) -> Figure:
    """The plant's output, one panel a case of the plant."""
    figure = canvas(3.0 if len(cases) == 1 else 2.5 * len(cases))
    panels = figure.subplots(len(cases), 1, squeeze=False)[:, 0]
    for axes, (name, curves) in zip(panels, cases, strict=True):
        scale, unit = time_unit(curves.end_s)
        axes.plot(curves.continuous[0] * scale, curves.continuous[1], color=DESIGN, label="continuous")
        sampled = curves.sampled
        axes.plot(sampled[0] * scale, sampled[1], color=STORED, linestyle=(0, (5, 2)), label="sampled, as stored")
        axes.set_xlim(0, curves.end_s * scale)
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
