"""Roll-off poles that make an improper transfer function causal, and what each of them costs.

An improper ``C(s)`` is split exactly into ``P(s) + q0 + R(s)/D(s)``, where ``P`` holds the first power of
s and higher ones. A filter ``F(s)`` of unit gain at s = 0 multiplies ``P`` alone (placement "derivative") or
all of ``C`` (placement "whole"). Transfer functions stay exact; phases, gains and windows are figures.
Polynomials are in descending powers of s, frequencies and poles in rad/s, phases in degrees.
"""

from realize.rolloff.case import PAIR_DAMPING, shapes
from realize.rolloff.criteria import CONVERTER_STEP_PERCENT, PHASE_BUDGET_DEG, Circumstances, Known, circumstances
from realize.rolloff.figures import decimal_or_quotient, finite_figure
from realize.rolloff.filters import Split, apply_rolloff, split
from realize.rolloff.proposal import Proposal, proposal_for, proposals, rolloff_toml
from realize.rolloff.window import samples_per_band_period

__all__ = [
    "CONVERTER_STEP_PERCENT",
    "PAIR_DAMPING",
    "PHASE_BUDGET_DEG",
    "Circumstances",
    "Known",
    "Proposal",
    "Split",
    "apply_rolloff",
    "circumstances",
    "decimal_or_quotient",
    "finite_figure",
    "proposal_for",
    "proposals",
    "rolloff_toml",
    "samples_per_band_period",
    "shapes",
    "split",
]
