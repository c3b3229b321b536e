"""Round-off against word length, drawn."""

from __future__ import annotations

from collections.abc import Sequence

from matplotlib.figure import Figure

from realize.page.plots.style import LIMIT, MARK, STORED, canvas, plain_log
from realize.words import Bound


def words_figure(bounds: Sequence[Bound], chosen_bits: int) -> Figure:
    """Proven bound of what rounding does to the output, and the tolerance."""
    figure = canvas(3.0)
    axes = figure.subplots()
    known = [(b.bits, b.percent) for b in bounds if b.percent is not None]
    axes.plot(*zip(*known, strict=True), "o-", color=STORED, markersize=5, label="proven bound")
    limits = [(b.bits, b.tolerance_percent) for b in bounds if b.tolerance_percent is not None]
    axes.plot(*zip(*limits, strict=True), color=LIMIT, linestyle=(0, (5, 2)), label="tolerance")
    axes.axvline(chosen_bits, color=MARK, linewidth=1)
    axes.annotate(
        "as emitted",
        (chosen_bits, 0),
        xycoords=("data", "axes fraction"),
        xytext=(4, 2),
        textcoords="offset points",
        va="bottom",
        fontsize=9,
    )
    axes.set_yscale("log")
    plain_log(axes.yaxis)
    axes.set_xticks([b.bits for b in bounds])
    axes.set_xlim(bounds[0].bits - 1, bounds[-1].bits + 1)
    axes.set_xlabel("word length in bits")
    axes.set_ylabel("error of the output\nin % of its range")
    axes.legend(loc="best")
    return figure
