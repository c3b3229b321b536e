"""A second opinion on the stored numbers: the same design by scipy's road, which shares no algebra with ours.

Where the two differ by more than scipy's accuracy, as measured, and the rounding of the stored numbers allow, one of
them is wrong.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from importlib.util import find_spec
from math import log, pi, tan
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from realize.band import frequency_text
from realize.firmware.audit.stored_response import Response, frequency_response, on_circle, step_response
from realize.firmware.recorded import Recorded
from realize.transfer import TransferFunction

INSTALL = 'pip install "realize[audit]"'

#: Frequencies at which responses are compared, and samples of a step.
_FREQUENCIES, _SAMPLES = 33, 200

#: The lowest frequency, below the band edge, and the highest, in half rates: near it the angle still has its digits.
_BELOW_BAND, _HIGHEST = 1000.0, 0.98

#: Bits of the tangents of half the angles at which responses are compared.
_TANGENT_BITS = 20

#: How many times the spread of the roads the error of the plainest is taken to be: eight samples of an error hardly
#: ever all lie within a tenth of it. Common practice, no source.
_SPREADS = 10

#: Roundings of a double that evaluating a gain takes by itself, and one for each sample of a step, relative.
_EVALUATION = {False: 32 * 2.0**-53, True: _SAMPLES * 2.0**-53}

#: Rounding is known to first order: twice that covers the rest while it stays below the response itself.
_FIRST_ORDER = 2


class Part(NamedTuple):
    """Frequency or step response compared.

    Attributes
    ----------
    what : str
        Which of the two.
    points, judged : int
        How many frequencies or samples, and at how many scipy and rounding leave anything to judge.
    difference, accuracy, rounding : float
        Of what was judged, largest: difference, scipy's accuracy (measured), what rounding may do; relative, those of
        the step to its largest sample.
    worst : str
        Where the difference is farthest beyond what both allow; empty where it is nowhere.
    """

    what: str
    points: int
    judged: int
    difference: float
    accuracy: float
    rounding: float
    worst: str


class Opinion(NamedTuple):
    """What scipy says."""

    parts: tuple[Part, ...]
    notes: tuple[str, ...]

    @property
    def finding(self) -> str:
        """The sentence where it disagrees, else empty."""
        worst = [part.worst for part in self.parts if part.worst]
        return f"scipy disagrees with the stored numbers: {'; '.join(worst)}" if worst else ""


def is_available() -> bool:
    """Whether scipy is installed."""
    return find_spec("scipy") is not None


def second_opinion(
    transfer: TransferFunction,
    method: str,
    band_rad_s: Fraction,
    exact_at_rad_s: Fraction,
    numbers: Recorded,
    record: Mapping[str, Any],
) -> Opinion:
    """Compare what the stored numbers do with what scipy makes of the design.

    Parameters
    ----------
    transfer : TransferFunction
        What was discretized.
    method : str
        Its method.
    band_rad_s, exact_at_rad_s : Fraction
        Band edge, and where ``bilinear-prewarped`` is exact.
    numbers, record : Recorded, mapping
        The stored numbers, and the record they stand in.
    """
    # Here, because it takes a second to load and no other command needs it.
    from realize.firmware.audit.scipy_roads import COVERED, roads

    if method not in COVERED:
        return Opinion((), (f"no second opinion: scipy has no road to {method}",))
    if transfer.order == 0:
        return Opinion((), ("no second opinion: a gain alone needs none",))
    tangents = _tangents(float(band_rad_s * numbers.period_s))
    points = on_circle(tangents)
    z = np.array([complex(*map(float, point)) for point in points])
    try:
        with np.errstate(all="ignore"):
            found = roads(transfer, numbers.period_s, method, exact_at_rad_s, z, _SAMPLES)
    except (ArithmeticError, ValueError) as error:  # a matrix without an inverse, a number beyond a double
        return Opinion((), (f"no second opinion: scipy's road ends: {error}",))
    try:
        with np.errstate(all="ignore"):
            gains = frequency_response(numbers, record, points)
            steps = step_response(numbers, record, _SAMPLES)
    except (ArithmeticError, KeyError, ValueError):
        return Opinion((), ("no second opinion: the stored numbers are not those of the record's structure",))
    rates = [2 * np.arctan(float(t)) / float(numbers.period_s) for t in tangents]
    parts = [
        _part("frequency response", gains, [road.gains for road in found], [f"at {frequency_text(w)}" for w in rates])
    ]
    curves = [road.step for road in found if road.step is not None]
    if curves:
        parts.append(_part("step response", steps, curves, [f"at sample {k}" for k in range(_SAMPLES)], peak=True))
    return Opinion(tuple(parts), _left_out(parts))


def _left_out(parts: Sequence[Part]) -> tuple[str, ...]:
    return tuple(
        f"second opinion: {part.what}: scipy's accuracy and rounding leave nothing to judge at "
        f"{part.points - part.judged} of {part.points} points"
        for part in parts
        if part.judged < part.points
    )


def _tangents(band_angle: float) -> list[Fraction]:
    """Of half the angles from far below the band to close to half the rate, in equal ratios, to few bits."""
    first, last = min(band_angle, 1.0) / _BELOW_BAND, _HIGHEST * pi
    ratio = log(last / first) / (_FREQUENCIES - 1)
    return [_short(tan(first * np.exp(i * ratio) / 2)) for i in range(_FREQUENCIES)]


def _short(value: float) -> Fraction:
    """A number to few significant bits."""
    exponent = int(np.frexp(value)[1])
    return round(Fraction(value) / Fraction(2) ** (exponent - _TANGENT_BITS)) * Fraction(2) ** (
        exponent - _TANGENT_BITS
    )


def _part(
    what: str, ours: Response, theirs: Sequence[npt.NDArray[Any]], names: Sequence[str], *, peak: bool = False
) -> Part:
    """Judge one response against the plainest road, by the spread of all and by rounding."""
    size = np.abs(ours.value)
    size = np.full(len(size), size.max()) if peak else size
    spread = np.max([np.abs(each - theirs[0]) for each in theirs], axis=0)
    accuracy = _SPREADS * spread + _EVALUATION[peak] * size
    rounding = _FIRST_ORDER * ours.rounding
    difference = np.abs(ours.value - theirs[0])
    judged = np.isfinite(difference + accuracy + rounding) & (accuracy + rounding < size)
    if not judged.any():
        return Part(what, len(size), 0, 0.0, 0.0, 0.0, "")
    most = [float((values / size)[judged].max()) for values in (difference, accuracy, rounding)]
    excess = np.where(judged, difference / np.where(judged, accuracy + rounding, 1), 0)
    i = int(np.argmax(excess))
    worst = ""
    if excess[i] > 1:
        share, allowed = (100 * float(value[i] / size[i]) for value in (difference, accuracy + rounding))
        worst = f"{what} {names[i]} by {share:.3g} %, where its measured accuracy and rounding allow {allowed:.2g} %"
    return Part(what, len(size), int(judged.sum()), most[0], most[1], most[2], worst)
