"""The bit-exact model: what the firmware answers, computed in Python.

The steps of :mod:`realize.arithmetic.sample` are printed as Python functions and compiled, the way the firmware
prints them as C. float32 is computed with numpy's scalars, float64 with Python's own; both round once per operation.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import isfinite
from types import SimpleNamespace
from typing import TYPE_CHECKING, Any

import numpy as np

from realize.arithmetic.sample import (
    HOLD_INTEGRAL,
    Guard,
    Integrate,
    Limit,
    Step,
    Sum,
    Term,
    coefficients,
    describe,
    largest,
)
from realize.arithmetic.settling import Settling, settle

if TYPE_CHECKING:
    from realize.arithmetic.realization import Realization


class Recursion:
    """A realization at work, with one state; it starts cleared.

    Parameters
    ----------
    realization, output_range, anti_windup, tracking_time_s, guard_nonfinite
        As in :func:`realize.arithmetic.sample.describe`.

    Notes
    -----
    Values come and go as Python floats that are values of the format.
    """

    def __init__(
        self,
        realization: Realization,
        output_range: tuple[Fraction, Fraction] | None = None,
        anti_windup: str = HOLD_INTEGRAL,
        tracking_time_s: Fraction | None = None,
        guard_nonfinite: bool = True,
    ) -> None:
        self.realization = realization
        self.sample = describe(realization, output_range, anti_windup, tracking_time_s, guard_nonfinite)
        self._number: Any = np.float32 if realization.format.name == "float32" else float
        self._taken: dict[str, Any] = {}
        self._names: list[dict[str, Any]] = []
        self._functions = self._compiled_sample()
        self._settling: Settling | None = None
        self.clear()

    def clear(self) -> None:
        """All state zero."""
        self._state = SimpleNamespace(**dict.fromkeys(self.sample.fields, self._number(0)))

    def take(self, coefficients: Mapping[str, float]) -> None:
        """Go on with other coefficients, by the names of the steps; the state stays.

        Parameters
        ----------
        coefficients : mapping of str to float
            Values of the format; ``settled_bound`` and ``settled_floor`` too, where the preset asks for them.
        """
        self._taken = {name: self._number(value) for name, value in coefficients.items()}
        for names in self._names:
            names |= self._taken

    def output(self, value: float) -> float:
        """The clamped command for an input; changes nothing but what ``advance`` needs."""
        with np.errstate(all="ignore"):
            return float(self._functions["output"](self._state, self._number(value)))

    def advance(self, value: float, applied: float) -> None:
        """The rest of the sample, given what was really applied."""
        with np.errstate(all="ignore"):
            self._functions["advance"](self._state, self._number(value), self._number(applied))

    def update(self, value: float) -> float:
        """One sample: output, then advance with it."""
        return self.run([value])[0]

    def run(self, values: Sequence[float]) -> list[float]:
        """``update`` for many inputs."""
        update, state, number = self._functions["update"], self._state, self._number
        with np.errstate(all="ignore"):
            return [float(update(state, number(value))) for value in values]

    def preset(self, value: float, output: float) -> bool:
        """Come to rest at an input so that the next output is the given one.

        Returns
        -------
        bool
            True when that is possible. Otherwise the state is the nearest one: the output within its limits; without an
            integral the output that belongs to the input; with one, an integral that moves on. Arguments that are
            not finite, and a state that would not be, are refused: nothing changes.

        Raises
        ------
        RealizeError
            When a stored section has a pole at z = 1.
        """
        settling = self._way_to_rest()
        if not (isfinite(value) and isfinite(output)):
            return False
        with np.errstate(all="ignore"):
            return self._preset(settling, self._number(value), self._number(output))

    def refused(self, value: float, output: float) -> str | None:
        """The first field of the state that ``preset`` refuses to set for finite arguments; None if there is none."""
        settling = self._way_to_rest()
        with np.errstate(all="ignore"):
            stored, _ = self._functions["settle"](self._number(value), self._number(output))
        fields = zip(settling.stored, stored, strict=True)
        return next((field for (field, _), settled in fields if not isfinite(settled)), None)

    def _way_to_rest(self) -> Settling:
        if self._settling is None:
            self._settling = settle(self.realization, self.sample)
            self._functions |= self._compiled_settling(self._settling)
        return self._settling

    def _preset(self, settling: Settling, value: Any, output: Any) -> bool:
        stored, reached = self._functions["settle"](value, output)
        if not all(map(isfinite, stored)):
            return False
        for (field, _), settled in zip(settling.stored, stored, strict=True):
            setattr(self._state, field, settled)
        if settling.integrating:
            return bool(value == 0 and reached == output)
        bound, floor = (
            self._taken.get(name, self._number(own))
            for name, own in (("settled_bound", settling.bound), ("settled_floor", settling.floor))
        )
        margin = bound * (-value if value < 0 else value) + floor
        return bool(-margin <= reached - output <= margin)

    def _compiled_sample(self) -> dict[str, Any]:
        sample = self.sample
        text = [
            *_function("output", "state, input", sample.output, sample.result),
            *_function("advance", "state, input, applied", sample.advance, "None"),
            *_function("update", "state, input", sample.update, sample.result),
        ]
        return self._compiled(text, coefficients((*sample.output, *sample.advance)))

    def _compiled_settling(self, settling: Settling) -> dict[str, Any]:
        values = "".join(f"{name}, " for _, name in settling.stored)
        reached = "wanted" if settling.integrating else "command"
        text = _function("settle", "input, output", settling.steps, f"({values}), {reached}")
        return self._compiled(text, coefficients(settling.steps))

    def _compiled(self, text: list[str], values: dict[str, float]) -> dict[str, Any]:
        """Compile functions whose text holds only the fixed names of the steps; numbers are bound by name."""
        values = values | {"zero": 0.0, "largest": largest(self.sample.format)}
        if self.sample.low is not None and self.sample.high is not None:
            values |= {"low": self.sample.low, "high": self.sample.high}
        names = {name: self._number(value) for name, value in values.items()} | self._taken
        exec("\n".join(text), names)
        self._names.append(names)
        return names


def _function(name: str, parameters: str, steps: Sequence[Step], result: str) -> list[str]:
    lines = [f"def {name}({parameters}):"]
    for step in steps:
        lines += [f"    {line}" for line in _lines(step)]
    return [*lines, f"    return {result}"]


def _lines(step: Step) -> list[str]:
    if isinstance(step, Sum):
        return [f"{step.target} = {_sum(step.terms)}"]
    if isinstance(step, Guard):
        return [f"if not -largest <= {step.target} <= largest: {step.target} = {step.fallback}"]
    if isinstance(step, Limit):
        return [
            f"{step.target} = {step.source} if {step.source} > low else low",
            f"{step.target} = {step.target} if {step.target} < high else high",
        ]
    return _integrate(step)


def _integrate(step: Integrate) -> list[str]:
    target, increment, rest, applied = step
    if rest is None:
        added = [f"{target} = {target} + {increment}"]
    else:
        added = [
            f"addend = {increment} + {rest}",
            f"total = {target} + addend",
            f"{rest} = addend - (total - {target})",
            f"{target} = total",
        ]
    if applied is None:
        return added
    pushes = f"{increment} > zero if unclamped > {applied} else unclamped < {applied} and {increment} < zero"
    return [f"if not ({pushes}):", *(f"    {line}" for line in added)]


def _sum(terms: tuple[Term, ...]) -> str:
    text = ""
    for term in terms:
        minus = "-" if term.sign < 0 else ""
        text += f" {minus or '+'} " if text else minus
        text += f"{term.coefficient} * {term.variable}" if term.coefficient else term.variable
    return text or "zero"
