"""``NAME.h`` in integers: provenance, calls, what is proven and what is not protected from, and the types."""

from __future__ import annotations

from fractions import Fraction

from realize.arithmetic.integer.interface import Port
from realize.arithmetic.integer.program import COMMAND, INPUT
from realize.arithmetic.integer.quiet import Answered, IntegrationTimes, Quiet
from realize.arithmetic.sample import BACK_CALCULATION, HOLD_INTEGRAL
from realize.firmware.c_preamble import (
    CAUTION,
    Provenance,
    accepted_text,
    calls,
    counted,
    listed,
    loop_lines,
    paragraph,
    prototypes,
    provenance,
    range_text,
    signatures,
    skeleton,
    unprotected,
)
from realize.firmware.c_text import comment, integer_constant, number_text, wrapped
from realize.firmware.integer.c_source import UNUSED, kept, state_bits
from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.integer.record import ceiling_text
from realize.firmware.integer.spelling import Spelling, ctype, port_type

#: How several sections stand to each other.
_ARRANGEMENTS = ("one after the other", "beside each other")

#: What a section is in each structure.
FORMS = {
    "direct": "in direct form I",
    "cascade": "in direct form I, one after the other",
    "error-feedback": "in direct form I, one after the other; what rounding discards is added back in the next sample",
    "delta": "in the operator z - 1, one after the other",
    "normal": "in normal (coupled) form where poles are a pair, one after the other",
    "parallel": "in direct form I, beside each other",
}


def header_text(emission: IntegerEmission, c: Spelling, silence: Quiet) -> str:
    """The whole header."""
    return skeleton(
        c.name,
        _preamble(emission, c, silence),
        emission.realization.period_s,
        includes=["#include <stdint.h>", ""],
        limits=_limits(c),
        declared=[*_state(c), *(_table(c) if c.table else []), *_prototypes(c)],
    )


# ---------------------------------------------------------------- the first comment


def _preamble(emission: IntegerEmission, c: Spelling, silence: Quiet) -> list[str]:
    name = emission.name
    return [
        *wrapped(
            f"{name}.h - a difference equation in integers, emitted by realize; its account is {name}.record.json"
        ),
        "",
        *([*wrapped(emission.about), ""] if emission.about else []),
        *provenance(emission, _provenance(emission)),
        "",
        *paragraph("Calls", calls(name)),
        *paragraph("Feed-through", _feed_through(c)),
        *paragraph("Arithmetic", _arithmetic(c)),
        *listed("Proven", [*_proven(emission, c), *_quiet(emission, silence)]),
        *listed("Expected, not proven", _expected(emission)),
        *loop_lines(emission.loop),
        *listed("Accepted deviations", [accepted_text(entry, emission.checks) for entry in emission.accepted]),
        *listed("Not protected", _unprotected(emission, c)),
        *listed("Method notes", emission.notes),
        *paragraph("Caution", CAUTION)[:-1],
    ]


def _provenance(emission: IntegerEmission) -> Provenance:
    interface = emission.realization.program.interface
    return Provenance(
        structure=_structure(emission),
        arithmetic=_widths(emission),
        input=_input_text(emission),
        input_count=_count_text(interface.input, emission.input_unit),
        output=_output_text(emission),
        output_count=_count_text(interface.output, emission.output_unit),
        more=(("gain", _gain(emission)), ("anti-windup", _anti_windup(emission))),
    )


def _structure(emission: IntegerEmission) -> str:
    realization = emission.realization
    sections = realization.sections
    integral = realization.program.integral
    states = counted(len(integral.stored) if integral else 0, "integral state")
    bits = f" of {integral.word.bits} bits with {integral.word.fraction_bits} fraction bits" if integral else ""
    form = f" {_form(realization.structure, len(sections))}" if sections else ""
    anew = "; numerators chosen anew for the rounded denominators" if realization.numerators_anew else ""
    return f"{realization.structure}: {counted(len(sections), 'section')}{form}; {states}{bits}{anew}"


def _form(structure: str, count: int) -> str:
    """What the sections are; how they are arranged only where there are several."""
    text = FORMS[structure]
    for arranged in _ARRANGEMENTS if count == 1 else ():
        text = text.replace(f", {arranged}", "")
    return text


def _widths(emission: IntegerEmission) -> str:
    program = emission.realization.program
    widest = max(each.bits for each in program.sums)
    return (
        f"int{program.bits}: factors of {program.bits} bits, sums of up to {widest}; every sum rounded once, to "
        "nearest, ties upward"
    )


def _input_text(emission: IntegerEmission) -> str:
    port = emission.realization.program.interface.input
    physical = f"; range {range_text(emission.input_range, emission.input_unit)}" if emission.input_range else ""
    ends = f"counts {port.low + port.offset} to {port.high + port.offset}"
    return f"{physical}; {f'saturated on entry to {ends}' if any(port.limits_type) else f'{ends}, all its type holds'}"


def _output_text(emission: IntegerEmission) -> str:
    port = emission.realization.program.interface.output
    physical = f" {range_text(emission.output_range, emission.output_unit)}:" if emission.output_range else ""
    return f"; clamped to{physical} counts {port.low + port.offset} to {port.high + port.offset}"


def _count_text(port: Port, unit: str) -> str:
    zero = f"; count {port.offset} stands for 0" if port.offset else ""
    return f"{port_type(port)}; 1 count = {number_text(port.per_count)} {unit}".rstrip() + zero


def _gain(emission: IntegerEmission) -> str:
    """What a physical gain comes to in counts, for those who compare a coefficient with the design."""
    per = f"{emission.output_unit} per {emission.input_unit}" if emission.input_unit else emission.output_unit
    scale = number_text(emission.realization.program.interface.scale)
    return f"a gain of {f'1 {per}'.rstrip()} is {scale} counts per count; coefficients are in counts"


def _anti_windup(emission: IntegerEmission) -> str | None:
    if emission.realization.program.integral is None:
        return None
    if emission.anti_windup == HOLD_INTEGRAL:
        further = len(emission.realization.program.integral.stored) > 1
        return (
            "hold-integral: an integral state is not updated while the unclamped command exceeds what was applied "
            "and its increment pushes further out"
            + ("; those above the first stay within limits of their own" if further else "")
        )
    if emission.anti_windup == BACK_CALCULATION and emission.tracking_time_s is not None:
        tracking = number_text(emission.tracking_time_s)
        return f"back-calculation: the integral follows what was applied, tracking time {tracking} s"
    return "none: the integral goes on while the command is limited, as far as limits of its own"


def _feed_through(c: Spelling) -> str:
    outputs = (*c.program.outputs, c.program.command)
    reached = {INPUT}
    for each in outputs:
        reached |= {each.target} if reached & {term.variable for term in each.terms} else set()
    if COMMAND in reached:
        return (
            "direct: the command depends on the input of the same sample, so it must be computed between sampling "
            "and the actuator, and every delay there adds to the loop's."
        )
    return (
        "none: the command of a sample does not depend on the input of that sample; it can be computed before sampling."
    )


def _arithmetic(c: Spelling) -> str:
    return (
        "results are the same, bit for bit, on every processor, and no operation is one that the C or C++ standard "
        "leaves undefined or to the implementation, whatever the input. A variable is an integer in units of a power "
        "of two of a count; its fraction bits stand beside it."
    )


def _proven(emission: IntegerEmission, c: Spelling) -> list[str]:
    proof = emission.realization.proof
    sums = [bound for bound in proof.bounds if bound.variable.endswith("(sum)")]
    least = min(sums, key=lambda bound: bound.spare_bits)
    where = least.variable.removesuffix(" (sum)").removeprefix("state.")
    table = " These proofs hold for the coefficients of the design, not for other ones." if c.table else ""
    bits = f"{least.spare_bits} bit{'' if least.spare_bits == 1 else 's'}"
    return [
        "from a cleared state, and from one set by preset, no state and no sum overflows, whatever the input; the "
        f"least room is {bits}, in the sum for {where}.{table}",
        f"from a cleared state, while no limit acts, rounding moves the output by at most "
        f"{ceiling_text(proof.output_error)} counts, its own rounding included",
    ]


def _expected(emission: IntegerEmission) -> list[str]:
    noise = emission.realization.proof.rms_error
    return [] if noise is None else [f"rounding noise of {noise:.2g} counts r.m.s."]


def _quiet(emission: IntegerEmission, silence: Quiet) -> list[str]:
    """What is not answered, and what does not come to rest."""
    at_rest = _at_rest(silence, emission.realization.proof.output_error)
    return [_deadband(silence), *_integration(silence.integration, emission), at_rest]


def _deadband(silence: Quiet) -> str:
    positive, negative = _side("positive", silence.positive), _side("negative", silence.negative)
    both = silence.positive == silence.negative
    return f"from rest, {_side('', silence.positive) if both else f'{positive}; {negative}'}"


def _side(sign: str, answer: Answered) -> str:
    constant = f"constant {sign} input".replace("  ", " ")
    if answer.counts is None:
        return f"no {constant} within the range is answered" if answer.exact else f"no {constant} is sure of an answer"
    if answer.exact:
        return f"the smallest {constant} that the output ever answers is {counted(answer.counts, 'count')}"
    return f"every {constant} from {counted(answer.counts, 'count')} on is answered, a smaller one perhaps"


def _integration(found: IntegrationTimes | None, emission: IntegerEmission) -> list[str]:
    if found is None:
        return []
    integral = emission.realization.program.integral
    several = integral is not None and len(integral.stored) > 1
    return [
        f"no increment of {'integral 1' if several else 'the integral'} is lost: one count of input, held, moves it by "
        f"one count of output within {counted(found.samples_per_count, 'sample')}, and by the whole output range "
        f"within {found.samples_to_limit}",
        *(f"integral {i} stays within {most}" for i, most in _held_integrals(emission)),
    ]


def _held_integrals(emission: IntegerEmission) -> list[tuple[int, str]]:
    """Numbers of the integral states above the first, with the size each is held to."""
    integral = emission.realization.program.integral
    if integral is None:
        return []
    unit = Fraction(2) ** integral.word.fraction_bits
    held = [(i, limits[1] / unit) for i, limits in enumerate(integral.limits, 1) if limits and i > 1]
    return [(i, f"{number_text(most)} counts per sample{f'^{i - 1}' if i > 2 else ''}") for i, most in held]


def _at_rest(silence: Quiet, error: Fraction) -> str:
    found = _searched(silence)
    if silence.integration:
        if silence.dies_out:
            return "without input, the output comes to rest: there is no limit cycle"
        return (
            f"without input, the output settles within {ceiling_text(error)} counts of what the integral holds, its "
            f"own rounding and limit cycles included{found}"
        )
    if silence.rests_at_zero:
        return "without input, the output comes to rest at zero: there is no limit cycle"
    most = counted(silence.largest_output, "count")
    if silence.searched_output is not None:
        cycle = counted(silence.searched_output, "count")
        return (
            f"without input, the output settles within {cycle} of zero, the largest limit cycle: found by searching "
            f"every state; without the search, at most {most}"
        )
    return f"without input, the output settles within {most} of zero, limit cycles included{found}"


def _searched(silence: Quiet) -> str:
    """Largest cycle of every section whose states were all searched, for behind a bound on all of them."""
    sizes = [
        (each.section, each.cycles.amplitude / Fraction(2) ** each.fraction_bits)
        for each in silence.sections
        if each.cycles.amplitude
    ]
    return "".join(
        f"; the largest cycle of section {number} by itself, found by searching every state, is "
        f"{ceiling_text(size)} count{'' if size == 1 else 's'}"
        for number, size in sizes
    )


def _unprotected(emission: IntegerEmission, c: Spelling) -> list[str]:
    other = "coefficients other than those of the design: a sum may then overflow, which is undefined"
    return [
        *([other] if c.table else []),
        *(f"an integral {i} that has to go beyond {most}: the rest is lost" for i, most in _held_integrals(emission)),
        *unprotected(
            emission,
            "the limits of the input hide it, and any count between them is taken as it is",
            follows_applied=_uses_applied(c),
        ),
        "a null pointer, a state that was never cleared, two calls on one state at the same time",
    ]


# ---------------------------------------------------------------- macros and types


def _limits(c: Spelling) -> list[str]:
    interface = c.program.interface
    says = "Limits in counts, offsets included. An input beyond them is saturated on entry; the command stays within."
    return [
        *comment(wrapped(says)),
        *_limit_macros(c.name, "INPUT", interface.input),
        *_limit_macros(c.name, "OUTPUT", interface.output),
        "",
    ]


def _limit_macros(name: str, which: str, port: Port) -> list[str]:
    ends = (("LOW", port.low + port.offset), ("HIGH", port.high + port.offset))
    return [f"#define {name}_{which}_{end} {integer_constant(value)}" for end, value in ends]


def _state(c: Spelling) -> list[str]:
    fields = [f"    {ctype(bits)} {name}; /* {_meaning(c, name)} */" for name, bits in state_bits(c).items()]
    return ["typedef struct {", *fields, f"}} {c.name}_state;", ""]


def _meaning(c: Spelling, field: str) -> str:
    """What a state field holds, and its fraction bits."""
    if field == UNUSED:
        return "nothing to remember"
    if field == COMMAND:
        return "command before the clamp, from output to advance"
    waiting = {each.name for each in kept(c)}
    part, _, role = field.partition("_")
    number = part.lstrip("abcdefghijklmnopqrstuvwxyz")
    if part.startswith("integral"):
        assert c.program.integral is not None
        return f"integral state {number}; {c.program.integral.word.fraction_bits} fraction bits"
    if field in waiting:
        what = "discards" if role.endswith("discarded") else "hands on"
        return f"what section {number} {what}, from output to advance"
    point = f"; {c.program.words[f'state.{field}'].fraction_bits} fraction bits"
    if part == INPUT:
        return f"input {counted(int(role), 'sample')} ago{point}"
    if role.startswith("output_"):
        age = role.removeprefix("output_")
        if age == "remainder":
            return f"what rounding in section {number} discarded, to be added back"
        return f"what section {number} handed on {counted(int(age), 'sample')} ago{point}"
    return f"section {number}, state {role}{point}"


def _table(c: Spelling) -> list[str]:
    fields = [
        f"    {ctype(one.bits)} {field}; /* {one.fraction_bits} fraction bits */" for field, one in c.fields.items()
    ]
    says = wrapped(
        "Every multiplied coefficient, as value times 2 to the power of its fraction bits. Those that are exactly 0 or "
        "a power of two are part of the code and not in the table. The gain of a section serves the preset and follows "
        "from the others. Another table is swapped in as a whole, between two samples."
    )
    return [
        *comment(says),
        "typedef struct {",
        *(fields or [f"    int8_t {UNUSED}; /* nothing is multiplied */"]),
        f"}} {c.name}_coefficients;",
        "",
        f"extern const {c.name}_coefficients {c.name}_nominal; /* the design's own */",
        "",
    ]


# ---------------------------------------------------------------- functions


def _prototypes(c: Spelling) -> list[str]:
    interface = c.program.interface
    says = (
        "All state zero: at rest at the input that stands for zero.",
        "One sample: the command for the input, then the state moved on with it.",
        "The clamped command for the input, with the least work before the actuator; the state does not move on yet.",
        _advance_says(c),
        _preset_says(c),
    )
    types = port_type(interface.input), port_type(interface.output)
    return prototypes(c.name, signatures(c.name, *types, table=c.table), says)


def _uses_applied(c: Spelling) -> bool:
    integral = c.program.integral
    return integral is not None and (c.program.hold or integral.tracking != 0)


def _advance_says(c: Spelling) -> str:
    text = (
        "The rest of the sample, after output with the same input: applied is what the actuator was really given, "
        "in counts as the command is."
    )
    if not _uses_applied(c):
        return f"{text} This design does not use it."
    limited = any(c.program.interface.output.limits_type)
    return text + (" Beyond the clamp it counts as the nearer limit." if limited else "")


def _preset_says(c: Spelling) -> str:
    text = "Bumpless start: at rest at the input, with output as the next output. Returns 1 when that is possible; "
    if c.program.integral:
        zero = c.program.interface.input.offset
        text += (
            f"else 0. With an integral no steady state exists but at input {zero}: at any other the next output is "
            "still the one asked for, and the integral moves on from there."
        )
    else:
        text += (
            "else the state at rest for the input, and 0. Possible is only the output that this state gives, to the "
            "count."
        )
    beyond = any(c.program.interface.output.limits_type)
    return text + (" An output beyond the clamp counts as the nearer limit, and gives 0." if beyond else "")
