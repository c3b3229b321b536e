"""Default tolerances, each with the sentence that derives it.

A figure is in the unit of its check. The keys are those of the design file's ``[tolerance]``.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from fractions import Fraction
from types import MappingProxyType
from typing import NamedTuple


class Default(NamedTuple):
    """A check's name, the unit of its figure, its tolerance, and what that rests on."""

    check: str
    unit: str
    tolerance: Fraction
    because: str


_SHIFT = "a corner known from parts of 1 to 5 % tolerance is not known better than 2 %"

#: By key of the design file, in the order in which checks are listed.
DEFAULTS: Mapping[str, Default] = MappingProxyType(
    {
        "pole_shift": Default("pole shift", "%", Fraction(2), _SHIFT),
        "zero_shift": Default("zero shift", "%", Fraction(2), _SHIFT),
        "magnitude_in_band": Default(
            "magnitude in band",
            "dB",
            Fraction(1, 2),
            "6 % of gain, a tenth of the gain margin of 2 (6 dB) that a careful loop keeps",
        ),
        "phase_in_band": Default(
            "phase in band",
            "deg",
            Fraction(5),
            "a tenth of the usual phase margin of 45 to 60 deg, and below the 6 deg a roll-off may cost",
        ),
        "low_frequency_gain": Default(
            "low-frequency gain",
            "%",
            Fraction(1, 10),
            "steady accuracy is what the design was made for: below the resolution of a 10-bit converter",
        ),
        "step_deviation": Default(
            "step deviation", "%", Fraction(1), "the width of a line in a plot of the response over its full height"
        ),
        "step_overshoot": Default(
            "step overshoot", "%", Fraction(1), "one point of overshoot is what a loop is specified to"
        ),
        "converter_step": Default(
            "converter step", "%", Fraction(5), "twenty counts of noise would take the output across its whole range"
        ),
        "round_off": Default(
            "round-off",
            "%",
            Fraction(1),
            "as much of the range as the step may deviate by; integer arithmetic only, and more where half a count of "
            "input alone can do more",
        ),
    }
)

#: Tolerance of the low-frequency gain where the limit is of ``s^-k G`` with k other than 0, in %: an integral or
#: washout gain is set by corners, which are not known better than a percent, and no steady value hangs on it.
LOW_FREQUENCY_SLOPE = Fraction(1)

#: Tolerance of the overshoot where the design names none: one point, or this share of the peak where that is more
#: (a derivative kick of 50 times the final value is not known to one point).
OVERSHOOT_SHARE = Fraction(1, 100)

#: Distance in % of the output range up to which an output agrees with the law it should follow: more than rounding
#: or a sample's shift can do to it, and far below the whole range that a wrong limit costs. Not to be overridden.
RECOVERY = Fraction(5)


class Tolerances:
    """The tolerances in force: the design's, and the defaults for the rest."""

    def __init__(self, given: Mapping[str, Fraction]) -> None:
        self._given = given

    @classmethod
    def of(cls, given: Iterable[tuple[str, Fraction]]) -> Tolerances:
        """Read the pairs of a design's ``tolerance``."""
        return cls(dict(given))

    def is_given(self, key: str) -> bool:
        """Whether the design names this one."""
        return key in self._given

    def exact(self, key: str) -> Fraction:
        """The tolerance in the unit of its check, as an exact number."""
        return self._given.get(key, DEFAULTS[key].tolerance)

    def low_frequency_gain(self, k: int) -> float:
        """Tolerance of the gain whose slope at low frequency is ``s^k``, in %."""
        if k == 0 or self.is_given("low_frequency_gain"):
            return float(self.exact("low_frequency_gain"))
        return float(LOW_FREQUENCY_SLOPE)

    def step_overshoot(self, peak_percent: float) -> float:
        """Tolerance of the overshoot, in points of % of the final value."""
        points = float(self.exact("step_overshoot"))
        if self.is_given("step_overshoot"):
            return points
        return max(points, float(OVERSHOOT_SHARE) * peak_percent)
