"""The page as one HTML file: no script, nothing from anywhere else."""

from __future__ import annotations

from importlib.resources import files

from jinja2 import Environment, StrictUndefined
from markupsafe import Markup

from realize.page.blocks import Drawing, Page, Table, one_line
from realize.page.inline import inlined
from realize.page.plots.style import styled, svg_text
from realize.report.paragraphs import AGREED, OUT

#: Cells that are read at a glance, by the class that marks them.
_MARKED = {"yes": "good", "within": "good", "no": "bad", "out": "bad", "accepted": "agreed"}

#: Characters that half a page holds beside each other.
_HALF_PAGE = 56

#: Characters beyond which a cell may be wrapped within a word.
_LONG = 40


def html_text(page: Page) -> str:
    """The whole file."""
    environment = Environment(autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True)
    template = environment.from_string((files("realize.page") / "page.html.jinja").read_text(encoding="utf-8"))
    text = template.render(
        page=page, svg=_svg, head=_head, flush_right=_flush_right, cell_class=_cell_class, is_broad=_is_broad
    )
    return text.rstrip() + "\n"


def _svg(drawing: Drawing) -> str:
    with styled():
        figure = drawing.draw()
    return inlined(svg_text(figure), drawing.key, drawing.title, drawing.alternative)


def _head(table: Table) -> list[str]:
    """The words above each column in one line; none where there are no words."""
    words = [one_line(lines) for lines in table.rows.head]
    return words if any(words) else []


def _flush_right(table: Table) -> list[bool]:
    """For each column whether it holds figures, most of it: then all of it is flush right."""
    columns = list(zip(*table.rows.cells, strict=True))
    return [bool(_head(table)) and 2 * sum(map(_is_figure, column)) > len(column) for column in columns]


def _cell_class(cell: str, flush_right: bool) -> Markup:
    """The class of a cell, as an attribute: marks are coloured, long texts may be broken anywhere."""
    names = ["figure"] if flush_right else []
    if cell.endswith((OUT, AGREED)) and len(cell) > 1:
        names.append("bad" if cell.endswith(OUT) else "agreed")
    elif cell in _MARKED:
        names.append(_MARKED[cell])
    elif len(cell) > _LONG:
        names.append("long")
    return Markup(' class="{}"').format(" ".join(names)) if names else Markup("")


def _is_figure(cell: str) -> bool:
    return cell[:1].isdigit() or (cell[:1] in "-<>+" and len(cell) < _LONG)


def _is_broad(table: Table) -> bool:
    """Whether half a page is too narrow for it."""
    columns = zip(*table.rows.cells, strict=True)
    return sum(max(map(len, column)) + 2 for column in columns) > _HALF_PAGE
