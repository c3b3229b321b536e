"""The loop part of a design: its plants as loops, what each method does in them, and the crossover as band edge."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from fractions import Fraction
from functools import cached_property
from math import degrees, pi, remainder
from typing import Any, NamedTuple

import numpy as np

from realize.band import frequency_text
from realize.checks import Check
from realize.design import Design
from realize.errors import Refused
from realize.loop import (
    ContinuousLoop,
    JitterMargin,
    Ledger,
    LoopFigures,
    LoopReference,
    MeasuredLoop,
    MeasuredPlant,
    Plant,
    SampledCase,
    highest_crossover_rad_s,
    loop_checks,
    loop_entry,
    measured_loop_checks,
    phase_ledger,
    plant_input_mapped,
    read_response,
    worst_case,
)
from realize.loop.response import Continuous, Real, phase_at
from realize.methods import Discretization
from realize.methods.fitted import Compensation, Weight, frequency_fit
from realize.transfer import PulseTransferFunction, TransferFunction


class Band(NamedTuple):
    """A causal controller, its period, and up to where it must be right."""

    controller: TransferFunction
    period_s: Fraction
    edge_rad_s: Fraction


class LoopResult(NamedTuple):
    """One controller in the loops of a design.

    Attributes
    ----------
    entries : tuple of dict
        For scripts, one a case: ``case``, ``continuous``, ``discrete``.
    checks : tuple of Check
        Each loop check, of the worst case.
    ledger : Ledger or None
        Phase at the crossover of the nominal case.
    jitter : JitterMargin or None
        Of the nominal case.
    notes : tuple of str
        What the user should know.
    """

    entries: tuple[dict[str, Any], ...]
    checks: tuple[Check, ...]
    ledger: Ledger | None
    jitter: JitterMargin | None
    notes: tuple[str, ...]


class JudgedLoop(NamedTuple):
    """One controller in the loops of a design, without the continuous ones beside them.

    Attributes
    ----------
    checks : tuple of Check
        Each loop check, of the worst case.
    figures : tuple of dict
        For scripts, one a case: ``case``, and the figures of its sampled loop.
    """

    checks: tuple[Check, ...]
    figures: tuple[dict[str, Any], ...]


def plants_of(design: Design) -> tuple[Plant | MeasuredPlant, ...]:
    """The plant of every case, or the measured one; empty without a plant."""
    measured = measured_plant(design)
    return transfer_plants(design) if measured is None else (measured,)


def transfer_plants(design: Design) -> tuple[Plant, ...]:
    """The plant of every case; empty without a plant, or with a measured one."""
    if design.plant is None or design.plant.response_text is not None:
        return ()
    return tuple(Plant(c.transfer, c.dead_time_s, c.sensor, c.name) for c in design.plant.cases)


def measured_plant(design: Design) -> MeasuredPlant | None:
    """The measured plant, where the design has one.

    Raises
    ------
    RealizeError
        When the file of the measurement cannot be understood.
    """
    table = design.plant
    if table is None or table.response_text is None:
        return None
    case = table.cases[0]
    response = read_response(table.response_text, f"[plant] response {table.response}")
    return MeasuredPlant(response, float(case.dead_time_s), case.sensor)


def loop_band(design: Design, controller: TransferFunction) -> tuple[Fraction, str] | None:
    """The crossover of ``C P H`` as band edge, the highest over the cases; None without one.

    Of a measured plant it must lie within the measured band: see :func:`unmeasured_crossover`.
    """
    crossover = highest_crossover_rad_s(controller, plants_of(design))
    if crossover is None:
        return None
    edge = Fraction(crossover)
    return edge, crossover_sentence(edge)


def crossover_sentence(edge_rad_s: Fraction) -> str:
    """Where a band edge comes from that is a crossover."""
    return f"band edge {frequency_text(edge_rad_s)}: the crossover of controller, plant and sensor"


def unmeasured_crossover(design: Design, controller: TransferFunction) -> str:
    """Why the crossover around a measured plant is not the band edge; empty where it is, or where none is needed."""
    plant = measured_plant(design) if design.band_rad_s is None else None
    return "" if plant is None else _beyond_measurement(controller, plant)


def _beyond_measurement(controller: TransferFunction, plant: MeasuredPlant) -> str:
    loop = MeasuredLoop(controller, plant)
    if loop.highest_crossover_rad_s is not None:
        return ""
    first, last = (frequency_text(float(plant.response.w_rad_s[end])) for end in (0, -1))
    where = f"still above 1 at {last}, the last frequency" if loop.ends_above_one else f"below 1 from {first} to {last}"
    return f"the measurement holds no crossover: the gain of controller, plant and sensor is {where}"


def phase_margins_deg(design: Design, rolled_off: Sequence[TransferFunction]) -> tuple[tuple[float, float | None], ...]:
    """Phase margin of the continuous loop before and after each roll-off, worst case; empty without a crossover."""
    plants = plants_of(design)
    before = [margin for plant in plants if (margin := _margin_at_crossover_deg(design.transfer, plant)) is not None]
    if not before:
        return ()
    return tuple((min(before), _least_margin_deg(controller, plants)) for controller in rolled_off)


def _least_margin_deg(controller: TransferFunction, plants: Sequence[Plant | MeasuredPlant]) -> float | None:
    margins = (_continuous_loop(controller, plant).margins.phase_margin_deg for plant in plants)
    return min((margin for margin in margins if margin is not None), default=None)


def _continuous_loop(controller: TransferFunction, plant: Plant | MeasuredPlant) -> ContinuousLoop | MeasuredLoop:
    return MeasuredLoop(controller, plant) if isinstance(plant, MeasuredPlant) else ContinuousLoop(controller, plant)


def _margin_at_crossover_deg(controller: TransferFunction, plant: Plant | MeasuredPlant) -> float | None:
    """Angle left to -180 deg at the highest crossover, of an improper controller too."""
    crossover = highest_crossover_rad_s(controller, [plant])
    if crossover is None:
        return None
    return degrees(remainder(_open_loop_phase(controller, plant, crossover) + pi, 2 * pi))


def _open_loop_phase(controller: TransferFunction, plant: Plant | MeasuredPlant, w_rad_s: float) -> float:
    """Phase of ``C P H`` with the dead time, in rad."""
    if isinstance(plant, MeasuredPlant):
        return float(MeasuredLoop(controller, plant).response(np.array([w_rad_s]))[1][0])
    parts = (controller, plant.transfer, plant.sensor)
    return sum(phase_at(Continuous(part), w_rad_s) for part in parts) - w_rad_s * float(plant.dead_time_s)


def compute_delay_s(design: Design, period_s: Fraction) -> Fraction:
    """From sampling to output: the time that the design states, or so many samples."""
    if design.loop.compute_delay_s is not None:
        return design.loop.compute_delay_s
    return (design.loop.compute_delay_samples or Fraction(0)) * period_s


@dataclass(frozen=True)
class LoopSetting:
    """What all methods of a design share in its loops.

    Attributes
    ----------
    design : Design
        With a plant.
    controller : TransferFunction
        Causal.
    period_s : Fraction
        Sample period.
    """

    design: Design
    controller: TransferFunction
    period_s: Fraction

    @cached_property
    def references(self) -> tuple[LoopReference, ...]:
        """The continuous loops, one a case."""
        delay = compute_delay_s(self.design, self.period_s)
        return tuple(
            LoopReference(self.controller, plant, self.period_s, delay) for plant in transfer_plants(self.design)
        )

    @cached_property
    def measured(self) -> MeasuredPlant | None:
        """The measured plant, where the design has one."""
        return measured_plant(self.design)

    def result(self, exact: PulseTransferFunction, stored: PulseTransferFunction) -> LoopResult:
        """Put one method's controller in every loop.

        Parameters
        ----------
        exact, stored : PulseTransferFunction
            Unrounded, and with the numbers as stored.
        """
        if self.measured is not None:
            return self._measured_result(self.measured, stored)
        cases = [(reference, reference.sampled(stored)) for reference in self.references]
        nominal = cases[0][1]
        return LoopResult(
            tuple(loop_entry(reference, sampled) for reference, sampled in cases),
            _worst([loop_checks(reference, sampled, "stored", self._given) for reference, sampled in cases]),
            self._ledger(nominal, exact, stored),
            nominal.jitter if nominal.verdict is not None and nominal.verdict.is_stable else None,
            _notes(cases) + self._jitter_notes(nominal),
        )

    def judged(self, stored: PulseTransferFunction) -> JudgedLoop:
        """Of :meth:`result` what one of many operating points needs, which costs half."""
        if self.measured is not None:
            result = self._measured_result(self.measured, stored)
            return JudgedLoop(result.checks, tuple(_sampled_alone(entry) for entry in result.entries))
        pairs = [(reference, reference.sampled(stored)) for reference in self.references]
        return JudgedLoop(
            _worst([loop_checks(*pair, "stored", self._given) for pair in pairs]),
            tuple({"case": reference.plant.case, **sampled.document()} for reference, sampled in pairs),
        )

    @property
    def _given(self) -> dict[str, Fraction]:
        return dict(self.design.tolerance)

    def _ledger(
        self, nominal: SampledCase, exact: PulseTransferFunction, stored: PulseTransferFunction
    ) -> Ledger | None:
        crossover = nominal.margins.crossover_rad_s
        if not crossover:
            return None
        controllers = (self.design.transfer, self.controller, exact, stored)
        return phase_ledger(crossover, controllers, self.references[0].held)

    def _jitter_notes(self, nominal: SampledCase) -> tuple[str, ...]:
        """The jitter of the design against the margin, which is sufficient and not necessary."""
        jitter_s = self.design.loop.jitter_s
        if jitter_s is None or nominal.verdict is None or not nominal.verdict.is_stable or nominal.jitter is None:
            return ()
        margin_s = nominal.jitter.jitter_s
        if jitter_s <= margin_s:
            return ()
        return (
            f"jitter of {float(jitter_s):.5g} s exceeds the jitter margin of {margin_s:.5g} s: stability under it is "
            "not shown (the margin is sufficient, not necessary)",
        )

    def _measured_result(self, plant: MeasuredPlant, stored: PulseTransferFunction) -> LoopResult:
        delay_s, period_s = float(compute_delay_s(self.design, self.period_s)), float(self.period_s)
        continuous = LoopFigures(MeasuredLoop(self.controller, plant))
        delayed = LoopFigures(MeasuredLoop(self.controller, plant, hold_s=period_s, compute_delay_s=delay_s))
        sampled = LoopFigures(MeasuredLoop(stored, plant, hold_s=period_s, compute_delay_s=delay_s))
        entry = {"case": "", "continuous": continuous.document(), "discrete": sampled.document()}
        checks = measured_loop_checks(delayed, sampled, "", "stored", self._given)
        note = f"the plant was measured from {plant.response.band_text}: nothing outside that band is known"
        assumed = _beyond_measurement(self.controller, plant) if self.design.band_rad_s is None else ""
        notes = (note, f"the band edge is assumed: {assumed}") if assumed else (note,)
        return LoopResult((entry,), checks, None, None, notes)


def loop_method(name: str, setting: LoopSetting | None, band: Band, design: Design) -> Discretization:
    """Discretize by a method that knows the band and the loop.

    Parameters
    ----------
    name : str
        ``frequency-fit`` or ``plant-input-mapped``.
    setting : LoopSetting or None
        The loops; the nominal case counts.
    band : Band
        What the fit reaches up to.

    Raises
    ------
    Refused
        When the method does not apply.
    """
    if name == "plant-input-mapped":
        if setting is None or not setting.references:
            raise Refused(
                "method", "plant-input-mapped needs a [plant] with a transfer function", "", "add it, or another method"
            )
        reference = setting.references[0]
        return plant_input_mapped(band.controller, reference.plant, band.period_s)
    weight = _closed_loop_weight(setting.references[0]) if setting is not None and setting.references else None
    asked = design.compensate_delay
    compensation = Compensation(True, compute_delay_s(design, band.period_s)) if asked else None
    return frequency_fit(
        band.controller, band.period_s, band_rad_s=band.edge_rad_s, weight=weight, compensation=compensation
    )


def _closed_loop_weight(reference: LoopReference) -> Weight:
    """``|P S|``: an error of the controller times this is an error of the closed loop (after Rattan 1984)."""
    loop, controller = reference.delayed.loop, Continuous(reference.controller)
    assert isinstance(loop, ContinuousLoop)

    def weight(w_rad_s: Real) -> Real:
        log_gain, phase = loop.response(w_rad_s)
        own, _ = controller.at(w_rad_s)
        closed: Real = np.exp(log_gain - own) / np.abs(1 + np.exp(log_gain + 1j * phase))
        return closed

    return weight


def loop_setting(design: Design, controller: TransferFunction, period_s: Fraction) -> LoopSetting | None:
    """The loops of a design; None without a plant."""
    return LoopSetting(design, controller, period_s) if design.plant is not None else None


def _sampled_alone(entry: dict[str, Any]) -> dict[str, Any]:
    return {"case": entry["case"], **entry["discrete"]}


def _worst(by_case: Sequence[Sequence[Check]]) -> tuple[Check, ...]:
    return tuple(worst_case(same) for same in zip(*by_case, strict=True))


def _notes(cases: Sequence[tuple[LoopReference, SampledCase]]) -> tuple[str, ...]:
    """Notes of every case, named where there are several."""
    notes: dict[str, None] = {}
    for reference, sampled in cases:
        case = reference.plant.case
        for note in sampled.notes:
            notes[f"case {case}: {note}" if case else note] = None
    return tuple(notes)
