"""The numbers that a target stores, with their checks.

Floats have one way of being stored that suits most designs, and a second where rounding spoils that. Integers have
several, which differ in cost and in what rounding does: they are tried from the cheapest on.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from math import inf
from typing import TYPE_CHECKING, NamedTuple

from realize.arithmetic.formats import FORMATS
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.realization import Realization, realization, stored_pulse
from realize.arithmetic.recursion import Recursion
from realize.arithmetic.sample import HOLD_INTEGRAL
from realize.checks import Check, ContinuousReference, Tolerances, run_checks
from realize.checks.round_off import check_round_off
from realize.design import Design
from realize.errors import Refused
from realize.transfer import PulseTransferFunction, TransferFunction
from realize.workflow.causal import signals_of
from realize.workflow.gate import gate

if TYPE_CHECKING:
    from realize.arithmetic.integer import IntegerRealization, Interface, Rounded, StructureChoice

#: Relative width of a peak gain that a tolerance is compared with.
_GAIN_WIDTH = Fraction(1, 1 << 10)

#: A check that is out by more than this many times what rounding does to the frequency response is out by the method,
#: and would be in delta: figures of response, gain and roots follow the response with a factor near 1, those of the
#: step, an integral over it, with a few. It only spares a second attempt, so an estimate does.
_LEVERAGE = 10

Simulation = Callable[[Sequence[float]], list[float]]


class Stored(NamedTuple):
    """What a target stores.

    Attributes
    ----------
    realization : Realization or IntegerRealization
        The numbers.
    pulse : PulseTransferFunction
        What they are, exactly, in physical units.
    checks : tuple of Check
        Of them, those of the loop apart.
    note : str
        Why this structure; empty where there is no choice.
    """

    realization: Realization | IntegerRealization
    pulse: PulseTransferFunction
    checks: tuple[Check, ...]
    note: str = ""


def stored_numbers(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction) -> Stored:
    """Round a pulse transfer function to the design's target, and check what is stored.

    Parameters
    ----------
    design : Design
        With its target, signals, tolerances and agreed deviations.
    reference : ContinuousReference
        What the checks compare with.
    pulse : PulseTransferFunction
        ``Gd(z)``, unrounded.

    Raises
    ------
    Refused
        When the target cannot hold it.
    RealizeError
        When an integer target lacks the ranges or sizes of its signals.
    """
    if design.target.arithmetic not in FORMATS:
        return _integers(design, reference, pulse)
    if design.target.structure != "auto":
        return float_numbers(design, reference, pulse, design.target.structure)
    return _floats(design, reference, pulse)


def _floats(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction) -> Stored:
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
    stored = realization(pulse, FORMATS[design.target.arithmetic], structure)
    as_stored = stored_pulse(stored)
    return Stored(stored, as_stored, _checks(design, reference, as_stored, lambda: _float_simulation(design, stored)))


class _Coarse(NamedTuple):
    """A structure whose coefficients alone are out of tolerance; orders by how far, then by its place."""

    out: tuple[int, float]
    place: int
    made: Rounded


def _integers(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction) -> Stored:
    """The cheapest structure that is within every tolerance; without one, the first that is least out.

    A proof costs far more than the checks of coefficients, so that those which are out by these wait. What a proof
    adds takes a structure farther out: where it is in doubt which is least out, the nearest are proven first. (Room
    that a proof finds wanting makes coefficients coarser; all checks judge them again.)
    """
    # Here, because a design in floating point does not need it, and its start is short.
    from realize.arithmetic.integer import choices, interface_of

    interface = interface_of(design.input, design.output, design.target.arithmetic)
    unsuited: dict[str, Refused] = {}
    order = choices(pulse, interface, design.target.arithmetic, design.target.structure, unsuited)
    refused = [(-1, name, refusal) for name, refusal in unsuited.items()]
    failed: list[tuple[str, tuple[Check, ...]]] = []
    proven: list[tuple[tuple[int, float], int, Stored]] = []
    coarse: list[_Coarse] = []
    judge = _CoefficientJudge(design, reference)
    for place, choice in enumerate(order):
        try:
            made = _rounded(design, pulse, interface, choice)
            blocking = judge(made.pulse)
            if blocking:
                coarse.append(_Coarse(_out(blocking), place, made))
            else:
                stored = _proven(design, reference, made)
                blocking, _ = gate(stored.checks, design.accept)
                proven.append((_out(blocking), place, stored))
        except Refused as refusal:
            refused.append((place, choice.structure, refusal))
            continue
        if not blocking:
            return stored._replace(note=_because(design, choice, failed, dict.fromkeys(name for _, name, _ in refused)))
        failed.append((choice.structure, blocking))
    return _least_out(design, reference, proven, coarse, refused)


class _CoefficientJudge:
    """What blocks by the coefficients alone; kept, for widths of sums often leave them as they are."""

    def __init__(self, design: Design, reference: ContinuousReference) -> None:
        self._design, self._reference = design, reference
        self._known: dict[object, tuple[Check, ...]] = {}

    def __call__(self, pulse: PulseTransferFunction) -> tuple[Check, ...]:
        key = pulse.numerator, pulse.denominator
        if key not in self._known:
            checks = _checks(self._design, self._reference, pulse)
            self._known[key], _ = gate(checks, self._design.accept)
        return self._known[key]


def _least_out(
    design: Design,
    reference: ContinuousReference,
    proven: Sequence[tuple[tuple[int, float], int, Stored]],
    coarse: Sequence[_Coarse],
    refused: Sequence[tuple[int, str, Refused]],
) -> Stored:
    """The first that is least out, the rest proven only as far as it takes to know."""
    found, refusals = list(proven), list(refused)
    for each in sorted(coarse, key=lambda each: each[:2]):
        if found and min(entry[:2] for entry in found) < each[:2]:
            break
        try:
            stored = _proven(design, reference, each.made)
        except Refused as refusal:
            refusals.append((each.place, each.made.structure, refusal))
            continue
        found.append((_out(gate(stored.checks, design.accept)[0]), each.place, stored))
    if not found:
        first: dict[str, Refused] = {}
        for _, name, why in sorted(refusals, key=lambda entry: entry[0]):
            first.setdefault(name, why)
        raise _none_does(design, first)
    return min(found, key=lambda entry: entry[:2])[2]


def integer_numbers(
    design: Design,
    reference: ContinuousReference,
    pulse: PulseTransferFunction,
    interface: Interface,
    choice: StructureChoice,
) -> Stored:
    """One way of storing integers, with its checks.

    Raises
    ------
    Refused
        When its words cannot hold the design.
    """
    return _proven(design, reference, _rounded(design, pulse, interface, choice))


def _rounded(design: Design, pulse: PulseTransferFunction, interface: Interface, choice: StructureChoice) -> Rounded:
    from realize.arithmetic.integer import rounded

    target = design.target
    tracking = pulse.period_s / target.tracking_time_s if target.tracking_time_s else Fraction(0)
    hold = target.anti_windup == HOLD_INTEGRAL
    return rounded(pulse, interface, choice.widths, choice.structure, hold=hold, tracking=tracking)


def _proven(design: Design, reference: ContinuousReference, made: Rounded) -> Stored:
    from realize.arithmetic.integer import proven_realization, stored_integer_pulse

    stored = proven_realization(made)
    _refuse_silent(stored)
    as_stored = stored_integer_pulse(stored)
    checks = _checks(design, reference, as_stored, lambda: _integer_simulation(stored))
    return Stored(stored, as_stored, (*checks, _round_off(design, stored)))


def _refuse_silent(stored: IntegerRealization) -> None:
    """Refuse an output that is always zero: less than half a count, whatever the input, and no integral."""
    port, gain = stored.program.interface.output, peak_gain(stored.proof.transfer, _GAIN_WIDTH).high
    assert gain is not None
    largest = gain * stored.program.interface.input.reach
    if stored.program.integral is not None or largest >= Fraction(1, 2):
        return
    raise Refused(
        "[signals.output] per_count",
        f"the whole input range moves the output by at most {float(largest):.3g} counts, so that it would stay at zero",
        "a gain with which the output moves by half a count at least",
        f"check the gain, or write a per_count of less than {float(2 * largest * port.per_count):.3g}",
    )


def _round_off(design: Design, stored: IntegerRealization) -> Check:
    """The proven bound beside what half a count of input can do by itself."""
    port, proof = stored.program.interface.output, stored.proof
    gain = peak_gain(proof.transfer, _GAIN_WIDTH).high
    assert gain is not None
    return check_round_off(
        Tolerances.of(design.tolerance), proof.output_error, gain / 2, Fraction(port.high - port.low)
    )


def _because(
    design: Design,
    choice: StructureChoice,
    failed: Sequence[tuple[str, tuple[Check, ...]]],
    refused: Iterable[str],
) -> str:
    """Why a structure was taken."""
    plural = "" if choice.multiplications == 1 else "s"
    cost = (
        f"{choice.multiplications} multiplication{plural} and {choice.state_bytes} bytes of state beside the integral"
    )
    chosen = f"structure {choice.structure}: {cost}"
    if design.target.structure != "auto":
        return chosen
    cheaper = [f"{name} ({', '.join(dict.fromkeys(c.check for c in out))} out)" for name, out in failed]
    left = dict.fromkeys([*cheaper, *(f"{name} (refused)" for name in refused)])
    others = f"; not {', '.join(left)}" if left else ""
    return f"{chosen}, the cheapest that is within every tolerance{others}"


def _none_does(design: Design, refusals: Mapping[str, Refused]) -> Refused:
    """One refusal from those of all structures, the reasons that differ in full.

    A structure that does not suit the poles explains nothing beside one that fails for another reason, and no
    structure makes up for signals that do not fit.
    """
    failed = [each for each in refusals.values() if each.where != "[target] structure"] or list(refusals.values())
    of_signals = [each for each in failed if each.where.startswith("[signals")]
    if of_signals:
        return of_signals[0]
    reasons = list(dict.fromkeys(refusal.found for refusal in failed))
    if len(reasons) == 1:
        return failed[0]
    return Refused(
        "[target] arithmetic",
        f"{design.target.arithmetic} does not hold this design in any structure: {'; '.join(reasons)}",
        "words that hold signals and coefficients",
        ", ".join([*_wider(design), "a lower sample rate, or a coarser per_count"]),
    )


def _wider(design: Design) -> list[str]:
    return ['arithmetic = "int32"'] if design.target.arithmetic == "int16" else ['arithmetic = "float32"']


def _out(blocking: Sequence[Check]) -> tuple[int, float]:
    """How far out: failures without a figure first, then the worst ratio."""
    ratios = [c.difference / c.tolerance for c in blocking if c.difference is not None and c.tolerance]
    return len(blocking) - len(ratios), max(ratios, default=0.0)


# ---------------------------------------------------------------- checks


def _checks(
    design: Design,
    reference: ContinuousReference,
    as_stored: PulseTransferFunction,
    simulation: Callable[[], Simulation] | None = None,
) -> tuple[Check, ...]:
    """Checks of the stored numbers; without a simulation those of their coefficients."""
    signals, tolerances = signals_of(design), Tolerances.of(design.tolerance)
    simulate = simulation() if simulation and signals.output_range else None
    checks = run_checks(reference, as_stored, "stored", tolerances, signals, simulate=simulate)
    return _with_added_growth(checks, reference.transfer, as_stored)


def _with_added_growth(
    checks: tuple[Check, ...], transfer: TransferFunction, stored: PulseTransferFunction
) -> tuple[Check, ...]:
    """Mark the stability check where the stored numbers have more growing poles than the design."""
    own = sum(root.count for root in transfer.poles if root.value.real > 0)
    # |z|^2 - 1 from z - 1, which keeps its digits next to the circle.
    growing = [r for r in stored.poles if 2 * r.value.real + abs(r.value) ** 2 > 0]
    if sum(root.count for root in growing) <= own:
        return checks
    farthest = max(growing, key=lambda root: abs(1 + root.value))
    at = 1 + farthest.value
    reason = f"the stored numbers have a growing pole that the design does not have; the farthest is z = {at:.5g}"
    return tuple(
        replace(c, difference=2.0, reason=reason, verdict="out") if c.check == "stability" and c.of == "stored" else c
        for c in checks
    )


def _float_simulation(design: Design, stored: Realization) -> Simulation:
    """The emitted recursion, cleared before each run."""
    target = design.target
    model = Recursion(stored, design.output.range, target.anti_windup, target.tracking_time_s, target.guard_nonfinite)

    def run(inputs: Sequence[float]) -> list[float]:
        model.clear()
        return model.run(inputs)

    return run


def _integer_simulation(stored: IntegerRealization) -> Simulation:
    """The emitted recursion between converters: physical values in and out, cleared before each run."""
    from realize.arithmetic.integer import IntegerRecursion

    model = IntegerRecursion(stored.program)
    incoming, outgoing = stored.program.interface
    size_in, size_out = float(incoming.per_count), float(outgoing.per_count)

    def run(inputs: Sequence[float]) -> list[float]:
        model.clear()
        counts = [min(max(round(value / size_in), incoming.low), incoming.high) + incoming.offset for value in inputs]
        return [(count - outgoing.offset) * size_out for count in model.run(counts)]

    return run
