"""The commands: options in, text or JSON out, exit status. No mathematics here."""

from __future__ import annotations

import gc
import json
import os
import re
import sys
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path
from typing import Any, TypeVar

import click

from realize.errors import RealizeError
from realize.version import VERSION

Command = TypeVar("Command", bound=Callable[..., Any])

#: Columns of an error, where the terminal has as many; below the least, wrapping would only hide what is said.
_COLUMNS, _LEAST_COLUMNS = 100, 40

#: Net allocations between two collections of cycles.
_COLLECT_EVERY = 200_000

_METHOD_HELP = 'Name of a method, or "auto" for the recommended one.'

_RATE_OPTIONS = (
    click.option("--rate", metavar="QUANTITY", help='Sample rate, such as "2 kHz".'),
    click.option("--period", metavar="QUANTITY", help='Sample period, such as "500 us".'),
)

#: What an argument may be, by its name.
_ARGUMENTS = {
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
_SOME_DESIGNS = click.argument("design", metavar="DESIGN...", nargs=-1, callback=_required_unless_all)


def _takes_design(
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


def _takes_design_and_one_method(command: Command) -> Command:
    """As :func:`_takes_design`, for a command that looks at every method unless one is asked for."""
    return _takes_design(command, 'Look at this method alone; by default, and with "auto", at every method.')


def _takes_designs(command: Command) -> Command:
    """As :func:`_takes_design`, for a command that takes several designs, or a directory of them."""
    return _takes_design(command, argument=_SOME_DESIGNS)


def _takes_rate(command: Command) -> Command:
    """Add the options of a command that works at one rate."""
    for option in reversed(_RATE_OPTIONS):
        command = option(command)
    return command


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(VERSION, prog_name="realize")
def commands() -> None:
    """Turn a transfer function in s into difference-equation code that the firmware can trust.

    DESIGN is a design file (ends in .toml), - for one on standard input, or an expression in s.

    \b
    Start with a file of your own:    realize new roller_gap
    Is it realizable at all?          realize assess roller_gap.toml
    What does each method make of it? realize compare roller_gap.toml
    Which rate does it really need?   realize rates roller_gap.toml
    Which integers would do?          realize words roller_gap.toml
    Write the firmware files:         realize emit roller_gap.toml --out firmware
    And those of many designs:        realize emit --all designs --out firmware
    Put all of it on one page:        realize report roller_gap.toml --out roller_gap.html
    Run them on the processor:        realize trial firmware/roller_gap.record.json --on all
    Are they still what they should?  realize audit firmware/roller_gap.record.json
    What changed between two records? realize differ old.record.json new.record.json
    Let an editor check the file:     realize schema design --out realize-design.schema.json
    """


@commands.command(short_help="Say whether DESIGN is realizable, and what is not.")
@_takes_rate
@_takes_design
def assess(design: str, as_json: bool, **options: Any) -> None:
    """Say whether DESIGN is realizable, which terms are not, and what would make it so.

    \b
    Example: realize assess "4.2 + 18/s + 0.09*s" --rate "2 kHz"
    Lists poles and zeros, names 0.09*s as the term that needs the future, and proposes
    roll-off poles with their price: phase, noise, converter steps.
    """
    from realize.report.documents import assess_document
    from realize.report.terminal import assess_text
    from realize.workflow import assess_design

    loaded = _load(design, options)
    assessment = assess_design(loaded)
    _print(assess_document(loaded, assessment) if as_json else assess_text(loaded, assessment))


@commands.command(short_help="Put every method side by side at one rate.")
@_takes_rate
@_takes_design
def compare(design: str, as_json: bool, **options: Any) -> None:
    """Put every method side by side at the chosen rate, with what it did to the design.

    Exit status 0 when the named or the recommended method is acceptable, else 1.

    \b
    Example: realize compare "5*(0.2*s + 1)/(0.02*s + 1)" --rate "200 Hz"
    """
    from realize.report.documents import compare_document
    from realize.report.terminal import compare_text
    from realize.workflow import compare as compare_methods

    comparison = compare_methods(_load(design, options))
    _print(compare_document(comparison) if as_json else compare_text(comparison))
    if not comparison.acceptable:
        sys.exit(1)


@commands.command(short_help="Find the lowest rate each method can live with.")
@_takes_design_and_one_method
@click.option("--from", "low", metavar="QUANTITY", help="Lowest rate; by default 4 times the crossover or band.")
@click.option("--to", "high", metavar="QUANTITY", help="Highest rate; by default 200 times the crossover or band.")
@click.option("--points", default="60", show_default=True, metavar="N", help="Rates on the logarithmic grid.")
def rates(design: str, as_json: bool, low: str | None, high: str | None, points: str, **options: Any) -> None:
    """Find the lowest rate that each method can live with, over a range of rates.

    A method's rate is the lowest from which all higher ones in the range pass every check. The
    design's own rate is not needed, and a method that the design file names does not hide the
    others: --method does. Progress goes to standard error: a bar on a terminal, else a line for
    each tenth. Exit status 0 whether or not a method has such a rate; 2 when the design has an error
    that no rate mends.

    \b
    Example: realize rates roller_gap.toml --from "200 Hz" --to "20 kHz"
             realize rates roller_gap.toml --method bilinear
    """
    from realize.quantity import parse_quantity
    from realize.rates import rates as over_rates
    from realize.report.range_of_rates import rates_document, rates_text

    ends = [parse_quantity(end, "rate", key) if end else None for end, key in ((low, "--from"), (high, "--to"))]
    count = _count(points, "--points")
    loaded = _load(design, options)
    only = options["method"] if options["method"] != "auto" else None
    found = over_rates(
        loaded, low_hz=ends[0], high_hz=ends[1], points=count, only=only, follow=_with_progress(count, "rates")
    )
    _print(rates_document(found) if as_json else rates_text(found))


def _count(text: str, where: str) -> int:
    """Read a whole number of a few digits."""
    from realize.algebra.expression.tokens import shown

    if not (text.isascii() and text.isdigit() and len(text) < 10):
        raise RealizeError(where, shown(text), "a whole number", f"{where} 60")
    return int(text)


def _with_progress(length: int, label: str) -> Callable[[Iterator[Any]], Iterator[Any]]:
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


@commands.command(short_help="Put structures and word lengths of integers side by side.")
@_takes_rate
@_takes_design
def words(design: str, as_json: bool, **options: Any) -> None:
    """Put structures and word lengths side by side: what integers of 16 and 32 bits do to DESIGN.

    Needs range and per_count of both signals; the arithmetic that the design names does not matter.
    Exit status 0 when there is a structure that is within every tolerance, else 1.

    \b
    Example: realize words roller_gap.toml
    """
    from realize.report.word_lengths import words_document, words_text
    from realize.words import words as over_words

    found = over_words(_load(design, options))
    _print(words_document(found) if as_json else words_text(found))
    if found.recommended is None:
        sys.exit(1)


@commands.command(short_help="Write the C files, the vectors and the record.")
@_takes_rate
@_takes_designs
@click.option("--all", "folder", metavar="DIR", is_eager=True, help="Emit every design file in DIR (*.toml).")
@click.option("--out", required=True, metavar="DIR", help="Directory for the files; made if missing.")
@click.option("--dependencies", metavar="FILE", help="Write the rule that make and ninja read into FILE.")
def emit(
    design: tuple[str, ...], folder: str | None, as_json: bool, out: str, dependencies: str | None, **options: Any
) -> None:
    """Do the whole job and write the C files, the vectors and the record: all or none.

    Refused with exit status 1 when the design is improper, unstable or out of tolerance. A file
    whose content would stay the same is left alone, so that a build does not compile it again.
    A design with a [schedule] also has a table of coefficients, and NAME_at, which looks them up.

    Several design files are emitted side by side, each all or none: one that is refused does not
    stop the others. The exit status is then the worst of them: 0 when all are written, 1 when one is
    refused, 2 when one has an error. What overrides the file overrides each of them.

    \b
    Example: realize emit roller_gap.toml --out firmware
    Writes firmware/roller_gap.h, .c, _selftest.c, _vectors.csv and
    .record.json; with a schedule, _schedule.h.
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

    loaded = _load(design, options)
    refuse_overridden(loaded, _values(options["values"]))
    rule = _rule(design, loaded, Path(out), dependencies)
    emitted = emit_design(loaded)
    paths = [str(path) for path in write_all(Path(out), emitted.files, rule(emitted.files))]
    if as_json:
        _print(emit_document(emitted, paths))
    else:
        _print(emit_text(emitted, paths))


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
    follow = _with_progress(len(paths), "emit")
    found = emit_all(paths, Path(out), _overrides(options), _rule_file(dependencies), follow=follow)
    _print(several_document(found) if as_json else several_text(found, out))
    if exit_status(found):
        sys.exit(exit_status(found))


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


@commands.command(short_help="Write one page about a design: verdict, methods, figures, numbers.")
@_takes_rate
@_takes_design
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
    made = Report(_load(design, options))
    drawn = {} if figures is None else made.figures(figure_type)
    contents = ({} if page is None else {page: made.html}) | {Path(figures or "", name): c for name, c in drawn.items()}
    if contents:
        write_all(next(iter(contents)).parent, {}, contents)
    paths = [str(path) for path in contents]
    if as_json:
        _print(report_document(made.design, made.page, paths) | ({"markdown": made.markdown} if markdown else {}))
        return
    _print(made.markdown if markdown else report_text(made.page, paths))
    if markdown and paths:
        click.echo(report_text(made.page, paths), nl=False, err=True)


@commands.command(short_help="Compile the emitted code and run it against its vectors.")
@click.argument("record", metavar="RECORD")
@click.option("--on", default="host", show_default=True, metavar="CPU", help='Name of a processor, or "all".')
@click.option("--compiler", metavar="COMMAND", help='Own compiler, such as "gcc -O2 {sources} -o {output}".')
@click.option("--clock", metavar="QUANTITY", help='Clock of the processor, such as "48 MHz".')
@click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
def trial(record: str, on: str, compiler: str | None, clock: str | None, as_json: bool) -> None:
    """Compile the emitted code, run it on CPU against its vectors, and compare bit for bit.

    CPU is host, cortex-m0, cortex-m3, cortex-m4f, cortex-m7f, rv32imac, or all of them. Says what
    the code takes there: bytes, stack, and instructions per sample. Exit status 1 at a difference.
    The compiler and the emulator come with: pip install "realize[target]"

    \b
    Example: realize trial firmware/roller_gap.record.json --on cortex-m0 --clock "48 MHz"
             realize trial firmware/roller_gap.record.json --compiler "gcc -O2 {sources} -o {output}"
    """
    from realize.quantity import parse_quantity
    from realize.report.on_target import trial_document, trial_text
    from realize.trial.run import trial as try_out

    clock_hz = None if clock is None else parse_quantity(clock, "rate", "--clock")
    if clock_hz is not None and clock_hz <= 0:
        raise RealizeError("--clock", clock or "", "a rate above zero", '--clock "48 MHz"')
    found = try_out(record, on, compiler)
    _print(trial_document(found, clock_hz) if as_json else trial_text(found, clock_hz))
    if not found.equal:
        sys.exit(1)


@commands.command(short_help="Say whether what was emitted is still what the design calls for.")
@click.argument("record", metavar="RECORD")
@click.option("--design", metavar="FILE", help="Design file to hold against the design in the record.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
def audit(record: str, design: str | None, as_json: bool) -> None:
    """Compute everything in RECORD anew and compare: files, coefficients, checks, and what scipy says.

    One line and exit status 0 when nothing differs; else every difference in words, and 1. What the
    command line overrode at emission counts as a difference from the design file. The second
    opinion needs scipy: pip install "realize[audit]"

    \b
    Example: realize audit firmware/roller_gap.record.json --design roller_gap.toml
    """
    from realize.firmware.audit import audit as audit_record
    from realize.report.auditing import audit_document, audit_text

    found = audit_record(record, design)
    _print(audit_document(found) if as_json else audit_text(found))
    if found.findings:
        sys.exit(1)


@commands.command(short_help="Say what changed between two records.")
@click.argument("old", metavar="OLD")
@click.argument("new", metavar="NEW")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
def differ(old: str, new: str, as_json: bool) -> None:
    """Say what changed between two records, in engineering terms: for a review.

    Gains, poles, margins, words, checks, files and all else. Exit status 0 when nothing differs, else 1.

    \b
    Example: realize differ released/roller_gap.record.json firmware/roller_gap.record.json
    """
    from realize.firmware.differ import differ as differ_records
    from realize.report.differing import differ_document, differ_text

    found = differ_records(old, new)
    _print(differ_document(found, old, new) if as_json else differ_text(found))
    if found.rows:
        sys.exit(1)


@commands.command(short_help="Write NAME.toml, a commented starter design.")
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


@commands.command(short_help="Print the schema of the design file or of a JSON document.")
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
        _print(table([[name, title(name)] for name in NAMES]))
    elif out is None:
        _print(schema_text(document))
    else:
        path = Path(out)
        text = schema_text(document)
        if not path.name:
            raise RealizeError("--out", "no name of a file", "a file for the schema", "--out NAME.schema.json")
        write_all(path.parent, {path.name: text})
        click.echo(f"yes: wrote {path}")


def _load(design: str, options: dict[str, Any]) -> Any:
    """Read a design, with the overrides of the command line."""
    from realize.design import load_design

    return load_design(design, _overrides(options))


def _overrides(options: dict[str, Any]) -> Any:
    from realize.design import Overrides

    return Overrides(
        options.get("rate"), options.get("period"), options["name"], options["method"], _values(options["values"])
    )


def _values(pairs: tuple[str, ...]) -> dict[str, str]:
    values = {}
    for pair in pairs:
        name, equals, text = pair.partition("=")
        if not (name and equals and text):
            raise RealizeError("--value", f"{pair!r}", "NAME=NUMBER", "--value kp=4.2")
        values[name.strip()] = text.strip()
    return values


def _print(content: Any) -> None:
    if isinstance(content, str):
        click.echo(content, nl=False)
    else:
        click.echo(json.dumps(content, indent=2, allow_nan=False))


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
        found = f"an error of realize itself, {type(error).__name__}: {error}"
        _fail(RealizeError("internal", found, "", "report it together with the design file"), given)


def _color() -> bool | None:
    """Whether to keep colour codes: never under NO_COLOR, else as the terminal allows."""
    return False if os.environ.get("NO_COLOR") else None


def _fail(error: RealizeError, given: list[str]) -> None:
    if "--json" in given:
        from realize.report.documents import error_document

        _print(error_document(_command_of(given), error))
    else:
        click.echo(_error_text(error), err=True)
    sys.exit(error.exit_status)


def _error_text(error: RealizeError) -> str:
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


def _usage(error: click.ClickException, given: list[str]) -> None:
    """Answer a mistake in the command line; no command at all is a question for help."""
    if not given:
        error.show()
        sys.exit(error.exit_code)
    context = getattr(error, "ctx", None) or _context_of(given)
    _fail(_usage_error(error, context, given), given)


def _usage_error(error: click.ClickException, context: click.Context, given: list[str]) -> RealizeError:
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
    text = parameter.help if isinstance(parameter, click.Option) else _ARGUMENTS[parameter.name or ""]
    return (text or "")[:1].lower() + (text or "")[1:].rstrip(".")


def _unknown(kind: str, word: str, known: list[str], context: click.Context) -> RealizeError:
    from realize.algebra.expression.tokens import nearest, shown

    # Dashes would count as likeness.
    stem = nearest(word.lstrip("-"), (name.lstrip("-") for name in known))
    like = next((name for name in known if name.lstrip("-") == stem), None)
    advice = f"did you mean {like}?" if like else f"{context.command_path} --help"
    return RealizeError(context.command_path, f"the unknown {kind} {shown(word)}", ", ".join(known), advice)


def _context_of(given: list[str]) -> click.Context:
    """The command that was meant, where the option library does not say."""
    name = _command_of(given)
    top = click.Context(commands, info_name="realize")
    return click.Context(commands.commands[name], info_name=name, parent=top) if name else top


def _command_of(given: list[str]) -> str:
    return next((word for word in given if word in commands.commands), "")
