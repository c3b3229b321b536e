"""What `realize report` says when it is done, for people and for scripts."""

from __future__ import annotations

from collections.abc import Sequence

from realize.design import Design
from realize.page.blocks import Page
from realize.report.documents import Document, heading
from realize.report.paragraphs import wrapped


def report_text(page: Page, paths: Sequence[str]) -> str:
    """The answer on the page, and the files."""
    return wrapped(f"{page.answer}: {page.verdict}") + "\nWritten\n" + "".join(f"  {path}\n" for path in paths)


def report_document(design: Design, page: Page, paths: Sequence[str]) -> Document:
    """The same for scripts; each figure with the words that stand for it."""
    return heading("report", design) | {
        "answer": page.answer,
        "verdict": page.verdict,
        "figures": [{"figure": d.key, "title": d.title, "alternative": d.alternative} for d in page.drawings],
        "written": list(paths),
    }
