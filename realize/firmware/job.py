"""From a design to the text of every file that is written for it: the whole job, but for the writing."""

from __future__ import annotations

import json
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import TYPE_CHECKING, Any

from realize.algebra.expression import decimal_text
from realize.arithmetic.realization import Realization
from realize.band import frequency_text
from realize.checks import Check
from realize.design import Accept, Design, Signal
from realize.design.record import exact_entries, exact_entry
from realize.firmware.c_text import number_text
from realize.firmware.emission import Emission
from realize.firmware.record import FIGURE_DIGITS
from realize.firmware.render import render_firmware
from realize.rolloff import Proposal
from realize.workflow import Causal, Comparison, MethodResult, choose, refuse_unacceptable

if TYPE_CHECKING:
    from realize.loop import Ledger
    from realize.loop_design import LoopResult
    from realize.schedule import Scheduled

#: Decimals of the phases in the ledger, in deg. Each is a difference of angles in double precision, of up to 1e4 rad
#: each to 1e-16 of itself (6e-11 deg); smaller phases than a millionth would be digits of that noise.
LEDGER_DECIMALS = 6


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
    schedule : Scheduled or None
        Every operating point of a design that has some; the comparison is that of the first.
    """

    comparison: Comparison
    chosen: MethodResult
    files: Mapping[str, str]
    schedule: Scheduled | None = None

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
    if design.schedule is not None:
        return _emit_scheduled(design)
    return emitted_from(choose(design))


def emitted_from(comparison: Comparison) -> Emitted:
    """What a comparison comes to, where its design has no schedule and asks for no roll-off that it does not name.

    Raises
    ------
    Refused
        When the chosen method is out of tolerance or there is none.
    """
    chosen = refuse_unacceptable(comparison)
    return Emitted(comparison, chosen, _rendered(comparison, chosen))


def _emit_scheduled(design: Design) -> Emitted:
    # Here, because a design without a schedule does not need it, and its start is short.
    from realize.firmware.schedule.record import schedule_entry
    from realize.schedule import scheduled, table_of

    found = scheduled(design)
    table, chosen, comparison = table_of(found), found.chosen, found.comparison
    constants = {name: value for name, value in design.values if name not in dict(found.schedule.values)}
    common = _common(comparison, chosen) | {
        "design": design.resolved(),
        "coefficients": "table",
        "particulars": [
            ("values", _named_values(constants.items())),
            ("scheduled", f"{', '.join(dict(found.schedule.values))} by {found.schedule.variable}; see Schedule below"),
            *((name, f"{text} (at the first point)") for name, text in _particulars(comparison)[1:] if text),
        ],
    }
    files = render_firmware(
        Emission(
            **common,
            **_of_floats(design),
            realization=table.stored[0],
            schedule=table,
            schedule_entry=schedule_entry(found, table.breakpoints),
        )
    )
    return Emitted(comparison, chosen, files, found)


def _rendered(comparison: Comparison, chosen: MethodResult) -> dict[str, str]:
    common = _common(comparison, chosen)
    if isinstance(chosen.realization, Realization):
        return render_firmware(Emission(**common, **_of_floats(comparison.design), realization=chosen.realization))
    # Here, because a design in floating point does not need it, and its start is short.
    from realize.firmware.integer.emission import IntegerEmission
    from realize.firmware.integer.render import render_integer_firmware

    assert chosen.realization is not None
    return render_integer_firmware(IntegerEmission(**common, realization=chosen.realization))


def _of_floats(design: Design) -> dict[str, Any]:
    """What an emission in floats says beside."""
    return {
        "input_count": _count(design.input),
        "output_count": _count(design.output),
        "guard_nonfinite": design.target.guard_nonfinite,
    }


def _common(comparison: Comparison, chosen: MethodResult) -> dict[str, Any]:
    """What an emission says, whatever its numbers are."""
    design, target = comparison.design, comparison.design.target
    return {
        "name": design.name,
        "method": chosen.method,
        "transfer_text": design.transfer_text,
        "about": design.about,
        "revision": design.revision,
        "requirement": design.requirement,
        "author": design.author,
        "particulars": _particulars(comparison),
        "input_range": design.input.range,
        "output_range": design.output.range,
        "input_unit": design.input.unit,
        "output_unit": design.output.unit,
        "coefficients": target.coefficients,
        "recursion_sign": target.recursion_sign,
        "anti_windup": target.anti_windup,
        "tracking_time_s": target.tracking_time_s,
        "notes": [note for note in chosen.notes if chosen.loop is None or note not in chosen.loop.notes],
        "design": design.resolved(),
        "causal": _causal(comparison),
        "loop": None if chosen.loop is None else loop_document(comparison, chosen.loop),
        "checks": [vars(check) for check in chosen.checks],
        "accepted": [_accepted(check, agreement) for check, agreement in chosen.accepted],
    }


def _particulars(comparison: Comparison) -> list[tuple[str, str]]:
    """Header lines on the values and on the roll-off."""
    design = comparison.design
    return [
        ("values", _named_values(design.values)),
        ("roll-off", _rolloff(comparison.causal)),
        ("band", comparison.band_rests_on),
    ]


def _named_values(values: Iterable[tuple[str, Fraction]]) -> str:
    return ", ".join(f"{name} = {number_text(value)}" for name, value in values)


def _rolloff(causal: Causal) -> str:
    proposal = causal.proposal
    if proposal is None:
        return ""
    return f"{proposal.placement}, order {proposal.order}, pole at {frequency_text(proposal.pole_rad_s)}"


def _count(signal: Signal) -> tuple[Fraction, int] | None:
    return None if signal.per_count is None else (signal.per_count, signal.offset)


def _causal(comparison: Comparison) -> dict[str, Any]:
    """What was discretized, exactly, and the band; a band that the design does not give is a figure."""
    causal, given = comparison.causal, comparison.design.band_rad_s
    band = exact_entry("band_rad_s", given)
    if given is None:
        band = {"band_rad_s": decimal_text(comparison.band_rad_s, FIGURE_DIGITS)}
    return {
        **exact_entries("numerator", causal.transfer.numerator),
        **exact_entries("denominator", causal.transfer.denominator),
        "rolloff": None if causal.proposal is None else _rolloff_document(causal.proposal, causal.assumed),
        **band,
        "band_rests_on": comparison.band_rests_on,
    }


def _rolloff_document(proposal: Proposal, assumed: bool) -> dict[str, Any]:
    return {
        "placement": proposal.placement,
        "order": proposal.order,
        **exact_entry("damping", proposal.damping),
        **exact_entry("pole_rad_s", proposal.pole_rad_s),
        "assumed": assumed,
    }


def loop_document(comparison: Comparison, loop: LoopResult) -> dict[str, Any]:
    """The loops around the chosen method's controller.

    Returns
    -------
    dict
        ``compute_delay_s``, ``compute_delay_samples`` (exact); ``measured``, whether the plant is a measured
        response, so that stability was not judged; ``cases``, each with ``case``, ``continuous`` and ``discrete``
        figures; ``phase_ledger_deg`` and ``phase_ledger_at_rad_s``; ``jitter_margin_s``; ``notes``.
    """
    # Here, because what analyses loops is loaded only where there is a plant.
    from realize.loop_design import compute_delay_s

    design, ledger = comparison.design, loop.ledger
    delay_s = compute_delay_s(design, comparison.period_s)
    return {
        "compute_delay_s": delay_s,
        "compute_delay_samples": delay_s / comparison.period_s,
        "measured": design.plant is not None and design.plant.response_text is not None,
        "cases": loop.entries,
        "phase_ledger_deg": None if ledger is None else _ledger(ledger),
        "phase_ledger_at_rad_s": None if ledger is None else ledger.w_rad_s,
        "jitter_margin_s": None if loop.jitter is None else loop.jitter.jitter_s,
        "notes": loop.notes,
    }


def _ledger(ledger: Ledger) -> dict[str, float]:
    """Adding 0 turns a rounded -0 into 0."""
    items = (*ledger.items, ("total", ledger.total_deg))
    return {name: round(value_deg, LEDGER_DECIMALS) + 0.0 for name, value_deg in items}


def _accepted(check: Check, agreement: Accept) -> dict[str, Any]:
    return {
        "check": check.check,
        "difference": check.difference,
        "limit": agreement.limit,
        "unit": agreement.unit,
        "because": agreement.because,
        "by": agreement.by,
    }
