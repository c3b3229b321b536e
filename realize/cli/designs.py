"""The commands that look at a design and write nothing."""

from __future__ import annotations

import sys
from typing import Any

import click

from realize.cli.manual import MANUALS
from realize.cli.options import (
    load,
    show,
    takes_design,
    takes_design_and_one_method,
    takes_rate,
    whole_number,
    with_progress,
)


@click.command(short_help="Say whether DESIGN is realizable, and what is not.", epilog=MANUALS["assess"])
@takes_rate
@takes_design
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

    loaded = load(design, options)
    assessment = assess_design(loaded)
    show(assess_document(loaded, assessment) if as_json else assess_text(loaded, assessment))


@click.command(short_help="Put every method side by side at one rate.", epilog=MANUALS["compare"])
@takes_rate
@takes_design
def compare(design: str, as_json: bool, **options: Any) -> None:
    """Put every method side by side at the chosen rate, with what it did to the design.

    \b
    Example: realize compare "5*(0.2*s + 1)/(0.02*s + 1)" --rate "200 Hz"
    """
    from realize.report.documents import compare_document
    from realize.report.terminal import compare_text
    from realize.workflow import compare as compare_methods

    comparison = compare_methods(load(design, options))
    show(compare_document(comparison) if as_json else compare_text(comparison))
    if not comparison.acceptable:
        sys.exit(1)


@click.command(short_help="Find the lowest rate each method can live with.", epilog=MANUALS["rates"])
@takes_design_and_one_method
@click.option("--from", "low", metavar="QUANTITY", help="Lowest rate; by default 4 times the crossover or band.")
@click.option("--to", "high", metavar="QUANTITY", help="Highest rate; by default 200 times the crossover or band.")
@click.option("--points", default="60", show_default=True, metavar="N", help="Rates on the logarithmic grid.")
def rates(design: str, as_json: bool, low: str | None, high: str | None, points: str, **options: Any) -> None:
    """Find the lowest rate that each method can live with, over a range of rates.

    A method's rate is the lowest from which all higher ones in the range pass every check. The
    design's own rate is not needed, and a method that the design file names does not hide the
    others: --method does. Progress goes to standard error: a bar on a terminal, else a line for
    each tenth.

    \b
    Example: realize rates roller_gap.toml --from "200 Hz" --to "20 kHz"
             realize rates roller_gap.toml --method bilinear
    """
    from realize.quantity import parse_quantity
    from realize.rates import rates as over_rates
    from realize.report.range_of_rates import rates_document, rates_text

    ends = [parse_quantity(end, "rate", key) if end else None for end, key in ((low, "--from"), (high, "--to"))]
    count = whole_number(points, "--points")
    loaded = load(design, options)
    only = options["method"] if options["method"] != "auto" else None
    found = over_rates(
        loaded, low_hz=ends[0], high_hz=ends[1], points=count, only=only, follow=with_progress(count, "rates")
    )
    show(rates_document(found) if as_json else rates_text(found))


@click.command(short_help="Put structures and word lengths of integers side by side.", epilog=MANUALS["words"])
@takes_rate
@takes_design
def words(design: str, as_json: bool, **options: Any) -> None:
    """Put structures and word lengths side by side: what integers of 16 and 32 bits do to DESIGN.

    Needs range and per_count of both signals; the arithmetic that the design names does not matter.

    \b
    Example: realize words roller_gap.toml
    """
    from realize.report.word_lengths import words_document, words_text
    from realize.words import words as over_words

    found = over_words(load(design, options))
    show(words_document(found) if as_json else words_text(found))
    if found.recommended is None:
        sys.exit(1)
