"""What the property tests draw from: transfer functions given by their exact roots, sample rates, numbers.

Roots are rational on purpose: the tests then know every pole and zero without having to find it.
"""

from __future__ import annotations

from dataclasses import dataclass
from fractions import Fraction
from typing import NamedTuple

from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.transfer import TransferFunction


@dataclass(frozen=True)
class ExactRoot:
    """A real root (``im == 0``) or a conjugate pair (``im > 0``), in rad/s, with its multiplicity."""

    re: Fraction
    im: Fraction
    multiplicity: int

    @property
    def count(self) -> int:
        return self.multiplicity * (2 if self.im else 1)

    def polynomial(self) -> poly.Rationals:
        """Monic polynomial of the roots this stands for, descending powers of s."""
        if self.im:
            return poly.power((Fraction(1), -2 * self.re, self.re**2 + self.im**2), self.multiplicity)
        return poly.power((Fraction(1), -self.re), self.multiplicity)


class Factored(NamedTuple):
    """``gain * prod(s - zero) / prod(s - pole)``."""

    gain: Fraction
    zeros: tuple[ExactRoot, ...]
    poles: tuple[ExactRoot, ...]

    @property
    def order(self) -> int:
        return sum(root.count for root in self.poles)

    @property
    def relative_degree(self) -> int:
        return self.order - sum(root.count for root in self.zeros)

    def transfer(self) -> TransferFunction:
        return TransferFunction.from_polynomials(poly.scale(expanded(self.zeros), self.gain), expanded(self.poles))


def expanded(roots: tuple[ExactRoot, ...]) -> poly.Rationals:
    """Monic polynomial with the given roots, descending powers of s."""
    product: poly.Rationals = (Fraction(1),)
    for root in roots:
        product = poly.multiply(product, root.polynomial())
    return product


#: Kinds of roots, by where they lie relative to the sample rate: natural frequency times period from 10**low
#: to 10**high, and the damping ratio's numerator and decimal exponent.
KINDS = ("slow", "ordinary", "stiff", "damped", "light", "undamped", "growing", "growing pair", "origin")


def decimals(low: int, high: int) -> st.SearchStrategy[Fraction]:
    """Positive numbers of three significant digits from ``10**low`` to ``10**high``."""
    return st.builds(
        lambda digits, exponent: digits * Fraction(10) ** (exponent - 2),
        st.integers(100, 999),
        st.integers(low, high - 1),
    )


def rates_hz() -> st.SearchStrategy[Fraction]:
    """Sample rates from 1e-5 Hz to 1e8 Hz."""
    return decimals(-5, 8)


@st.composite
def roots(draw: st.DrawFn, rate_hz: Fraction, kinds: tuple[str, ...] = KINDS) -> ExactRoot:
    """One root or pair of any kind, possibly repeated."""
    kind = draw(st.sampled_from(kinds))
    multiplicity = draw(st.sampled_from((1, 1, 1, 2, 3)))
    if kind == "origin":
        return ExactRoot(Fraction(0), Fraction(0), multiplicity)
    low, high = {"slow": (-9, -3), "stiff": (1, 6), "growing": (-4, 1), "growing pair": (-4, 0)}.get(kind, (-3, 1))
    size = draw(decimals(low, high)) * rate_hz
    damping = draw(decimals(-12, -2)) if kind == "light" else draw(decimals(-1, 0))
    return {
        "damped": ExactRoot(-size * damping, size, multiplicity),
        "light": ExactRoot(-size * damping, size, multiplicity),
        "undamped": ExactRoot(Fraction(0), size, multiplicity),
        "growing": ExactRoot(size, Fraction(0), multiplicity),
        "growing pair": ExactRoot(size * damping, size, multiplicity),
    }.get(kind, ExactRoot(-size, Fraction(0), multiplicity))


@st.composite
def root_sets(draw: st.DrawFn, rate_hz: Fraction, most: int, kinds: tuple[str, ...] = KINDS) -> tuple[ExactRoot, ...]:
    """Distinct roots, at most ``most`` of them, conjugates and repetitions counted."""
    chosen: list[ExactRoot] = []
    for root in draw(st.lists(roots(rate_hz, kinds), max_size=most)):
        fits = sum(r.count for r in chosen) + root.count <= most
        if fits and all((r.re, r.im) != (root.re, root.im) for r in chosen):
            chosen.append(root)
    return tuple(chosen)


@st.composite
def factored(
    draw: st.DrawFn,
    rate_hz: Fraction,
    most_order: int = 16,
    pole_kinds: tuple[str, ...] = KINDS,
    zero_kinds: tuple[str, ...] = KINDS,
) -> Factored:
    """A proper transfer function in lowest terms."""
    poles = draw(root_sets(rate_hz, most_order, pole_kinds))
    order = sum(root.count for root in poles)
    places = {(root.re, root.im) for root in poles}
    zeros = [z for z in draw(root_sets(rate_hz, order, zero_kinds)) if (z.re, z.im) not in places]
    sign = draw(st.sampled_from((1, -1)))
    return Factored(sign * draw(decimals(-3, 3)), tuple(zeros), poles)


@st.composite
def sampled_designs(
    draw: st.DrawFn,
    most_order: int = 16,
    pole_kinds: tuple[str, ...] = KINDS,
    zero_kinds: tuple[str, ...] = KINDS,
) -> tuple[Factored, Fraction]:
    """A transfer function and a sample period in seconds."""
    rate_hz = draw(rates_hz())
    return draw(factored(rate_hz, most_order, pole_kinds, zero_kinds)), 1 / rate_hz
