"""The loop checks: stability, phase margin, sensitivity and overshoot of the sampled loop.

The reference is the continuous loop with hold and delay in it.

A margin has two limits, what it may lose and a floor. The tolerance of a check is the narrower of the two, seen from
the reference, so that one figure says how much of the room is used.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from types import MappingProxyType

from realize.band import frequency_text
from realize.checks.check import OUT, UNDEFINED, WITHIN, Check
from realize.checks.schur import STABLE
from realize.checks.tolerances import Default
from realize.loop.analysis import LoopFigures, LoopReference, SampledCase

#: By key of the design file.
LOOP_DEFAULTS: Mapping[str, Default] = MappingProxyType(
    {
        "loop_phase_margin_loss": Default(
            "loop phase margin",
            "deg",
            Fraction(5),
            "the phase the controller itself may be off by within its band, once more at the crossover",
        ),
        "loop_phase_margin_least": Default(
            "loop phase margin",
            "deg",
            Fraction(30),
            "below it a loop rings for several cycles; usual designs keep 45 to 60",
        ),
        "loop_sensitivity_most": Default(
            "loop sensitivity", "", Fraction(2), "keeps a gain margin of 2 and a phase margin of 29 deg at the least"
        ),
        "loop_overshoot_rise": Default(
            "loop overshoot", "%", Fraction(2), "a fifth of the 10 % that many loops are specified to"
        ),
    }
)


def loop_checks(
    reference: LoopReference, sampled: SampledCase, of: str, given: Mapping[str, Fraction]
) -> tuple[Check, ...]:
    """Judge the sampled loop of one case.

    Parameters
    ----------
    reference : LoopReference
    sampled : SampledCase
    of : str
        ``stored`` or ``exact``.
    given : mapping
        Tolerances of the design by key; :data:`LOOP_DEFAULTS` for the rest.

    Returns
    -------
    tuple of Check
        ``loop stability``, ``loop phase margin``, ``loop sensitivity``, ``loop overshoot``; the case is named in the
        reason.
    """
    judge = _Judge(of, reference.plant.case, given)
    delayed = reference.delayed
    return (
        judge.stability(delayed, sampled),
        judge.phase_margin(delayed, sampled),
        judge.sensitivity(delayed, sampled),
        judge.overshoot(delayed, sampled),
    )


def measured_loop_checks(
    delayed: LoopFigures, sampled: LoopFigures, case: str, of: str, given: Mapping[str, Fraction]
) -> tuple[Check, ...]:
    """Judge a loop whose plant is known within a band only: phase margin and sensitivity; the others are undefined.

    Parameters
    ----------
    delayed, sampled : LoopFigures
        Around the measured plant: the continuous controller with hold and delay, and the sampled one.
    """
    judge = _Judge(of, case, given)
    unknown = "a measured response does not tell"
    return (
        judge.undefined("loop stability", unknown),
        judge.phase_margin(delayed, sampled),
        judge.sensitivity(delayed, sampled),
        judge.undefined("loop overshoot", unknown),
    )


def worst_case(checks: Sequence[Check]) -> Check:
    """The check to show of one that was made for several cases.

    Out before within, then by the room that is used, then by what is left of it to the floor.
    """
    rank = {OUT: 2, WITHIN: 1, UNDEFINED: 0}
    return max(checks, key=lambda check: (rank[check.verdict], _used(check), _badness(check)))


def _badness(check: Check) -> float:
    """How bad the figure itself is: a small phase margin, a large sensitivity or overshoot."""
    if not isinstance(check.obtained, float):
        return 0.0
    return -check.obtained if check.check == "loop phase margin" else check.obtained


def _used(check: Check) -> float:
    if check.difference is None:
        return float("inf")
    return check.difference / check.tolerance if check.tolerance else check.difference


class _Judge:
    """Checks of one case."""

    def __init__(self, of: str, case: str, given: Mapping[str, Fraction]) -> None:
        self._of = of
        self._case = f"case {case}: " if case else ""
        self._given = given

    def stability(self, delayed: LoopFigures, sampled: LoopFigures) -> Check:
        """The sampled loop must be stable, whatever the continuous one is."""
        assert delayed.verdict is not None
        assert sampled.verdict is not None
        found, wanted = sampled.verdict, delayed.verdict
        stable = found.stability == STABLE
        reason = found.by
        if not stable and not wanted.is_stable:
            reason += "; with hold and delay the continuous loop is not stable either"
        return self._check(
            "loop stability", wanted.stability, found.stability, float(not stable), 0.0, "", reason, within=stable
        )

    def phase_margin(self, delayed: LoopFigures, sampled: LoopFigures) -> Check:
        """At most so much less than with hold and delay alone, and never below the floor."""
        name, loss, least = (
            "loop phase margin",
            self._figure("loop_phase_margin_loss"),
            self._figure("loop_phase_margin_least"),
        )
        obtained, wanted = sampled.margins.phase_margin_deg, delayed.margins.phase_margin_deg
        if not _is_stable(sampled):
            return self._check(
                name, wanted, obtained, None, loss, "deg", "the sampled loop is not stable", within=False
            )
        if obtained is None and sampled.verdict is None and wanted is not None:
            reason = (
                f"the continuous loop crosses over at {_frequency(delayed.margins.crossover_rad_s)}, and no crossover "
                "is left below half the sample rate where the plant was measured"
            )
            return self._check(name, wanted, None, None, loss, "deg", reason, within=False)
        if obtained is None:
            return self.undefined(name, "there is no gain crossover")
        where = f"at {_frequency(sampled.margins.crossover_rad_s)}"
        if wanted is None or not _is_stable(delayed):
            reason = (
                f"{where}; the continuous loop with hold and delay has none to compare; the floor is {least:.5g} deg"
            )
            short = max(least - obtained, 0.0)
            return self._check(name, None, obtained, short, 0.0, "deg", reason, within=short == 0)
        room = min(loss, wanted - least)
        reason = f"{where}; at most {loss:.5g} deg below the loop with hold and delay, and at least {least:.5g} deg"
        if room < 0:
            reason += ", which that loop does not reach itself"
            return self._check(
                name, wanted, obtained, max(least - obtained, 0.0), 0.0, "deg", reason, within=obtained >= least
            )
        lost = max(wanted - obtained, 0.0)
        return self._check(name, wanted, obtained, lost, room, "deg", reason, within=lost <= room)

    def sensitivity(self, delayed: LoopFigures, sampled: LoopFigures) -> Check:
        """At most the limit."""
        name, most = "loop sensitivity", self._figure("loop_sensitivity_most")
        obtained, wanted = sampled.margins.maximum_sensitivity, delayed.margins.maximum_sensitivity
        if not _is_stable(sampled) or obtained is None:
            return self._check(name, wanted, None, None, most, "", "the sampled loop is not stable", within=False)
        reason = f"greatest at {_frequency(sampled.margins.peak_rad_s)}; at most {most:.5g}"
        start = wanted if wanted is not None and _is_stable(delayed) and wanted < most else most
        if start == most:
            reason += ", which the continuous loop with hold and delay does not keep itself"
        risen = max(obtained - start, 0.0)
        return self._check(name, wanted, obtained, risen, most - start, "", reason, within=obtained <= most)

    def overshoot(self, delayed: LoopFigures, sampled: LoopFigures) -> Check:
        """At most so many points more than with hold and delay alone."""
        name, rise = "loop overshoot", self._figure("loop_overshoot_rise")
        if not _is_stable(sampled):
            return self._check(name, None, None, None, rise, "%", "the sampled loop is not stable", within=False)
        if sampled.step is None:
            reason = "the plant's output has no final value other than 0, or takes too many samples to reach it"
            return self.undefined(name, reason)
        obtained = sampled.step.overshoot_percent
        if delayed.step is None:
            return self.undefined(name, "the continuous loop with hold and delay does not settle")
        wanted = delayed.step.overshoot_percent
        risen = max(obtained - wanted, 0.0)
        reason = "points above the continuous loop with hold and delay, between the samples too"
        return self._check(name, wanted, obtained, risen, rise, "%", reason, within=risen <= rise)

    def undefined(self, name: str, reason: str) -> Check:
        """Nothing to compare."""
        return Check(name, self._of, None, None, None, None, "", UNDEFINED, self._case + reason)

    def _figure(self, key: str) -> float:
        return float(self._given.get(key, LOOP_DEFAULTS[key].tolerance))

    def _check(
        self,
        name: str,
        reference: float | str | None,
        obtained: float | str | None,
        difference: float | None,
        tolerance: float,
        unit: str,
        reason: str,
        *,
        within: bool,
    ) -> Check:
        verdict = WITHIN if within else OUT
        return Check(name, self._of, reference, obtained, difference, tolerance, unit, verdict, self._case + reason)


def _is_stable(figures: LoopFigures) -> bool:
    """Whether the loop is stable, as far as that is known."""
    return figures.verdict is None or figures.verdict.is_stable


def _frequency(w_rad_s: float | None) -> str:
    return "high frequency" if w_rad_s is None else "0 Hz" if w_rad_s == 0 else frequency_text(w_rad_s)
