"""What the stored numbers do, straight from their exact values: frequency response and step response.

Nothing is rounded on the way that would show in the last digits of a double. Beside each response stands what rounding
the stored numbers may have done to it, to first order.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from math import prod
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from realize.firmware.audit.sensitivity import Floats, Move, moves_of, units
from realize.firmware.recorded import Recorded, RecordedSection

Complex = npt.NDArray[np.complex128]

#: Bits behind the point of the signals of the step response: what is cut off there does not reach a double.
_BITS = 200

#: A point of the unit circle, its parts exact.
Point = tuple[Fraction, Fraction]


class Response(NamedTuple):
    """A response, and how far rounding the stored numbers may have moved it; complex or real."""

    value: npt.NDArray[Any]
    rounding: Floats


def on_circle(tangents: Sequence[Fraction]) -> list[Point]:
    """``z = (1 + jt)/(1 - jt)``, on the unit circle at the angle ``2 atan t``, exactly."""
    return [((1 - t * t) / (1 + t * t), 2 * t / (1 + t * t)) for t in tangents]


def frequency_response(recorded: Recorded, record: Mapping[str, Any], points: Sequence[Point]) -> Response:
    """``Gd(z)`` in physical units at points of the unit circle.

    Notes
    -----
    A section ``H = B/A`` moves by ``(dB - H dA)/A``; a cascade by that times all the others.
    """
    z = np.array([complex(*map(float, point)) for point in points])
    sections = [_section_response(section, moves_of(section, record), points, z) for section in recorded.sections]
    values = [section.value for section in sections]
    total, error = np.zeros(len(z), complex), np.zeros(len(z))
    if recorded.parallel:
        total = sum(values, total + float(recorded.direct_gain))
        error = sum((section.rounding for section in sections), error + _unit_of_direct(record))
    elif sections:
        total = np.asarray(prod(values, start=np.ones(len(z), complex)))
        for i, section in enumerate(sections):
            error += section.rounding * np.abs(prod(values[:i] + values[i + 1 :], start=np.ones(len(z), complex)))
    less_one = np.array([complex(float(re - 1), float(im)) for re, im in points])
    for i, (gain, unit) in enumerate(zip(recorded.integral, _integral_units(record), strict=True), 1):
        total = total + float(gain) / less_one**i
        error = error + unit / np.abs(less_one) ** i
    scale = float(recorded.scale)
    return Response(total / scale, error / scale)


def _section_response(section: RecordedSection, moves: Sequence[Move], points: Sequence[Point], z: Complex) -> Response:
    above = np.array([_at(section.b, point) for point in points])
    below = np.array([_at((Fraction(1), *section.a), point) for point in points])
    value = above / below
    powers = z[:, None] ** -np.arange(len(section.b))
    error = np.zeros(len(z))
    for move in moves:
        error += move.unit * np.abs((powers @ move.b - value * (powers @ move.a)) / below)
    return Response(value, error)


def _at(p: Sequence[Fraction], point: Point) -> complex:
    """A polynomial in ascending powers of 1/z, evaluated exactly, then rounded."""
    re, im = Fraction(0), Fraction(0)
    x, y = point[0], -point[1]
    for c in reversed(p):
        re, im = re * x - im * y + c, re * y + im * x
    return complex(float(re), float(im))


def step_response(recorded: Recorded, record: Mapping[str, Any], count: int) -> Response:
    """The first samples of the answer to a unit step, in physical units."""
    step = [1 << _BITS] * count
    scale = float(recorded.scale)
    signals, total, error = [step], [0] * count, np.zeros(count)
    for section in recorded.sections:
        source = step if recorded.parallel else signals[-1]
        signals.append(_filtered(section, source))
        if recorded.parallel:
            total = [a + b for a, b in zip(total, signals[-1], strict=True)]
    if recorded.parallel:
        total = [a + _times(recorded.direct_gain, x) for a, x in zip(total, step, strict=True)]
        error += _unit_of_direct(record)
    elif recorded.sections:
        total = signals[-1]
    error += _step_rounding(recorded, record, [_doubles(signal) for signal in signals])
    sums = step
    for gain, unit in zip(recorded.integral, _integral_units(record), strict=True):
        sums = _summed(sums)
        total = [a + _times(gain, x) for a, x in zip(total, sums, strict=True)]
        error += unit * np.abs(_doubles(sums))
    return Response(_doubles(total) / scale, error / scale)


def _step_rounding(recorded: Recorded, record: Mapping[str, Any], signals: Sequence[Floats]) -> Floats:
    """``dB/A`` of what goes into a section less ``dA/A`` of what comes out, through all that follow."""
    total = np.zeros(len(signals[0]))
    for k, section in enumerate(recorded.sections):
        source = signals[0] if recorded.parallel else signals[k]
        behind = () if recorded.parallel else recorded.sections[k + 1 :]
        moves = moves_of(section, record)
        spans, b, a = (np.array([move[i] for move in moves]) for i in range(3))
        moved = _recursion(section, _convolved(source, b) - _convolved(signals[k + 1], a))
        for each in behind:
            moved = _recursion(each, _convolved(moved, np.array([[float(c) for c in each.b]])))
        total += spans @ np.abs(moved)
    return total


def _convolved(source: Floats, b: Floats) -> Floats:
    """Signals, or one, by polynomials in 1/z, or one: a row each."""
    rows = np.atleast_2d(source)
    result = np.zeros((max(len(rows), len(b)), rows.shape[1]))
    for i in range(b.shape[1]):
        result[:, i:] += b[:, i : i + 1] * rows[:, : rows.shape[1] - i]
    return result


def _recursion(section: RecordedSection, source: Floats) -> Floats:
    """``1/A`` in doubles, row by row: good enough for a bound."""
    a = np.array([float(c) for c in reversed(section.a)])
    result = np.zeros((len(source), source.shape[1] + len(a)))
    for k in range(source.shape[1]):
        result[:, k + len(a)] = source[:, k] - result[:, k : k + len(a)] @ a
    return result[:, len(a) :]


def _filtered(section: RecordedSection, source: Sequence[int]) -> list[int]:
    """``y = sum b x - sum a y`` on integers, of which each product is cut off far below a double."""
    result: list[int] = []
    for k in range(len(source)):
        forward = sum(_times(c, source[k - i]) for i, c in enumerate(section.b) if i <= k)
        result.append(forward - sum(_times(c, result[k - i]) for i, c in enumerate(section.a, 1) if i <= k))
    return result


def _times(factor: Fraction, value: int) -> int:
    return factor.numerator * value // factor.denominator


def _summed(values: Sequence[int]) -> list[int]:
    """``1/(z - 1)``: the sum of all values before."""
    sums, total = [], 0
    for value in values:
        sums.append(total)
        total += value
    return sums


def _doubles(values: Sequence[int]) -> Floats:
    return np.array([value / (1 << _BITS) for value in values])


def _integral_units(record: Mapping[str, Any]) -> list[float]:
    return units(record["integral"], record["arithmetic"])


def _unit_of_direct(record: Mapping[str, Any]) -> float:
    entry = record.get("direct_gain")
    return units([entry], record["arithmetic"])[0] if entry else 0.0
