"""The loop around a controller: plant, dead time, sensor, hold and delay; margins, stability and step, both ways.

A :class:`Plant` (one case) and a controller make a :class:`ContinuousLoop` or, held and sampled, a
:class:`SampledLoop`; :class:`LoopReference` keeps what all methods of a case share. A :class:`MeasuredPlant` gives
margins within its band. Nothing here reads a design file.
"""

from realize.loop.analysis import LoopFigures, LoopReference, SampledCase, loop_entry
from realize.loop.checks import LOOP_DEFAULTS, loop_checks, measured_loop_checks, worst_case
from realize.loop.continuous import ContinuousLoop, Verdict
from realize.loop.crossover import Settled, highest_crossover_rad_s, settled_pole
from realize.loop.figures import StepFigures
from realize.loop.held import HeldPlant, held_plant
from realize.loop.input_mapped import plant_input_mapped
from realize.loop.inversion import continuous_step
from realize.loop.jitter import JitterMargin, jitter_margin
from realize.loop.ledger import Ledger, phase_ledger
from realize.loop.margins import Margins
from realize.loop.measured import MeasuredLoop, MeasuredPlant, MeasuredResponse, read_response
from realize.loop.plant import Plant, lost_modes
from realize.loop.sampled import SampledLoop
from realize.loop.simulation import step_figures

__all__ = [
    "LOOP_DEFAULTS",
    "ContinuousLoop",
    "HeldPlant",
    "JitterMargin",
    "Ledger",
    "LoopFigures",
    "LoopReference",
    "Margins",
    "MeasuredLoop",
    "MeasuredPlant",
    "MeasuredResponse",
    "Plant",
    "SampledCase",
    "SampledLoop",
    "Settled",
    "StepFigures",
    "Verdict",
    "continuous_step",
    "held_plant",
    "highest_crossover_rad_s",
    "jitter_margin",
    "loop_checks",
    "loop_entry",
    "lost_modes",
    "measured_loop_checks",
    "phase_ledger",
    "plant_input_mapped",
    "read_response",
    "settled_pole",
    "step_figures",
    "worst_case",
]
