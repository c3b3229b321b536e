"""What a page is made of, before it is set in HTML or Markdown."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING, NamedTuple

from realize.report.tables import Rows

if TYPE_CHECKING:
    from matplotlib.figure import Figure


class Table(NamedTuple):
    """A table with its caption, and words below it; a head of empty words means there is none."""

    caption: str
    rows: Rows
    note: str = ""


class Drawing(NamedTuple):
    """A figure.

    Attributes
    ----------
    key : str
        Part of its file name and of its place in the page.
    title : str
    alternative : str
        What it shows, in words with figures.
    table : Table
        The numbers behind it.
    draw : callable
        Makes it.
    """

    key: str
    title: str
    alternative: str
    table: Table
    draw: Callable[[], Figure]


class Section(NamedTuple):
    """A part of the page: sentences, a list, a drawing, tables, text to paste; in this order, each may be missing."""

    key: str
    title: str
    sentences: tuple[str, ...] = ()
    items: tuple[str, ...] = ()
    drawings: tuple[Drawing, ...] = ()
    tables: tuple[Table, ...] = ()
    code: str = ""


class Page(NamedTuple):
    """A whole page.

    Attributes
    ----------
    name : str
        Of the design.
    about : str
        Its line for the header; may be empty.
    answer : str
        "yes" or "no".
    verdict : str
        The answer in one sentence, without that word.
    sections : tuple of Section
    caution : str
    """

    name: str
    about: str
    answer: str
    verdict: str
    sections: tuple[Section, ...]
    caution: str

    @property
    def drawings(self) -> tuple[Drawing, ...]:
        """Every figure, in the order of the page."""
        return tuple(drawing for section in self.sections for drawing in section.drawings)


def pairs(caption: str, items: list[tuple[str, str]]) -> Table:
    """A table of names and what belongs to them."""
    return Table(caption, Rows((("",), ("",)), [list(item) for item in items]))


def one_line(words: tuple[str, ...]) -> str:
    """What stands above a column, its lines joined; a word that was parted is whole again."""
    return " ".join(filter(None, words)).replace("- ", "")
