"""All checks of one pulse transfer function, in the order in which tables list them."""

from __future__ import annotations

from realize.checks.check import Asked, Check
from realize.checks.counterpart import Counterpart
from realize.checks.frequency import check_frequency_response
from realize.checks.gain import check_converter_step, check_low_frequency_gain
from realize.checks.recovery import Signals, Simulate, check_recovery
from realize.checks.reference import ContinuousReference
from realize.checks.shift import check_shift
from realize.checks.stability import check_stability
from realize.checks.step import SampledResponse, check_deviation, check_overshoot
from realize.checks.tolerances import Tolerances
from realize.transfer import PulseTransferFunction


def run_checks(
    reference: ContinuousReference,
    discrete: PulseTransferFunction,
    of: str,
    tolerances: Tolerances,
    signals: Signals,
    *,
    known_stability: str | None = None,
    simulate: Simulate | None = None,
) -> tuple[Check, ...]:
    """Compare a pulse transfer function with the design it stands for.

    Parameters
    ----------
    reference : ContinuousReference
        The design.
    discrete : PulseTransferFunction
        Its counterpart, at the same period.
    of : str
        ``stored`` or ``exact``.
    tolerances : Tolerances
        In force.
    signals : Signals
        What is known of them.
    known_stability : str, optional
        Class of ``discrete`` where it follows from the method: coefficients carried to finitely many bits need
        not keep an undamped pair on the circle.
    simulate : callable, optional
        Inputs to outputs from rest, with the clamp: what the firmware does.

    Returns
    -------
    tuple of Check
        ``stability``, ``pole shift``, ``zero shift``, ``magnitude in band``, ``phase in band``, ``low-frequency
        gain``, ``step deviation``, ``step overshoot``, ``converter step``, ``saturation recovery``.
    """
    transfer, design = reference.transfer, reference.step
    period_s = float(reference.period_s)
    stability = check_stability(transfer.poles, reference.stability, discrete, of, known_stability)
    counterpart = Counterpart(discrete)
    sampled = SampledResponse(counterpart, design.samples)
    shifts = (
        check_shift(
            Asked(name, of, "%", float(tolerances.exact(key))),
            roots,
            images,
            float(reference.band_rad_s),
            period_s,
        )
        for name, key, roots, images in (
            ("pole shift", "pole_shift", reference.poles, counterpart.poles),
            ("zero shift", "zero_shift", reference.zeros, counterpart.zeros),
        )
    )
    return (
        stability,
        *shifts,
        *check_frequency_response(reference.frequency, counterpart, of, tolerances),
        check_low_frequency_gain(transfer, counterpart, of, tolerances),
        check_deviation(design, sampled, period_s, of, tolerances),
        check_overshoot(
            design,
            sampled,
            (reference.stability, str(stability.obtained)),
            transfer.zeros_minus_poles_at_origin,
            period_s,
            of,
            tolerances,
        ),
        check_converter_step(transfer, discrete, of, tolerances, signals.input_per_count, signals.output_span),
        check_recovery(discrete, sampled, design.last, of, signals, simulate),
    )
