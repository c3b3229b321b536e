"""From a design to the text of its page, its review comment and its figures; writes nothing."""

from __future__ import annotations

from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING

from realize.design import Design
from realize.errors import RealizeError
from realize.page import extra
from realize.page.blocks import Page

if TYPE_CHECKING:
    from matplotlib.figure import Figure

#: What a figure may be written as.
FIGURE_TYPES = ("svg", "png")


def page_path(name: str) -> Path:
    """Where the page goes.

    Raises
    ------
    RealizeError
        When the name is not that of an HTML file.
    """
    if not name.lower().endswith((".html", ".htm")):
        raise RealizeError("--out", f'"{name}"', "a name that ends in .html", "--out page.html")
    return Path(name)


class Report:
    """Everything about one design, for people.

    Parameters
    ----------
    design : Design
        With a sample rate.

    Raises
    ------
    RealizeError
        When the design has no sample rate, or its ``[rolloff]`` does not fit.
    """

    def __init__(self, design: Design) -> None:
        from realize.page.known import Known
        from realize.page.sections import page

        self.design = design
        self.page: Page = page(Known(design))

    @cached_property
    def html(self) -> str:
        """The page."""
        extra.require()
        from realize.page.html import html_text

        return html_text(self.page)

    @cached_property
    def markdown(self) -> str:
        """The same as a review comment."""
        from realize.page.markdown import markdown_text

        return markdown_text(self.page)

    def figures(self, kind: str) -> dict[str, bytes]:
        """Every figure as a file: name and content.

        Parameters
        ----------
        kind : str
            One of :data:`FIGURE_TYPES`.
        """
        if kind not in FIGURE_TYPES:
            raise RealizeError("--figure-type", f'"{kind}"', " or ".join(FIGURE_TYPES), "--figure-type png")
        extra.require()
        from realize.page.plots.style import png_bytes, styled, svg_text

        def content(figure: Figure) -> bytes:
            return svg_text(figure, "white").encode() if kind == "svg" else png_bytes(figure)

        with styled():
            drawn = {d.key: d.draw() for d in self.page.drawings}
        return {f"{self.design.name}_{key}.{kind}": content(figure) for key, figure in drawn.items()}
