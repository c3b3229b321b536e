"""The whole job in the order a person would do it: causal first, then the methods, the checks, the gate.

Every step is a function from values to values; nothing here prints, and nothing touches the disk.
"""

from realize.workflow.causal import Causal, assess_design, make_causal
from realize.workflow.compare import choose, compare, methods_for
from realize.workflow.refusal import refuse_unacceptable
from realize.workflow.results import Comparison, MethodResult

__all__ = [
    "Causal",
    "Comparison",
    "MethodResult",
    "assess_design",
    "choose",
    "compare",
    "make_causal",
    "methods_for",
    "refuse_unacceptable",
]
