"""From a design to the text of every file that is written for it: the whole job, but for the writing."""

from __future__ import annotations

import json
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from realize.band import frequency_text
from realize.checks import Check
from realize.design import Accept, Design
from realize.firmware.emission import Emission
from realize.firmware.render import render_firmware
from realize.workflow import Causal, Comparison, MethodResult, choose, refuse_unacceptable


@dataclass(frozen=True)
class Emitted:
    """What one design comes to.

    Attributes
    ----------
    comparison : Comparison
        The methods that were run.
    chosen : MethodResult
        The one that is emitted.
    files : mapping
        File name to text.
    """

    comparison: Comparison
    chosen: MethodResult
    files: Mapping[str, str]

    @property
    def record(self) -> dict[str, Any]:
        """Content of the record."""
        text = next(text for name, text in self.files.items() if name.endswith(".record.json"))
        return dict(json.loads(text))


def emit(design: Design) -> Emitted:
    """Do the whole job; write nothing.

    Raises
    ------
    Refused
        When the design is improper without ``[rolloff]``, unstable, or out of tolerance.
    RealizeError
        When it cannot be understood.
    """
    comparison = choose(design)
    chosen = refuse_unacceptable(comparison)
    return Emitted(comparison, chosen, render_firmware(_emission(comparison, chosen)))


def _emission(comparison: Comparison, chosen: MethodResult) -> Emission:
    design, target = comparison.design, comparison.design.target
    assert chosen.realization is not None
    return Emission(
        name=design.name,
        realization=chosen.realization,
        method=chosen.method,
        transfer_text=design.transfer_text,
        about=design.about,
        revision=design.revision,
        requirement=design.requirement,
        author=design.author,
        particulars=_particulars(comparison),
        input_range=design.input.range,
        output_range=design.output.range,
        input_unit=design.input.unit,
        output_unit=design.output.unit,
        coefficients=target.coefficients,
        recursion_sign=target.recursion_sign,
        anti_windup=target.anti_windup,
        tracking_time_s=target.tracking_time_s,
        guard_nonfinite=target.guard_nonfinite,
        notes=chosen.notes,
        design=design.resolved(),
        checks=[vars(check) for check in chosen.checks],
        accepted=[_accepted(check, agreement) for check, agreement in chosen.accepted],
    )


def _particulars(comparison: Comparison) -> list[tuple[str, str]]:
    """Header lines on the values and on the roll-off."""
    design = comparison.design
    named = ", ".join(f"{name} = {float(value):.5g}" for name, value in design.values)
    return [("values", named), ("roll-off", _rolloff(comparison.causal)), ("band", comparison.band_rests_on)]


def _rolloff(causal: Causal) -> str:
    proposal = causal.proposal
    if proposal is None:
        return ""
    return f"{proposal.placement}, order {proposal.order}, pole at {frequency_text(proposal.pole_rad_s)}"


def _accepted(check: Check, agreement: Accept) -> dict[str, Any]:
    return {
        "check": check.check,
        "difference": check.difference,
        "limit": agreement.limit,
        "unit": agreement.unit,
        "because": agreement.because,
        "by": agreement.by,
    }
