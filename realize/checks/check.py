"""What a check answers."""

from __future__ import annotations

from dataclasses import dataclass

#: A difference below this share of its tolerance decides nothing, and its digits would come from the last bits of
#: floating point, which differ between machines: it counts as 0.
_DUST = 1e-6

Figure = float | complex | str | None

WITHIN, OUT, UNDEFINED = "within", "out", "undefined"


@dataclass(frozen=True)
class Check:
    """One property compared between the design and its discrete counterpart.

    Attributes
    ----------
    check : str
        Its name, as in the tables.
    of : str
        ``stored`` or ``exact``: with the numbers as the target stores them, or unrounded.
    reference, obtained : float, complex, str or None
        The property of the design, and of its counterpart; finite.
    difference : float or None
        How far apart they are, in ``unit``; never negative; None where no figure says it.
    tolerance : float or None
        Largest difference that is within.
    unit : str
        Of difference and tolerance.
    verdict : str
        ``within``, ``out`` or ``undefined`` (which does not block).
    reason : str
        Where the worst figure lies, or why there is none.
    """

    check: str
    of: str
    reference: Figure
    obtained: Figure
    difference: float | None
    tolerance: float | None
    unit: str
    verdict: str
    reason: str


class Asked:
    """A check about to be answered: its name, unit and tolerance, and whose numbers it is about."""

    def __init__(self, check: str, of: str, unit: str, tolerance: float) -> None:
        self._asked = (check, of)
        self._unit = unit
        self.tolerance = tolerance

    def measured(self, reference: Figure, obtained: Figure, difference: float, reason: str) -> Check:
        """Judge a difference."""
        difference = difference if difference > self.tolerance * _DUST else 0.0
        verdict = WITHIN if difference <= self.tolerance else OUT
        return self._answer(reference, obtained, difference, verdict, reason)

    def failed(self, reference: Figure, obtained: Figure, reason: str) -> Check:
        """Out, without a figure that would say by how much."""
        return self._answer(reference, obtained, None, OUT, reason)

    def undefined(self, reason: str) -> Check:
        """Nothing to compare."""
        return self._answer(None, None, None, UNDEFINED, reason)

    def _answer(
        self, reference: Figure, obtained: Figure, difference: float | None, verdict: str, reason: str
    ) -> Check:
        return Check(*self._asked, reference, obtained, difference, self.tolerance, self._unit, verdict, reason)
