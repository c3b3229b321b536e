"""Mistakes in the command line, and errors of any kind, in the words of every other answer."""

from __future__ import annotations

import re

import click

from realize.cli.group import commands
from realize.cli.options import ARGUMENTS
from realize.errors import RealizeError

#: Columns of an error, where the terminal has as many; below the least, wrapping would only hide what is said.
_COLUMNS, _LEAST_COLUMNS = 100, 40


def error_text(error: RealizeError) -> str:
    """An error as the terminal shows it: wrapped, but what is quoted or to be pasted stays as it is."""
    from shutil import get_terminal_size

    width = max(_LEAST_COLUMNS, min(_COLUMNS, get_terminal_size((_COLUMNS, 24)).columns))
    lines = _wrapped("no: " if error.exit_status == 1 else "error: ", f"{error.where}: {error.found}", width)
    lines += [f"  {line}" for line in error.excerpt.splitlines()]
    lines += _wrapped("  allowed: ", error.allowed, width) if error.allowed else []
    lines += _wrapped("  try: ", error.advice, width) if error.advice else []
    return "\n".join(lines)


def _wrapped(label: str, text: str, width: int) -> list[str]:
    """The first line of a text, wrapped below its label; the others are lines to paste."""
    from textwrap import wrap

    first, *others = text.split("\n")
    rows = wrap(
        label + first,
        width,
        subsequent_indent=" " * len(label),
        break_long_words=False,
        break_on_hyphens=False,
    )
    return rows + others


def usage_error(error: click.ClickException, context: click.Context, given: list[str]) -> RealizeError:
    """Say what the option library found, in the words of every other error."""
    command, help_advice = context.command, f"{context.command_path} --help"
    names = [name for parameter in command.get_params(context) for name in parameter.opts if name.startswith("--")]
    if isinstance(error, click.MissingParameter) and error.param is not None:
        return _missing(error.param, command)
    if isinstance(error, click.NoSuchOption):
        return _unknown("option", error.option_name, names, context)
    if isinstance(error, click.BadOptionUsage):
        option = next(p for p in command.get_params(context) if error.option_name in p.opts)
        return _misused(error.option_name, option)
    if isinstance(command, click.Group):
        word = next((word for word in given if not word.startswith("-")), "")
        return _unknown("command", word, sorted(commands.commands), context)
    message = error.format_message().rstrip(".")
    usage = " ".join([context.command_path, *command.collect_usage_pieces(context)])
    advice = f"put what has blanks in quotes, or see {help_advice}"
    return RealizeError(context.command_path, message[:1].lower() + message[1:], usage, advice)


def _missing(parameter: click.Parameter, command: click.Command) -> RealizeError:
    """Answer an option or argument that has to be there, with the example of the command."""
    example = re.search(r"Example: (.*)", command.help or "")
    advice = example[1] if example else f"realize {command.name} --help"
    name = parameter.opts[0] if isinstance(parameter, click.Option) else (parameter.name or "").upper()
    return RealizeError(name, "nothing", _allowed(parameter), advice)


def _misused(name: str, option: click.Parameter) -> RealizeError:
    """Answer an option without its value, or a switch with one."""
    if isinstance(option, click.Option) and option.is_flag:
        return RealizeError(name, "a value", "no value: the option stands alone", f"write {name}")
    return RealizeError(name, "nothing", _allowed(option), f"write {name} {option.metavar}")


def _allowed(parameter: click.Parameter) -> str:
    text = parameter.help if isinstance(parameter, click.Option) else ARGUMENTS[parameter.name or ""]
    return (text or "")[:1].lower() + (text or "")[1:].rstrip(".")


def _unknown(kind: str, word: str, known: list[str], context: click.Context) -> RealizeError:
    from realize.algebra.expression.tokens import nearest, shown

    # Dashes would count as likeness.
    stem = nearest(word.lstrip("-"), (name.lstrip("-") for name in known))
    like = next((name for name in known if name.lstrip("-") == stem), None)
    advice = f"did you mean {like}?" if like else f"{context.command_path} --help"
    return RealizeError(context.command_path, f"the unknown {kind} {shown(word)}", ", ".join(known), advice)


def context_of(given: list[str]) -> click.Context:
    """The command that was meant, where the option library does not say."""
    name = command_of(given)
    top = click.Context(commands, info_name="realize")
    return click.Context(commands.commands[name], info_name=name, parent=top) if name else top


def command_of(given: list[str]) -> str:
    """The command that was given; empty where there was none."""
    return next((word for word in given if word in commands.commands), "")
