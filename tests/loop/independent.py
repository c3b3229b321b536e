"""The second road: loops in floating point, by dense grids, general root finding, matrix exponentials and small steps.

Nothing here uses the code under test. Polynomials are floats in descending powers; they are evaluated directly, so the
loops are chosen with rates not far above their corners.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from math import factorial
from typing import Any, NamedTuple

import numpy as np
from scipy.linalg import expm
from scipy.optimize import brentq, minimize_scalar

#: Points of the dense grid.
_POINTS = 20_000

Response = Callable[[Any], Any]


class Figures(NamedTuple):
    """Margins as a dense grid and a root finder give them; None where there is none."""

    crossovers: list[float]
    gain_raise: float | None
    gain_cut: float | None
    phase_margin_deg: float | None
    maximum_sensitivity: float


class Ratio(NamedTuple):
    """Numerator and denominator."""

    above: list[float]
    below: list[float]

    def at(self, s: Any) -> Any:
        """Value at complex points."""
        return np.polyval(self.above, s) / np.polyval(self.below, s)

    def times(self, other: Ratio) -> Ratio:
        """Product."""
        return Ratio(list(np.polymul(self.above, other.above)), list(np.polymul(self.below, other.below)))


def figures(response: Response, low: float, high: float, *, ends: Sequence[complex] = ()) -> Figures:
    """Look at a response on a dense grid and refine what is found.

    Parameters
    ----------
    ends : sequence of complex
        Real values the response has at the ends of the axis, where they matter.
    """
    w = np.geomspace(low, high, _POINTS)
    value = response(w)
    size = np.log(np.abs(value))
    crossovers = _zeros(lambda x: float(np.log(abs(response(x)))), w, size)
    real = [response(x) for x in _zeros(lambda x: float(response(x).imag), w, value.imag)]
    negative = [-v.real for v in (*real, *ends) if v.real < 0]
    below, above = [v for v in negative if v < 1], [v for v in negative if v > 1]
    angles = [float(np.degrees(np.angle(-response(x)))) for x in crossovers]
    return Figures(
        crossovers,
        1 / max(below) if below else None,
        1 / min(above) if above else None,
        min(map(abs, angles)) if angles else None,
        _peak(response, w, value),
    )


def _zeros(function: Callable[[float], float], w: Any, values: Any) -> list[float]:
    i = np.flatnonzero(values[:-1] * values[1:] < 0)
    found = [brentq(function, w[k], w[k + 1], xtol=1e-14 * w[k], rtol=1e-14) for k in i]
    # A pole on the axis changes the sign too.
    return [x for x in found if abs(function(x)) < 1e-3]


def _peak(response: Response, w: Any, value: Any) -> float:
    k = int(np.argmin(np.abs(1 + value)))
    low, high = w[max(k - 1, 0)], w[min(k + 1, len(w) - 1)]
    best = minimize_scalar(lambda x: abs(1 + response(x)), bounds=(low, high), method="bounded")
    return float(1 / min(best.fun, np.abs(1 + value).min()))


def continuous_response(ratio: Ratio, delay_s: float, hold_s: float = 0.0) -> Response:
    """``L(jw)`` by Horner's rule."""

    def response(w: Any) -> Any:
        s = 1j * np.asarray(w, complex)
        hold = (1 - np.exp(-s * hold_s)) / (s * hold_s) if hold_s else 1.0
        return ratio.at(s) * np.exp(-s * delay_s) * hold

    return response


def growing_modes(ratio: Ratio, delay_s: float) -> int:
    """Closed-loop roots right of the axis, with the dead time as a Pade approximant of order 12."""
    above, below = _pade(delay_s, 12) if delay_s else ([1.0], [1.0])
    closed = np.polyadd(np.polymul(ratio.below, below), np.polymul(ratio.above, above))
    return int(np.sum(np.roots(closed).real > 0))


def _pade(delay_s: float, order: int) -> tuple[list[float], list[float]]:
    f = factorial
    c = [f(2 * order - k) * f(order) / (f(2 * order) * f(k) * f(order - k)) for k in range(order + 1)]
    below = [x * delay_s**k for k, x in enumerate(c)]
    above = [x * (-1) ** k for k, x in enumerate(below)]
    return above[::-1], below[::-1]


class StateSpace(NamedTuple):
    """``x' = A x + B u``, ``y = C x + D u``."""

    a: Any
    b: Any
    c: Any
    d: float


def state_space(ratio: Ratio) -> StateSpace:
    """Controllable companion form."""
    below = np.array(ratio.below) / ratio.below[0]
    n = len(below) - 1
    above = np.zeros(n + 1)
    above[n + 1 - len(ratio.above) :] = np.array(ratio.above) / ratio.below[0]
    a, b = np.zeros((n, n)), np.zeros(n)
    if n:
        a[0], a[1:, :-1], b[0] = -below[1:], np.eye(n - 1), 1.0
    return StateSpace(a, b, above[1:] - above[0] * below[1:], float(above[0]))


def held(system: StateSpace, time: float) -> tuple[Any, Any]:
    """``exp(A t)`` and its integral times B."""
    n = len(system.b)
    m = np.zeros((n + 1, n + 1))
    m[:n, :n], m[:n, n] = system.a, system.b
    e = expm(m * time)
    return e[:n, :n], e[:n, n]


class Sampled(NamedTuple):
    """A plant with hold and fractional delay: ``x+ = F x + g0 u[k-d+1] + g1 u[k-d]``, ``y = c x``, d >= 1.

    Source of the split: the modified form in Astrom & Wittenmark, Computer-Controlled Systems.
    """

    f: Any
    g0: Any
    g1: Any
    c: Any
    d: int
    period_s: float

    def at(self, z: Any) -> Any:
        """Pulse transfer function at an array of points."""
        drive = self.g0 * z[:, None] ** (1 - self.d) + self.g1 * z[:, None] ** -float(self.d)
        matrices = z[:, None, None] * np.eye(len(self.c)) - self.f
        return np.linalg.solve(matrices, drive[:, :, None])[:, :, 0] @ self.c

    def closed(self, controller: Ratio) -> Any:
        """Closed-loop matrix: plant, d past inputs, controller."""
        control = state_space(Ratio(list(controller.above), list(controller.below)))
        n, d, m = len(self.c), self.d, len(control.b)
        a = np.zeros((n + d + m, n + d + m))
        command = np.zeros(n + d + m)
        command[:n], command[n + d :] = -control.d * self.c, control.c
        # past[0] is u[k-1], ..., past[d-1] is u[k-d].
        newest = command if d == 1 else np.eye(n + d + m)[n + d - 2]
        a[:n, :n] = self.f
        a[:n] += np.outer(self.g0, newest)
        a[:n, n + d - 1] += self.g1
        a[n] = command
        for i in range(1, d):
            a[n + i, n + i - 1] = 1
        a[n + d :, :n] = -np.outer(control.b, self.c)
        a[n + d :, n + d :] = control.a
        return a


def sampled(ratio: Ratio, period_s: float, delay_s: float) -> Sampled:
    """Discretize a strictly proper plant with its total delay, ``(d - 1) T + t'``, 0 < t' <= T."""
    system = state_space(ratio)
    d = max(1, int(np.ceil(delay_s / period_s - 1e-12)))
    late = delay_s - (d - 1) * period_s
    f, _ = held(system, period_s)
    rest, g0 = held(system, period_s - late)
    _, early = held(system, late)
    return Sampled(f, g0, rest @ early, system.c, d, period_s)


def sampled_response(plant: Sampled, controller: Ratio) -> Response:
    """``L(exp(jwT))``."""

    def response(w: Any) -> Any:
        z = np.exp(1j * np.atleast_1d(w) * plant.period_s)
        values = plant.at(z) * controller.at(z)
        return values if np.ndim(w) else values[0]

    return response


def alias_sum(ratio: Ratio, period_s: float, delay_s: float, w: float, terms: int = 20_000) -> complex:
    """Held plant on the unit circle as the sum of its continuous response over all aliases."""
    s = 1j * (w + 2 * np.pi / period_s * np.arange(-terms, terms + 1))
    return complex(np.sum(ratio.at(s) * np.exp(-s * delay_s) * -np.expm1(-s * period_s) / (s * period_s)))


def simulate(
    plant: Ratio, sensor: Ratio, controller: Ratio, period_s: float, delay_s: float, samples: int, parts: int
) -> tuple[Any, Any]:
    """Step of the sampled loop in parts of a period (the delay a multiple of one), exactly from part to part.

    Returns
    -------
    times, output
        The plant's output before the sensor.
    """
    first, second = state_space(plant), state_space(sensor)
    n, m = len(first.b), len(second.b)
    a = np.zeros((n + m, n + m))
    a[:n, :n], a[n:, n:] = first.a, second.a
    a[n:, :n] = np.outer(second.b, first.c)
    chain = StateSpace(a, np.concatenate([first.b, second.b * first.d]), None, 0.0)
    f, g = held(chain, period_s / parts)
    read = np.concatenate([first.c, np.zeros(m)])
    seen = np.concatenate([second.d * first.c, second.c])
    control = state_space(controller)
    late = round(delay_s / (period_s / parts))
    x, state, line, output = np.zeros(n + m), np.zeros(len(control.b)), [0.0] * (late + 1), []
    for i in range(samples * parts):
        if i % parts == 0:
            error = 1 - seen @ x
            command = control.c @ state + control.d * error
            state = control.a @ state + control.b * error
        line.append(command)
        output.append(read @ x)
        x = f @ x + g * line[-1 - late]
    return period_s / parts * np.arange(samples * parts), np.array(output)


def delayed_step(ratio: Ratio, sensor: Ratio, delay_s: float, parts: int, length_s: float) -> tuple[Any, Any]:
    """Step of the continuous loop with dead time by Runge-Kutta steps of a fraction of it.

    The dead time is put behind the sensor; what comes back half a step later is interpolated by a cubic.
    """
    forward, behind = state_space(ratio), state_space(sensor)
    assert forward.d == 0
    n = len(forward.b)
    a = np.zeros((n + len(behind.b),) * 2)
    a[:n, :n], a[n:, n:], a[n:, :n] = forward.a, behind.a, np.outer(behind.b, forward.c)
    b = np.concatenate([forward.b, np.zeros(len(behind.b))])
    read = np.concatenate([forward.c, np.zeros(len(behind.b))])
    seen = np.concatenate([behind.d * forward.c, behind.c])
    h, x = delay_s / parts, np.zeros(len(b))
    back: list[float] = []
    slopes: list[float] = []
    output: list[float] = []

    def returned(i: int, half: bool) -> float:
        if i < 0:
            return 0.0
        if not half:
            return back[i]
        return (back[i] + back[i + 1]) / 2 + h / 8 * (slopes[i] - slopes[i + 1])

    steps = int(length_s / h)
    for i in range(steps):
        back.append(float(seen @ x))
        output.append(float(read @ x))
        drive = 1 - returned(i - parts, half=False)
        slopes.append(float(seen @ (a @ x + b * drive)))
        middle, end = 1 - returned(i - parts, half=True), 1 - returned(i + 1 - parts, half=False)
        k1 = a @ x + b * drive
        k2 = a @ (x + h / 2 * k1) + b * middle
        k3 = a @ (x + h / 2 * k2) + b * middle
        k4 = a @ (x + h * k3) + b * end
        x = x + h / 6 * (k1 + 2 * k2 + 2 * k3 + k4)
    return h * np.arange(steps) + delay_s, np.array(output)


def overshoot_percent(output: Any, final: float, *, smooth: bool = True) -> float:
    """From the highest point; where the output is smooth there, by a parabola through its neighbours."""
    y = output / final
    i = int(np.argmax(y))
    top = float(y[i])
    if smooth and 0 < i < len(y) - 1:
        left, here, right = y[i - 1 : i + 2]
        curve = left - 2 * here + right
        top = float(here - (left - right) ** 2 / (8 * curve)) if curve < 0 else top
    return 100 * max(top - 1, 0.0)
