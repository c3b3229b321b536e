"""The commands on what was emitted."""

from __future__ import annotations

import sys

import click

from realize.cli.manual import MANUALS
from realize.cli.options import show
from realize.errors import RealizeError


@click.command(short_help="Compile the emitted code and run it against its vectors.", epilog=MANUALS["trial"])
@click.argument("record", metavar="RECORD")
@click.option("--on", default="host", show_default=True, metavar="CPU", help='Name of a processor, or "all".')
@click.option("--compiler", metavar="COMMAND", help='Own compiler, such as "gcc -O2 {sources} -o {output}".')
@click.option("--clock", metavar="QUANTITY", help='Clock of the processor, such as "48 MHz".')
@click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
def trial(record: str, on: str, compiler: str | None, clock: str | None, as_json: bool) -> None:
    """Compile the emitted code, run it on CPU against its vectors, and compare bit for bit.

    CPU is host, cortex-m0, cortex-m3, cortex-m4f, cortex-m7f, rv32imac, or all of them. Says what
    the code takes there: bytes, stack, and instructions per sample. The compiler and the emulator
    come with: pip install "realize[target]"

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
    show(trial_document(found, clock_hz) if as_json else trial_text(found, clock_hz))
    if not found.equal:
        sys.exit(1)


@click.command(short_help="Say whether what was emitted is still what the design calls for.", epilog=MANUALS["audit"])
@click.argument("record", metavar="RECORD")
@click.option("--design", metavar="FILE", help="Design file to hold against the design in the record.")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
def audit(record: str, design: str | None, as_json: bool) -> None:
    """Compute everything in RECORD anew and compare: files, coefficients, checks, and what scipy says.

    One line when nothing differs, else every difference in words. What the command line overrode at
    emission counts as a difference from the design file. The second opinion needs scipy:
    pip install "realize[audit]"

    \b
    Example: realize audit firmware/roller_gap.record.json --design roller_gap.toml
    """
    from realize.firmware.audit import audit as audit_record
    from realize.report.auditing import audit_document, audit_text

    found = audit_record(record, design)
    show(audit_document(found) if as_json else audit_text(found))
    if found.findings:
        sys.exit(1)


@click.command(short_help="Say what changed between two records.", epilog=MANUALS["differ"])
@click.argument("old", metavar="OLD")
@click.argument("new", metavar="NEW")
@click.option("--json", "as_json", is_flag=True, help="Print one JSON document and nothing else.")
def differ(old: str, new: str, as_json: bool) -> None:
    """Say what changed between two records, in engineering terms: for a review.

    Gains, poles, margins, words, checks, files and all else.

    \b
    Example: realize differ released/roller_gap.record.json firmware/roller_gap.record.json
    """
    from realize.firmware.differ import differ as differ_records
    from realize.report.differing import differ_document, differ_text

    found = differ_records(old, new)
    show(differ_document(found, old, new) if as_json else differ_text(found))
    if found.rows:
        sys.exit(1)
