"""Integers: which structure is taken is what trying and proving every one would take."""

from __future__ import annotations

from fractions import Fraction

import pytest

from realize.arithmetic.integer import choices, integer_realization, interface_of, proven_realization, rounded
from realize.checks import Check, ContinuousReference
from realize.design import Design, design_from_text
from realize.errors import Refused
from realize.methods import discretize
from realize.transfer import PulseTransferFunction
from realize.workflow import integers as workflow
from realize.workflow.gate import gate
from realize.workflow.stored import Stored
from realize.workflow.target import stored_numbers

PID = "4*(1 + 1/(0.3*s) + 0.05*s/(0.005*s + 1))"
NOTCH = "(s^2/300^2 + 0.02*s/300 + 1)/(s^2/300^2 + s/300 + 1)"
PAIRS = "1/((s^2/40^2 + 0.6*s/40 + 1)*(s^2/90^2 + 0.4*s/90 + 1))"


def design(transfer: str, arithmetic: str = "int16", tolerance: str = "") -> Design:
    port = 'range = [-8, 8]\nper_count = "1/2048"\n'
    return design_from_text(
        f'[design]\nname = "tried"\ntransfer = "{transfer}"\n[signals.input]\n{port}[signals.output]\n{port}'
        f'[target]\narithmetic = "{arithmetic}"\n[tolerance]\n{tolerance}',
        "tried.toml",
    )


def conversion(of: Design, rate_hz: int, method: str) -> tuple[ContinuousReference, PulseTransferFunction]:
    period_s = Fraction(1, rate_hz)
    reference = ContinuousReference(of.transfer, period_s, Fraction(6 * rate_hz, 30))
    return reference, discretize(of.transfer, period_s, method, None).pulse


def all_tried(
    of: Design, reference: ContinuousReference, pulse: PulseTransferFunction
) -> list[tuple[str, Stored, tuple[Check, ...]]]:
    """Every structure that can be had, with everything proven, the cheapest first."""
    interface, arithmetic = interface_of(of.input, of.output, of.target.arithmetic), of.target.arithmetic
    found = []
    for choice in choices(pulse, interface, arithmetic, "auto", {}):
        try:
            stored = workflow.integer_numbers(of, reference, pulse, interface, choice)
        except Refused:
            continue
        found.append((choice.structure, stored, gate(stored.checks, of.accept)[0]))
    return found


@pytest.mark.parametrize("method", ["bilinear", "ramp-invariant", "step-invariant", "forward-difference"])
@pytest.mark.parametrize(
    ("transfer", "rate_hz", "tolerance"),
    [
        (PID, 300, ""),
        (PID, 3000, ""),
        (NOTCH, 900, ""),
        (NOTCH, 9000, ""),
        (PAIRS, 1000, ""),
        (PAIRS, 4000, 'low_frequency_gain = "0.0001 %"'),
    ],
)
def test_the_one_taken_is_the_cheapest_within_every_tolerance_and_else_the_first_that_is_least_out(
    transfer: str, rate_hz: int, tolerance: str, method: str
) -> None:
    of = design(transfer, tolerance=tolerance)
    reference, pulse = conversion(of, rate_hz, method)
    tried = all_tried(of, reference, pulse)
    within = [entry for entry in tried if not entry[2]]
    wanted = within[0] if within else min(tried, key=lambda entry: distance(entry[2]))
    taken = stored_numbers(of, reference, pulse)
    assert (taken.realization.structure, taken.realization.widths) == (  # type: ignore[union-attr]
        wanted[0],
        wanted[1].realization.widths,  # type: ignore[union-attr]
    )
    assert taken.checks == wanted[1].checks
    assert bool(taken.note) == bool(within)


def distance(blocking: tuple[Check, ...]) -> tuple[int, float]:
    """Failures without a figure, then the worst figure in units of its tolerance."""
    ratios = [c.difference / c.tolerance for c in blocking if c.difference is not None and c.tolerance]
    return len(blocking) - len(ratios), max(ratios, default=0.0)


def test_what_is_out_by_its_coefficients_is_not_proven_where_another_is_within(monkeypatch: pytest.MonkeyPatch) -> None:
    of = design(PAIRS)
    reference, pulse = conversion(of, 4000, "bilinear")
    tried = all_tried(of, reference, pulse)
    assert tried[0][2], "the cheapest is out, or this shows nothing"
    proven: list[str] = []
    through = workflow._proven

    def counted(*arguments: object) -> Stored:
        proven.append("")
        return through(*arguments)  # type: ignore[arg-type]

    monkeypatch.setattr(workflow, "_proven", counted)
    taken = stored_numbers(of, reference, pulse)
    assert taken.note
    as_far = next(i for i, entry in enumerate(tried, 1) if not entry[2])
    assert len(proven) < as_far


def test_rounded_and_then_proven_is_the_realization_in_one_go() -> None:
    of = design(PID)
    _, pulse = conversion(of, 1000, "bilinear")
    interface = interface_of(of.input, of.output, "int16")
    (choice, *_) = choices(pulse, interface, "int16", "auto", {})
    made = rounded(pulse, interface, choice.widths, choice.structure)
    whole = integer_realization(pulse, interface, choice.widths, choice.structure)
    assert proven_realization(made).program == whole.program
    assert made.program == whole.program, "nothing overflows here, so that the first binary points stay"
