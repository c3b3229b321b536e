"""Arguments and options that commands share, and what is made of them."""

from __future__ import annotations

import json
import sys
from collections.abc import Callable, Iterator
from typing import Any, TypeVar

import click

from realize.errors import RealizeError

Command = TypeVar("Command", bound=Callable[..., Any])

_METHOD_HELP = 'Name of a method, or "auto" for the recommended one.'

_RATE_OPTIONS = (
    click.option("--rate", metavar="QUANTITY", help='Sample rate, such as "2 kHz".'),
    click.option("--period", metavar="QUANTITY", help='Sample period, such as "500 us".'),
)

#: What an argument may be, by its name.
ARGUMENTS = {
    "design": "a design file (ends in .toml), - for one on standard input, or an expression in s",
    "name": "the name of the design to start, such as roller_gap",
    "record": "a record that realize emit wrote (ends in .record.json)",
    "old": "the record from before (ends in .record.json)",
    "new": "the record that is to take its place (ends in .record.json)",
}


def _required_unless_all(context: click.Context, argument: click.Parameter, given: tuple[str, ...]) -> tuple[str, ...]:
    """Ask for a design where no directory of them is given."""
    if not given and context.params.get("folder") is None:
        raise click.MissingParameter(ctx=context, param=argument)
    return given


_ONE_DESIGN = click.argument("design", metavar="DESIGN")

_SOME_DESIGNS = click.argument("design", metavar="[DESIGN]...", nargs=-1, callback=_required_unless_all)


def takes_design(
    command: Command, method_help: str = _METHOD_HELP, argument: Callable[[Command], Command] = _ONE_DESIGN
) -> Command:
    """Add the argument and the options that every command on a design shares."""
    options = (
        argument,
        click.option("--name", metavar="IDENTIFIER", help="Name of the emitted functions and files."),
        click.option("--method", metavar="METHOD", help=method_help),
        click.option(
            "--value", "values", multiple=True, metavar="NAME=NUMBER", help="Replace a value; may be repeated."
        ),
        click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else."),
    )
    for option in reversed(options):
        command = option(command)
    return command


def takes_design_and_one_method(command: Command) -> Command:
    """As :func:`takes_design`, for a command that looks at every method unless one is asked for."""
    return takes_design(command, 'Look at this method alone; by default, and with "auto", at every method.')


def takes_designs(command: Command) -> Command:
    """As :func:`takes_design`, for a command that takes several designs, or a directory of them."""
    return takes_design(command, argument=_SOME_DESIGNS)


def takes_rate(command: Command) -> Command:
    """Add the options of a command that works at one rate."""
    for option in reversed(_RATE_OPTIONS):
        command = option(command)
    return command


def load(design: str, options: dict[str, Any]) -> Any:
    """Read a design, with the overrides of the command line."""
    from realize.design import load_design

    return load_design(design, overrides(options))


def overrides(options: dict[str, Any]) -> Any:
    """What the command line says in place of the file."""
    from realize.design import Overrides

    return Overrides(
        options.get("rate"), options.get("period"), options["name"], options["method"], values_of(options["values"])
    )


def values_of(pairs: tuple[str, ...]) -> dict[str, str]:
    """Values of the command line, by name."""
    values = {}
    for pair in pairs:
        name, equals, text = pair.partition("=")
        if not (name and equals and text):
            raise RealizeError("--value", f"{pair!r}", "NAME=NUMBER", "--value kp=4.2")
        values[name.strip()] = text.strip()
    return values


def whole_number(text: str, where: str) -> int:
    """Read a whole number of a few digits."""
    from realize.algebra.expression.tokens import shown

    if not (text.isascii() and text.isdigit() and len(text) < 10):
        raise RealizeError(where, shown(text), "a whole number", f"{where} 60")
    return int(text)


def with_progress(length: int, label: str) -> Callable[[Iterator[Any]], Iterator[Any]]:
    """Pass results on one by one; on standard error a bar, or a line for each tenth where that is no terminal."""

    def bar(results: Iterator[Any]) -> Iterator[Any]:
        with click.progressbar(results, length=length, label=label, file=sys.stderr) as shown:
            yield from shown

    def lines(results: Iterator[Any]) -> Iterator[Any]:
        for done, result in enumerate(results, 1):
            if done * 10 // length > (done - 1) * 10 // length:
                click.echo(f"{label}: {done} of {length}", err=True)
            yield result

    return bar if sys.stderr.isatty() else lines


def show(content: Any) -> None:
    """Print a screen, or a document as JSON."""
    if isinstance(content, str):
        click.echo(content, nl=False)
    else:
        click.echo(json.dumps(content, indent=2, allow_nan=False))
