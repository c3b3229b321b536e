"""The page for a review comment: the same words and tables in Markdown, figures named by what they show."""

from __future__ import annotations

from realize.page.blocks import Page, Section, Table, one_line

#: Characters that Markdown would take for its own.
_SPECIAL = str.maketrans({c: f"\\{c}" for c in "\\`*_[]<>|#~"})


def markdown_text(page: Page) -> str:
    """The whole comment."""
    title = f"{page.name}: {page.about}" if page.about else page.name
    blocks = [f"## {_plain(title)}", f"**{page.answer}**: {_plain(page.verdict)}"]
    for section in page.sections:
        blocks += _section(section)
    blocks.append(f"> **Caution.** {_plain(page.caution)}")
    return "\n\n".join(blocks) + "\n"


def _section(section: Section) -> list[str]:
    blocks = [f"### {_plain(section.title)}", *map(_plain, section.sentences)]
    if section.items:
        blocks.append("\n".join(f"- {_plain(item)}" for item in section.items))
    blocks += [f"*{_plain(drawing.title)}.* {_plain(drawing.alternative)}" for drawing in section.drawings]
    for table in section.tables:
        blocks += _table(table)
    if section.code:
        blocks += ["To take the first proposal, add to the design file:", f"```toml\n{section.code.rstrip()}\n```"]
    return blocks


def _table(table: Table) -> list[str]:
    """Caption, then the table; Markdown has no table without a head, so an empty one stands where there is none."""
    head = [_plain(one_line(words)) for words in table.rows.head]
    rows = [head, ["---"] * len(head), *([_plain(cell) for cell in row] for row in table.rows.cells)]
    lines = "\n".join(f"| {' | '.join(row)} |" for row in rows)
    return [f"**{_plain(table.caption)}**", lines, *([_plain(table.note)] if table.note else [])]


def _plain(text: str) -> str:
    return text.translate(_SPECIAL)
