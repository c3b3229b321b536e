"""What the headers of all arithmetics share: the first comment's parts, the period's macros, the signatures."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, Any, NamedTuple

from realize.arithmetic.sample import BACK_CALCULATION
from realize.checks.agreement import agreed_text
from realize.checks.check import Check
from realize.firmware.c_text import WIDTH, comment, integer_constant, number_text, wrapped
from realize.firmware.loop_text import loop_entries, loop_sentence

if TYPE_CHECKING:
    from realize.firmware.emission import Emission
    from realize.firmware.integer.emission import IntegerEmission

#: Width of the label column in the header's first comment.
LABEL = 15

CAUTION = (
    "Controllers move machines. Check on the bench, with the actuator limited, before closing the loop. This code and "
    "the tool that wrote it do not replace a functional-safety process (IEC 61508 and its sector standards), local "
    "codes, or the judgement of a licensed engineer where one is required. Code-generating tools earn credit only "
    "through verification of their output."
)


def skeleton(
    name: str,
    preamble: Sequence[str],
    period_s: Fraction,
    *,
    includes: Sequence[str] = (),
    limits: Sequence[str],
    declared: Sequence[str],
) -> str:
    """A header from its parts.

    Parameters
    ----------
    name : str
        Prefix of every name.
    preamble : sequence of str
        Lines of the first comment.
    period_s : Fraction
        Sample period.
    includes, limits, declared : sequence of str
        Lines before and after the period's macros, and types and functions.
    """
    lines = [
        *comment(preamble),
        f"#ifndef {name}_H",
        f"#define {name}_H",
        "",
        *includes,
        *period_macros(name, period_s),
        *limits,
        "#ifdef __cplusplus",
        'extern "C" {',
        "#endif",
        "",
        *declared,
        "#ifdef __cplusplus",
        "}",
        "#endif",
        "",
        f"#endif /* {name}_H */",
    ]
    return "\n".join(lines) + "\n"


class Provenance(NamedTuple):
    """What an arithmetic says of itself in the provenance.

    Attributes
    ----------
    structure, arithmetic : str
        Of the realization.
    input, output : str
        What stands behind the meaning of each.
    input_count, output_count : str or None
        What a count is.
    more : tuple of (str, str or None)
        Further labels and their texts.
    """

    structure: str
    arithmetic: str
    input: str
    input_count: str | None
    output: str
    output_count: str | None
    more: tuple[tuple[str, str | None], ...]


def provenance(emission: Emission | IntegerEmission, words: Provenance) -> list[str]:
    """Where the code comes from, label by label."""
    period_s = emission.realization.period_s
    return labelled(
        [
            ("revision", emission.revision),
            ("requirement", emission.requirement),
            ("author", emission.author),
            ("transfer", f"G(s) = {emission.transfer_text}"),
            *emission.particulars,
            ("method", emission.method),
            ("sample period", f"{period_text(period_s)} s (rate {number_text(1 / period_s)} Hz)"),
            ("structure", words.structure),
            ("arithmetic", words.arithmetic),
            ("input", f"the input (for a controller the error, reference minus measurement){words.input}"),
            ("input count", words.input_count),
            ("output", f"the output (for a controller the command; so called below){words.output}"),
            ("output count", words.output_count),
            *words.more,
        ]
    )


def prototypes(name: str, declared: Sequence[str], says: Sequence[str]) -> list[str]:
    """Clear, update, output, advance and preset, each with what it does, and the self-test."""
    functions = zip(says, declared, strict=True)
    return [
        *(line for text, signature in functions for line in (*comment(wrapped(text)), f"{signature};", "")),
        *selftest_prototype(name),
    ]


def labelled(entries: Iterable[tuple[str, str | None]]) -> list[str]:
    """A label and its text on each line; entries without text are left out."""
    return [
        line
        for label, text in entries
        if text
        for line in wrapped(text, f"{wrapped(label)[0]:<{LABEL}} ", " " * (LABEL + 1))
    ]


def period_text(period_s: Fraction) -> str:
    """The sample period in seconds, exact where that is short."""
    exact = str(period_s)
    return exact if len(exact) <= len("1/1000000000000") else number_text(period_s)


def range_text(limits: tuple[Fraction, Fraction], unit: str) -> str:
    """A physical range."""
    return f"{number_text(limits[0])} to {number_text(limits[1])} {unit}".rstrip()


def counted(count: int, what: str) -> str:
    """A number of things."""
    return f"{count or 'no'} {what}{'' if count == 1 else 's'}"


def calls(name: str) -> str:
    """In which order the functions are called."""
    return (
        f"{name}_clear or {name}_preset once; then, every sample period, either {name}_update alone, or "
        f"{name}_output with the input, the actuator, and {name}_advance with the same input and what the actuator "
        f"was really given. {name}_update is the two with the command applied. One {name}_state per instance; no "
        "function touches anything else, and none may work on one state while another does."
    )


def accepted_text(entry: Mapping[str, Any], checks: Sequence[Mapping[str, Any]]) -> str:
    """What was agreed to, with the figure that is left where the check is there."""
    limit, unit = entry.get("limit"), entry.get("unit") or ""
    key = [entry["check"], entry.get("difference"), "out"]
    check = next((c for c in checks if [c.get(k) for k in ("check", "difference", "verdict")] == key), None)
    figure = number_text(limit) if isinstance(limit, Fraction) else str(limit)
    up_to = "" if limit is None else f", up to {figure} {unit}".rstrip()
    said = f"{entry['check']}{up_to}" if check is None else agreed_text(Check(**check), limit)
    by = f" ({entry['by']})" if entry.get("by") else ""
    return f"{said}: {entry.get('because', '')}{by}"


def loop_lines(loop: Mapping[str, Any] | None) -> list[str]:
    """The loops the design was checked in."""
    if loop is None:
        return []
    return loop_paragraph(loop, loop_entries(loop))


def loop_paragraph(loop: Mapping[str, Any], entries: Sequence[str]) -> list[str]:
    """With which delay the loops were checked, and what was found in them."""
    lines = [line for entry in entries for line in wrapped(entry, "- ", "  ")]
    return [*wrapped(f"Loop: {loop_sentence(loop)}"), *lines, ""]


def unprotected(emission: Emission | IntegerEmission, sensor: str, *, follows_applied: bool) -> list[str]:
    """What no code of this kind is safe from.

    Parameters
    ----------
    emission : Emission or IntegerEmission
        What is emitted.
    sensor : str
        What becomes of a wrong input.
    follows_applied : bool
        Whether the integral follows what the actuator was really given.
    """
    period = period_text(emission.realization.period_s)
    measured = emission.loop and emission.loop["jitter_margin_s"] is not None
    jitter = "jitter beyond the margin of the loop" if measured else "jitter, whose margin was not judged"
    actuator = "an actuator that limits further than the output range when only update is called: the integral winds up"
    kick = (
        "back-calculation with a tracking time shorter than the derivative time: the derivative kick winds the "
        "integral the wrong way"
    )
    return [
        f"a converter that wraps around, a sensor that fails: {sensor}",
        f"a sample period other than {period} s; {jitter}",
        *([actuator] if follows_applied else []),
        *([kick] if follows_applied and emission.anti_windup == BACK_CALCULATION else []),
        "a preset that returns 0 and is ignored: the controller does not start at rest",
    ]


def paragraph(label: str, text: str) -> list[str]:
    """Labelled prose, and a blank line."""
    return [*wrapped(f"{label}: {text}"), ""]


def listed(label: str, entries: Sequence[str]) -> list[str]:
    """Labelled entries, and a blank line; nothing without entries."""
    if not entries:
        return []
    return [f"{label}:", *(line for entry in entries for line in wrapped(entry, "- ", "  ")), ""]


def period_macros(name: str, period_s: Fraction) -> list[str]:
    """The sample period as integer constants."""
    numerator, denominator = (integer_constant(n) for n in (period_s.numerator, period_s.denominator))
    if numerator is None or denominator is None:
        numerator, denominator = f"{float(period_s):.16e}", "1"
        says = "Sample period in seconds, to 17 digits: the exact fraction has no room in an integer constant."
    else:
        says = "Sample period in seconds, exactly."
    return [
        *comment([says]),
        f"#define {name}_PERIOD_NUMERATOR {numerator}",
        f"#define {name}_PERIOD_DENOMINATOR {denominator}",
        "",
    ]


def signatures(name: str, given: str, made: str, *, table: bool) -> tuple[str, str, str, str, str]:
    """Clear, update, output, advance and preset, as declared and defined, for the C types of input and output."""
    state, value = f"{name}_state *state", f"{given} input"
    both = [state, *([f"const {name}_coefficients *coefficients"] if table else [])]
    return (
        f"void {name}_clear({state})",
        signature(f"{made} {name}_update", [*both, value]),
        signature(f"{made} {name}_output", [*both, value]),
        signature(f"void {name}_advance", [*both, value, f"{made} applied"]),
        signature(f"int {name}_preset", [*both, value, f"{made} output"]),
    )


def selftest_prototype(name: str) -> list[str]:
    """The self-test, which stands in a file of its own."""
    says = f"In {name}_selftest.c, linked only where it is wanted: 0, or the number of the first sample that differs."
    return [*comment(wrapped(says)), f"int {name}_selftest(void);", ""]


def signature(function: str, parameters: Sequence[str]) -> str:
    """On one line, or a line for each parameter."""
    line = f"{function}({', '.join(parameters)})"
    return line if len(line) < WIDTH else f"{function}(\n    " + ",\n    ".join(parameters) + ")"
