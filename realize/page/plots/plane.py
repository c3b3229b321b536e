"""Poles and zeros in the z-plane, drawn."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
from matplotlib.axes import Axes
from matplotlib.figure import Figure

from realize.page.curves.plane import Mapped, Plane
from realize.page.plots.style import DESIGN, INK, MARK, STORED, canvas

#: Roots nearer to z = 1 than this, if there are any but at z = 1 itself, are shown by themselves, too.
_NEAR = 0.2

#: Margin around what is shown, as a share of it.
_MARGIN = 1.35

#: Farthest root from z = 0 for which the picture is made larger; one beyond is left to the table.
_FARTHEST = 3.0


def plane_figure(plane: Plane) -> Figure:
    """The unit circle with poles, zeros and exact images; beside it what lies close to z = 1."""
    near = max((abs(d) for d in _places(plane) if abs(d) < _NEAR), default=0.0)
    figure = canvas(3.6)
    panels = figure.subplots(1, 2 if near else 1, squeeze=False)[0]
    size = max(1.0, *(abs(1 + d) for d in _places(plane) if abs(1 + d) < _FARTHEST), 1.0)
    _whole(panels[0], plane, size)
    if near:
        _around_one(panels[1], plane, near)
    handles, labels = panels[0].get_legend_handles_labels()
    figure.legend(handles, labels, loc="outside lower center", ncols=4)
    return figure


def _places(plane: Plane) -> list[complex]:
    roots = (*plane.poles, *plane.zeros)
    return [place for root in roots for place in (root.delta, root.image) if place is not None]


def _whole(axes: Axes, plane: Plane, size: float) -> None:
    angle = np.linspace(0, 2 * np.pi, 181)
    axes.plot(np.cos(angle), np.sin(angle), color=MARK, linewidth=1)
    _draw(axes, plane, 1.0)
    axes.set(xlim=(-1.15 * size, 1.15 * size), ylim=(-1.15 * size, 1.15 * size), aspect="equal")
    axes.set(xlabel="Re z", ylabel="Im z")


def _around_one(axes: Axes, plane: Plane, near: float) -> None:
    reach = _MARGIN * near
    angle = np.linspace(-min(np.pi, 2 * reach), min(np.pi, 2 * reach), 181)
    # cos - 1 by its sine form: close to z = 1 nothing else is left of it.
    axes.plot(-2 * np.sin(angle / 2) ** 2, np.sin(angle), color=MARK, linewidth=1)
    _draw(axes, plane, 0.0)
    axes.set(xlim=(-reach, reach), ylim=(-reach, reach), aspect="equal")
    axes.set(xlabel="Re z - 1", ylabel="Im z")
    axes.set_title("close to z = 1")
    axes.ticklabel_format(style="sci", scilimits=(-2, 2), useMathText=False)
    axes.locator_params(nbins=5)


def _draw(axes: Axes, plane: Plane, origin: float) -> None:
    """Everything at its place, the origin added to ``z - 1``."""
    for roots, marker, name in ((plane.poles, "x", "pole"), (plane.zeros, "o", "zero")):
        _shifts(axes, roots, origin)
        images = [r.image for r in roots if r.image is not None]
        stored = [r.delta for r in roots if r.delta is not None]
        style: Any = {"linestyle": "none", "markerfacecolor": "none"}
        if images:
            axes.plot(*_xy(images, origin), marker=marker, ms=11, mew=1, color=DESIGN, label=f"{name}, exact", **style)
        if stored:
            axes.plot(
                *_xy(stored, origin), marker=marker, ms=6, mew=1.8, color=STORED, label=f"{name}, stored", **style
            )


def _shifts(axes: Axes, roots: Sequence[Mapped], origin: float) -> None:
    """A line from every exact image to where the root is."""
    for root in roots:
        if root.image is not None and root.delta is not None:
            axes.plot(*_xy([root.image, root.delta], origin), color=INK, linewidth=1)


def _xy(places: Sequence[complex], origin: float) -> tuple[list[float], list[float]]:
    return [place.real + origin for place in places], [place.imag for place in places]
