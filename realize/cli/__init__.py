"""The commands: options in, text or JSON out, exit status. No mathematics here."""

from __future__ import annotations

import gc
import os
import sys

import click

from realize.cli.designs import assess, compare, rates, words
from realize.cli.emission import emit
from realize.cli.group import commands
from realize.cli.mistakes import command_of, context_of, error_text, usage_error
from realize.cli.options import show
from realize.cli.records import audit, differ, trial
from realize.cli.writing import new, report, schema
from realize.errors import RealizeError, internal

__all__ = ["commands", "main"]

#: Net allocations between two collections of cycles.
_COLLECT_EVERY = 200_000

for _command in (assess, audit, compare, differ, emit, new, rates, report, schema, trial, words):
    commands.add_command(_command)


def main(arguments: list[str] | None = None) -> None:
    """Run a command; turn every error into one clear message and an exit status."""
    given = sys.argv[1:] if arguments is None else arguments
    # A command lives for a second and makes few cycles: collecting them at the usual pace costs a tenth of the start.
    gc.set_threshold(_COLLECT_EVERY)
    try:
        commands.main(given, prog_name="realize", standalone_mode=False, color=_color())
    except RealizeError as error:
        _fail(error, given)
    except click.ClickException as error:
        _usage(error, given)
    except (click.Abort, KeyboardInterrupt):
        click.echo("stopped: nothing was written", err=True)
        sys.exit(130)
    except BrokenPipeError:
        # The reader has what it wanted; what is left in the buffer has nowhere to go.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    except Exception as error:  # whatever the user typed, the answer is a sentence
        _fail(internal(error), given)


def _color() -> bool | None:
    """Whether to keep colour codes: never under NO_COLOR, else as the terminal allows."""
    return False if os.environ.get("NO_COLOR") else None


def _fail(error: RealizeError, given: list[str]) -> None:
    if "--json" in given:
        from realize.report.documents import error_document

        show(error_document(command_of(given), error))
    else:
        click.echo(error_text(error), err=True)
    sys.exit(error.exit_status)


def _usage(error: click.ClickException, given: list[str]) -> None:
    """Answer a mistake in the command line; no command at all is a question for help."""
    if not given:
        error.show()
        sys.exit(error.exit_code)
    context = getattr(error, "ctx", None) or context_of(given)
    _fail(usage_error(error, context, given), given)
