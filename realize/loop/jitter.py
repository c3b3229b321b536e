"""The jitter margin: additional delay that may vary from sample to sample.

Source: Kao & Lincoln, Automatica 40(8), 2004, hybrid form: a continuous plant, a sampled controller, the delay anywhere
between 0 and J at every sample. The condition is sufficient, not necessary: a loop may stand more.
"""

from __future__ import annotations

from math import ceil, floor, pi
from typing import NamedTuple

import numpy as np

from realize.checks.modes import every
from realize.loop.margins import lowest
from realize.loop.plant import series
from realize.loop.response import Continuous, Real, log_size
from realize.loop.sampled import SampledLoop
from realize.transfer import TransferFunction

#: Aliases are summed until this multiple of the highest corner, where two terms of the expansion at infinity serve for
#: the rest; at least and at most so many on each side.
_CORNERS = 8
_LEAST_ALIASES, _MOST_ALIASES = 8, 512


class JitterMargin(NamedTuple):
    """A sufficient bound.

    Attributes
    ----------
    jitter_s : float
        Delay that may vary between 0 and this, from sample to sample, on top of the constant delay.
    w_rad_s : float
        Frequency that sets it.
    """

    jitter_s: float
    w_rad_s: float


def jitter_margin(loop: SampledLoop) -> JitterMargin | None:
    """Sufficient margin of a stable loop.

    Returns
    -------
    JitterMargin or None
        None where the loop is not stable, where plant and sensor answer at once, so that the condition cannot hold, or
        where their corners lie so far above the rate that the aliases are too many to sum.

    Notes
    -----
    ``|P_alias C/(1 + L)| < 1/(N |exp(jwT) - 1|)`` for all w up to half the rate, ``P_alias^2`` the sum of
    ``|P H|^2`` over all aliases; with n whole periods and a part g, ``N^2 = n^2 + 2 n g + g`` and ``J = (n + g) T``.
    """
    chain = series(loop.held.plant.transfer, loop.held.plant.sensor).lowest
    if chain.relative_degree == 0 or not loop.verdict.is_stable:
        return None
    period = float(loop.period_s)
    if _aliases(chain, 2 * pi / period) > _MOST_ALIASES:
        return None

    def room(w: Real) -> Real:
        log_gain, phase = loop.response(w)
        (control, _), alias = loop.controller_response(w), _alias_size(chain, w, 2 * pi / period)
        # 1 + L and C both may be infinite at z = 1: take C out of both.
        opened = np.exp(-control) + np.exp(log_gain - control + 1j * phase)
        room: Real = np.abs(opened) / (alias * 2 * np.sin(w * period / 2))
        return room

    least, at = lowest(room, loop.grid, room(loop.grid))
    whole = floor(least)
    part = (least * least - whole * whole) / (2 * whole + 1)
    return JitterMargin((whole + part) * period, at)


def _alias_size(chain: TransferFunction, w: Real, turn: float) -> Real:
    """``sqrt(sum_k |G(j(w + k turn))|^2)``: near terms one by one, the rest by its integral (Euler-Maclaurin)."""
    response, count = Continuous(chain), _aliases(chain, turn)
    aliases = np.abs(w[:, None] + turn * np.arange(-count, count + 1))
    size, _ = response.at(aliases.ravel())
    near: Real = np.exp(2 * size).reshape(aliases.shape).sum(axis=1)
    ends = (count + 0.5) * turn + np.array([[1.0], [-1.0]]) * w
    size_of_all: Real = np.sqrt(near + _beyond(chain, ends, turn).sum(axis=0))
    return size_of_all


def _aliases(chain: TransferFunction, turn: float) -> int:
    """How many are summed on each side."""
    corner = max((abs(r.value) for r in chain.poles + chain.zeros), default=0.0)
    return max(ceil(_CORNERS * corner / turn), _LEAST_ALIASES)


def _beyond(chain: TransferFunction, start: Real, turn: float) -> Real:
    """``sum_k |G(j(start + (k + 1/2) turn))|^2`` by ``c w^-2r (1 + b/w^2)``.

    Notes
    -----
    ``|jw - p|^2 = w^2 (1 + Re p^2/w^2 + ...)`` on average over a pair. The midpoint sum is the integral and
    ``turn^2/24`` times the slope at the start.
    """
    r = chain.relative_degree
    c = np.exp(2 * log_size(chain.gain))
    b = sum((z * z).real for z in every(chain.zeros)) - sum((p * p).real for p in every(chain.poles))
    lead = c * start ** (1 - 2 * r)
    integral = lead * (1 / (2 * r - 1) + b / ((2 * r + 1) * start**2))
    slope = -2 * r * lead / start**2
    tail: Real = integral / turn + turn / 24 * slope
    return tail
