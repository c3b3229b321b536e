"""The command that writes the firmware's files, for one design or several."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterable
from pathlib import Path
from typing import Any

import click

from realize.cli.manual import MANUALS
from realize.cli.options import load, overrides, show, takes_designs, takes_rate, values_of, with_progress
from realize.errors import RealizeError


@click.command(short_help="Write the C files, the vectors and the record.", epilog=MANUALS["emit"])
@takes_rate
@takes_designs
@click.option("--all", "folder", metavar="DIR", is_eager=True, help="Emit every design file in DIR (*.toml).")
@click.option("--out", required=True, metavar="DIR", help="Directory for the files; made if missing.")
@click.option("--dependencies", metavar="FILE", help="Write the rule that make and ninja read into FILE.")
def emit(
    design: tuple[str, ...], folder: str | None, as_json: bool, out: str, dependencies: str | None, **options: Any
) -> None:
    """Do the whole job and write the C files, the vectors and the record: all or none.

    Give one DESIGN, several design files, or --all DIR in their place.

    A file whose content would stay the same is left alone, so that a build does not compile it
    again. A design with a [schedule] also has a table of coefficients, and NAME_at, which looks them
    up.

    Several design files are emitted side by side, each all or none: one that is refused does not
    stop the others. The exit status is then the worst of them. What overrides the file overrides
    each of them.

    \b
    Example: realize emit roller_gap.toml --out firmware
             realize emit --all designs --out firmware
    """
    if not out.strip():
        raise RealizeError("--out", "an empty name", "a directory for the files", "--out firmware, or --out . for here")
    if folder is None and len(design) == 1:
        _emit_one(design[0], as_json, out, dependencies, options)
    else:
        _emit_several(design, folder, as_json, out, dependencies, options)


def _emit_one(design: str, as_json: bool, out: str, dependencies: str | None, options: dict[str, Any]) -> None:
    from realize.design.schedule import refuse_overridden
    from realize.firmware.files import write_all
    from realize.firmware.job import emit as emit_design
    from realize.report.documents import emit_document
    from realize.report.terminal import emit_text

    loaded = load(design, options)
    refuse_overridden(loaded, values_of(options["values"]))
    rule = _rule(design, loaded, Path(out), dependencies)
    emitted = emit_design(loaded)
    paths = [str(path) for path in write_all(Path(out), emitted.files, rule(emitted.files))]
    if as_json:
        show(emit_document(emitted, paths))
    else:
        show(emit_text(emitted, paths))
        _tell_left_over(out, loaded.name, emitted.files)


def _emit_several(
    designs: tuple[str, ...],
    folder: str | None,
    as_json: bool,
    out: str,
    dependencies: str | None,
    options: dict[str, Any],
) -> None:
    from realize.firmware.batch import design_files, emit_all, exit_status
    from realize.report.several import several_document, several_text

    paths = design_files(designs, folder)
    if options["name"] is not None:
        raise RealizeError(
            "--name", "one name for several designs", "a name for one design", "write each name under [design]"
        )
    follow = with_progress(len(paths), "emit")
    found = emit_all(paths, Path(out), overrides(options), _rule_file(dependencies), follow=follow)
    show(several_document(found) if as_json else several_text(found, out))
    for result in found:
        if result.name and result.summary and not as_json:
            _tell_left_over(out, result.name, result.summary.files)
    if exit_status(found):
        sys.exit(exit_status(found))


def _tell_left_over(out: str, name: str, written: Iterable[str]) -> None:
    """Tell what a build that takes every file of the directory would take for a part of the design."""
    from realize.algebra.expression.tokens import printable
    from realize.firmware.files import left_over

    found = left_over(out, name, written)
    if found is not None:
        click.echo(f"left from an earlier emission: {printable(str(found))}; nothing includes it")


def _rule(
    argument: str, design: Any, folder: Path, dependencies: str | None
) -> Callable[[Iterable[str]], dict[Path, str]]:
    """From the names of emitted files to the rule that makes them, if one is asked for; refused before any work."""
    path = _rule_file(dependencies)
    if path is None:
        return lambda _: {}
    from realize.firmware.dependencies import prerequisites, rule_text

    sources = prerequisites(argument, design)
    return lambda names: {path: rule_text([str(folder / name) for name in names], sources)}


def _rule_file(dependencies: str | None) -> Path | None:
    if dependencies is not None and not dependencies.strip():
        raise RealizeError("--dependencies", "an empty name", "a file for the rule", "--dependencies firmware.d")
    return None if dependencies is None else Path(dependencies)
