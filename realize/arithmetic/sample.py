"""What one sample does, as a list of steps.

The firmware text and the Python model are two printings of the same steps, so operation order and rounding cannot
drift apart. Every operation rounds once, to the format of the realization.

Conventions: a section is in transposed direct form II, ``b`` and ``a`` in ascending powers of 1/z, ``a`` without
its leading 1 and subtracted. In delta the same form holds with ascending powers of 1/delta, ``delta = z - 1``: a state
adds up what in z it would become. Integral states are in units of the output. ``state.x`` is kept between samples, any
other name lives within one; a limit is a value of the format. The history never sees the clamped output.
"""

from __future__ import annotations

import math
from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, NamedTuple

import numpy as np

from realize.arithmetic.realization import DeltaSection
from realize.errors import RealizeError

if TYPE_CHECKING:
    from realize.arithmetic.formats import FloatFormat
    from realize.arithmetic.realization import AnySection, Realization

#: Formats whose integral states carry a second word with what the addition lost. In float32 an increment of 2.5e-8
#: (1 % error, 40 s, 10 kHz) beside a state of 1 is below half a unit in the last place; float64 has 29 bits more. So do
#: the states of sections in delta: beside a pole of 2 Hz at 500 kHz (2.5e-5 from z = 1) they would stop 0.1 % short.
INTEGRAL_COMPENSATED = {"float32": True, "float64": False}

HOLD_INTEGRAL = "hold-integral"
BACK_CALCULATION = "back-calculation"


class Term(NamedTuple):
    """``sign * coefficient * variable``; without a name the coefficient is exactly 1 and is not multiplied."""

    sign: int
    coefficient: str | None
    value: float
    variable: str


class Sum(NamedTuple):
    """``target`` becomes the sum of the terms, added from left to right; 0 without any."""

    target: str
    terms: tuple[Term, ...]


class Guard(NamedTuple):
    """``target`` becomes ``fallback`` when it is not finite."""

    target: str
    fallback: str


class Limit(NamedTuple):
    """``target`` becomes ``source``, raised to the low limit, then lowered to the high one.

    Not a number, which only an overflow can bring here, becomes the low limit: no NaN reaches an actuator.
    """

    target: str
    source: str


class Integrate(NamedTuple):
    """``target += increment``; with a ``rest``, that word carries what the addition lost into the next one.

    Where ``applied`` is named, nothing is added while the increment pushes further out of what was applied: while it
    is positive and ``unclamped > applied``, or negative and ``unclamped < applied``.

    Notes
    -----
    With a rest: ``y = d + r; t = s + y; r = y - (t - s); s = t`` (Kahan 1965, from memory). Under round-to-nearest
    ``t + r = s + y`` exactly where ``|s| >= |y|``. Otherwise ``t - s`` is within a factor of 2 of y, so ``y - (t - s)``
    is exact and only ``t - s`` rounds: an error of at most a unit in the last place of y, as the product that made the
    increment has. No value needs another branch.
    """

    target: str
    increment: str
    rest: str | None
    applied: str | None


Step = Sum | Guard | Limit | Integrate


class Sample(NamedTuple):
    """Everything a sample does.

    Attributes
    ----------
    format : FloatFormat
        Of every operation.
    low, high : float or None
        Limits of the output, inside the declared range.
    fields : tuple of str
        What is kept between samples, without ``state.``.
    result : str
        Name of the command after ``output`` and ``update``.
    output, advance, update : tuple of Step
        The three functions. ``output`` keeps what ``advance`` needs; ``update`` is both, with the command applied.
    """

    format: FloatFormat
    low: float | None
    high: float | None
    fields: tuple[str, ...]
    result: str
    output: tuple[Step, ...]
    advance: tuple[Step, ...]
    update: tuple[Step, ...]


def describe(
    realization: Realization,
    output_range: tuple[Fraction, Fraction] | None = None,
    anti_windup: str = HOLD_INTEGRAL,
    tracking_time_s: Fraction | None = None,
    guard_nonfinite: bool = True,
) -> Sample:
    """List the steps of a sample.

    Parameters
    ----------
    realization : Realization
        Sections and integral gains as stored.
    output_range : tuple of Fraction, optional
        Rounded inward to the format, so that the command never leaves it. Nothing is limited without it.
    anti_windup : str
        ``hold-integral``, ``back-calculation`` or ``none``.
    tracking_time_s : Fraction, optional
        Needed by ``back-calculation``.
    guard_nonfinite : bool
        Whether an input that is NaN or infinite counts as the previous accepted one, and such an applied value as
        the command.

    Raises
    ------
    RealizeError
        When the realization is empty, no value of the format lies in the output range, or back-calculation has no
        tracking time.
    """
    if not (realization.sections or realization.integral):
        raise RealizeError(
            "realization", "it is empty", "a section or an integral state", "check the transfer function"
        )
    low, high = _inward(output_range, realization.format) if output_range else (None, None)
    output, result = _output_steps(realization, low is not None)
    gain = _tracking_gain(realization, tracking_time_s) if anti_windup == BACK_CALCULATION else 0.0
    apart = _advance_steps(realization, anti_windup, gain, "applied")
    joint = _advance_steps(realization, anti_windup if output_range else "none", gain, result)
    guard, measured, accept = _guards(apart, result) if guard_nonfinite else ((), (), ())
    kept = _kept(output, (*measured, *apart))
    return Sample(
        realization.format,
        low,
        high,
        (*_state_fields(realization), *(("accepted",) if guard_nonfinite else ()), *kept),
        result,
        needed((*guard, *output, *(copied(f"state.{name}", name) for name in kept)), {result}),
        (*(copied(name, f"state.{name}") for name in kept), *guard, *measured, *apart, *accept),
        needed((*guard, *output, *joint, *accept), {result}),
    )


def is_recursive(coefficient: str) -> bool:
    """Whether a coefficient is one of ``a``, which are subtracted."""
    return coefficient.startswith("section") and "_a" in coefficient


def coefficients(steps: Sequence[Step]) -> dict[str, float]:
    """Name and value of every coefficient that is multiplied, in the order of first use."""
    terms = (term for step in steps if isinstance(step, Sum) for term in step.terms)
    return {term.coefficient: term.value for term in terms if term.coefficient}


def variables(steps: Sequence[Step]) -> set[str]:
    """The names a list of steps reads."""
    names: set[str] = set()
    for step in steps:
        if isinstance(step, Sum):
            names |= {term.variable for term in step.terms}
        elif isinstance(step, Guard):
            names |= {step.target, step.fallback}
        elif isinstance(step, Limit):
            names.add(step.source)
        else:
            names |= {step.increment, *(("unclamped", step.applied) if step.applied else ())}
    return names


def needed(steps: Sequence[Step], wanted: set[str]) -> tuple[Step, ...]:
    """The steps that set the state or something wanted, or something those read."""
    kept: list[Step] = []
    for step in reversed(steps):
        if isinstance(step, Guard) or step.target in wanted or step.target.startswith("state."):
            kept.append(step)
            wanted = wanted | variables([step])
    return tuple(reversed(kept))


# ---------------------------------------------------------------- sums, shared with settling


def product(sign: int, name: str, value: float, variable: str) -> tuple[Term, ...]:
    """The one place where a coefficient of exactly 0, 1 or -1 loses its multiplication.

    That changes no bit: 1 and -1 multiply exactly, and adding a zero changes at most the sign of a zero.
    """
    if value == 0:
        return ()
    if abs(value) == 1:
        return (plain(variable, sign * int(value)),)
    return (Term(sign, name, value, variable),)


def plain(variable: str, sign: int = 1) -> Term:
    """A variable on its own."""
    return Term(sign, None, 1.0, variable)


def copied(target: str, source: str) -> Sum:
    """``target = source``."""
    return Sum(target, (plain(source),))


def section_output(k: int, section: AnySection, source: str, place: str) -> Sum:
    """``y = b_0 u + s_1``, the state found at ``place`` (``state.`` or nothing)."""
    now = product(1, f"section{k}_b0", section.b[0], source)
    return Sum(f"section{k}_output", (*now, plain(f"{place}section{k}_1")) if section.a else now)


def section_following(k: int, section: AnySection, i: int, place: str, source: str, answer: str) -> tuple[Term, ...]:
    """``s_{i+1} + b_i u - a_i y``: what state i becomes, or in delta what is added to it."""
    following = (plain(f"{place}section{k}_{i + 1}"),) if i < len(section.a) else ()
    forward = product(1, f"section{k}_b{i}", section.b[i], source)
    back = product(-1, f"section{k}_a{i}", section.a[i - 1], answer)
    return (*following, *forward, *back)


# ---------------------------------------------------------------- the steps


def _output_steps(realization: Realization, limited: bool) -> tuple[tuple[Step, ...], str]:
    """From the input to the command, and the command's name."""
    steps: list[Step] = []
    last = "input"
    for k, section in enumerate(realization.sections, 1):
        steps.append(section_output(k, section, last, "state."))
        last = f"section{k}_output"
    if realization.integral:
        rest = (plain(last),) if realization.sections else ()
        steps.append(Sum("unclamped", (*rest, plain("state.integral1"))))
        last = "unclamped"
    if limited:
        steps.append(Limit("command", last))
        last = "command"
    return tuple(steps), last


def _advance_steps(realization: Realization, anti_windup: str, tracking_gain: float, applied: str) -> tuple[Step, ...]:
    """State updates, given the locals of the output steps."""
    return (
        *_section_states(realization),
        *_integral_states(realization, anti_windup, tracking_gain, applied),
    )


def _section_states(realization: Realization) -> list[Step]:
    steps: list[Step] = []
    last = "input"
    for k, section in enumerate(realization.sections, 1):
        answer = f"section{k}_output"
        for i in range(1, len(section.a) + 1):
            state, following = f"state.section{k}_{i}", section_following(k, section, i, "state.", last, answer)
            if isinstance(section, DeltaSection):
                increment = f"section{k}_{i}_increment"
                steps += [Sum(increment, following), Integrate(state, increment, _rest(realization, state), None)]
            else:
                steps.append(Sum(state, following))
        last = answer
    return steps


def _rest(realization: Realization, state: str) -> str | None:
    """The word that carries what an addition to a state lost, where the format needs one."""
    return f"{state}_rest" if INTEGRAL_COMPENSATED[realization.format.name] else None


def _integral_states(realization: Realization, anti_windup: str, tracking_gain: float, applied: str) -> list[Step]:
    """``I_i += R_i x + I_{i+1}``, with the state above as it was before this sample."""
    steps: list[Step] = []
    back: tuple[Term, ...] = ()
    if realization.integral and anti_windup == BACK_CALCULATION and tracking_gain:
        steps.append(Sum("shortfall", (plain(applied), plain("unclamped", -1))))
        back = product(1, "tracking_gain", tracking_gain, "shortfall")
    held = applied if anti_windup == HOLD_INTEGRAL else None
    for i, gain in enumerate(realization.integral, 1):
        state, increment = f"state.integral{i}", f"integral{i}_increment"
        forward = product(1, f"integral{i}_gain", gain, "input")
        above = (plain(f"state.integral{i + 1}"),) if i < len(realization.integral) else ()
        steps.append(Sum(increment, (*forward, *above, *(back if i == 1 else ()))))
        steps.append(Integrate(state, increment, _rest(realization, state), held))
    return steps


def _tracking_gain(realization: Realization, tracking_time_s: Fraction | None) -> float:
    if tracking_time_s is None or tracking_time_s <= 0:
        raise RealizeError(
            "target.tracking_time",
            "it is missing" if tracking_time_s is None else f"{tracking_time_s} s",
            "a positive time",
            'tracking_time = "0.2 s", or anti_windup = "hold-integral"',
        )
    return realization.format.round(realization.period_s / tracking_time_s)


def _guards(advance: Sequence[Step], command: str) -> tuple[tuple[Step, ...], tuple[Step, ...], tuple[Step, ...]]:
    """Guard of the input, guard of the applied value where it is read, and the input kept for next time."""
    measured = (Guard("applied", command),) if "applied" in variables(advance) else ()
    return (Guard("input", "state.accepted"),), measured, (copied("state.accepted", "input"),)


def _kept(output: Sequence[Step], following: Sequence[Step]) -> tuple[str, ...]:
    """Locals of the output steps that the rest of the sample reads."""
    read = variables(following)
    return tuple(step.target for step in output if step.target in read)


def _state_fields(realization: Realization) -> tuple[str, ...]:
    words = ("", "_rest") if INTEGRAL_COMPENSATED[realization.format.name] else ("",)
    sections = [
        f"section{k}_{i}{word}"
        for k, section in enumerate(realization.sections, 1)
        for i in range(1, len(section.a) + 1)
        for word in (words if isinstance(section, DeltaSection) else ("",))
    ]
    integrals = [f"integral{i}{word}" for i in range(1, len(realization.integral) + 1) for word in words]
    return (*sections, *integrals)


# ---------------------------------------------------------------- values of the format


def largest(target: FloatFormat) -> float:
    """The largest finite value of a format."""
    return math.ldexp(2.0 - 2.0 ** (1 - target.precision), target.most_exponent - 1)


def least_normal(target: FloatFormat) -> float:
    """The least positive value of a format that has its full precision."""
    return math.ldexp(1.0, target.least_exponent + target.precision - 1)


def at_least(value: Fraction, target: FloatFormat) -> float:
    """The least value of the format that is not below."""
    near = target.round(value)
    if Fraction(near) >= value:
        return near
    if target.name == "float32":
        return float(np.nextafter(np.float32(near), np.float32(np.inf)))
    return math.nextafter(near, math.inf)


def _inward(limits: tuple[Fraction, Fraction], target: FloatFormat) -> tuple[float, float]:
    """The widest limits of the format that stay within the range."""
    most = Fraction(largest(target))
    low = at_least(max(limits[0], -most), target)
    high = 0.0 - at_least(-min(limits[1], most), target)
    if low > high:
        raise RealizeError(
            "signals.output.range",
            f"no value of {target.name} lies in it",
            "a range wider than the spacing of the format",
            "widen the range, or use float64",
        )
    return low, high
