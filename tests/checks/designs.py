"""What the tests of the checks share: designs from text, counterparts from roots, and answers by other roads."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from itertools import accumulate

from realize.algebra import polynomial as poly
from realize.algebra.expression import evaluate_constant, evaluate_transfer
from realize.algebra.roots import isolate
from realize.checks import Check, ContinuousReference, Signals, Tolerances, run_checks
from realize.methods import discretize
from realize.transfer import PulseTransferFunction, TransferFunction

#: Of the difference equation: 1e-300 is still known to 100 digits.
BITS = 1400

DEFAULT = Tolerances.of(())


def transfer(text: str, **values: str) -> TransferFunction:
    """``transfer("1/(s + a)", a="2")``."""
    exact = {name: evaluate_constant(value, {}, name) for name, value in values.items()}
    return TransferFunction.from_polynomials(*evaluate_transfer(text, exact, "transfer"))


def reference(text: str, period_s: str, band_rad_s: str = "1", **values: str) -> ContinuousReference:
    """A design at a rate and band."""
    return ContinuousReference(transfer(text, **values), Fraction(period_s), Fraction(band_rad_s))


def converted(text: str, period_s: str, method: str, **values: str) -> PulseTransferFunction:
    """Its counterpart by a method."""
    return discretize(transfer(text, **values), Fraction(period_s), method).pulse


def pulse(
    numerator: Sequence[Fraction | int | str], denominator: Sequence[Fraction | int | str], period_s: str
) -> PulseTransferFunction:
    """A counterpart from its coefficients in descending powers of z, the leading one of the denominator being 1."""
    top, bottom = (tuple(Fraction(c) for c in p) for p in (numerator, denominator))
    padded = (Fraction(0),) * (len(bottom) - len(top)) + top
    return PulseTransferFunction(padded, bottom, Fraction(period_s), *map(roots_of, (bottom, poly.trimmed(top))))


def roots_of(p: poly.Rationals) -> tuple:  # type: ignore[type-arg]
    """Roots in ``z - 1``."""
    return isolate(poly.primitive(poly.shift(p, Fraction(1)))) if len(p) > 1 else ()


def monic(*roots: Fraction | int | str) -> poly.Rationals:
    """The monic polynomial with some rational roots."""
    product: poly.Rationals = (Fraction(1),)
    for root in roots:
        product = poly.multiply(product, (Fraction(1), -Fraction(root)))
    return product


def answers(design: ContinuousReference, discrete: PulseTransferFunction, **more: object) -> dict[str, Check]:
    """Every check by its name."""
    found = run_checks(design, discrete, "exact", DEFAULT, Signals(), **more)  # type: ignore[arg-type]
    return {check.check: check for check in found}


def step_samples(discrete: PulseTransferFunction, count: int) -> list[float]:
    """First samples of the step response, by the difference equation in integers of units of ``2**-BITS``."""
    b, a = ([round(c * (1 << BITS)) for c in p] for p in (discrete.numerator, discrete.denominator))
    sums = list(accumulate(b))
    y: list[int] = []
    for k in range(count):
        past = sum(a[i] * y[k - i] for i in range(1, min(k, len(a) - 1) + 1))
        y.append(sums[min(k, len(sums) - 1)] - (past >> BITS))
    return [float(Fraction(value, 1 << BITS)) for value in y]
