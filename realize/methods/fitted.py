"""Fit of the frequency response: the pulse transfer function of G's order that follows G best over a band.

Each step is Levy's linear problem (IRE Transactions on Automatic Control AC-4, 1959) weighted by the denominator
before it, the iteration of Sanathanan & Koerner (IEEE Transactions on Automatic Control 8, 1963); the last steps are
Gauss and Newton's, because that iteration need not end in a least error of its own norm. The weight may come from a
loop (idea: Rattan, IEEE Transactions on Automatic Control 29, 1984): with a plant P and the sensitivity S, the closed
loop is off by about ``|P S| |G - Gd|``.

Everything is a polynomial in ``x = (z - 1)/(z + 1)``, which is ``j tan(w T/2)`` on the unit circle, scaled so that the
grid ends at ``|u| = 1``; constant terms are 1, so the low-frequency gain is kept whatever is fitted, and a slow root
keeps its relative precision. All arithmetic is in integers in units of ``2**-bits`` (no linear-algebra library, no
trigonometry of the machine), and weights are rounded before use: the same bytes everywhere. What comes out is
rational, and exact from there on.

Kept, not fitted: roots of G at s = 0 are at z = 1; other poles that do not decay, and zeros on the imaginary axis, are
at ``exp(s T)``. Fitted poles decay and do not ring, unless a pole of the design does so there. Measured, not proven:
that no better fit exists, and the error between the frequencies of the grid. Proven: where the poles lie.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from fractions import Fraction
from math import frexp, isqrt, sqrt
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt

from realize.algebra import polynomial as poly
from realize.algebra.elementary import exponential, tangent
from realize.algebra.enclosure import Array, Enclosure, Unresolved, integers
from realize.algebra.irrational import pi
from realize.algebra.roots import Root, isolate
from realize.errors import RealizeError, Refused
from realize.methods import METHODS, discretize
from realize.methods.conversion import (
    Conversion,
    Discretization,
    normalised_ratio,
    pulse_transfer_function,
    refuse_growth,
)
from realize.methods.invariant import mapped_exponentially
from realize.transfer import TransferFunction

#: Name of the method.
METHOD = "frequency-fit"

#: Bits beyond the range of the design's factors over the grid: 53 that a figure may need, as many for a residual far
#: below the response, and as many for what the linear problem loses.
_BITS = 160

#: Ratio of neighbouring frequencies in the band: the bend of a well-damped corner takes a decade, 38 of them.
_RATIO = 1.0625

#: The grid starts this far below the lowest corner (or the band edge): there the corner has turned the phase by 6 deg
#: and the magnitude by 0.5 %, and the gain below is exact anyway.
_BELOW = 10

#: Roots with a damping ratio below this bend the response more sharply than the grid; it gets more frequencies there.
_NARROW = 0.5

#: Where: the natural frequency, and offsets in units of the damping ratio, until the resonance is down to an eighth.
_OFFSETS = (-8, -4, -2, -1, -0.5, 0, 0.5, 1, 2, 4, 8)

#: Frequencies this near (relatively) a root on the imaginary axis are left out: response and weight are 0 or infinite.
_APART = 2.0**-20

#: Above the band, up to this share of the Nyquist frequency, on a coarser grid, errors count too ...
_TOP = 0.95
_RATIO_ABOVE = 1.25

#: ... a relative error of 1 there as much as this share of the residual of the best of the nine in the band: it decides
#: between fits that are equal in the band, and keeps compensation from paying for the last digits with noise.
_SHARE_ABOVE = Fraction(1, 10)

#: Shares of the sums are taken in units of ``2**-_SHARE_BITS``: more exactly than the sums need it.
_SHARE_BITS = 64

#: Weights are rounded to this many bits of the largest: they need no more, and their last digits, which may differ
#: between machines, are gone.
_WEIGHT_BITS = 24

#: A fitted pole with a smaller damping ratio than this (in x) rings: its resonance peaks by a factor of 1.7.
_RINGING = 0.3

#: It may, where a pole of the design rings: within this share of that pole's distance from z = 1 (in x) and with half
#: of its damping ratio or more.
_OWN = 0.2

#: Largest ``|x|`` of a fitted pole: x = -2 is z = -1/3, an alternation that dies within a few samples.
_FASTEST = 2.0

#: Added to the (unit) diagonal of the normal equations: directions that change the response by less than 2**-50 of
#: what the others do are left alone.
_DAMPING_BITS = 100

#: Iterations at most, and the relative change of the squared residual below which they end.
_MOST_STEPS = 8
_SETTLED = Fraction(1, 100)

#: Halvings of a Gauss-Newton step at most.
_MOST_HALVINGS = 5

#: Significant bits of a fitted coefficient.
_COEFFICIENT_BITS = 128

Weight = Callable[[npt.NDArray[np.float64]], npt.NDArray[np.float64]]

#: Real and imaginary parts at the frequencies of the grid.
_Complex = tuple[Array, Array]


class Compensation(NamedTuple):
    """What the fit makes up for within the band.

    Attributes
    ----------
    hold : bool
        The zero-order hold behind the controller: half a period of delay, and its loss of magnitude.
    delay_s : Fraction
        Compute delay in seconds.
    """

    hold: bool
    delay_s: Fraction


def frequency_fit(
    transfer: TransferFunction,
    period_s: Fraction,
    *,
    band_rad_s: Fraction,
    weight: Weight | None = None,
    compensation: Compensation | None = None,
) -> Discretization:
    """Fit the pulse transfer function to the frequency response over the band.

    Parameters
    ----------
    transfer : TransferFunction
        G: proper, not a pure gain.
    period_s : Fraction
        Sample period.
    band_rad_s : Fraction
        Highest frequency that is fitted, below the Nyquist frequency.
    weight : callable, optional
        ``weight(frequencies in rad/s)``: what the error ``|G - Gd|`` is multiplied by, up to a common factor. Default:
        ``1/|G|``, the relative error.
    compensation : Compensation, optional
        Fit G times the inverse of hold and delay instead of G.

    Returns
    -------
    Discretization
        Named :data:`METHOD`, exact, with G's order and low-frequency gain; the notes tell the residual and that of the
        best of the nine.

    Raises
    ------
    Refused
        When G is improper or a pure gain, or the band reaches the Nyquist frequency.
    RealizeError
        When the weight is not finite, not negative and somewhere positive.

    Notes
    -----
    The residual is the root of ``sum q weight^2 |Gd - G|^2 / sum q weight^2 |G|^2`` over the grid up to the band edge
    (G compensated), q being the width in ln w, so that it is a relative error. Above the band a small share of the
    relative error is added while fitting (:data:`_SHARE_ABOVE`). The residual is never above that of the best of the
    nine, where those do not count that make a decaying pole grow: where no fit is below it, the result is that
    method's own pulse transfer function (with its low-frequency gain), and a note says so.

    Lead is had from zeros and poles that the design has anyway: a first-order controller can make up for little delay,
    and what a higher order makes up for, it pays with gain above the band.
    """
    _refuse_unfit(transfer, period_s, band_rad_s)
    frame = _Frame(transfer, period_s, _grid(transfer, period_s, band_rad_s), compensation)
    band = frame.band_weights(weight)
    name, best, start = _best_of_nine(frame, band, band_rad_s)
    problem = _Problem(frame, band, best)
    fit = _fitted(problem, start)
    beside = _compensation_notes(compensation)
    if fit.band >= best:
        made = discretize(transfer, period_s, name, band_rad_s)
        notes = (*made.conversion.notes, _unbeaten_note(frame, fit, name, best), *beside)
        return Discretization(METHOD, made.pulse, made.conversion._replace(notes=notes))
    note = _residual_note(frame, fit, name, best)
    conversion = _conversion(frame, fit, (note, *_moved_notes(fit), *beside))
    return Discretization(METHOD, pulse_transfer_function(conversion, period_s), conversion)


def _refuse_unfit(transfer: TransferFunction, period_s: Fraction, band_rad_s: Fraction) -> None:
    if transfer.relative_degree < 0:
        raise Refused(
            "transfer",
            f"it is improper: its numerator has {-transfer.relative_degree} more than its denominator's degree",
            "as many poles as zeros, or more",
            "add a roll-off pole first",
        )
    if transfer.order == 0:
        raise Refused(
            "method", f"{METHOD} finds nothing to fit in a pure gain", "one pole at least", "use any other method"
        )
    if band_rad_s * period_s >= pi():
        raise Refused(
            "method",
            f"{METHOD} fits up to the band edge, {float(band_rad_s / (2 * pi())):.5g} Hz, "
            f"which is not below half the sample rate, {float(1 / (2 * period_s)):.5g} Hz",
            "a band below half the sample rate",
            "lower the band, or raise the sample rate",
        )
    refuse_growth(transfer.poles, period_s)


class _Grid(NamedTuple):
    """Ascending frequencies in rad/s: in the band, and above it."""

    band: tuple[float, ...]
    above: tuple[float, ...]


def _grid(transfer: TransferFunction, period_s: Fraction, band_rad_s: Fraction) -> _Grid:
    roots = transfer.poles + transfer.zeros
    edge, top = float(band_rad_s), _TOP * float(pi() / period_s)
    corners = [_size(root.value) for root in roots if root.value]
    band = _geometric(min([edge, *corners]) / _BELOW, edge, _RATIO)
    above = _geometric(edge, top, _RATIO_ABOVE)[1:] if edge < top else []
    on_axis = [root.value.imag for root in roots if root.value.real == 0]
    details = [w for w in _details(roots) if band[0] < w < edge]
    return _Grid(_apart(band + details, on_axis), _apart(above, on_axis))


def _geometric(first: float, last: float, ratio: float) -> list[float]:
    """Both ends, and frequencies between by repeated multiplication, which every machine does alike."""
    found = [first]
    while found[-1] * ratio < last:
        found.append(found[-1] * ratio)
    return [*found, last]


def _details(roots: Sequence[Root]) -> list[float]:
    """Frequencies around narrow bends."""
    sizes = [(_size(root.value), abs(root.value.real)) for root in roots if root.is_pair]
    return [size + offset * re for size, re in sizes if re < _NARROW * size for offset in _OFFSETS]


def _apart(frequencies: Sequence[float], on_axis: Sequence[float]) -> tuple[float, ...]:
    kept = (w for w in set(frequencies) if all(abs(w - axis) > _APART * w for axis in on_axis))
    return tuple(sorted(kept))


def _size(value: complex) -> float:
    """``|value|`` by operations that every machine rounds alike."""
    return sqrt(value.real * value.real + value.imag * value.imag)


class _Frame:
    """The design on the grid: what of it is kept, and what the rest must be.

    Attributes
    ----------
    bits : int
        All arrays are integers in units of ``2**-bits``.
    unit : Fraction
        ``x = unit u``: a power of two, at least ``|x|`` at the highest frequency.
    powers : object array
        ``|u|**k`` in row k.
    per_design : pair of object arrays
        ``1/(G E)``, E the compensation, up to G's gain: ``u**-k`` at low frequency.
    per_target : pair of object arrays
        ``kept zeros/(kept poles G E)``: its product with the fitted ratio is to be 1, and is at low frequency.
    kept_zeros, kept_poles : polynomial
        In ``z - 1``, monic.
    """

    def __init__(
        self, transfer: TransferFunction, period_s: Fraction, grid: _Grid, compensation: Compensation | None
    ) -> None:
        self.transfer, self.period_s, self.grid = transfer, period_s, grid
        frequencies = grid.band + grid.above
        self.bits = _BITS + 2 * _range_bits(transfer, frequencies)
        halves = self.fixed([Fraction(w) * period_s / 2 for w in frequencies])
        tangents = integers([tangent(int(half), self.bits)[0] for half in halves])
        exponent = max(int(t) for t in tangents).bit_length() - self.bits
        self.unit = Fraction(2) ** exponent
        self.powers = self._powers(tangents, exponent, 2 * transfer.order)
        self.per_design = self._per_design(self._powers(halves, exponent, transfer.order))
        if compensation is not None:
            self.per_design = self.times(self.per_design, self._per_compensation(halves, tangents, compensation))
        self.kept_zeros = self._kept([root for root in transfer.zeros if self._is_kept(root)])
        self.kept_poles = self._kept([root for root in transfer.poles if self.is_kept_pole(root)])
        zeros, poles = (self.values(self.monic_at_one(p)) for p in (self.kept_zeros, self.kept_poles))
        self.per_target = self.times(self.per_design, self.over(zeros, poles))

    def _is_kept(self, root: Root) -> bool:
        """Whether a root is on the imaginary axis, and below the Nyquist frequency."""
        return root.value.real == 0 and Fraction(root.value.imag) * self.period_s < pi()

    def is_kept_pole(self, root: Root) -> bool:
        """Whether a pole has its place without a fit."""
        return root.value.real > 0 or self._is_kept(root)

    def _kept(self, roots: Sequence[Root]) -> poly.Rationals:
        product: poly.Rationals = (Fraction(1),)
        for root in roots:
            (image,) = mapped_exponentially((root,), self.period_s)
            factor = self._on_circle(image) if root.is_pair and root.value.real == 0 else self.factor(image)
            product = poly.multiply(product, poly.power(factor, root.multiplicity))
        return product

    def _on_circle(self, image: Root) -> poly.Rationals:
        """``z^2 - 2 z cos(w T) + 1`` in ``z - 1``: on the unit circle whatever the cosine is rounded to."""
        gap = Fraction(-2 * image.enclosure(self.bits)[0], 1 << self.bits)
        return Fraction(1), gap, gap

    def factor(self, image: Root) -> poly.Rationals:
        """Monic polynomial of a root or a pair, in ``z - 1``."""
        re, im = (Fraction(c, 1 << self.bits) for c in image.enclosure(self.bits)[:2])
        return (Fraction(1), -2 * re, re * re + im * im) if image.is_pair else (Fraction(1), -re)

    def in_u(self, p: poly.Rationals) -> list[Fraction]:
        """``p(z - 1)`` times ``(1 - x)^degree``, ascending powers of u: ``z - 1 = 2 x/(1 - x)``."""
        found = [Fraction(0)] * len(p)
        for i, c in enumerate(reversed(p)):
            if c:
                for k, b in enumerate(reversed(poly.power((-1, 1), len(p) - 1 - i))):
                    found[i + k] += c * 2**i * b
        return [c * self.unit**k for k, c in enumerate(found)]

    def monic_at_one(self, p: poly.Rationals) -> Array:
        """:meth:`in_u` in fixed point, relative to the lowest coefficient that is not 0."""
        return self._relative(self.in_u(p))

    def _relative(self, ascending: Sequence[Fraction]) -> Array:
        lowest = next(c for c in ascending if c)
        return self.fixed([c / lowest for c in ascending])

    def fixed(self, values: Sequence[Fraction]) -> Array:
        """Rationals as integers in units of ``2**-bits``."""
        return integers([(v.numerator << self.bits) // v.denominator for v in values])

    def _powers(self, values: Array, exponent: int, highest: int) -> Array:
        """Powers of ``values`` in units of ``2**exponent``, a row each."""
        rows = [integers([1 << self.bits] * len(values))]
        scaled = values << -exponent if exponent < 0 else values >> exponent
        for _ in range(highest):
            rows.append(rows[-1] * scaled >> self.bits)
        return np.array(rows)

    def _per_design(self, powers: Array) -> _Complex:
        """``1/G`` at ``s T/2 = j halves``, from the powers of these."""
        parts = []
        for p in reversed(normalised_ratio(self.transfer, self.period_s)):
            ascending = [c * (2 * self.unit) ** i for i, c in enumerate(reversed(p))]
            parts.append(_on_axis(self._relative(ascending), powers, self.bits))
        return self.over(parts[0], parts[1])

    def _per_compensation(self, halves: Array, tangents: Array, compensation: Compensation) -> _Complex:
        """Hold and delay: ``exp(-jw(delay + T/2)) sin(w T/2)/(w T/2)``, with ``sin = tan/sqrt(1 + tan^2)``."""
        lag = 2 * compensation.delay_s / self.period_s + (1 if compensation.hold else 0)
        discs = [exponential((0, int(-half * lag // 1), 1), self.bits) for half in halves]
        turn = integers([re for re, _, _ in discs]), integers([im for _, im, _ in discs])
        if not compensation.hold:
            return turn
        secants = integers([isqrt((1 << 2 * self.bits) + int(t) * int(t)) for t in tangents])
        loss = (tangents << 2 * self.bits) // (halves * secants)
        return turn[0] * loss >> self.bits, turn[1] * loss >> self.bits

    def values(self, p: Array) -> _Complex:
        """A polynomial in u, ascending powers, on the grid."""
        return _on_axis(p, self.powers, self.bits)

    def times(self, a: _Complex, b: _Complex) -> _Complex:
        """Product on the grid."""
        return a[0] * b[0] - a[1] * b[1] >> self.bits, a[0] * b[1] + a[1] * b[0] >> self.bits

    def over(self, a: _Complex, b: _Complex) -> _Complex:
        """Quotient on the grid."""
        size = b[0] * b[0] + b[1] * b[1]
        re, im = a[0] * b[0] + a[1] * b[1], a[1] * b[0] - a[0] * b[1]
        return (re << self.bits) // size, (im << self.bits) // size

    def squared_error(self, ratio: _Complex, weights: Array) -> int:
        """Weighted squares of ``ratio - 1``, summed."""
        re, im = ratio[0] - (1 << self.bits), ratio[1]
        return int((re * re + im * im >> self.bits) @ weights) >> self.bits

    def residual(self, square: int) -> float:
        """Root of a sum of weighted squares."""
        return isqrt(square << self.bits) / (1 << self.bits)

    def band_weights(self, weight: Weight | None) -> Array:
        """Weights of the squared relative error: 1 in all, 0 above the band."""
        shares = np.array(_widths(self.grid.band))
        if weight is not None:
            shares = shares * _relative_weights(weight(np.array(self.grid.band)), self._magnitudes()) ** 2
        return self._normalised([*shares.tolist(), *(0.0 for _ in self.grid.above)])

    def weights_above(self) -> Array:
        """Weights of the squared relative error above the band: 1 in all, if there is anything above."""
        return self._normalised([*(0.0 for _ in self.grid.band), *_widths(self.grid.above)])

    def _normalised(self, shares: Sequence[float]) -> Array:
        units = [int(share * (1 << _SHARE_BITS)) for share in shares]
        total = sum(units) or 1
        return integers([(unit << self.bits) // total for unit in units])

    def _magnitudes(self) -> npt.NDArray[np.float64]:
        """``|G E|`` in the band, relative to the largest."""
        squares = self.per_design[0] ** 2 + self.per_design[1] ** 2
        sizes = [isqrt((1 << 4 * self.bits) // int(s)) for s in squares[: len(self.grid.band)]]
        return np.array([size / max(sizes) for size in sizes])


def _range_bits(transfer: TransferFunction, frequencies: Sequence[float]) -> int:
    """Bits by which the factors of G, or of their images, may differ over the grid."""
    low, top = _exponent(frequencies[0]), _exponent(frequencies[-1])
    bits = 0
    for root in transfer.poles + transfer.zeros:
        size = _exponent(_size(root.value))
        # In x the highest frequency lies farther out than in s T/2, by less than 2^4 at 0.95 of the Nyquist frequency.
        distance = 4 + max(0, top - max(size, low))
        depth = max(0, size - _exponent(root.value.real)) if root.is_pair and root.value.real else 0
        bits += root.count * (distance + depth)
    return bits


def _exponent(value: float) -> int:
    return frexp(value)[1] if value else -1100


def _on_axis(p: Array, powers: Array, bits: int) -> _Complex:
    """``sum_k p_k (j v)^k``, ascending, from the powers of v."""
    signed = p * integers([(1, 1, -1, -1)[k % 4] for k in range(len(p))])
    even: Array = signed[::2] @ powers[: len(p) : 2]
    odd: Array = signed[1::2] @ powers[1 : len(p) : 2] if len(p) > 1 else even * 0
    return even >> bits, odd >> bits


def _widths(frequencies: Sequence[float]) -> list[float]:
    """Width of each frequency's share of the axis of ln w, times two."""
    around = [*frequencies[:1], *frequencies, *frequencies[-1:]]
    return [(above - below) / w for below, w, above in zip(around, around[1:], around[2:], strict=False)]


def _relative_weights(values: Any, magnitudes: npt.NDArray[np.float64]) -> npt.NDArray[np.float64]:
    """Weight of the relative error from that of the error, rounded."""
    given = np.asarray(values, float)
    good = given.shape == magnitudes.shape and bool(np.isfinite(given).all()) and bool((given >= 0).all())
    if not good or not given.any():
        raise RealizeError(
            "weight",
            "it is not a weight for every frequency",
            "as many finite numbers as frequencies, none negative, not all 0",
            "leave it out: the relative error counts then",
        )
    relative = given / given.max() * magnitudes
    rounded: npt.NDArray[np.float64] = np.round(np.ldexp(relative / relative.max(), _WEIGHT_BITS))
    return rounded


def _best_of_nine(frame: _Frame, band: Array, band_rad_s: Fraction) -> tuple[str, int, Array]:
    """Name and squared residual of the method with the least one, and its denominator without what is kept."""
    found = []
    for name, convert in METHODS.items():
        try:
            conversion = convert(frame.transfer, frame.period_s, band_rad_s)
            if _keeps_decay(frame.transfer, conversion):
                found.append((frame.squared_error(_ratio(frame, conversion), band), name, conversion))
        except (Refused, Unresolved):
            continue
    if not found:
        raise Refused("method", f"{METHOD} starts from another method, and none applies", "", "raise the sample rate")
    square, name, conversion = min(found, key=lambda entry: entry[0])
    free: poly.Rationals = (Fraction(1),)
    for root, image in zip(frame.transfer.poles, conversion.poles(), strict=True):
        if not frame.is_kept_pole(root):
            free = poly.multiply(free, poly.power(frame.factor(image), root.multiplicity))
    return name, square, frame.monic_at_one(free)


def _keeps_decay(transfer: TransferFunction, conversion: Conversion) -> bool:
    """Whether decaying poles decay and undamped ones do not grow (forward-difference grows by ``|z - 1|^2``)."""
    for root, image in zip(transfer.poles, conversion.poles(), strict=True):
        re, im = image.value.real, image.value.imag
        growth = re * (2 + re) + im * im
        if (root.value.real < 0 and growth >= 0) or (root.value.real == 0 and growth > (re * re + im * im) / 2):
            return False
    return True


def _ratio(frame: _Frame, conversion: Conversion) -> _Complex:
    """``Gd/(G E)`` of another method."""
    transfer = frame.transfer
    top, bottom = (
        frame.in_u(poly.shift(part(frame.bits).midpoints(), Fraction(1)))
        for part in (conversion.numerator, conversion.denominator)
    )
    lowest = bottom[poly.trailing_zeros(transfer.denominator)]
    gain = transfer.low_frequency_gain * (2 * frame.unit / frame.period_s) ** transfer.zeros_minus_poles_at_origin
    above, below = ([c / (lowest * factor) for c in p] for p, factor in ((top, gain), (bottom, 1)))
    return frame.times(frame.over(frame.values(frame.fixed(above)), frame.values(frame.fixed(below))), frame.per_design)


class _Fit(NamedTuple):
    """A fitted ratio.

    Attributes
    ----------
    numerator, denominator : object array
        In u, ascending powers, constant term 1.
    ratio : pair of object arrays
        ``Gd/(G E)``.
    band, total : int
        Squared residuals: in the band, and with the share of what lies above.
    moved : bool
        Whether poles were moved to where they decay and do not ring.
    """

    numerator: Array
    denominator: Array
    ratio: _Complex
    band: int
    total: int
    moved: bool


class _Problem:
    """Steps from one fit to the next.

    Parameters
    ----------
    frame : _Frame
        The design on the grid.
    band : object array
        Weights of the squared relative error in the band.
    best : int
        Squared residual of the best of the nine.
    """

    def __init__(self, frame: _Frame, band: Array, best: int) -> None:
        self._frame, self._band, self._best = frame, band, best
        above = frame.weights_above() * int(_SHARE_ABOVE**2 * best) >> frame.bits
        self._weights = band + above
        self._one = 1 << frame.bits
        images = mapped_exponentially(tuple(r for r in frame.transfer.poles if r.value.real < 0), frame.period_s)
        in_x = [_to_x(image.value) for image in images if image.is_pair]
        self._ringing = [x for x in in_x if -x.real < _RINGING * _size(x)]

    def rank(self, fit: _Fit) -> tuple[bool, int]:
        """Least for the best fit; one that is closer in the band than the nine comes first."""
        return fit.band >= self._best, fit.total

    def closest_with(self, denominator: Array) -> _Fit:
        """The best numerator over a denominator, which is moved first where it rings or grows: a linear problem."""
        denominator, moved = self._tamed(denominator)
        order = self._frame.transfer.order - poly.degree(self._frame.kept_zeros)
        start = self._fit(integers([self._one] + [0] * order), denominator, moved)
        return self._fit(_plus(start.numerator, self.changes(start, None)[0]), denominator, moved)

    def changed(self, fit: _Fit, changes: tuple[Array, Array], halvings: int) -> _Fit:
        """Another fit, by :meth:`changes` halved so often."""
        numerator, denominator = (change >> halvings for change in changes)
        wanted = _plus(fit.denominator, denominator)
        tamed, moved = self._tamed(wanted)
        if moved:
            return self.closest_with(wanted)
        return self._fit(_plus(fit.numerator, numerator), tamed, moved)

    def design(self) -> _Complex:
        """1 on the grid: the design relative to itself."""
        count = self._frame.powers.shape[1]
        return integers([self._one] * count), integers([0] * count)

    def _fit(self, numerator: Array, denominator: Array, moved: bool) -> _Fit:
        frame = self._frame
        ratio = frame.times(frame.over(frame.values(numerator), frame.values(denominator)), frame.per_target)
        band, total = (frame.squared_error(ratio, weights) for weights in (self._band, self._weights))
        return _Fit(numerator, denominator, ratio, band, total, moved)

    def changes(self, fit: _Fit, facing: _Complex | None) -> tuple[Array, Array]:
        """Changes of numerator and denominator (but for constant terms) to the least error of the linear problem.

        Notes
        -----
        ``H = 1/(G E)`` as far as not kept, ``V = H N/D``. The error ``V - 1`` changes with N by ``H dN/D``; with D it
        changes by ``-dD/D`` in the iteration of Sanathanan and Koerner, by ``-V dD/D`` to first order (Gauss-Newton):
        ``facing`` is 1 or V, or None to change the numerator alone.
        """
        frame = self._frame
        inverse = frame.over(self.design(), frame.values(fit.denominator))
        columns = [(frame.times(frame.per_target, inverse), len(fit.numerator) - 1)]
        if facing is not None:
            re, im = frame.times(facing, inverse)
            columns.append(((-re, -im), len(fit.denominator) - 1))
        error = fit.ratio[0] - self._one, fit.ratio[1]
        found = _solved(*self._normal_equations(columns, error), frame.bits)
        return found[: len(fit.numerator) - 1], found[len(fit.numerator) - 1 :]

    def _normal_equations(self, columns: list[tuple[_Complex, int]], error: _Complex) -> tuple[Array, Array]:
        """Matrix and right side for columns ``f_i u^k``, k from 1 to a highest power, that are to cancel ``error``.

        Notes
        -----
        ``u = j v`` makes ``sum w Re(conj(f_i u^k) f_g u^m)`` a moment of ``w conj(f_i) f_g``: of order ``k + m``,
        turned by ``j^(m - k)``. So there are few sums to take.
        """
        places = [(i, k) for i, (_, highest) in enumerate(columns) for k in range(1, highest + 1)]
        moments = [[self._moments(f, g) for g, _ in columns] for f, _ in columns]
        matrix = np.empty((len(places), len(places)), dtype=object)
        for row, (i, k) in enumerate(places):
            matrix[row] = [_turned(moments[i][g], k + m, m - k) for g, m in places]
        against = [self._moments(f, error) for f, _ in columns]
        return matrix, integers([-_turned(against[i], k, -k) for i, k in places])

    def _moments(self, a: _Complex, b: _Complex) -> _Complex:
        """``sum w conj(a) b v^k`` for every power."""
        re, im = self._frame.times((a[0], -a[1]), b)
        powers, bits = self._frame.powers, self._frame.bits
        return powers @ (re * self._weights >> bits) >> bits, powers @ (im * self._weights >> bits) >> bits

    def _tamed(self, denominator: Array) -> tuple[Array, bool]:
        """Move poles that grow or ring to where they do not."""
        unit = float(self._frame.unit)
        roots = isolate(poly.primitive(poly.trimmed(int(c) for c in denominator[::-1])))
        lost = len(denominator) - 1 - sum(root.count for root in roots)
        found = [(root.value * unit, root.multiplicity) for root in roots] + [(complex(-np.inf), 1)] * lost
        moved = [(self._allowed(x), multiplicity) for x, multiplicity in found]
        if moved == found:
            return denominator, False
        product: poly.Rationals = (Fraction(1),)
        for x, multiplicity in moved:
            product = poly.multiply(product, poly.power(_factor(x / unit), multiplicity))
        return self._frame.fixed(product[::-1]), True

    def _allowed(self, x: complex) -> complex:
        """The nearest place, at the same distance where possible, at which a pole decays and does not ring."""
        re, im, size = -abs(x.real), x.imag, _size(x)
        own = [p for p in self._ringing if im and _size(complex(re, im) - p) < _OWN * _size(p)]
        least = min([-p.real / _size(p) / 2 for p in own], default=_RINGING)
        if size > _FASTEST and not own:
            re, im, size = (re / size * _FASTEST if im else -_FASTEST), im / size * _FASTEST, _FASTEST
        if -re < least * size:
            re, im = -least * size, size * sqrt(1 - least * least)
        return complex(re, im)


def _fitted(problem: _Problem, start: Array) -> _Fit:
    """Sanathanan and Koerner's iteration, then Gauss and Newton's."""
    best = current = problem.closest_with(start)
    for _ in range(_MOST_STEPS):
        last = current
        current = problem.changed(last, problem.changes(last, problem.design()), 0)
        best = min(best, current, key=problem.rank)
        if abs(current.total - last.total) <= last.total * _SETTLED:
            break
    for _ in range(_MOST_STEPS):
        last, changes = best, problem.changes(best, best.ratio)
        tries = (problem.changed(last, changes, halvings) for halvings in range(_MOST_HALVINGS + 1))
        best = next((fit for fit in tries if problem.rank(fit) < problem.rank(last)), last)
        if last.total - best.total <= last.total * _SETTLED:
            break
    return best


def _plus(p: Array, change: Array) -> Array:
    """Add to all coefficients but the constant one."""
    return np.concatenate([p[:1], p[1:] + change])


def _turned(moments: _Complex, power: int, turns: int) -> int:
    """Real part of a moment times ``j**turns``."""
    re, im = int(moments[0][power]), int(moments[1][power])
    return (re, -im, -re, im)[turns % 4]


def _solved(matrix: Array, right: Array, bits: int) -> Array:
    """Solve normal equations, scaled to a diagonal of 1 and damped, by elimination."""
    one, count = 1 << bits, len(right)
    scales = integers([isqrt(int(matrix[i, i]) << bits) or 1 for i in range(count)])
    a = (matrix << 2 * bits) // (scales[:, None] * scales[None, :])
    b = (right << bits) // scales
    for i in range(count):
        a[i, i] += one >> _DAMPING_BITS
    for i in range(count):
        factors = (a[i + 1 :, i] << bits) // a[i, i]
        a[i + 1 :, i:] -= factors[:, None] * a[i, i:] >> bits
        b[i + 1 :] -= factors * b[i] >> bits
    for i in reversed(range(count)):
        b[i] = ((int(b[i]) << bits) - int(a[i, i + 1 :] @ b[i + 1 :] if i + 1 < count else 0)) // int(a[i, i])
    found: Array = (b << bits) // scales
    return found


def _to_x(delta: complex) -> complex:
    """``x = delta/(2 + delta)`` by operations that every machine rounds alike."""
    re, im = delta.real, delta.imag
    size = (2 + re) * (2 + re) + im * im
    return complex((re * (2 + re) + im * im) / size, 2 * im / size)


def _factor(root: complex) -> poly.Rationals:
    """Polynomial of a real root, or a pair, in descending powers, its constant term 1."""
    re, im = Fraction(root.real), Fraction(root.imag)
    size = re * re + im * im
    return (1 / size, -2 * re / size, Fraction(1)) if im else (-1 / re, Fraction(1))


def _conversion(frame: _Frame, fit: _Fit, notes: tuple[str, ...]) -> Conversion:
    """The fit as exact polynomials in z, with the gain at low frequency that G has."""
    transfer, k = frame.transfer, frame.transfer.zeros_minus_poles_at_origin
    top, bottom = (
        poly.multiply(kept, _in_delta(frame, p))
        for kept, p in ((frame.kept_zeros, fit.numerator), (frame.kept_poles, fit.denominator))
    )
    lowest = [next(c for c in reversed(p) if c) for p in (top, bottom)]
    gain = transfer.low_frequency_gain / frame.period_s**k * lowest[1] / lowest[0]
    top, bottom = poly.scale(top, gain / bottom[0]), poly.scale(bottom, 1 / bottom[0])
    numerator, denominator = (poly.shift(p, Fraction(-1)) for p in (top, bottom))
    above = Enclosure.exact((Fraction(0),) * (len(denominator) - len(numerator)) + numerator)
    below = Enclosure.exact(denominator)
    return Conversion(
        lambda bits: above,
        lambda bits: below,
        lambda: isolate(poly.primitive(bottom)),
        lambda: isolate(poly.primitive(top)),
        notes=notes,
    )


def _in_delta(frame: _Frame, p: Array) -> poly.Rationals:
    """``p(u) (2 + d)^degree`` in ``d = z - 1``, descending powers, from rounded coefficients: ``x = d/(2 + d)``."""
    total: poly.Rationals = ()
    for k, c in enumerate(p):
        value = _significant(int(c)) / (frame.unit**k * (1 << frame.bits))
        term = poly.power((Fraction(1), Fraction(2)), len(p) - 1 - k)
        total = poly.add(total, poly.scale((*term, *[Fraction(0)] * k), value))
    return total


def _significant(value: int) -> int:
    """Nearest integer of few enough significant bits."""
    places = max(0, value.bit_length() - _COEFFICIENT_BITS)
    return (value + (1 << places >> 1)) >> places << places


def _residual_note(frame: _Frame, fit: _Fit, name: str, best: int) -> str:
    return (
        f"relative error over the band, weighted: {_percent(frame, fit.band)} rms, "
        f"where {name}, the best of the nine methods, has {_percent(frame, best)}; measured"
    )


def _unbeaten_note(frame: _Frame, fit: _Fit, name: str, best: int) -> str:
    kind = "of this order whose poles decay and do not ring" if fit.moved else "of this order"
    return (
        f"is {name} itself: no fit {kind} was found closer to the design over the band than that, "
        f"{_percent(frame, best)} rms, weighted"
    )


def _percent(frame: _Frame, square: int) -> str:
    return f"{100 * frame.residual(square):.3g} %"


def _moved_notes(fit: _Fit) -> tuple[str, ...]:
    note = "the fit wanted poles that grow or ring: moved to where they do not, and the numerator fitted again"
    return (note,) if fit.moved else ()


def _compensation_notes(compensation: Compensation | None) -> tuple[str, ...]:
    if compensation is None:
        return ()
    parts = ["the hold"] if compensation.hold else []
    parts += [f"{float(compensation.delay_s):.5g} s of compute delay"] if compensation.delay_s else []
    return (f"leads the design within the band, to make up for {' and '.join(parts)}",) if parts else ()
