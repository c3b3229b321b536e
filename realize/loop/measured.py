"""A plant known by its measured frequency response: margins within the measured band, and nothing else.

The file has a line with the names ``frequency_hz``, ``magnitude_db``, ``phase_deg``, in any order, and a line for each
frequency, ascending. Between them the magnitude in dB and the phase, unwrapped, are straight lines over the logarithm
of the frequency.
"""

from __future__ import annotations

import csv
from collections.abc import Sequence
from functools import cached_property
from itertools import pairwise
from math import isfinite, log, pi
from typing import NamedTuple

import numpy as np

from realize.algebra.expression.tokens import shown
from realize.band import frequency_text
from realize.errors import RealizeError
from realize.loop.margins import GainCrossover, Margins, Scan, margins
from realize.loop.plant import UNITY
from realize.loop.response import Continuous, Delay, Hold, Part, Real, Sampled, combined
from realize.transfer import PulseTransferFunction, TransferFunction

#: Names of the columns.
COLUMNS = ("frequency_hz", "magnitude_db", "phase_deg")

#: Points a band needs at the least: two have no shape between them.
LEAST_POINTS = 3

#: Points between two measured frequencies, for what the controller and a dead time do there.
_BETWEEN = 16

#: Jump of the phase between neighbours, in deg, that says the measurement is too coarse to be unwrapped.
_MOST_JUMP_DEG = 150.0


class MeasuredResponse:
    """A frequency response between two frequencies.

    Parameters
    ----------
    frequency_hz, magnitude_db, phase_deg : sequence of float
        Ascending frequencies; the phase may be wrapped.
    """

    def __init__(
        self, frequency_hz: Sequence[float], magnitude_db: Sequence[float], phase_deg: Sequence[float]
    ) -> None:
        self.w_rad_s: Real = 2 * pi * np.array(frequency_hz)
        self._log_w = np.log(self.w_rad_s)
        self._log_gain = np.array(magnitude_db) * (log(10) / 20)
        self._phase = np.unwrap(np.radians(phase_deg))

    def at(self, w: Real) -> tuple[Real, Real]:
        """``ln |.|`` and phase; the ends go on for ever, so stay within the band."""
        x = np.log(w)
        return np.interp(x, self._log_w, self._log_gain), np.interp(x, self._log_w, self._phase)

    @property
    def band_text(self) -> str:
        """The measured band in words."""
        return f"{frequency_text(float(self.w_rad_s[0]))} to {frequency_text(float(self.w_rad_s[-1]))}"


class MeasuredPlant(NamedTuple):
    """A measured plant.

    Attributes
    ----------
    response : MeasuredResponse
        From the controller's output to the plant's output.
    dead_time_s : float
        Dead time that the measurement does not hold.
    sensor : TransferFunction
        Sensor that the measurement does not hold.
    case : str
    """

    response: MeasuredResponse
    dead_time_s: float = 0.0
    sensor: TransferFunction = UNITY
    case: str = ""


def read_response(text: str, where: str = "[plant] response") -> MeasuredResponse:
    """Read a measured response from the text of a CSV file.

    Parameters
    ----------
    text : str
    where : str
        The file as the user knows it.

    Raises
    ------
    RealizeError
        When a column is missing, a number is none, frequencies do not ascend, or there are too few points.
    """
    lines = text.removeprefix("\N{ZERO WIDTH NO-BREAK SPACE}").splitlines()
    reader = csv.reader(lines)
    # Each row with the number of its line, which is where the user looks.
    rows = [(reader.line_num, row) for row in reader if any(cell.strip() for cell in row)]
    if not rows:
        raise RealizeError(where, "the file is empty", _EXPECTED, "export the measurement as text")
    (first, head), *body = rows
    places = _places(head, lines[first - 1], f"{where}, line {first}")
    points = [_point(row, len(head), places, lines[i - 1], f"{where}, line {i}") for i, row in body]
    if len(points) < LEAST_POINTS:
        raise RealizeError(
            where, f"it has {len(points)} points", f"at least {LEAST_POINTS}", "measure at more frequencies"
        )
    frequency, magnitude, phase = zip(*points, strict=True)
    numbers = [i for i, _ in body]
    _require_ascending(frequency, numbers, where)
    _require_resolved(frequency, phase, numbers, where)
    return MeasuredResponse(frequency, magnitude, phase)


_EXPECTED = f"a first line with {', '.join(COLUMNS)}, and a line for each frequency"


def _places(head: Sequence[str], line: str, where: str) -> list[int]:
    """Where each column stands."""
    names = [cell.strip().lower() for cell in head]
    for name in COLUMNS:
        if names.count(name) != 1:
            found = "is missing" if name not in names else "is there more than once"
            advice = "name the columns in the first line, with commas between them"
            raise RealizeError(where, f"the column {name} {found} in {shown(line.strip())}", _EXPECTED, advice)
    return [names.index(name) for name in COLUMNS]


def _point(row: Sequence[str], width: int, places: Sequence[int], line: str, where: str) -> list[float]:
    if len(row) <= max(places):
        found, advice = "only ", "separate the numbers with commas; complete the line or remove it"
    elif any(cell.strip() for cell in row[width:]):
        found, advice = "", "write decimal points; use commas between the numbers only"
    else:
        return [_number(row[place], name, where) for place, name in zip(places, COLUMNS, strict=True)]
    count = f"{found}{len(row)} column{'' if len(row) == 1 else 's'}"
    raise RealizeError(where, f"{count} in {shown(line.strip())}", f"{width} columns, as in the first line", advice)


def _number(cell: str, name: str, where: str) -> float:
    try:
        value = float(cell)
    except ValueError:
        value = float("nan")
    if not isfinite(value):
        raise RealizeError(where, f"{name} is {shown(cell.strip())}", "a finite number", "correct or remove the line")
    return value


def _require_ascending(frequency: Sequence[float], lines: Sequence[int], where: str) -> None:
    if frequency[0] <= 0:
        raise RealizeError(
            f"{where}, line {lines[0]}",
            f"the first frequency is {frequency[0]:.5g} Hz",
            "frequencies above 0",
            "leave out the point at 0",
        )
    for line, (before, after) in zip(lines[1:], pairwise(frequency), strict=True):
        if after <= before:
            raise RealizeError(
                f"{where}, line {line}",
                f"{after:.5g} Hz after {before:.5g} Hz",
                "ascending frequencies",
                "sort the lines by frequency, each once",
            )


def _require_resolved(frequency: Sequence[float], phase_deg: Sequence[float], lines: Sequence[int], where: str) -> None:
    for i, (before, after) in enumerate(pairwise(phase_deg)):
        jump = abs((after - before + 180) % 360 - 180)
        if jump > _MOST_JUMP_DEG:
            raise RealizeError(
                f"{where}, line {lines[i + 1]}",
                f"the phase changes by {jump:.5g} deg between {frequency[i]:.5g} and {frequency[i + 1]:.5g} Hz",
                f"at most {_MOST_JUMP_DEG:.5g} deg from one frequency to the next",
                "measure at more frequencies there",
            )


class MeasuredLoop:
    """A controller around a measured plant: margins within the band.

    Parameters
    ----------
    controller : TransferFunction or PulseTransferFunction
        Continuous or sampled.
    plant : MeasuredPlant
    hold_s : float, optional
        Period of a hold in the loop. A sampled loop needs it: the aliases of the plant above half the sample rate are
        not known and not counted.
    compute_delay_s : float
        From sampling to output.
    """

    def __init__(
        self,
        controller: TransferFunction | PulseTransferFunction,
        plant: MeasuredPlant,
        *,
        hold_s: float | None = None,
        compute_delay_s: float = 0.0,
    ) -> None:
        self.plant = plant
        first: Continuous | Sampled
        if isinstance(controller, PulseTransferFunction):
            first, highest = Sampled(controller), pi / float(controller.period_s)
        else:
            first, highest = Continuous(controller), float("inf")
        delay = plant.dead_time_s + compute_delay_s
        hold: tuple[Part, ...] = (Hold(hold_s),) if hold_s else ()
        self.parts: tuple[Part, ...] = (first, plant.response, Continuous(plant.sensor), Delay(delay), *hold)
        w = plant.response.w_rad_s
        self._known = w[w <= highest]
        if len(self._known) < 2:
            raise RealizeError(
                "[plant] response",
                f"it was measured from {plant.response.band_text}, above half the sample rate",
                "measured frequencies below half the sample rate",
                "measure at lower frequencies, or raise the sample rate",
            )

    def response(self, w_rad_s: Real) -> tuple[Real, Real]:
        """``ln |L|`` and unwrapped phase in rad, within the band."""
        return combined(self.parts, w_rad_s)

    @cached_property
    def _scan(self) -> Scan:
        x = np.log(self._known)
        parts = np.arange(len(x), step=1 / _BETWEEN)[: _BETWEEN * (len(x) - 1) + 1]
        return Scan(self.response, np.exp(np.interp(parts, np.arange(len(x)), x)))

    @cached_property
    def crossovers(self) -> tuple[GainCrossover, ...]:
        """All gain crossovers within the band, ascending."""
        return self._scan.gain_crossovers()

    @property
    def highest_crossover_rad_s(self) -> float | None:
        """Highest gain crossover; None without one, or where the gain is above 1 at the last measured frequency.

        Whatever lies within the band, the highest crossover then lies beyond it.
        """
        if not self.crossovers or self.ends_above_one:
            return None
        return self.crossovers[-1].w_rad_s

    @property
    def ends_above_one(self) -> bool:
        """Whether the gain is above 1 at the last frequency."""
        return bool(self._scan.log[-1] > 0)

    @cached_property
    def margins(self) -> Margins:
        """Margins as far as the band shows them; stability is not known."""
        return margins(self._scan, self.crossovers, self._scan.phase_crossovers(), None, None)

    @property
    def notes(self) -> tuple[str, ...]:
        """What the figures rest on."""
        band = self.plant.response.band_text
        notes = [f"margins within the measured band, {band}; stability and step are not known from it"]
        if not self.crossovers:
            notes.append(f"no gain crossover within the measured band, {band}")
        if any(isinstance(part, Sampled) for part in self.parts):
            notes.append("aliases of the plant above half the sample rate are not counted")
        return tuple(notes)
