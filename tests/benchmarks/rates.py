"""What a range of rates costs: the whole command, and the exact conversions against scipy.signal in float64.

A conversion is timed to the same end on both sides, its coefficients: described and rounded here, each coefficient
correctly, as ``realize.methods.coefficients`` does it. What ``realize.methods.discretize`` carries beyond them for the
checks (a thousand bits, zeros, images of roots) is in the time of the whole command.

Run it from the root of the project: python tests/benchmarks/rates.py [POINTS]
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from fractions import Fraction
from functools import partial
from statistics import median

from scipy import signal

from realize.algebra.rounding import FLOAT64
from realize.design import design_from_text
from realize.methods import coefficients
from realize.rates import rates
from realize.transfer import TransferFunction

#: A third-order controller and a fourth-order plant with sensor, invented.
DESIGN = """
[design]
name = "benchmark"
transfer = "4*(s + 3)*(s + 30)/(s*(s + 400)*(s + 900))*100"
[plant]
transfer = "3e6/((s + 1)*(s + 8)*(s^2 + 20*s + 2500))"
sensor = "1/(0.0005*s + 1)"
"""

HOLD = ("step-invariant", "ramp-invariant", "impulse-invariant")
RATIONAL = ("forward-difference", "backward-difference", "bilinear")
SCIPY = {
    "step-invariant": "zoh",
    "ramp-invariant": "foh",
    "impulse-invariant": "impulse",
    "forward-difference": "euler",
    "backward-difference": "backward_diff",
    "bilinear": "bilinear",
}

RATES_HZ = [Fraction(200 + 37 * i) for i in range(60)]


def converted(transfer: TransferFunction, rate_hz: Fraction, method: str) -> None:
    """One exact conversion, every coefficient correctly rounded."""
    coefficients(transfer, 1 / rate_hz, method, FLOAT64)


def exact_s(transfer: TransferFunction, methods: tuple[str, ...]) -> float:
    """Median time of one conversion with its coefficients correctly rounded, in seconds."""
    return median(seconds(partial(converted, transfer, rate, method)) for rate in RATES_HZ for method in methods)


def scipy_s(transfer: TransferFunction, methods: tuple[str, ...]) -> float:
    """Median time of the same by scipy.signal, in seconds."""
    system = ([float(c) for c in transfer.numerator], [float(c) for c in transfer.denominator])
    # The impulse method of scipy does not take a direct feed-through, which this controller does not have.
    return median(
        seconds(partial(signal.cont2discrete, system, 1 / float(rate), SCIPY[method]))
        for rate in RATES_HZ
        for method in methods
    )


def seconds(run: Callable[[], object]) -> float:
    start = time.perf_counter()
    run()
    return time.perf_counter() - start


def main(points: int) -> None:
    """Print the ratios, each against its yardstick."""
    design = design_from_text(DESIGN, "benchmark")
    for name, methods, most in (("rational", RATIONAL, 1.2), ("hold", HOLD, 3.0)):
        ours, theirs = exact_s(design.transfer, methods), scipy_s(design.transfer, methods)
        print(f"{name} methods, exact: {1e3 * ours:.2f} ms; scipy.signal.cont2discrete: {1e3 * theirs:.2f} ms")
        print(f"ratio {ours / theirs:.2f}, at most {most} wanted")
    spent = seconds(lambda: rates(design, points=points))
    print(f"{points} rates x 11 methods, third-order controller, fourth-order plant, two processes: {spent:.1f} s")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 60)
