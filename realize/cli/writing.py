"""The commands that write what is not for the firmware: the page, a starter, a schema."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from realize.cli.manual import MANUALS
from realize.cli.options import load, show, takes_design, takes_rate
from realize.errors import RealizeError


@click.command(
    short_help="Write one page about a design: verdict, methods, figures, numbers.", epilog=MANUALS["report"]
)
@takes_rate
@takes_design
@click.option("--out", metavar="FILE.html", help="The page.")
@click.option("--figures", metavar="DIR", help="Write each figure as a file into DIR, too.")
@click.option("--figure-type", default="svg", show_default=True, metavar="TYPE", help="svg or png.")
@click.option("--markdown", is_flag=True, help="Print the same as Markdown, for a review comment.")
def report(
    design: str, as_json: bool, out: str | None, figures: str | None, figure_type: str, markdown: bool, **options: Any
) -> None:
    """Write one self-contained page about DESIGN: verdict, methods, figures with their numbers.

    The page opens from disk, needs nothing else, follows a dark screen, and prints on A4. It is
    written whether or not the design can be emitted, and says so. Needs the packages that draw:
    pip install "realize[report]"

    \b
    Example: realize report roller_gap.toml --out roller_gap.html
             realize report roller_gap.toml --figures figures --figure-type png
             realize report roller_gap.toml --markdown > review.md
    """
    from realize.firmware.files import write_all
    from realize.page.answer import report_document, report_text
    from realize.page.job import Report, page_path

    if not (out or figures or markdown):
        raise RealizeError("realize report", "nothing to write", "--out, --figures or --markdown", "--out page.html")
    page = None if out is None else page_path(out)
    made = Report(load(design, options))
    drawn = {} if figures is None else made.figures(figure_type)
    contents = ({} if page is None else {page: made.html}) | {Path(figures or "", name): c for name, c in drawn.items()}
    if contents:
        write_all(next(iter(contents)).parent, {}, contents)
    paths = [str(path) for path in contents]
    if as_json:
        show(report_document(made.design, made.page, paths) | ({"markdown": made.markdown} if markdown else {}))
        return
    show(made.markdown if markdown else report_text(made.page, paths))
    if markdown and paths:
        click.echo(report_text(made.page, paths), nl=False, err=True)


@click.command(short_help="Write NAME.toml, a commented starter design.", epilog=MANUALS["new"])
@click.argument("name")
def new(name: str) -> None:
    """Write NAME.toml, a commented starter design that `realize emit` accepts as it is.

    Never overwrites a file.

    \b
    Example: realize new roller_gap
             realize emit roller_gap.toml --out firmware
    """
    from realize.firmware.files import write_new
    from realize.starter import SCHEMA_FILE, starter_text

    path = Path(f"{name}.toml")
    write_new(path, starter_text(name))
    click.echo(f"yes: wrote {path}. Next: realize emit {path} --out firmware")
    click.echo(f"For an editor that checks it: realize schema design --out {SCHEMA_FILE}")


@click.command(short_help="Print the schema of the design file or of a JSON document.", epilog=MANUALS["schema"])
@click.argument("document", metavar="[NAME]", required=False)
@click.option("--out", metavar="FILE", help="Write the schema into FILE instead.")
def schema(document: str | None, out: str | None) -> None:
    """Print the JSON Schema (draft 2020-12) of what NAME stands for; without NAME, list what has one.

    An editor that knows TOML and is given the schema of the design file completes its keys, shows
    units and defaults, and marks what is not allowed.

    \b
    Example: realize schema design --out realize-design.schema.json
             realize schema compare
    """
    from realize.firmware.files import write_all
    from realize.report.paragraphs import table
    from realize.schemas import NAMES, schema_text, title

    if document is None and out is not None:
        raise RealizeError("NAME", "nothing", ", ".join(NAMES), f"realize schema design --out {out}")
    if document is None:
        show(table([[name, title(name)] for name in NAMES]))
    elif out is None:
        show(schema_text(document))
    else:
        path = Path(out)
        text = schema_text(document)
        if not path.name:
            raise RealizeError("--out", "no name of a file", "a file for the schema", "--out NAME.schema.json")
        write_all(path.parent, {path.name: text})
        click.echo(f"yes: wrote {path}")
