"""An agreed deviation in words: the figure that is left, how far it is off, and how far it may be."""

from __future__ import annotations

from fractions import Fraction

from realize.checks.check import Check, Figure

#: Of the checks of the loop: unit of the property, unit of the difference, which way is worse, and what the difference
#: is taken from where the continuous loop with hold and delay does not keep that limit itself.
_LOOP = {
    "loop phase margin": (" deg", " deg", "less", "below the floor"),
    "loop sensitivity": ("", "", "more", "above the limit"),
    "loop overshoot": (" %", " points", "more", None),
}


def agreed_text(check: Check, limit: Fraction | None) -> str:
    """Say what an accepted check leaves, how far off that is, and up to which difference it was agreed to.

    Parameters
    ----------
    check : Check
        Out of tolerance, and accepted.
    limit : Fraction or None
        Largest difference that is agreed to, in the unit of the check's difference.

    Returns
    -------
    str
        Such as ``loop phase margin 43 deg, 6.1 deg less than the 49.1 deg of the continuous loop with hold and delay,
        agreed up to 7 deg``.
    """
    said, unit = _in_the_loop(check) if check.check in _LOOP else _plain(check)
    return said if limit is None else f"{said}, agreed up to {float(limit):.5g}{unit}"


def _in_the_loop(check: Check) -> tuple[str, str]:
    """The sentence, and the unit of its difference."""
    unit, difference_unit, worse, limited = _LOOP[check.check]
    said, off = f"{check.check} {_figure(check.obtained)}{unit}", f"{_figure(check.difference)}{difference_unit}"
    # Without room below the limit the difference is what lies beyond the limit.
    if limited and not check.tolerance:
        return f"{said}, {off} {limited}", difference_unit
    reference = f"{_figure(check.reference)}{unit}"
    return f"{said}, {off} {worse} than the {reference} of the continuous loop with hold and delay", difference_unit


def _plain(check: Check) -> tuple[str, str]:
    unit = " points" if check.check == "step overshoot" else f" {check.unit}" if check.unit else ""
    said = f"{check.check}, {_figure(check.obtained)} obtained"
    return f"{said}, {_figure(check.difference)}{unit} of difference" if check.difference and unit else said, unit


def _figure(value: Figure) -> str:
    if isinstance(value, complex):
        return f"{value.real:.4g}+-{abs(value.imag):.5g}j" if value.imag else f"{value.real:.5g}"
    return value if isinstance(value, str) else "no figure" if value is None else f"{value:.3g}"
