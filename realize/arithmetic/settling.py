"""How a state comes to rest at a given input and output: the bumpless start.

Conventions as in :mod:`realize.arithmetic.sample`; here ``input``, ``output`` and the new state are all locals.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, NamedTuple

from realize.arithmetic.realization import DeltaSection
from realize.arithmetic.sample import (
    Limit,
    Sample,
    Step,
    Sum,
    at_least,
    copied,
    least_normal,
    needed,
    plain,
    product,
    section_following,
    section_output,
)
from realize.errors import RealizeError

if TYPE_CHECKING:
    from realize.algebra.rounding import FloatFormat
    from realize.arithmetic.realization import AnySection, Realization


class Settling(NamedTuple):
    """The way to rest.

    Attributes
    ----------
    steps : tuple of Step
        From ``input`` and ``output`` to the new state and, with an integral, ``wanted`` (the output within its
        limits), without one ``command`` (the next output).
    stored : tuple of (str, str)
        State fields and the locals that go into them.
    integrating : bool
        Whether only input 0 is at rest.
    bound, floor : float
        Without an integral, ``output`` is the output at rest when ``|command - output| <= bound |input| + floor``.
    """

    steps: tuple[Step, ...]
    stored: tuple[tuple[str, str], ...]
    integrating: bool
    bound: float
    floor: float


def settle(realization: Realization, sample: Sample) -> Settling:
    """List the steps that bring a state to rest.

    Raises
    ------
    RealizeError
        When a stored section has a pole at z = 1, which has no state of rest.

    Notes
    -----
    At rest a section gives ``y = g u`` with its gain g at z = 1, computed exactly and rounded, and keeps
    ``s_n = b_n u - a_n y``, ``s_i = s_{i+1} + b_i u - a_i y``; one in delta, whose increments are then 0,
    ``s_1 = y - b_0 u``, ``s_{i+1} = a_i y - b_i u``. It hands on ``b_0 u + s_1``, as in the next sample. An integral
    chain is at rest only at input 0; ``I_{i+1} = -R_i x`` keeps all but the last still otherwise.
    """
    stored_gains, bound, floor = rest_figures(realization)
    steps: list[Step] = []
    last = "input"
    for k, (section, gain) in enumerate(zip(realization.sections, stored_gains, strict=True), 1):
        steps += _settled_section(k, section, gain, last)
        last = f"section{k}_output"
    if realization.integral:
        steps += _settled_integral(realization, last if realization.sections else None, sample)
        last = "unclamped"
    steps.append(Limit("command", last) if sample.low is not None else copied("command", last))
    stored = tuple((field, _settled_name(field)) for field in sample.fields)
    verdict = "wanted" if realization.integral else "command"
    read = needed(steps, {verdict, *(name for _, name in stored)})
    return Settling(read, stored, bool(realization.integral), bound, floor)


def rest_figures(realization: Realization) -> tuple[list[float], float, float]:
    """Gain at rest of every section, rounded; bound and floor of :class:`Settling`.

    Raises
    ------
    RealizeError
        When a stored section has a pole at z = 1.
    """
    exact = [_gain(section, k) for k, section in enumerate(realization.sections, 1)]
    gains = [realization.format.round(gain) for gain in exact]
    bound, floor = (0.0, 0.0) if realization.integral else _bound(realization, exact, gains)
    return gains, bound, floor


def _gain(section: AnySection, k: int) -> Fraction:
    """Gain at z = 1 of the stored coefficients, exactly."""
    b, a = section.in_z()
    below = 1 + sum(a)
    if below == 0:
        raise RealizeError(
            "realization",
            f"rounding moved a pole of section {k} to z = 1",
            "poles at z = 1 only as integral states",
            "use float64, or a lower sample rate",
        )
    return sum(b, Fraction(0)) / below


def _settled_section(k: int, section: AnySection, gain: float, source: str) -> list[Step]:
    answer = f"section{k}_settled"
    settled = Sum(answer, product(1, f"section{k}_gain", gain, source))
    states = _delta_states if isinstance(section, DeltaSection) else _states
    return [settled, *states(k, section, source, answer), section_output(k, section, source, "")]


def _states(k: int, section: AnySection, source: str, answer: str) -> list[Step]:
    """Each state from the one above it."""
    return [
        Sum(f"section{k}_{i}", section_following(k, section, i, "", source, answer))
        for i in range(len(section.a), 0, -1)
    ]


def _delta_states(k: int, section: AnySection, source: str, answer: str) -> list[Step]:
    """Each state as the one that makes the increment of the state below it 0."""
    back = (1.0, *section.a)
    return [
        Sum(
            f"section{k}_{i + 1}",
            (
                *product(1, f"section{k}_a{i}", back[i], answer),
                *product(-1, f"section{k}_b{i}", section.b[i], source),
            ),
        )
        for i in range(len(section.a))
    ]


def _settled_integral(realization: Realization, rest: str | None, sample: Sample) -> list[Step]:
    others = (plain(rest),) if rest else ()
    less_others = (plain(rest, -1),) if rest else ()
    wanted: Step = copied("wanted", "output") if sample.low is None else Limit("wanted", "output")
    chain = [
        Sum(f"integral{i + 1}", product(-1, f"integral{i}_gain", gain, "input"))
        for i, gain in enumerate(realization.integral[:-1], 1)
    ]
    first = Sum("integral1", (plain("wanted"), *less_others))
    return [wanted, first, *chain, Sum("unclamped", (*others, plain("integral1")))]


def _settled_name(field: str) -> str:
    """The local that goes into a state field."""
    if field.endswith("_rest"):
        return "zero"
    return "input" if field == "accepted" else field


def _bound(realization: Realization, exact: Sequence[Fraction], stored: Sequence[float]) -> tuple[float, float]:
    """How far the command at rest can be from the exact gain of the stored coefficients times x, rounded once.

    Notes
    -----
    ``u`` is half a unit in the last place of 1, ``h`` half the least subnormal. A section adds ``c |x| + d`` to what
    its exact gain g makes of its input, and hands on ``|g| + c`` times what came in. The asked output is within ``u``
    of the exact one; the three roundings of the comparison are covered by ``1 + 8 u``, their underflow by ``2 h``.
    """
    target = realization.format
    u, h = _half_units(target)
    size, error, floor = Fraction(1), Fraction(0), Fraction(0)
    for section, gain, rounded in zip(realization.sections, exact, stored, strict=True):
        added = _added_in_delta if isinstance(section, DeltaSection) else _added
        # The answer fl(fl(g) x) of a section is within e |x| + h of g x.
        c, d = added(section, abs(gain), abs(Fraction(rounded) - gain) + u * abs(Fraction(rounded)), target)
        floor = (abs(gain) + c) * floor + d
        error = (abs(gain) + c) * error + c * size
        size *= abs(gain)
    slack = 1 + 8 * u
    least = Fraction(least_normal(target))
    return at_least((error + u * size) * slack, target), at_least(max(floor * slack + 2 * h, least), target)


def _half_units(target: FloatFormat) -> tuple[Fraction, Fraction]:
    """Half a unit in the last place of 1, and half the least subnormal."""
    return Fraction(1, 2**target.precision), Fraction(2) ** (target.least_exponent - 1)


def _added(section: AnySection, gain: Fraction, e: Fraction, target: FloatFormat) -> tuple[Fraction, Fraction]:
    """``c`` and ``d`` of a section in z.

    Notes
    -----
    ``b_0 x + s_1`` adds up ``b_i x`` and ``-a_i y`` with at most ``2n + 1`` roundings each, in ``2n + 1`` products;
    ``gamma_k = k u/(1 - k u)``. So ``c = gamma_{2n+1} (sum |b| + (|g| + e) sum |a|) + e |sum a|`` and
    ``d = h (2n + 1 + 2 sum |a|)``.
    """
    u, h = _half_units(target)
    k = 2 * len(section.a) + 1
    forward = sum((abs(Fraction(b)) for b in section.b), Fraction(0))
    back = sum((abs(Fraction(a)) for a in section.a), Fraction(0))
    c = k * u / (1 - k * u) * (forward + (gain + e) * back) + e * abs(sum(map(Fraction, section.a), Fraction(0)))
    return c, h * (k + 2 * back)


def _added_in_delta(section: AnySection, gain: Fraction, e: Fraction, target: FloatFormat) -> tuple[Fraction, Fraction]:
    """``c`` and ``d`` of a section in delta.

    Notes
    -----
    The answer is y, within ``e |x| + h`` of ``g x``. ``p = fl(b_0 x)`` is the same number in ``s_1 = fl(y - p)`` and in
    ``fl(p + s_1)``, so only these two additions round: by ``u |y - p|`` and ``u |p + s_1|``, in all at most
    ``u (2 + u) |y| + u (1 + u) |p|``, where ``|y| <= (|g| + e) |x| + h`` and ``|p| <= (1 + u) |b_0 x| + h``. So
    ``c = e + u (2 + u) (|g| + e) + u (1 + u)^2 |b_0|``, and ``d = h (1 + u (2 + u) + u (1 + u)) <= 2 h``.
    """
    u, h = _half_units(target)
    first = abs(Fraction(section.b[0]))
    return e + u * (2 + u) * (gain + e) + u * (1 + u) ** 2 * first, 2 * h
