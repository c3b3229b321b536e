"""The check ``round-off``: what rounding to integers can do to the output at worst."""

from __future__ import annotations

from fractions import Fraction

from realize.checks.check import Asked, Check
from realize.checks.tolerances import Tolerances


def check_round_off(
    tolerances: Tolerances, proven_counts: Fraction, converter_counts: Fraction, span_counts: Fraction
) -> Check:
    """Compare the proven bound of the output's error with its tolerance, in % of the output range.

    Parameters
    ----------
    proven_counts : Fraction
        No sum of rounding errors exceeds it.
    converter_counts : Fraction
        What half a count of input, which its converter has rounded off already, can do to the output at worst. Where
        the design names no tolerance, as much may come from the arithmetic: nobody could tell the two apart.
    span_counts : Fraction
        Width of the output range.
    """
    allowed = float(tolerances.exact("round_off"))
    share = float(100 * converter_counts / span_counts)
    if not tolerances.is_given("round_off"):
        allowed = max(allowed, share)
    asked = Asked("round-off", "stored", "%", allowed)
    obtained = float(100 * proven_counts / span_counts)
    return asked.measured(0.0, obtained, obtained, f"proven; half a count of input alone can do {share:.3g} %")
