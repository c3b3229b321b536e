"""How a state comes to rest at a given input and output: the bumpless start.

Conventions as in :mod:`realize.arithmetic.sample`; here ``input``, ``output`` and the new state are all locals.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, NamedTuple

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
    section_output,
    section_state,
)
from realize.errors import RealizeError

if TYPE_CHECKING:
    from realize.arithmetic.realization import Realization, Section


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
    At rest a section gives ``y = g u`` with ``g = sum b / (1 + sum a)``, computed exactly and rounded, and keeps
    ``s_n = b_n u - a_n y``, ``s_i = s_{i+1} + b_i u - a_i y``. It hands on ``b_0 u + s_1``, as in the next sample. An
    integral chain is at rest only at input 0; ``I_{i+1} = -R_i x`` keeps all but the last still otherwise.
    """
    exact = [_gain(section, k) for k, section in enumerate(realization.sections, 1)]
    stored_gains = [realization.format.round(gain) for gain in exact]
    steps: list[Step] = []
    last = "input"
    for k, (section, gain) in enumerate(zip(realization.sections, stored_gains, strict=True), 1):
        steps += _settled_section(k, section, gain, last)
        last = f"section{k}_output"
    if realization.integral:
        steps += _settled_integral(realization, last if realization.sections else None, sample)
        last = "unclamped"
    steps.append(Limit("command", last) if sample.low is not None else copied("command", last))
    bound, floor = (0.0, 0.0) if realization.integral else _bound(realization, exact, stored_gains)
    stored = tuple((field, _settled_name(field)) for field in sample.fields)
    verdict = "wanted" if realization.integral else "command"
    read = needed(steps, {verdict, *(name for _, name in stored)})
    return Settling(read, stored, bool(realization.integral), bound, floor)


def _gain(section: Section, k: int) -> Fraction:
    """Gain at z = 1 of the stored coefficients, exactly."""
    below = 1 + sum(map(Fraction, section.a))
    if below == 0:
        raise RealizeError(
            "realization",
            f"rounding moved a pole of section {k} to z = 1",
            "poles at z = 1 only as integral states",
            "use float64, or a lower sample rate",
        )
    return sum(map(Fraction, section.b), Fraction(0)) / below


def _settled_section(k: int, section: Section, gain: float, source: str) -> list[Step]:
    answer = f"section{k}_settled"
    settled = Sum(answer, product(1, f"section{k}_gain", gain, source))
    states = [section_state(k, section, i, "", source, answer) for i in range(len(section.a), 0, -1)]
    return [settled, *states, section_output(k, section, source, "")]


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
    ``u`` is half a unit in the last place of 1, ``h`` half the least subnormal, ``gamma_k = k u/(1 - k u)``. The answer
    ``fl(fl(g) x)`` of a section is within ``e |x| + h`` of ``g x``, ``e = |fl(g) - g| + u |fl(g)|``. ``b_0 x + s_1``
    adds up ``b_i x`` and ``-a_i y`` with at most ``2n + 1`` roundings each, in ``2n + 1`` products. So a section adds
    ``c |x| + d`` with ``c = gamma_{2n+1} (sum |b| + (|g| + e) sum |a|) + e |sum a|`` and
    ``d = h (2n + 1 + 2 sum |a|)``, and hands on ``|g| + c`` times what came in. The asked output is within ``u`` of
    the exact one; the three roundings of the comparison are covered by ``1 + 8 u``, their underflow by ``2 h``.
    """
    target = realization.format
    u, h = Fraction(1, 2**target.precision), Fraction(2) ** (target.least_exponent - 1)
    size, error, floor = Fraction(1), Fraction(0), Fraction(0)
    for section, gain, rounded in zip(realization.sections, exact, stored, strict=True):
        e = abs(Fraction(rounded) - gain) + u * abs(Fraction(rounded))
        k = 2 * len(section.a) + 1
        forward = sum((abs(Fraction(b)) for b in section.b), Fraction(0))
        back = sum((abs(Fraction(a)) for a in section.a), Fraction(0))
        c = k * u / (1 - k * u) * (forward + (abs(gain) + e) * back) + e * abs(
            sum(map(Fraction, section.a), Fraction(0))
        )
        floor = (abs(gain) + c) * floor + h * (k + 2 * back)
        error = (abs(gain) + c) * error + c * size
        size *= abs(gain)
    slack = 1 + 8 * u
    least = Fraction(least_normal(target))
    return at_least((error + u * size) * slack, target), at_least(max(floor * slack + 2 * h, least), target)
