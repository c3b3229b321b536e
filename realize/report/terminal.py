"""What people read in the terminal: at most 100 columns, whole sentences, no colour needed.

Every screen starts with yes or no, then says why, then what to do. Figures have at most five significant
digits.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

from realize.algebra.expression.printing import format_transfer
from realize.algebra.roots import Root
from realize.design import Design
from realize.design.schedule import nominal_note
from realize.firmware.job import Emitted
from realize.quantity import format_engineering
from realize.realizability import Assessment
from realize.report.paragraphs import WIDTH, bullets, figures_table, heading, table, wrapped
from realize.report.sentences import (
    CAUTION,
    accepted_sentences,
    assessment_verdict,
    comparison_verdict,
    emission_verdict,
    margins_sentences,
    reasons,
    setting,
    stored_words,
    unshown,
)
from realize.report.tables import (
    LOOPS_KEY,
    METHODS_KEY,
    checks_rows,
    ledger_rows,
    loop_rows,
    loops_rows,
    loops_title,
    methods_rows,
    proposals_rows,
    roots_rows,
)
from realize.report.values import hz
from realize.rolloff import Proposal, rolloff_toml
from realize.workflow import Comparison, MethodResult

if TYPE_CHECKING:
    from realize.loop_design import LoopResult

#: Longest transfer function printed in lowest terms: beyond it the user's own text says more.
_LONGEST_TRANSFER = 400

#: Digits of the values in the table of checks, fewer where it is too wide for the screen.
_DIGITS = (5, 4, 3, 2)


def assess_text(design: Design, assessment: Assessment) -> str:
    """The screen of `realize assess`."""
    blocks = [wrapped(assessment_verdict(design, assessment)), _transfer_block(design, assessment)]
    blocks += _roots_block("Poles", assessment.transfer.poles), _roots_block("Zeros", assessment.transfer.zeros)
    if assessment.terms:
        blocks.append(heading("What makes it improper") + bullets(term.text for term in assessment.terms))
        blocks.append(_proposals_block(assessment.proposals) + bullets(margins_sentences(assessment)))
    notes = [*assessment.notes, *(_unmeasured(design) if assessment.terms else ()), *nominal_note(design)]
    if notes:
        blocks.append(heading("Notes") + bullets(notes))
    if assessment.proposals and design.rolloff is None:
        blocks.append(
            heading("To take the first proposal, add to the design file") + rolloff_toml(assessment.proposals[0])
        )
    return "\n".join(blocks)


def _unmeasured(design: Design) -> tuple[str, ...]:
    """Why the band edge is not the crossover around a measured plant."""
    if design.plant is None:
        return ()
    from realize.loop_design import unmeasured_crossover

    reason = unmeasured_crossover(design, design.transfer)
    return (f"the band edge is assumed: {reason}",) if reason else ()


def compare_text(comparison: Comparison) -> str:
    """The screen of `realize compare`."""
    blocks = [wrapped(comparison_verdict(comparison)), setting_text(comparison), _methods_block(comparison.methods)]
    blocks += [_loops_block(comparison)] if comparison.design.plant else []
    refused = [m for m in comparison.methods if m.refused]
    if refused:
        blocks.append(heading("Refused") + bullets(f"{m.method}: {m.refused}" for m in refused))
    if comparison.closest and comparison.closest.refused is None:
        blocks.append(_checks_block(comparison.closest, comparison.design))
    # What is chosen for the nominal values need not suit the points of a schedule.
    if comparison.design.method == "auto" and comparison.recommended and comparison.design.schedule is None:
        blocks.append(pin_text(comparison.recommended))
    return "\n".join(blocks)


def pin_text(method: str) -> str:
    """What to write to keep a method."""
    return heading("To pin the method, under [method]") + f'name = "{method}"\n'


def emit_text(emitted: Emitted, paths: Sequence[str]) -> str:
    """The screen of `realize emit`."""
    if emitted.schedule is not None:
        # Here, because a design without a schedule does not need it, and its start is short.
        from realize.report.scheduled import scheduled_text

        return scheduled_text(emitted.schedule, paths)
    comparison, chosen, design = emitted.comparison, emitted.chosen, emitted.comparison.design
    blocks = [wrapped(emission_verdict(comparison, chosen)), setting_text(comparison), _checks_block(chosen, design)]
    blocks.append(heading(f"Written ({stored_words(chosen, design)})") + "".join(f"  {path}\n" for path in paths))
    blocks += [pin_text(chosen.method)] if design.method == "auto" else []
    return "\n".join([*blocks, wrapped(CAUTION)])


def setting_text(comparison: Comparison) -> str:
    """Rate, band and roll-off: what every figure below rests on."""
    return "".join(wrapped(line, indent="  ") for line in setting(comparison))


def _transfer_block(design: Design, assessment: Assessment) -> str:
    reduced = format_transfer(assessment.transfer.numerator, assessment.transfer.denominator)
    lines = [design.transfer_text]
    if len(reduced) <= _LONGEST_TRANSFER and reduced != design.transfer_text:
        lines.append(f"= {reduced}")
    lines.append(f"relative degree {assessment.transfer.relative_degree}")
    return heading("Transfer function") + "".join(wrapped(line, indent="  ") for line in lines)


def _roots_block(title: str, roots: Sequence[Root]) -> str:
    return heading(title) + (table(roots_rows(roots).lines) if roots else "  none\n")


def _proposals_block(proposals: Sequence[Proposal]) -> str:
    why = (f"{p.placement}, order {p.order}: {reason}" for p in proposals[:1] for reason in p.reasons)
    return heading("Roll-off proposals, best first") + table(proposals_rows(proposals).lines) + bullets(why)


def _methods_block(methods: Sequence[MethodResult]) -> str:
    rows = methods_rows(methods)
    lines = rows.lines
    first = len(lines) - len(rows.cells)
    return figures_table(lines[:first], rows.cells, first=2) + wrapped(METHODS_KEY) + bullets(unshown(methods))


def _loops_block(comparison: Comparison) -> str:
    rows = loops_rows(comparison)
    if rows is None:
        return heading("In the loop") + "  no method has one\n"
    head = rows.lines[: -len(rows.cells)]
    return heading(loops_title(comparison)) + figures_table(head, rows.cells, first=2) + wrapped(LOOPS_KEY)


def _checks_block(result: MethodResult, design: Design) -> str:
    """The checks of one method, with as many digits as the screen is wide."""
    for digits in _DIGITS:
        rows = table(checks_rows(result, design, digits).lines)
        if max(map(len, rows.splitlines())) <= WIDTH:
            break
    block = heading(f"Checks of {result.method}") + rows + bullets(reasons(result))
    accepted = accepted_sentences(result)
    block += ("\n" + heading("Accepted deviations") + bullets(accepted)) if accepted else ""
    block += _loop_block(result.loop) if result.loop else ""
    return block + (heading("Notes") + bullets(result.notes) if result.notes else "")


def _loop_block(loop: LoopResult) -> str:
    """The loops before and after, and where the phase at the crossover went."""
    rows = loop_rows(loop)
    lines = table(rows.lines).splitlines()
    first = len(lines) - len(rows.cells)
    block = "\n" + "\n".join(lines[:first]) + "\n"
    each = len(rows.cells) // len(loop.entries)
    for i, entry in enumerate(loop.entries):
        title = [f"  case {entry['case']}:"] if entry["case"] else []
        block += "\n".join([*title, *lines[first + each * i : first + each * (i + 1)]]) + "\n"
    if loop.ledger is not None:
        at = hz(loop.ledger.w_rad_s)
        block += "\n" + heading(f"Phase at the crossover, {at}, against controller and plant alone")
        block += table(ledger_rows(loop).cells)
    if loop.jitter is not None:
        margin = format_engineering(loop.jitter.jitter_s, "s")
        block += wrapped(f"jitter margin {margin}: delay may vary by so much (sufficient, not necessary)", indent="  ")
    return block
