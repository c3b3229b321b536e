"""What must survive the conversion from ``G(s)`` to ``Gd(z)``: poles, zeros, frequency response, gain, step, recovery.

Every check compares a design with one counterpart and answers with a :class:`Check`; what depends on the design and the
period alone is computed once, in :class:`ContinuousReference`.
"""

from realize.checks.check import Check
from realize.checks.recovery import Signals
from realize.checks.reference import ContinuousReference
from realize.checks.schur import stability
from realize.checks.shift import root_notes
from realize.checks.suite import run_checks
from realize.checks.tolerances import DEFAULTS, Tolerances

__all__ = [
    "DEFAULTS",
    "Check",
    "ContinuousReference",
    "Signals",
    "Tolerances",
    "root_notes",
    "run_checks",
    "stability",
]
