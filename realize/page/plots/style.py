"""How every figure looks: sizes, colours that colour-blind readers tell apart, and the same bytes on every machine.

The colours of curves are those of Okabe and Ito ("Color universal design", 2008), for which they were tested; curves
differ in dash or marker, too, so that a print without colour can be read.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from io import BytesIO, StringIO
from typing import Any

import matplotlib as mpl
from matplotlib.axes import Axes
from matplotlib.axis import Axis
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure

#: Width in inches: at 72 points an inch as wide as half a page of A4 sheet and as half a screen of 900 pixels, so that
#: letters of ten points stay letters of ten points there.
WIDTH_IN = 5.4

#: What a colour stands for; the page replaces them for a dark background.
INK, FAINT = "#1c1c1e", "#c9c9ce"
DESIGN, STORED, SECOND, LIMIT, MARK = "#0072b2", "#d55e00", "#009e73", "#a3186e", "#6b6b70"

#: Dots per inch of PNG files: 1200 pixels wide.
_DPI = 200

_SETTINGS: Any = {
    "svg.fonttype": "none",
    "svg.hashsalt": "realize",
    "path.simplify": True,
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 10,
    "axes.titlesize": 10,
    "axes.labelsize": 10,
    "legend.fontsize": 9,
    "xtick.labelsize": 9,
    "ytick.labelsize": 9,
    "text.color": INK,
    "axes.edgecolor": MARK,
    "axes.labelcolor": INK,
    "xtick.color": INK,
    "ytick.color": INK,
    "axes.facecolor": "none",
    "figure.facecolor": "none",
    "axes.grid": True,
    "grid.color": FAINT,
    "grid.linewidth": 0.6,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.axisbelow": True,
    "lines.linewidth": 1.6,
    "legend.frameon": False,
    "axes.formatter.use_mathtext": False,
    "axes.unicode_minus": True,
    "figure.constrained_layout.use": True,
}


@contextmanager
def styled() -> Iterator[None]:
    """Draw in this style, whatever the user's own settings are."""
    with mpl.rc_context():
        mpl.rcdefaults()
        mpl.rcParams.update(_SETTINGS)
        yield


def canvas(height_in: float) -> Figure:
    """An empty figure of the usual width; drawn off screen."""
    figure = Figure(figsize=(WIDTH_IN, height_in))
    FigureCanvasAgg(figure)
    return figure


def mark_frequency(axes: Axes, at_hz: float, name: str) -> None:
    """A vertical line with its name above it."""
    axes.axvline(at_hz, color=MARK, linewidth=1, linestyle=(0, (4, 2)))
    if name:
        axes.annotate(
            name,
            (at_hz, 1.0),
            xycoords=("data", "axes fraction"),
            xytext=(0, 2),
            textcoords="offset points",
            ha="center",
            va="bottom",
            fontsize=9,
            color=INK,
        )


def plain_log(axis: Axis) -> None:
    """Numbers as people write them along a logarithmic axis."""
    axis.set_major_formatter(lambda value, _: f"{value:g}")


def svg_text(figure: Figure, background: str = "none") -> str:
    """The figure as SVG with real text; no date and no maker in it."""
    with styled():
        text = StringIO()
        nothing = {"Date": None, "Creator": None, "Format": None, "Type": None}
        figure.savefig(text, format="svg", facecolor=background, metadata=nothing)
    return text.getvalue()


def png_bytes(figure: Figure) -> bytes:
    """The figure as PNG on white."""
    with styled():
        data = BytesIO()
        figure.savefig(data, format="png", dpi=_DPI, facecolor="white", metadata={"Software": None})
    return data.getvalue()
