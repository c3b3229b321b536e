"""Everything the checks need of the design alone: computed once, on first use, for all methods."""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property
from math import pi

from realize.checks.frequency import FrequencyResponse
from realize.checks.modes import every
from realize.checks.response import StepResponse
from realize.checks.stability import continuous_stability
from realize.errors import Refused
from realize.transfer import TransferFunction

#: Gains outside would take the figures of a response out of a double's range (1e-308 to 1e308).
_LEAST_GAIN, _MOST_GAIN = Fraction(1, 10**250), Fraction(10**250)


class ContinuousReference:
    """A proper transfer function at one rate and band.

    Parameters
    ----------
    transfer : TransferFunction
        Proper.
    period_s : Fraction
        Sample period.
    band_rad_s : Fraction
        Band edge.

    Raises
    ------
    Refused
        When the gain at low frequency is beyond what a double can hold.
    """

    def __init__(self, transfer: TransferFunction, period_s: Fraction, band_rad_s: Fraction) -> None:
        if not _LEAST_GAIN < abs(transfer.low_frequency_gain) < _MOST_GAIN:
            raise Refused(
                "transfer",
                "its gain at low frequency is beyond the range of a double",
                "a gain between 1e-250 and 1e250",
                "choose units in which the signals have ordinary sizes",
            )
        self.transfer = transfer
        self.period_s = period_s
        self.band_rad_s = band_rad_s
        self.stability = continuous_stability(transfer.poles)

    @cached_property
    def poles(self) -> list[complex]:
        """Every pole by itself, in rad/s."""
        return every(self.transfer.poles)

    @cached_property
    def zeros(self) -> list[complex]:
        """Every finite zero by itself, in rad/s."""
        return every(self.transfer.zeros)

    @cached_property
    def step(self) -> StepResponse:
        """Response to a unit step."""
        return StepResponse(float(self.transfer.low_frequency_gain), self.zeros, self.poles, float(self.period_s))

    @cached_property
    def frequency(self) -> FrequencyResponse:
        """Response up to the band edge, or the Nyquist frequency where that is lower."""
        edge_rad_s = min(float(self.band_rad_s), pi / float(self.period_s))
        return FrequencyResponse(float(self.transfer.low_frequency_gain), self.zeros, self.poles, edge_rad_s)
