"""``NAME_selftest.c``: some hundred samples of the vectors as C, for the user's own compiler, board or boot code.

Inputs are those of the vectors, in their order, but for long noise; an input that stays is one line with the number
of samples it is held for. The answers are the model's, from a cleared state. They are played through update, and once
more through output and advance; then the state is preset, and the actuator given something else than the command.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from itertools import groupby, pairwise, product
from math import copysign, inf, isfinite, nan
from typing import TYPE_CHECKING, Any, NamedTuple, TypeVar

from realize.arithmetic.sample import largest
from realize.firmware.c_preamble import signature
from realize.firmware.c_text import comment, dialect, own_set, statement, wrapped
from realize.firmware.vectors import answers, full_scale, in_format, scheduled

if TYPE_CHECKING:
    from realize.arithmetic.recursion import Recursion
    from realize.firmware.emission import Emission

#: An input that stays for so many samples is a run. Between two runs, so many samples are taken: enough to move every
#: state by different amounts, few enough for a small memory.
RUN, STRETCH = 8, 40

#: Inputs that are not finite, in the order in which the C makes them.
NONFINITE = (nan, inf, -inf)

#: Inputs that the preset refuses are looked for from the largest finite one down by powers of two, in steps that reach
#: below every gain; between two that differ the step is halved so often. Beside the largest output, sums overflow now
#: and then by their rounding alone: there the first steps are small. They are fractions, so that no two inputs have
#: alike digits.
COARSE = tuple(0.97 * k for k in range(66))
FINE = (*(0.07 * k for k in range(100)), *(octaves for octaves in COARSE if octaves > 7))
HALVINGS = 9

Value = TypeVar("Value", int, float)
Row = TypeVar("Row")


class Held(NamedTuple):
    """An input, the number of samples it is held for, and the answer to the last; with a schedule at its variable."""

    input: float
    held: int
    answer: float
    variable: float | None = None


class Rest(NamedTuple):
    """A cleared state is preset; then another input, its command not being what is applied; the next answer to it."""

    input: float
    then: float
    output: float
    applied: float
    possible: bool
    answer: float
    after: float


class Samples(NamedTuple):
    """What is played.

    Attributes
    ----------
    held : sequence of Held
        From a cleared state.
    guarded : sequence of float
        Answers to :data:`NONFINITE` after these; none where the code does not guard.
    rests : sequence of Rest
        Each by itself.
    """

    held: Sequence[Held]
    guarded: Sequence[float]
    rests: Sequence[Rest]


class Wording(NamedTuple):
    """How the C is spelled.

    Attributes
    ----------
    name : str
        Prefix of every name.
    given, made : str
        C types of input and output.
    given_text, made_text : callable
        A constant of each.
    table : bool
        Whether coefficients come by pointer.
    largest : str
        The largest finite number; empty in integers.
    scheduled : bool
        Whether coefficients are looked up.
    """

    name: str
    given: str
    made: str
    given_text: Callable[[float], str]
    made_text: Callable[[float], str]
    table: bool
    largest: str
    scheduled: bool = False


# ---------------------------------------------------------------- samples


def chosen(inputs: Sequence[Row]) -> Iterator[tuple[Row, int]]:
    """Inputs and how long each is held: a long run is parted after 1, 2, 4, ... samples, to be compared there."""
    changing = 0
    for value, same in groupby(inputs):
        length = len(list(same))
        changing = changing + length if length < RUN else 0
        if changing <= STRETCH:
            yield from ((value, part) for part in _parts(length))


def _parts(length: int) -> Iterator[int]:
    done = 0
    while done < length:
        part = min(max(done, 1), length - done)
        yield part
        done += part


def selftest_text(emission: Emission, inputs: Sequence[float]) -> str:
    """The self-test of an emission in floats, from the inputs of its vectors."""
    c = dialect(emission)

    def text(value: float) -> str:
        return f"-{c.literal(0.0)}" if value == 0 and copysign(1.0, value) < 0 else c.literal(value)

    words = Wording(c.name, c.real, c.real, text, text, c.table, f"{c.macros}_MAX", emission.schedule is not None)
    return source_of(words, _samples(emission, inputs))


def _samples(emission: Emission, inputs: Sequence[float]) -> Samples:
    model = emission.recursion()
    rows: list[Held] = []
    variables: Sequence[float | None] = scheduled(emission, len(inputs)) or [None] * len(inputs)
    pairs = [(x, v) for x, v in zip(inputs, variables, strict=True) if isfinite(x) and (v is None or isfinite(v))]
    for (value, variable), held in chosen(pairs):
        answer = answers(emission, model, [value] * held, [variable or 0.0] * held)[-1]
        if not isfinite(answer):
            return Samples(rows, (), _rests(emission, model))
        rows.append(Held(value, held, answer, variable))
    guarded = model.run(NONFINITE) if emission.guard_nonfinite else ()
    return Samples(rows, guarded, _rests(emission, model))


def _rests(emission: Emission, model: Recursion) -> list[Rest]:
    """Outputs and applied values within the limits and beyond, and the output that is at rest."""
    low, high = full_scale(emission)
    ends = (
        (low, high) if model.sample.low is None or model.sample.high is None else (model.sample.low, model.sample.high)
    )
    most = largest(emission.realization.format)
    beyond = min(2 * max(map(abs, ends)), most)
    levels = in_format([-beyond, ends[0] / 2 + ends[1] / 2, beyond], emission.realization.format)
    found = []
    if emission.schedule is not None:
        model.take(emission.schedule.sets[0])
    for value, then in turns(low, 0.0, high):
        model.clear()
        model.preset(value, levels[1])
        for output in (*levels, model.output(value)):
            found += [rest_of(model, (value, then), output, applied) for applied in levels if isfinite(output)]
    found += [rest_of(model, (value, 0.0), output, levels[1]) for value, output in refusals(model, most)]
    return [each for each in found if isfinite(each.answer) and isfinite(each.after)]


def refusals(model: Recursion, most: float) -> list[tuple[float, float]]:
    """Finite inputs and outputs that preset refuses, for each field of the state that it can do so for one pair.

    Notes
    -----
    A field is refused for where it overflows and those before it do not. Where two neighbouring sizes of the input have
    different answers, the ratio of the two is halved :data:`HALVINGS` times: a band that is narrower, and holds none of
    the sizes, is not found.
    """
    outputs = (0.0, most, -most) if model.sample.low is None and model.realization.integral else (0.0,)
    found: dict[str, tuple[float, float]] = {}
    for sign, output in product((1.0, -1.0), outputs):

        def asked(octaves: float, sign: float = sign, output: float = output) -> str | None:
            (value,) = in_format([sign * most * 2.0**-octaves], model.realization.format)
            field = model.refused(value, output)
            if field is not None:
                found.setdefault(field, (value, output))
            return field

        places = [(octaves, asked(octaves)) for octaves in (FINE if output else COARSE)]
        for (low, at_low), (high, at_high) in pairwise(places):
            _between(asked, low, at_low, high, at_high, HALVINGS)
    return list(found.values())


def _between(
    asked: Callable[[float], str | None], low: float, at_low: str | None, high: float, at_high: str | None, depth: int
) -> None:
    """Ask between two places until neighbours answer alike or are close."""
    if at_low == at_high or depth == 0:
        return
    middle = (low + high) / 2
    answer = asked(middle)
    _between(asked, low, at_low, middle, answer, depth - 1)
    _between(asked, middle, answer, high, at_high, depth - 1)


def turns(low: Value, zero: Value, high: Value) -> tuple[tuple[Value, Value], ...]:
    """Inputs of the preset and after it: a state as far as a preset takes it is driven back, and further."""
    return (zero, zero), (low, high), (high, low), (low, low), (high, high)


def rest_of(model: Any, values: tuple[Value, Value], output: Value, applied: Value) -> Rest:
    """What a model, in floats or in integers, makes of a preset and a sample after it."""
    first, then = values
    model.clear()
    possible = model.preset(first, output)
    answer = model.output(then)
    model.advance(then, applied)
    return Rest(first, then, output, applied, possible, answer, model.output(then))


# ---------------------------------------------------------------- C


def source_of(c: Wording, samples: Samples) -> str:
    """The whole file."""
    held, passed = len(samples.held), len(samples.held) + len(samples.guarded)
    says = (
        f"{c.name}_selftest.c - the code of {c.name}.c held against {held} lines of expected answers, emitted by "
        "realize. It calls no library and keeps nothing; link it where it is wanted. The samples that are compared are "
        f"counted: 1 to "
        f"{passed} for {c.name}_update, {passed + 1} to {2 * passed} for the same through {c.name}_output and "
        f"{c.name}_advance, those above for {c.name}_preset and what follows it."
    )
    lines = [
        *comment(wrapped(says)),
        f'#include "{c.name}.h"',
        "",
        *(["#include <float.h>", ""] if c.largest else []),
        *_held_table(c, samples.held),
        *_rest_table(c, samples.rests),
        *(_guarded_table(c, samples.guarded) if samples.guarded else []),
        *(_same(c) if c.largest else []),
        *(_nonfinite(c) if c.largest else []),
        *_answer(c),
        *_played(c, samples),
        *_rested(c, samples.rests),
        *_selftest(c, passed, samples),
    ]
    return "\n".join(lines)


def _held_table(c: Wording, rows: Sequence[Held]) -> list[str]:
    at = ["" if row.variable is None else f"{c.given_text(row.variable)}, " for row in rows]
    values = [
        f"    {{{first}{c.given_text(row.input)}, {c.made_text(row.answer)}, {row.held}}},"
        for first, row in zip(at, rows, strict=True)
    ]
    says = "An input, the answer to the last sample that it is held for, and their number."
    return [
        f"enum {{ {c.name}_HELD_LINES = {len(rows)} }};",
        "",
        *comment([f"The variable of the schedule. {says}" if c.scheduled else says]),
        f"static const struct {c.name}_held_line {{",
        *([f"    {c.given} variable;"] if c.scheduled else []),
        f"    {c.given} input;",
        f"    {c.made} answer;",
        "    int samples;",
        f"}} {c.name}_held_lines[{c.name}_HELD_LINES] = {{",
        *values,
        "};",
        "",
    ]


def _rest_table(c: Wording, rows: Sequence[Rest]) -> list[str]:
    values = [
        f"    {{{c.given_text(row.input)}, {c.given_text(row.then)}, {c.made_text(row.output)}, "
        f"{c.made_text(row.applied)}, {c.made_text(row.answer)}, {c.made_text(row.after)}, {int(row.possible)}}},"
        for row in rows
    ]
    return [
        f"enum {{ {c.name}_REST_LINES = {len(rows)} }};",
        "",
        "/* The preset's input, the input after it, the preset's output, what the actuator is given in the",
        " * first sample, the answers in that and in the next, and what the preset returns.",
        " */",
        f"static const struct {c.name}_rest_line {{",
        f"    {c.given} input;",
        f"    {c.given} then;",
        f"    {c.made} output;",
        f"    {c.made} applied;",
        f"    {c.made} answer;",
        f"    {c.made} after;",
        "    int possible;",
        f"}} {c.name}_rest_lines[{c.name}_REST_LINES] = {{",
        *values,
        "};",
        "",
    ]


def _guarded_table(c: Wording, answers: Sequence[float]) -> list[str]:
    values = ", ".join(map(c.made_text, answers))
    return [
        "/* Answers to inputs that are not finite. */",
        f"static const {c.made} {c.name}_guarded[{len(answers)}] = {{{values}}};",
        "",
    ]


def _same(c: Wording) -> list[str]:
    return [
        "/* Whether two numbers have the same bits: zeros of either sign differ. */",
        f"static int {c.name}_same({c.made} left, {c.made} right)",
        "{",
        "    const unsigned char *const one = (const unsigned char *)(const void *)&left;",
        "    const unsigned char *const other = (const unsigned char *)(const void *)&right;",
        "    int same = 1;",
        "    for (unsigned int k = 0; k < sizeof left; k++) {",
        "        if (one[k] != other[k]) {",
        "            same = 0;",
        "        }",
        "    }",
        "    return same;",
        "}",
        "",
    ]


def _nonfinite(c: Wording) -> list[str]:
    return [
        "/* Volatile, so that what overflows does so when it runs. */",
        f"static const volatile {c.given} {c.name}_largest = {c.largest};",
        "",
        "/* Not a number, infinity, and infinity below zero. */",
        f"static {c.given} {c.name}_nonfinite(int which)",
        "{",
        f"    const {c.given} infinite = {c.name}_largest + {c.name}_largest;",
        f"    {c.given} value = infinite - infinite;",
        "    if (which == 1) {",
        "        value = infinite;",
        "    }",
        "    if (which == 2) {",
        "        value = -infinite;",
        "    }",
        "    return value;",
        "}",
        "",
    ]


def _differs(c: Wording, left: str, right: str) -> str:
    return f"!{c.name}_same({left}, {right})" if c.largest else f"{left} != {right}"


def _own(c: Wording) -> str:
    return f", &{own_set(c.name, scheduled=c.scheduled)}" if c.table else ""


def _looked_up(c: Wording) -> str:
    """The coefficients that the variable calls for, else those of the design."""
    return ", &coefficients" if c.scheduled else _own(c)


def _answer(c: Wording) -> list[str]:
    own = ", coefficients" if c.scheduled else _own(c)
    parameters = [
        f"{c.name}_state *state",
        *([f"const {c.name}_coefficients *coefficients"] if c.scheduled else []),
        *(f"{c.given} input", "int samples", "int in_two"),
    ]
    return [
        "/* The answer to an input that is held, in one call a sample or in two. */",
        *signature(f"static {c.made} {c.name}_answer", parameters).splitlines(),
        "{",
        f"    {c.made} answer = {c.made_text(0)};",
        "    for (int k = 0; k < samples; k++) {",
        "        if (in_two != 0) {",
        f"            answer = {c.name}_output(state{own}, input);",
        f"            {c.name}_advance(state{own}, input, answer);",
        "        } else {",
        f"            answer = {c.name}_update(state{own}, input);",
        "        }",
        "    }",
        "    return answer;",
        "}",
        "",
    ]


def _played(c: Wording, samples: Samples) -> list[str]:
    given, looked_up = f"{c.name}_held_lines[k]", ", &coefficients" if c.scheduled else ""
    return [
        "/* The first line that differs, counted from 1; 0 for none. */",
        f"static int {c.name}_played(int in_two)",
        "{",
        f"    {c.name}_state state;",
        *([f"    {c.name}_coefficients coefficients;"] if c.scheduled else []),
        "    int differs = 0;",
        f"    {c.name}_clear(&state);",
        *([f"    {c.name}_at({c.given_text(0)}, &coefficients);"] if c.scheduled else []),
        f"    for (int k = 0; k < {c.name}_HELD_LINES && differs == 0; k++) {{",
        *([f"        {c.name}_at({given}.variable, &coefficients);"] if c.scheduled else []),
        *statement(
            f"const {c.made} answer =",
            ["", f"{c.name}_answer(&state{looked_up}, {given}.input,", f"    {given}.samples, in_two)"],
            " " * 8,
        ),
        f"        if ({_differs(c, 'answer', f'{given}.answer')}) {{",
        "            differs = k + 1;",
        "        }",
        "    }",
        *(_guarded(c, samples.guarded) if samples.guarded else []),
        "    return differs;",
        "}",
        "",
    ]


def _guarded(c: Wording, answers: Sequence[float]) -> list[str]:
    """Inputs that are not finite; where they are, what is applied is not finite either, which counts as the command."""
    return [
        f"    for (int k = 0; k < {len(answers)} && differs == 0; k++) {{",
        f"        const {c.given} input = {c.name}_nonfinite(k);",
        f"        {c.made} answer;",
        "        if (in_two != 0) {",
        f"            answer = {c.name}_output(&state{_looked_up(c)}, input);",
        f"            {c.name}_advance(&state{_looked_up(c)}, input, input);",
        "        } else {",
        f"            answer = {c.name}_update(&state{_looked_up(c)}, input);",
        "        }",
        f"        if ({_differs(c, 'answer', f'{c.name}_guarded[k]')}) {{",
        f"            differs = {c.name}_HELD_LINES + k + 1;",
        "        }",
        "    }",
    ]


def _rested(c: Wording, rows: Sequence[Rest]) -> list[str]:
    return [
        "/* The first line that differs, counted from 1; 0 for none. */",
        f"static int {c.name}_rested(void)",
        "{",
        "    int differs = 0;",
        f"    for (int k = 0; k < {c.name}_REST_LINES && differs == 0; k++) {{",
        f"        const struct {c.name}_rest_line *const line = &{c.name}_rest_lines[k];",
        f"        {c.name}_state state;",
        "        int possible;",
        f"        {c.made} answer;",
        f"        {c.made} after;",
        f"        {c.made} whole;",
        f"        {c.name}_clear(&state);",
        f"        possible = {c.name}_preset(&state{_own(c)}, line->input, line->output);",
        f"        answer = {c.name}_output(&state{_own(c)}, line->then);",
        f"        {c.name}_advance(&state{_own(c)}, line->then, line->applied);",
        f"        after = {c.name}_output(&state{_own(c)}, line->then);",
        f"        {c.name}_clear(&state);",
        f"        (void){c.name}_preset(&state{_own(c)}, line->input, line->output);",
        f"        whole = {c.name}_update(&state{_own(c)}, line->then);",
        f"        if (possible != line->possible || {_differs(c, 'answer', 'line->answer')} ||",
        f"            {_differs(c, 'after', 'line->after')} ||",
        f"            {_differs(c, 'whole', 'line->answer')}) {{",
        "            differs = k + 1;",
        "        }",
        "    }",
        *(_refused(c) if c.largest else []),
        "    return differs;",
        "}",
        "",
    ]


def _refused(c: Wording) -> list[str]:
    zero = c.made_text(0)
    return [
        f"    for (int k = 0; k < {len(NONFINITE)} && differs == 0; k++) {{",
        f"        const {c.given} value = {c.name}_nonfinite(k);",
        f"        {c.name}_state state;",
        f"        {c.name}_clear(&state);",
        f"        if ({c.name}_preset(&state{_own(c)}, value, {zero}) != 0 ||",
        f"            {c.name}_preset(&state{_own(c)}, {zero}, value) != 0) {{",
        f"            differs = {c.name}_REST_LINES + k + 1;",
        "        }",
        "    }",
    ]


def _selftest(c: Wording, passed: int, samples: Samples) -> list[str]:
    return [
        f"int {c.name}_selftest(void)",
        "{",
        f"    int differs = {c.name}_played(0);",
        "    if (differs == 0) {",
        f"        differs = {c.name}_played(1);",
        "        if (differs != 0) {",
        f"            differs = differs + {passed};",
        "        }",
        "    }",
        "    if (differs == 0) {",
        f"        differs = {c.name}_rested();",
        "        if (differs != 0) {",
        f"            differs = differs + {2 * passed};",
        "        }",
        "    }",
        "    return differs;",
        "}",
        "",
    ]
