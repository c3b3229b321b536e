"""The checks ``low-frequency gain`` and ``converter step``: exact numbers on both sides."""

from __future__ import annotations

from fractions import Fraction

from realize.checks.check import Asked, Check
from realize.checks.counterpart import Counterpart
from realize.checks.tolerances import Tolerances
from realize.transfer import PulseTransferFunction, TransferFunction


def check_low_frequency_gain(
    transfer: TransferFunction, counterpart: Counterpart, of: str, tolerances: Tolerances
) -> Check:
    """Limit of ``s^-k G`` for s to 0 against that of ``((z-1)/T)^-k Gd`` for z to 1, in % of the former."""
    k, found = transfer.zeros_minus_poles_at_origin, counterpart.k
    asked = Asked("low-frequency gain", of, "%", tolerances.low_frequency_gain(k))
    wanted = transfer.low_frequency_gain
    if k != found:
        return asked.failed(float(wanted), None, f"the gain goes as (z - 1)^{found}, and should as s^{k}")
    difference = 100 * abs(counterpart.low_frequency_gain / wanted - 1)
    what = "G(0)" if k == 0 else f"the limit of s^{-k} G"
    return asked.measured(float(wanted), float(counterpart.low_frequency_gain), float(difference), f"{what}, exactly")


def check_converter_step(
    transfer: TransferFunction,
    discrete: PulseTransferFunction,
    of: str,
    tolerances: Tolerances,
    per_count: Fraction | None,
    span: Fraction | None,
) -> Check:
    """What one count at the input does to the output at once, in % of the output range.

    Parameters
    ----------
    per_count : Fraction or None
        Physical size of one count at the input.
    span : Fraction or None
        Width of the output range.
    """
    asked = Asked("converter step", of, "%", float(tolerances.exact("converter_step")))
    if per_count is None or not span:
        missing = "per_count of the input" if per_count is None else "the output range"
        return asked.undefined(f"it needs {missing}")
    wanted, found = (float(100 * abs(g.feed_through) * per_count / span) for g in (transfer, discrete))
    return asked.measured(wanted, found, found, "in % of the output range, for one count at the input")
