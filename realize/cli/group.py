"""The group that all commands belong to."""

from __future__ import annotations

import click

from realize.cli.manual import GROUP
from realize.version import VERSION


@click.group(
    context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100},
    epilog=GROUP,
)
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
