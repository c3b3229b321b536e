"""The page as one HTML file: no script, nothing from anywhere else."""

from __future__ import annotations

from importlib.resources import files

from jinja2 import Environment, StrictUndefined

from realize.page.blocks import Drawing, Page, Table
from realize.page.inline import inlined
from realize.page.plots.style import styled, svg_text
from realize.report.paragraphs import AGREED, OUT

#: Cells that are read at a glance, by the class that marks them.
_MARKED = {"yes": "good", "within": "good", "no": "bad", "out": "bad", "accepted": "agreed"}

#: Characters beyond which a cell may be wrapped within a word.
_LONG = 40


def html_text(page: Page) -> str:
    """The whole file."""
    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    template = environment.from_string((files("realize.page") / "page.html.jinja").read_text(encoding="utf-8"))
    text = template.render(page=page, svg=_svg, head=_head, kind=_kind, is_figure=_is_figure)
    return text.rstrip() + "\n"


def _svg(drawing: Drawing) -> str:
    with styled():
        figure = drawing.draw()
    return inlined(svg_text(figure), drawing.key, drawing.title, drawing.alternative)


def _head(table: Table) -> list[str]:
    """The words above each column in one line; none where there are no words."""
    words = [" ".join(filter(None, lines)).replace("- ", "") for lines in table.rows.head]
    return words if any(words) else []


def _kind(cell: str) -> str:
    """Class of a cell: what it says, that it is marked, or that it is long enough to be wrapped anywhere."""
    if cell.endswith((OUT, AGREED)) and len(cell) > 1:
        return "bad" if cell.endswith(OUT) else "agreed"
    return _MARKED.get(cell, "long" if len(cell) > _LONG else "")


def _is_figure(cell: str) -> bool:
    """Whether a cell is flush right."""
    return cell[:1].isdigit() or (cell[:1] in "-<>+" and len(cell) < 24)
