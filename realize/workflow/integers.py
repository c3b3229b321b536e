"""The integers that a target stores: structures differ in cost and in what rounding does; the cheapest come first."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from fractions import Fraction
from typing import NamedTuple

from realize.arithmetic.integer import (
    IntegerRealization,
    IntegerRecursion,
    Interface,
    Rounded,
    StructureChoice,
    choices,
    interface_of,
    proven_realization,
    rounded,
    stored_integer_pulse,
)
from realize.arithmetic.peak_gain import peak_gain
from realize.arithmetic.sample import HOLD_INTEGRAL
from realize.checks import Check, ContinuousReference, Tolerances
from realize.checks.round_off import check_round_off
from realize.design import Design
from realize.errors import Refused
from realize.transfer import PulseTransferFunction
from realize.workflow.gate import gate
from realize.workflow.stored import Simulation, Stored, checks_of_stored

#: Relative width of a peak gain that a tolerance is compared with.
_GAIN_WIDTH = Fraction(1, 1 << 10)


class _Coarse(NamedTuple):
    """A structure whose coefficients alone are out of tolerance; orders by how far, then by its place."""

    out: tuple[int, float]
    place: int
    made: Rounded


def cheapest_integers(design: Design, reference: ContinuousReference, pulse: PulseTransferFunction) -> Stored:
    """The cheapest structure that is within every tolerance; without one, the first that is least out.

    A proof costs far more than the checks of coefficients, so that those which are out by these wait. What a proof
    adds takes a structure farther out: where it is in doubt which is least out, the nearest are proven first. (Room
    that a proof finds wanting makes coefficients coarser; all checks judge them again.)
    """
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
            checks = checks_of_stored(self._design, self._reference, pulse)
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

    target = design.target
    tracking = pulse.period_s / target.tracking_time_s if target.tracking_time_s else Fraction(0)
    hold = target.anti_windup == HOLD_INTEGRAL
    return rounded(pulse, interface, choice.widths, choice.structure, hold=hold, tracking=tracking)


def _proven(design: Design, reference: ContinuousReference, made: Rounded) -> Stored:

    stored = proven_realization(made)
    _refuse_silent(stored)
    as_stored = stored_integer_pulse(stored)
    checks = checks_of_stored(design, reference, as_stored, lambda: _integer_simulation(stored))
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


def _integer_simulation(stored: IntegerRealization) -> Simulation:
    """The emitted recursion between converters: physical values in and out, cleared before each run."""

    model = IntegerRecursion(stored.program)
    incoming, outgoing = stored.program.interface
    size_in, size_out = float(incoming.per_count), float(outgoing.per_count)

    def run(inputs: Sequence[float]) -> list[float]:
        model.clear()
        counts = [min(max(round(value / size_in), incoming.low), incoming.high) + incoming.offset for value in inputs]
        return [(count - outgoing.offset) * size_out for count in model.run(counts)]

    return run
