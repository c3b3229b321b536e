"""From a transfer function in s to difference-equation code the firmware can trust.

From Python::

    import realize

    controller = realize.TransferFunction.parse("kp + ki/s", kp=4.2, ki=18)
    discrete = realize.discretize(controller, rate="2 kHz")
    print(realize.compare(controller, rate="2 kHz"))

What is named here is loaded when it is first asked for: the command line shares this package, and its start is short.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from realize.api.discrete import PulseTransferFunction, discretize
    from realize.api.jobs import assess, compare, emit
    from realize.api.results import Assessment, Comparison, Emission, MethodResult, Proposal
    from realize.api.transfer import TransferFunction
    from realize.checks.check import Check
    from realize.errors import RealizeError, Refused

__all__ = [
    "Assessment",
    "Check",
    "Comparison",
    "Emission",
    "MethodResult",
    "Proposal",
    "PulseTransferFunction",
    "RealizeError",
    "Refused",
    "TransferFunction",
    "assess",
    "compare",
    "discretize",
    "emit",
]

#: Where each name lives.
_HOMES = {
    "Assessment": "realize.api.results",
    "Check": "realize.checks.check",
    "Comparison": "realize.api.results",
    "Emission": "realize.api.results",
    "MethodResult": "realize.api.results",
    "Proposal": "realize.api.results",
    "PulseTransferFunction": "realize.api.discrete",
    "RealizeError": "realize.errors",
    "Refused": "realize.errors",
    "TransferFunction": "realize.api.transfer",
    "assess": "realize.api.jobs",
    "compare": "realize.api.jobs",
    "discretize": "realize.api.discrete",
    "emit": "realize.api.jobs",
}


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}; it has {', '.join(__all__)}")
    from importlib import import_module

    found: object = getattr(import_module(_HOMES[name]), name)
    # The next time it is found without coming here.
    globals()[name] = found
    return found


def __dir__() -> list[str]:
    return sorted({*__all__, *(name for name in globals() if name.startswith("__"))})
