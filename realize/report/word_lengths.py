"""The answer of `realize words`, for people and for scripts; apart, because it loads what integers need."""

from __future__ import annotations

from realize.algebra.expression import exact_text
from realize.algebra.irrational import pi
from realize.arithmetic.integer import IntegerRealization
from realize.arithmetic.integer.quiet import Quiet, SectionCycles
from realize.design.schedule import nominal_note
from realize.quantity import format_engineering
from realize.report.documents import Document, check_document
from realize.report.documents import heading as document_heading
from realize.report.paragraphs import bullets, figures_table, heading, wrapped
from realize.words import FloatWords, Row, StructureWords, Words

#: What heads the table: three lines a column.
_HEAD = (
    ("structure", "", ""),
    ("word/", "sum", "bits"),
    ("pole", "shift", "%"),
    ("over-", "shoot", "points"),
    ("gain", "error", "%"),
    ("error", "proven", "counts"),
    ("r.m.s.", "expected", "counts"),
    ("dead-", "band", "counts"),
    ("limit", "cycle", "counts"),
    ("mult.", "", ""),
    ("state", "", "bytes"),
)

#: Checks whose figure has a column.
_FIGURES = ("pole shift", "step overshoot", "low-frequency gain")


def words_text(found: Words) -> str:
    """The screen of `realize words`."""
    design, comparison = found.comparison.design, found.comparison
    rate = format_engineering(float(1 / comparison.period_s), "Hz")
    counts = found.interface
    why = "as the design names it" if design.method != "auto" else "recommended for unrounded numbers"
    setting = (
        f"{found.method} ({why}) at {rate}; input from {counts.input.low} to {counts.input.high} counts, output from "
        f"{counts.output.low} to {counts.output.high}"
    )
    head = [["", *(words[i] for words in _HEAD)] for i in range(3)]
    rows = [["yes" if row.acceptable else "no", *_cells(row)] for row in found.rows]
    blocks = [
        wrapped(f"{'yes' if found.recommended else 'no'}: {design.name}: {_answer(found)}."),
        "".join(wrapped(line, indent="  ") for line in (setting, *nominal_note(design))),
        figures_table(head, rows, first=2) + wrapped(_KEY),
        heading("Shortest words") + bullets(_needs(each) for each in found.structures),
    ]
    reasons = [f"{row.structure} in {row.widths.bits} bits: {_reason(row)}" for row in found.rows if not row.acceptable]
    reasons += [f"{name}: {reason}" for name, reason in found.refused.items()]
    blocks += [heading("Why not") + bullets(reasons)] if reasons else []
    blocks.append(heading("In floating point") + bullets(_float_words(each) for each in found.floats))
    # What is chosen for the nominal values need not suit the points of a schedule.
    if found.recommended and design.schedule is None:
        blocks.append(heading("To take it, in the design file") + _lines_to_add(found))
    return "\n".join(blocks)


def _lines_to_add(found: Words) -> str:
    assert found.recommended is not None
    bits, structure = found.recommended.widths.bits, found.recommended.structure
    return f'[target]\narithmetic = "int{bits}"\nstructure = "{structure}"\n\n[method]\nname = "{found.method}"\n'


def _float_words(each: FloatWords) -> str:
    if each.refused:
        return f"{each.arithmetic}: {each.refused}"
    verdict = f"{', '.join(each.out)} out of tolerance" if each.out else "within every tolerance"
    if each.smallest_answered is None:
        answer = "no count of input is answered"
    else:
        answer = f"the smallest input that is answered is {_count(each.smallest_answered, 'count')}"
    return f"{each.arithmetic}, structure {each.structure}: {verdict}; {answer}"


_KEY = (
    "Figures of pole, overshoot and gain are differences between stored numbers and design. The error is that of the "
    "output through rounding: proven, and to be expected. The deadband is in counts of the input (the largest that is "
    "never answered), everything else in counts of the output; <= where less may be true, - where there is no figure."
)


def _answer(found: Words) -> str:
    row = found.recommended
    if row is None:
        return "no structure is within every tolerance in 16 or 32 bits; float32 needs none of this"
    assert row.realization is not None
    program = row.realization.program
    return (
        f'arithmetic = "int{row.widths.bits}" with structure = "{row.structure}" is the cheapest that is within every '
        f"tolerance: {_count(program.multiplications, 'multiplication')} and {program.state_bytes} bytes of state a "
        f"sample, sums of sections in {row.widths.accumulator_bits} bits"
    )


def _count(n: int, what: str) -> str:
    return f"{n} {what}{'' if n == 1 else 's'}"


def _cells(row: Row) -> list[str]:
    name, widths = row.structure, f"{row.widths.bits}/{row.widths.accumulator_bits}"
    stored = row.realization
    if stored is None:
        return [name, widths, *["-"] * (len(_HEAD) - 2)]
    return [
        name,
        widths,
        *(_figure(row.difference(check)) + ("!" if check in row.out else "") for check in _FIGURES),
        _figure(float(stored.proof.output_error)) + ("!" if "round-off" in row.out else ""),
        _figure(stored.proof.rms_error),
        *_quiet(row),
        str(stored.program.multiplications),
        str(stored.program.state_bytes),
    ]


def _quiet(row: Row) -> list[str]:
    """The smallest input that is answered, of both signs the larger, and the largest cycle."""
    if row.quiet is None:
        return ["-", "-"]
    return [deadband_text(row.quiet), cycle_text(row.quiet)]


def deadband_text(found: Quiet) -> str:
    """Counts of input that are not answered; ``<=`` where fewer may be."""
    sides = [side for side in (found.positive, found.negative) if side.counts is not None]
    if not sides:
        return "-"
    worst = max(sides, key=lambda side: side.counts or 0)
    assert worst.counts is not None
    return f"{'' if worst.exact or worst.counts == 1 else '<='}{worst.counts - 1}"


def cycle_text(found: Quiet) -> str:
    """Largest cycle at the output without input, in counts; ``<=`` where it is only bounded."""
    if found.rests_at_zero:
        return "0"
    return f"<={found.largest_output}" if found.searched_output is None else str(found.searched_output)


def _figure(value: float | None) -> str:
    return "-" if value is None else f"{value:.3g}"


def _needs(each: StructureWords) -> str:
    if each.smallest_bits is None:
        words = "32 bits are not within every tolerance"
    else:
        words = f"words from {each.smallest_bits} bits"
    if each.coefficient_bits is None:
        return f"{each.structure}: {words}; no coefficients up to 32 bits are"
    return f"{each.structure}: {words}; coefficients alone from {each.coefficient_bits} bits"


def _reason(row: Row) -> str:
    return row.refused or ", ".join(row.out) + " out of tolerance"


def words_document(found: Words) -> Document:
    """The answer of `realize words`."""
    row = found.recommended
    incoming, outgoing = found.interface
    return document_heading("words", found.comparison.design) | {
        "period_s": exact_text(found.comparison.period_s),
        "band_hz": float(found.comparison.band_rad_s / (2 * pi())),
        "input_counts": [incoming.low, incoming.high],
        "output_counts": [outgoing.low, outgoing.high],
        "method": found.method,
        "unsuited": dict(found.refused),
        "rows": [_row_document(each) for each in found.rows],
        "structures": [each._asdict() for each in found.structures],
        "floats": [each._asdict() | {"out": list(each.out)} for each in found.floats],
        "recommended": None
        if row is None
        else {
            "arithmetic": f"int{row.widths.bits}",
            "structure": row.structure,
            "accumulator_bits": row.widths.accumulator_bits,
        },
        "because": _answer(found),
    }


def _row_document(row: Row) -> Document:
    document: Document = {
        "structure": row.structure,
        "word_bits": row.widths.bits,
        "accumulator_bits": row.widths.accumulator_bits,
        "acceptable": row.acceptable,
        "refused": row.refused,
        "out": list(row.out),
        "checks": [check_document(check) for check in row.checks],
    }
    if row.realization is None or row.quiet is None:
        return document
    return document | _realized(row.realization, row.quiet)


def _cycles(each: SectionCycles) -> Document:
    bound = each.cycles.bound
    return {
        "section": each.section,
        "proven_bound_counts": None if bound is None else float(bound) * 2.0**-each.fraction_bits,
        "searched": each.cycles.searched,
        "amplitude_counts": None if each.cycles.amplitude is None else each.cycles.amplitude * 2.0**-each.fraction_bits,
        "period_samples": each.cycles.period,
    }


def _realized(stored: IntegerRealization, found: Quiet) -> Document:
    return {
        "smallest_answered_counts": {
            side: {"counts": answered.counts, "exact": answered.exact}
            for side, answered in (("positive", found.positive), ("negative", found.negative))
        },
        "integration": None if found.integration is None else found.integration._asdict(),
        "limit_cycles": [_cycles(each) for each in found.sections],
        "proven_error_counts": float(stored.proof.output_error),
        "expected_rms_counts": stored.proof.rms_error,
        "multiplications": stored.program.multiplications,
        "state_bytes": stored.program.state_bytes,
    }
