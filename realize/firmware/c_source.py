"""``NAME.c``: the steps of a sample in C99 that is C++11 as well.

Every line does what the Python model does, in the same order. The code uses nothing but ``<float.h>``, allocates
nothing, calls no library, and holds no construct whose result the standards leave open.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from realize.arithmetic.sample import Guard, Integrate, Limit, Sample, Step, Sum
from realize.arithmetic.settling import Settling
from realize.firmware.c_preamble import signatures
from realize.firmware.c_text import (
    WIDTH,
    Dialect,
    comment,
    definition,
    dialect,
    hexadecimal,
    own_set,
    reads,
    statement,
    variable,
    wrapped,
)
from realize.firmware.emission import Emission

#: Comes after every numbered part.
LAST = 1 << 30

#: What gcc, clang and others define under settings that let them change results.
FAST_MATH = (
    "defined(__FAST_MATH__)",
    "(defined(__FINITE_MATH_ONLY__) && __FINITE_MATH_ONLY__ > 0)",
    "defined(__ASSOCIATIVE_MATH__)",
    "defined(__RECIPROCAL_MATH__)",
    "defined(__NO_SIGNED_ZEROS__)",
    "defined(_M_FP_FAST)",
)

#: Mantissa digits, least and largest exponent of IEEE 754 binary32 and binary64 as ``<float.h>`` counts them.
IEEE_754 = {"FLT": (24, -125, 128), "DBL": (53, -1021, 1024)}

#: What to do where a type has another form.
_WIDEN = {
    "FLT": "compile for a processor whose float is that, or set the option that makes it so",
    "DBL": "give double its 64 bits (avr-gcc: -mdouble=64), or emit with arithmetic float32",
}


def stored_coefficients(emission: Emission, sample: Sample, settling: Settling) -> dict[str, float]:
    """Field name and value of every coefficient the C text stores."""
    steps = (*sample.output, *sample.advance, *settling.steps)
    c = dialect(emission)
    stored = dict(sorted(c.stored(steps).items(), key=_place))
    if not settling.integrating:
        stored |= {"settled_bound": settling.bound, "settled_floor": settling.floor}
    if emission.schedule is None:
        return stored
    from realize.firmware.schedule.c_lookup import field_sets

    return field_sets(c, emission.schedule, stored)[0]


def _place(item: tuple[str, float]) -> tuple[bool, int, bool, str]:
    """Sections first, each ``b``, ``a``, gain; then the integral's, then the rest."""
    part, _, role = item[0].partition("_")
    number = part.lstrip("abcdefghijklmnopqrstuvwxyz")
    order = role.replace("minus_", "").replace("b", " ")
    return not part.startswith("section"), int(number or LAST), role == "gain", order


def source_text(emission: Emission, sample: Sample, settling: Settling, stored: Mapping[str, float]) -> str:
    """The whole source file.

    Parameters
    ----------
    emission : Emission
        What is emitted.
    sample, settling : Sample, Settling
        The steps.
    stored : mapping
        From :func:`stored_coefficients`.
    """
    c = dialect(emission)
    lines = [
        *comment(wrapped(f"{c.name}.c - a difference equation, emitted by realize; see {c.name}.h")),
        f'#include "{c.name}.h"',
        *([f'#include "{c.name}_schedule.h"'] if emission.schedule else []),
        "",
        "#include <float.h>",
        "",
        *_refusals(c),
        *_contraction_off(),
        *_constants(c, emission, stored),
        *_helpers(c, sample),
        *_lookup(c, emission, list(stored)),
        *_functions(c, sample, settling),
        *_contraction_restored(),
    ]
    return "\n".join(lines) + "\n"


# ---------------------------------------------------------------- what the compiler must not do


def _refusals(c: Dialect) -> list[str]:
    evaluation = "FLT_EVAL_METHOD != 0"
    if c.macros == "DBL":
        evaluation = "(FLT_EVAL_METHOD != 0 && FLT_EVAL_METHOD != 1)"
    digits, least, most = IEEE_754[c.macros]
    form = (
        "FLT_RADIX != 2",
        f"{c.macros}_MANT_DIG != {digits}",
        f"{c.macros}_MIN_EXP != ({least})",
        f"{c.macros}_MAX_EXP != {most}",
    )
    subnormal = f"{c.macros}_HAS_SUBNORM"
    evaluated = f"{c.name} needs {c.real} evaluated as {c.real}"
    return [
        *_refusal(
            FAST_MATH,
            f"{c.name} must not be compiled with fast-math settings",
            "remove -ffast-math, -Ofast, /fp:fast or the part of them that is set",
        ),
        *_refusal(("!defined(FLT_EVAL_METHOD)",), evaluated, "compile as C99 or C++11, or later"),
        *_refusal((evaluation,), evaluated, "on x86 compile with -msse2 -mfpmath=sse"),
        *_refusal(
            form,
            f"{c.name} needs {c.real} to be IEEE 754 binary{32 if c.macros == 'FLT' else 64}",
            _WIDEN[c.macros],
        ),
        *_refusal(
            (f"defined({subnormal}) && {subnormal} == 0",),
            f"{c.name} needs subnormal numbers of {c.real}",
            "switch flush-to-zero off, or take another floating-point library",
        ),
        "",
    ]


def _refusal(conditions: Sequence[str], says: str, advice: str) -> list[str]:
    """Stop the compilation; the message is one, on two lines."""
    whole = " || ".join(conditions)
    parted = " || \\\n    ".join(conditions)
    return [f"#if {whole if len(whole) < WIDTH - 4 else parted}", f'#error "{says}:\\', f' {advice}"', "#endif"]


def _contraction_off() -> list[str]:
    return [
        *comment(
            wrapped(
                "No fused multiply-add. gcc warns about the standard pragma and has its own; it fuses in spite of it "
                "where it joins a sum and a difference in one vector (seen with gcc 12), so no such vectors."
            )
        ),
        "#if defined(__GNUC__) && !defined(__clang__)",
        "#pragma GCC push_options",
        '#pragma GCC optimize ("fp-contract=off", "no-tree-slp-vectorize")',
        "#else",
        "#pragma STDC FP_CONTRACT OFF",
        "#endif",
        "",
    ]


def _contraction_restored() -> list[str]:
    return ["#if defined(__GNUC__) && !defined(__clang__)", "#pragma GCC pop_options", "#endif"]


# ---------------------------------------------------------------- numbers and helpers


def _constants(c: Dialect, emission: Emission, stored: Mapping[str, float]) -> list[str]:
    if c.table:
        values = [f"    {c.literal(value)}, /* {hexadecimal(value)} {name} */" for name, value in stored.items()]
        return [
            f"const {c.name}_coefficients {own_set(c.name, scheduled=emission.schedule is not None)} = {{",
            *(values or [f"    {c.literal(0.0)}"]),
            "};",
            "",
        ]
    return [
        *(
            f"static const {c.real} {c.name}_{name} = {c.literal(value)}; /* {hexadecimal(value)} */"
            for name, value in stored.items()
        ),
        "",
    ]


def _helpers(c: Dialect, sample: Sample) -> list[str]:
    """The functions the steps call, as far as there are such steps; the preset needs the first always."""
    steps = (*sample.output, *sample.advance)
    integrals = [step for step in steps if isinstance(step, Integrate)]
    return [
        *_finite(c),
        *(_limit(c) if sample.low is not None else []),
        *(_pushes(c) if any(step.applied for step in integrals) else []),
        *(_integrate(c) if any(step.rest for step in integrals) else []),
    ]


def _lookup(c: Dialect, emission: Emission, fields: Sequence[str]) -> list[str]:
    if emission.schedule is None:
        return []
    from realize.firmware.schedule.c_lookup import lookup_definitions

    return lookup_definitions(c, emission.schedule, fields)


def _finite(c: Dialect) -> list[str]:
    return [
        f"static inline int {c.name}_is_finite({c.real} value)",
        "{",
        f"    return value >= -{c.macros}_MAX && value <= {c.macros}_MAX;",
        "}",
        "",
    ]


def _limit(c: Dialect) -> list[str]:
    return [
        f"static const {c.real} {c.name}_low = {c.name}_OUTPUT_LOW;",
        f"static const {c.real} {c.name}_high = {c.name}_OUTPUT_HIGH;",
        "",
        "/* Not a number, which only an overflow can bring here, becomes the low limit. */",
        f"static inline {c.real} {c.name}_limit({c.real} value)",
        "{",
        f"    const {c.real} raised = value > {c.name}_low ? value : {c.name}_low;",
        f"    return raised < {c.name}_high ? raised : {c.name}_high;",
        "}",
        "",
    ]


def _pushes(c: Dialect) -> list[str]:
    return [
        "/* Whether the increment would drive the command further out of what was applied. */",
        f"static inline int {c.name}_pushes({c.real} increment, {c.real} unclamped, {c.real} applied)",
        "{",
        "    if (unclamped > applied) {",
        f"        return increment > {c.literal(0.0)};",
        "    }",
        "    if (unclamped < applied) {",
        f"        return increment < {c.literal(0.0)};",
        "    }",
        "    return 0;",
        "}",
        "",
    ]


def _integrate(c: Dialect) -> list[str]:
    return [
        "/* Adds the increment; the rest carries what the addition lost into the next one. */",
        f"static inline void {c.name}_integrate({c.real} *sum, {c.real} *rest, {c.real} increment)",
        "{",
        f"    const {c.real} addend = increment + *rest;",
        f"    const {c.real} total = *sum + addend;",
        "    *rest = addend - (total - *sum);",
        "    *sum = total;",
        "}",
        "",
    ]


# ---------------------------------------------------------------- functions


def _functions(c: Dialect, sample: Sample, settling: Settling) -> list[str]:
    clear, update, output, advance, preset = signatures(c.name, c.real, c.real, table=c.table)
    answer = [f"    return {sample.result};"]
    zero = [f"    state->{field} = {c.literal(0.0)};" for field in sample.fields or ("unused",)]
    return [
        *definition(clear, zero),
        *definition(update, [*_statements(c, sample.update), *answer]),
        *definition(output, [*_statements(c, sample.output), *answer]),
        *definition(advance, _statements(c, sample.advance)),
        *definition(preset, _preset(c, settling)),
    ]


def _statements(c: Dialect, steps: Sequence[Step]) -> list[str]:
    """Steps from the last to the first, but for a guard of what nothing after it reads."""
    lines: list[str] = []
    for step in reversed(steps):
        if not isinstance(step, Guard) or reads("\n".join(lines), step.target):
            lines = [*_statement(c, step), *lines]
    return lines


def _statement(c: Dialect, step: Step) -> list[str]:
    if isinstance(step, Sum):
        return statement(_assigned(c, step.target), c.total(step.terms))
    if isinstance(step, Guard):
        return [
            f"    if (!{c.name}_is_finite({step.target})) {{",
            f"        {step.target} = {variable(step.fallback)};",
            "    }",
        ]
    if isinstance(step, Limit):
        return [f"    {_assigned(c, step.target)}{c.name}_limit({variable(step.source)});"]
    return _integrated(c, step)


def _assigned(c: Dialect, target: str) -> str:
    """``target = ``, declared where it is a local: each is set once."""
    return f"{variable(target)} = " if target.startswith("state.") else f"const {c.real} {target} = "


def _integrated(c: Dialect, step: Integrate) -> list[str]:
    target = variable(step.target)
    if step.rest:
        added = f"{c.name}_integrate(&{target}, &{variable(step.rest)}, {step.increment});"
    else:
        added = f"{target} = {target} + {step.increment};"
    if step.applied is None:
        return [f"    {added}"]
    return [
        f"    if (!{c.name}_pushes({step.increment}, unclamped, {step.applied})) {{",
        f"        {added}",
        "    }",
    ]


def _preset(c: Dialect, settling: Settling) -> list[str]:
    fresh = [name for _, name in settling.stored if name not in ("zero", "input")]
    return [
        *_return_unless_finite(c, ["input", "output"]),
        *_statements(c, settling.steps),
        *(_return_unless_finite(c, fresh) if fresh else []),
        *(f"    state->{field} = {c.literal(0.0) if name == 'zero' else name};" for field, name in settling.stored),
        *_possible(c, settling),
    ]


def _return_unless_finite(c: Dialect, names: Sequence[str]) -> list[str]:
    tests = [f"{c.name}_is_finite({name})" for name in names]
    joined = " &&\n          ".join(tests)
    return [f"    if (!({joined})) {{", "        return 0;", "    }"]


def _possible(c: Dialect, settling: Settling) -> list[str]:
    zero = c.literal(0.0)
    if settling.integrating:
        reached = [step for step in settling.steps if isinstance(step, Limit) and step.target == "wanted"]
        within = " && wanted >= output && wanted <= output" if reached else ""
        return [f"    return input >= {zero} && input <= {zero}{within};"]
    bound, floor = c.coefficient("settled_bound"), c.coefficient("settled_floor")
    return [
        f"    const {c.real} difference = command - output;",
        f"    const {c.real} margin = {bound} * (input < {zero} ? -input : input) + {floor};",
        "    return -margin <= difference && difference <= margin;",
    ]
