"""The check ``stability``: the counterpart may be no worse than the design, and growth is never silent."""

from __future__ import annotations

from collections.abc import Sequence

from realize.algebra.roots import Root
from realize.checks.check import Asked, Check
from realize.checks.modes import in_disc_words, in_words
from realize.checks.schur import CLASSES, MARGINAL, STABLE, UNSTABLE, stability
from realize.transfer import PulseTransferFunction


def continuous_stability(poles: Sequence[Root]) -> str:
    """Class of a transfer function in s by its poles, exactly.

    Returns
    -------
    str
        ``stable``, ``marginal`` (simple poles on the imaginary axis, the others left of it) or ``unstable``;
        a repeated pole on the axis, such as a double integrator's, is ``unstable``: its response to a bounded
        input grows without bound.
    """
    if any(_grows(root) for root in poles):
        return UNSTABLE
    return MARGINAL if any(root.value.real == 0 for root in poles) else STABLE


def check_stability(
    poles: Sequence[Root],
    design_class: str,
    discrete: PulseTransferFunction,
    of: str,
    known: str | None,
) -> Check:
    """Compare the class of ``Gd`` with that of the design.

    Parameters
    ----------
    poles : sequence of Root
        Of the design, in s.
    design_class : str
        From :func:`continuous_stability`.
    known : str or None
        Class of ``Gd`` where it follows from the method: coefficients that are carried to finitely many bits
        need not keep an undamped pair on the circle.
    """
    asked = Asked("stability", of, "", 0.0)
    found = known or stability(discrete.denominator)
    if CLASSES.index(found) > CLASSES.index(design_class):
        worst = max(discrete.poles, key=lambda root: (abs(1 + root.value), root.multiplicity))
        reason = f"the design is {design_class}, but a pole lies at {in_disc_words(worst.value)}"
        return asked.measured(design_class, found, 1.0, reason)
    if design_class == UNSTABLE:
        growing = next(root for root in poles if _grows(root))
        kind = "the design itself grows: " + ("a repeated pole" if growing.value.real == 0 else "a pole")
        return asked.measured(design_class, found, 1.0, f"{kind} at {in_words(growing.value)}")
    return asked.measured(design_class, found, 0.0, "decided exactly")


def _grows(root: Root) -> bool:
    return root.value.real > 0 or (root.value.real == 0 and root.multiplicity > 1)
