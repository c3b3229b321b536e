"""The floats that a target stores: one way that suits most designs, and a second where rounding spoils that."""

from __future__ import annotations

from collections.abc import Sequence
from math import inf

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.realization import Realization, realization, stored_pulse
from realize.arithmetic.recursion import Recursion
from realize.checks import Check, ContinuousReference
from realize.design import Design
from realize.errors import Refused
from realize.transfer import PulseTransferFunction
from realize.workflow.gate import gate
from realize.workflow.stored import Simulation, Stored, checks_of_stored

#: A check that is out by more than this many times what rounding does to the frequency response is out by the method,
#: and would be in delta: figures of response, gain and roots follow the response with a factor near 1, those of the
#: step, an integral over it, with a few. It only spares a second attempt, so an estimate does.
_LEVERAGE = 10


def suiting_floats(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction) -> Stored:
    """The cascade; sections in delta where rounding alone spoils it.

    Both are the same ``Gd(z)``: where delta is within tolerance and the cascade is not, rounding is what spoils it.
    """
    try:
        stored = float_numbers(design, reference, pulse, "auto")
    except Refused as refusal:
        instead = _in_delta(design, reference, pulse, f"cascade is refused ({refusal.found})")
        if instead is None:
            raise
        return instead
    blocking, _ = gate(stored.checks, design.accept)
    if not blocking or _is_by_method(blocking, _rounding_effect(pulse, stored.pulse)):
        return stored
    out = ", ".join(dict.fromkeys(check.check for check in blocking))
    why = f"rounded to {design.target.arithmetic}, {stored.realization.structure} is out of tolerance ({out})"
    return _in_delta(design, reference, pulse, why) or stored


def _is_by_method(blocking: Sequence[Check], effect: float) -> bool:
    """Whether a check is farther out than rounding could bring it. A unit is a hundredth or more of the figure."""
    return any(
        c.difference is not None and c.tolerance and (c.difference - c.tolerance) / 100 > _LEVERAGE * effect
        for c in blocking
    )


def _rounding_effect(exact: PulseTransferFunction, stored: PulseTransferFunction) -> float:
    """Share by which the frequency response moves at most, to first order.

    Notes
    -----
    A root p moved by d changes its factor ``z - p`` by ``d / |z - p|``, on the unit circle at most by d over the
    distance of p to the circle, ``||p|^2 - 1| / (|p| + 1)``. Infinite where a root was lost.
    """
    effect = abs(float(stored.gain / exact.gain) - 1)
    for before, after in ((exact.poles, stored.poles), (exact.zeros, stored.zeros)):
        if sum(root.count for root in before) != sum(root.count for root in after):
            return inf
        for root in after:
            value = min((each.value for each in before), key=lambda own: abs(own - root.value))
            moved = abs(value - root.value)
            from_circle = abs(2 * value.real + abs(value) ** 2) / (abs(1 + value) + 1)
            if moved:
                effect += root.count * (moved / from_circle if from_circle else inf)
    return effect


def _in_delta(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction, why: str) -> Stored | None:
    """Sections in delta, with the reason in their note, if they are within every tolerance."""
    try:
        stored = float_numbers(design, reference, pulse, "delta")
    except Refused:
        return None
    blocking, _ = gate(stored.checks, design.accept)
    note = f"structure delta: {why}; sections in delta = z - 1 are within every tolerance"
    return None if blocking else stored._replace(note=note)


def float_numbers(
    design: Design, reference: ContinuousReference, pulse: PulseTransferFunction, structure: str
) -> Stored:
    """One way of storing floats, with its checks.

    Raises
    ------
    Refused
        When the format or the structure cannot hold the design.
    """
    return checked_floats(design, reference, realization(pulse, FORMATS[design.target.arithmetic], structure))


def checked_floats(design: Design, reference: ContinuousReference, stored: Realization) -> Stored:
    """Stored floats with their checks."""
    as_stored = stored_pulse(stored)
    checks = checks_of_stored(design, reference, as_stored, lambda: _float_simulation(design, stored))
    return Stored(stored, as_stored, checks)


def _float_simulation(design: Design, stored: Realization) -> Simulation:
    """The emitted recursion, cleared before each run."""
    target = design.target
    model = Recursion(stored, design.output.range, target.anti_windup, target.tracking_time_s, target.guard_nonfinite)

    def run(inputs: Sequence[float]) -> list[float]:
        model.clear()
        return model.run(inputs)

    return run
