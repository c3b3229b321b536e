"""``NAME.h``: where the code comes from, how it is called, what it does not protect from, and its types."""

from __future__ import annotations

from collections.abc import Mapping
from fractions import Fraction
from typing import TYPE_CHECKING

from realize.arithmetic.sample import BACK_CALCULATION, HOLD_INTEGRAL, Sample, variables
from realize.firmware.c_preamble import (
    CAUTION,
    Provenance,
    accepted_text,
    calls,
    counted,
    listed,
    loop_lines,
    loop_paragraph,
    paragraph,
    prototypes,
    provenance,
    range_text,
    signatures,
    skeleton,
    unprotected,
)
from realize.firmware.c_text import (
    LONGEST_EXACT,
    Dialect,
    comment,
    dialect,
    hexadecimal,
    integer_constant,
    number_text,
    own_set,
    wrapped,
)
from realize.firmware.emission import Emission

if TYPE_CHECKING:
    from realize.arithmetic.realization import AnySection


def header_text(emission: Emission, sample: Sample, stored: Mapping[str, float]) -> str:
    """The whole header.

    Parameters
    ----------
    emission : Emission
        What is emitted.
    sample : Sample
        The steps of a sample.
    stored : mapping
        Field name and value of every coefficient; used with ``coefficients = "table"``.
    """
    c = dialect(emission)
    declared = [
        *_state(c, sample),
        *(_table(c, emission, stored) if c.table else []),
        *_prototypes(c, emission, sample),
    ]
    preamble, period_s = _preamble(emission, sample), emission.realization.period_s
    return skeleton(c.name, preamble, period_s, limits=_limits(c, sample), declared=declared)


# ---------------------------------------------------------------- the first comment


def _preamble(emission: Emission, sample: Sample) -> list[str]:
    name = emission.name
    return [
        *wrapped(f"{name}.h - a difference equation, emitted by realize; its account is {name}.record.json"),
        "",
        *([*wrapped(emission.about), ""] if emission.about else []),
        *provenance(emission, _provenance(emission, sample)),
        "",
        *paragraph("Calls", calls(name)),
        *_schedule(emission),
        *paragraph("Feed-through", _feed_through(emission)),
        *paragraph("Arithmetic", _arithmetic()),
        *_loop(emission),
        *listed("Accepted deviations", [accepted_text(entry, emission.checks) for entry in emission.accepted]),
        *listed("Not protected", _unprotected(emission, sample)),
        *listed("Method notes", emission.notes),
        *paragraph("Caution", CAUTION)[:-1],
    ]


def _schedule(emission: Emission) -> list[str]:
    if emission.schedule is None:
        return []
    from realize.firmware.schedule.c_lookup import schedule_says

    return paragraph("Schedule", schedule_says(emission, emission.schedule))


def _loop(emission: Emission) -> list[str]:
    """The loops of the design, or of all points of its schedule."""
    entry = emission.schedule_entry
    if entry is None or entry["loop"] is None:
        return loop_lines(emission.loop)
    from realize.firmware.schedule.loop_text import scheduled_loop_entries

    return loop_paragraph(entry["loop"], scheduled_loop_entries(entry))


def _provenance(emission: Emission, sample: Sample) -> Provenance:
    return Provenance(
        structure=_structure(emission),
        arithmetic=f"{emission.realization.format.name}, every operation rounded once, to nearest",
        input=_input_text(emission),
        input_count=_count_text(emission.input_count, emission.input_unit),
        output=_output_text(emission, sample),
        output_count=_count_text(emission.output_count, emission.output_unit),
        more=(("anti-windup", _anti_windup(emission, sample)), ("input guard", _guard(emission))),
    )


def _structure(emission: Emission) -> str:
    realization = emission.realization
    sections = counted(len(realization.sections), "section")
    integrals = counted(len(realization.integral), "integral state")
    units = " in units of the output" if realization.integral else ""
    form = "transposed direct form II"
    if realization.structure == "delta":
        form += " of the operator delta = z - 1, so that each state adds up increments"
    return f"{realization.structure}: {sections} in {form}; {integrals}{units}"


def _input_text(emission: Emission) -> str:
    if emission.input_range is None:
        return f", in {emission.input_unit}" if emission.input_unit else ""
    return f"; range {range_text(emission.input_range, emission.input_unit)}, declared but not enforced"


def _output_text(emission: Emission, sample: Sample) -> str:
    unit = f", in {emission.output_unit}" if emission.output_unit else ""
    if emission.output_range is None:
        return f"{unit}; no range was given: nothing limits it"
    inside = "" if _is_stored_exactly(emission.output_range, sample) else ", rounded inward to the format"
    return f"; clamped to {range_text(emission.output_range, emission.output_unit)}{inside}"


def _count_text(count: tuple[Fraction, int] | None, unit: str) -> str | None:
    """The converter beside the code, which itself works in physical units."""
    if count is None:
        return None
    size, at_zero = count
    exact = str(size)
    figure = exact if len(exact) <= LONGEST_EXACT else number_text(size)
    zero = f"; count {at_zero} stands for 0" if at_zero else ""
    return f"1 count = {figure} {unit}".rstrip() + f"{zero}; converting is up to the caller"


def _is_stored_exactly(limits: tuple[Fraction, Fraction], sample: Sample) -> bool:
    assert sample.low is not None
    assert sample.high is not None
    return limits == (Fraction(sample.low), Fraction(sample.high))


def _anti_windup(emission: Emission, sample: Sample) -> str | None:
    if not emission.realization.integral:
        return None
    if emission.anti_windup == HOLD_INTEGRAL:
        return (
            "hold-integral: an integral state is not updated while the unclamped command exceeds what was applied "
            "and its increment pushes further out"
        )
    if emission.anti_windup == BACK_CALCULATION and emission.tracking_time_s is not None:
        tracking = number_text(emission.tracking_time_s)
        return f"back-calculation: the integral follows what was applied, tracking time {tracking} s"
    return "none: the integral goes on while the command is limited"


def _guard(emission: Emission) -> str:
    if emission.guard_nonfinite:
        return "an input that is NaN or infinite counts as the previous accepted input, 0 at first"
    return "none: an input that is NaN or infinite spoils the state until it is cleared"


def _feed_through(emission: Emission) -> str:
    sections = emission.realization.sections
    if sections and all(section.b[0] != 0 for section in sections):
        return (
            "direct: the command depends on the input of the same sample, so it must be computed between sampling "
            "and the actuator, and every delay there adds to the loop's."
        )
    return (
        "none: the command of a sample does not depend on the input of that sample; it can be computed before sampling."
    )


def _arithmetic() -> str:
    return (
        "results are the same, bit for bit, on every IEEE 754 processor that rounds to nearest and does not flush "
        "subnormal numbers to zero. Fast-math settings, wider evaluation and other float formats stop the "
        "compilation. Fused multiply-add is kept out: under gcc by its own optimize pragma, elsewhere (clang too) by "
        "the standard pragma. Do not give clang -ffp-contract=fast or a part of -ffast-math: the first overrides the "
        "pragma, the second cannot be seen by the preprocessor."
    )


def _unprotected(emission: Emission, sample: Sample) -> list[str]:
    everywhere = [emission.realization] if emission.schedule is None else emission.schedule.stored
    lively = [
        str(k)
        for k, _ in enumerate(emission.realization.sections, 1)
        if not all(_decays(each.sections[k - 1]) for each in everywhere)
    ]
    limits = [] if sample.low is not None else ["without an output range nothing limits the command"]
    undamped = [
        f"section {', '.join(lively)} has poles that do not decay (undamped or growing): such a pair is not protected "
        "from windup, the limit of the actuator notwithstanding"
    ]
    moving = [] if emission.schedule is None else [f"a {emission.schedule.variable} that moves fast, or is wrong"]
    return [
        *limits,
        *(undamped if lively else []),
        *unprotected(
            emission,
            "any finite input is taken as it is",
            follows_applied="applied" in variables(sample.advance),
        ),
        "finite inputs so large that a product overflows: the state stays infinite or NaN until it is cleared"
        + ("; the command stays within its limits (NaN counts as the low one)" if sample.low is not None else ""),
        *moving,
        "a null pointer, a state that was never cleared, two calls on one state at the same time",
    ]


def _decays(section: AnySection) -> bool:
    """Whether all poles lie inside the unit circle (Jury's conditions, exact on stored numbers)."""
    a1, a2 = (*section.in_z()[1], Fraction(0), Fraction(0))[:2]
    return abs(a2) < 1 and abs(a1) < 1 + a2


# ---------------------------------------------------------------- macros and types


def _limits(c: Dialect, sample: Sample) -> list[str]:
    if sample.low is None or sample.high is None:
        return []
    return [
        "/* The command never leaves these. */",
        f"#define {c.name}_OUTPUT_LOW {_limit(c, sample.low)}",
        f"#define {c.name}_OUTPUT_HIGH {_limit(c, sample.high)}",
        "",
    ]


def _limit(c: Dialect, value: float) -> str:
    whole = integer_constant(int(value)) if value.is_integer() else None
    if whole is not None:
        return whole
    text = f"({c.literal(value)})" if value < 0 else c.literal(value)
    return f"{text} /* {hexadecimal(value)} */"


def _state(c: Dialect, sample: Sample) -> list[str]:
    fields = [f"    {c.real} {field}; /* {_meaning(field)} */" for field in sample.fields]
    nothing = [f"    {c.real} unused; /* a static gain has nothing to remember */"]
    return ["typedef struct {", *(fields or nothing), f"}} {c.name}_state;", ""]


def _meaning(field: str) -> str:
    """What a state field holds, from its name."""
    known = {
        "accepted": "the last input that was finite",
        "unclamped": "command before the clamp, from output to advance",
        "command": "command after the clamp, from output to advance",
    }
    if field in known:
        return known[field]
    part, _, role = field.partition("_")
    kind, number = part.rstrip("0123456789"), part.lstrip("abcdefghijklmnopqrstuvwxyz")
    if role.endswith("rest"):
        return "what the last addition to it lost"
    if kind == "integral":
        return f"integral state {number}"
    if role == "output":
        return f"what section {number} hands on, from output to advance"
    return f"section {number}, state {role}"


def _table(c: Dialect, emission: Emission, stored: Mapping[str, float]) -> list[str]:
    scheduled = emission.schedule is not None
    own = "those of the first point of the schedule" if scheduled else "the design's own"
    fields = [f"    {c.real} {field};" for field in stored]
    says = wrapped(
        "Every multiplied coefficient. Those that are exactly 0, 1 or -1 are part of the code and not in the table. "
        "The gain of a section, and settled_bound and settled_floor, serve the preset and follow from the others."
    )
    return [
        *comment(says),
        "typedef struct {",
        *(fields or [f"    {c.real} unused; /* nothing is multiplied */"]),
        f"}} {c.name}_coefficients;",
        "",
        f"extern const {c.name}_coefficients {own_set(c.name, scheduled=scheduled)}; /* {own} */",
        "",
        *_lookup(c, emission, len(stored)),
    ]


def _lookup(c: Dialect, emission: Emission, count: int) -> list[str]:
    if emission.schedule is None:
        return []
    from realize.firmware.schedule.c_lookup import lookup_prototype

    return lookup_prototype(c, emission.schedule, count)


# ---------------------------------------------------------------- functions


def _prototypes(c: Dialect, emission: Emission, sample: Sample) -> list[str]:
    says = (
        "All state zero.",
        "One sample: the command for the input, then the state moved on with it.",
        _output_says(sample),
        _advance_says(emission, sample),
        _preset_says(emission),
    )
    return prototypes(c.name, signatures(c.name, c.real, c.real, table=c.table), says)


def _output_says(sample: Sample) -> str:
    clamped = "The clamped command" if sample.low is not None else "The command"
    return f"{clamped} for the input, with the least work before the actuator; the state does not move on yet."


def _advance_says(emission: Emission, sample: Sample) -> str:
    text = (
        "The rest of the sample, after output with the same input: applied is what the actuator was really given, "
        "in units of the command."
    )
    if "applied" not in variables(sample.advance):
        return f"{text} This design does not use it."
    guarded = " A value that is NaN or infinite counts as the command."
    return text + (guarded if emission.guard_nonfinite else "")


def _preset_says(emission: Emission) -> str:
    text = "Bumpless start: at rest at the input, with output as the next output. Returns 1 when that is possible; "
    if emission.realization.integral:
        text += (
            "else 0. With an integral only input 0 is at rest: at any other input the next output is still the one "
            "asked for, and the integral moves on from there. "
        )
    else:
        text += (
            "else the state at rest for the input, and 0. Possible is what the gain at rest times the input gives, "
            "within the rounding of the sample. "
        )
    if emission.schedule is not None:
        text += "Between points of the schedule only input 0 is known to be at rest: any other gives 0. "
    if emission.output_range is not None:
        text += "An output beyond the clamp counts as the limit, and gives 0 unless the limit is what it rounds to. "
    return text + "Arguments that are NaN or infinite, and a state that would be, are refused: 0, nothing changed."
