"""Plant-input mapping: the transfer from reference to plant input keeps its poles through sampling.

Source: Markazi & Hori, American Control Conference 1992. With C around G the plant input answers the reference by
``M = C/(1 + C G)``; Md is M pole-zero-mapped, Gd the plant's step-invariant counterpart, and

    Cd = Md/(1 - Gd Md)

has the closed-loop poles at exactly ``exp(p T)``. The gain makes ``Gd Md`` equal to ``G M`` at low frequency. Zeros
of Md lie exactly on the plant's poles: these modes stay in the loop as they are, unseen from the reference, so that
only a plant whose modes decay, or with one integrator (which the gain takes care of), can be had.
"""

from __future__ import annotations

from fractions import Fraction
from functools import lru_cache
from math import ceil, floor
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.enclosure import Enclosure, integers, reciprocal
from realize.algebra.roots import Root, isolate, origin, rational
from realize.checks.modes import in_words
from realize.errors import Refused
from realize.loop.circle import Ball, balls, product, rational_balls, total, without_ones
from realize.loop.held import held_plant
from realize.loop.plant import Plant, series
from realize.methods import Discretization
from realize.methods.conversion import CARRIED_BITS, Conversion, pulse_transfer_function, refuse_growth
from realize.methods.invariant import exponential_denominator, mapped_exponentially
from realize.transfer import TransferFunction

#: Name of the method.
METHOD = "plant-input-mapped"


class _Input(NamedTuple):
    """``M = N' D_g/A'`` in lowest terms, ``f = gcd(N_c, D_g)`` taken out: ``N_c = f N'``, ``A_cl = f A'``.

    Attributes
    ----------
    zeros : tuple of int
        N'.
    plant_poles : tuple of int
        D_g.
    poles : tuple of int
        A'.
    excess : int
        Zeros of M at infinity.
    """

    zeros: poly.Integers
    plant_poles: poly.Integers
    poles: poly.Integers
    excess: int


def plant_input_mapped(controller: TransferFunction, plant: Plant, period_s: Fraction) -> Discretization:
    """Discretize a controller so that the closed loop keeps its poles.

    Parameters
    ----------
    controller : TransferFunction
        Proper.
    plant : Plant
        Strictly proper with its sensor, without dead time.
    period_s : Fraction
        Sample period.

    Raises
    ------
    Refused
        When there is dead time, plant and sensor answer at once or have modes that do not decay (but one integrator),
        the closed loop is not stable or has no steady response to match.
    """
    chain = series(plant.transfer, plant.sensor).lowest
    _refuse_unfit(controller, plant, chain)
    mapping = _Mapping(controller, chain, period_s)
    conversion = mapping.conversion()
    return Discretization(METHOD, pulse_transfer_function(conversion, period_s), conversion)


def _refuse_unfit(controller: TransferFunction, plant: Plant, chain: TransferFunction) -> None:
    if plant.dead_time_s:
        raise Refused(
            "[plant] dead_time",
            f"{METHOD} needs a plant without dead time, and this one has {float(plant.dead_time_s):.5g} s",
            "a dead time of 0",
            "another method",
        )
    if chain.relative_degree < 1:
        raise Refused(
            "[plant] transfer",
            f"{METHOD} needs a plant that does not answer at once",
            "more poles than zeros, the sensor's included",
            "add the poles of the actuator or the sensor",
        )
    lasting = [r for r in chain.poles if r.value.real >= 0 and (r.value != 0 or r.multiplicity > 1)]
    if lasting:
        raise Refused(
            "[plant] transfer",
            f"{METHOD} cancels the plant's modes, and the one at {in_words(lasting[-1].value)} does not decay",
            "a plant whose modes decay, one integrator aside",
            "another method",
        )
    if controller.relative_degree < 0:
        raise Refused(
            "transfer", "the controller is improper", "as many poles as zeros, or more", "add a roll-off pole first"
        )


def _plant_input(controller: TransferFunction, chain: TransferFunction) -> _Input:
    loop = series(controller, chain)
    shared = poly.greatest_common_divisor(controller.numerator, chain.denominator)
    closed = poly.add(loop.numerator, loop.denominator)
    growing = [r for r in isolate(closed) if r.value.real >= 0] if len(closed) > 1 else []
    if growing:
        raise Refused(
            "[plant]",
            f"{METHOD} keeps the closed loop as it is, and its mode at {in_words(growing[-1].value)} does not decay",
            "a continuous loop that is stable",
            "design the continuous loop first",
        )
    return _Input(
        poly.quotient(controller.numerator, shared),
        chain.denominator,
        poly.quotient(closed, shared),
        controller.relative_degree,
    )


def _reference_gain(controller: TransferFunction, chain: TransferFunction) -> Fraction:
    """``G M`` at s = 0."""
    loop = series(controller, chain)
    above, below = loop.numerator[-1], loop.denominator[-1]
    if above == 0:
        raise Refused(
            "[plant]",
            f"{METHOD} matches the steady response, and a zero at s = 0 leaves none",
            "a loop that passes steady signals",
            "another method",
        )
    return Fraction(above, above + below)


class _Mapping:
    """``Cd = k Z A_g (z + 1)^e / (A' - k B_g Z (z + 1)^e)`` in balls, each letter the image of its polynomial.

    Where ``G M`` is 1 at s = 0 the denominator vanishes at z = 1: exactly, so the factor is taken out; where the plant
    integrates the numerator has it too, and it cancels.
    """

    def __init__(self, controller: TransferFunction, chain: TransferFunction, period_s: Fraction) -> None:
        self._controller = controller
        self._closed = _plant_input(controller, chain)
        self._gain = _reference_gain(controller, chain)
        self._period_s = period_s
        self._bare = held_plant(Plant(chain), period_s, Fraction(0)).conversion
        self._integrates = self._gain == 1
        self._cancels = self._integrates and chain.denominator[-1] == 0
        refuse_growth(TransferFunction((1,), self._closed.zeros).poles + chain.poles, period_s)

    def conversion(self) -> Conversion:
        """Coefficients and roots."""
        parts = lru_cache(maxsize=8)(self._parts)
        return Conversion(
            lambda bits: _enclosure(parts(bits)[0], bits),
            lambda bits: _enclosure(parts(bits)[1], bits),
            lambda: self._poles(parts(CARRIED_BITS)[1]),
            self._zeros,
            notes=self._notes(),
        )

    def _notes(self) -> tuple[str, ...]:
        notes = ["made for this plant without compute delay: closed-loop poles at exp(pT)"]
        kept = [root for root in isolate(self._closed.plant_poles) if root.value != 0]
        if kept:
            modes = ", ".join(in_words(root.value) for root in kept)
            notes.append(f"cancels the plant's modes at {modes}: disturbances at the plant's input still excite them")
        if self._cancels and self._controller.denominator[-1] == 0:
            notes.append("the plant integrates already: the controller's own integral is lost")
        return tuple(notes)

    def _parts(self, bits: int) -> tuple[list[Ball], list[Ball]]:
        closed = self._closed
        zeros, plant_poles, poles = (self._image(p, bits) for p in (closed.zeros, closed.plant_poles, closed.poles))
        ends = rational_balls(tuple(map(Fraction, poly.power((1, 1), closed.excess))), bits)
        shape = product(zeros, ends, bits)
        around = product(balls(self._bare.numerator(bits), bits), shape, bits)
        k = _quotient(_at_one(poles), _at_one(around), self._gain, bits)
        above = product(product(shape, plant_poles, bits), [k], bits)
        below = total(poles, [(-m, r) for m, r in product(around, [k], bits)])
        if self._integrates:
            below = without_ones(below, 1)
            above = without_ones(above, 1) if self._cancels else above
        if self._integrates and not self._cancels:
            below = product(below, rational_balls((Fraction(1), Fraction(-1)), bits), bits)
        return above, below

    def _image(self, p: poly.Integers, bits: int) -> list[Ball]:
        return balls(exponential_denominator(TransferFunction((1,), p), self._period_s, bits), bits)

    def _poles(self, below: list[Ball]) -> tuple[Root, ...]:
        """Roots of the carried denominator, in ``z - 1``."""
        at_one = int(self._integrates and not self._cancels)
        carried = tuple(Fraction(m) for m, _ in without_ones(below, at_one))
        found = isolate(poly.primitive(poly.shift(carried, Fraction(1)))) if len(carried) > 1 else ()
        return ((origin(1),) if at_one else ()) + found

    def _zeros(self) -> tuple[Root, ...]:
        kept = self._closed.plant_poles[:-1] if self._cancels else self._closed.plant_poles
        parts = (TransferFunction((1,), p).poles for p in (self._closed.zeros, kept))
        images = tuple(root for roots in parts for root in mapped_exponentially(roots, self._period_s))
        excess = self._closed.excess
        return _merged(images) + ((rational(Fraction(-2), excess),) if excess else ())


def _merged(roots: tuple[Root, ...]) -> tuple[Root, ...]:
    """Roots at z = 1 as one."""
    ones = sum(root.multiplicity for root in roots if root.value == 0)
    return ((origin(ones),) if ones else ()) + tuple(root for root in roots if root.value != 0)


def _at_one(p: list[Ball]) -> Ball:
    return sum(m for m, _ in p), sum(r for _, r in p)


def _quotient(a: Ball, b: Ball, factor: Fraction, bits: int) -> Ball:
    """``factor a/b``."""
    (mid, rad), (inverse, spread) = a, reciprocal(*b, bits)
    radius = (abs(mid) * spread + rad * (abs(inverse) + spread) >> bits) + 2
    exact = (mid * inverse >> bits) * factor
    return floor(exact), ceil(radius * abs(factor)) + 1


def _enclosure(p: list[Ball], bits: int) -> Enclosure:
    mids, rads = zip(*p, strict=True)
    return Enclosure(integers(mids), integers(rads), bits)
