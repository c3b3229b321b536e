from __future__ import annotations

from fractions import Fraction

import pytest

from realize.checks import Check
from realize.checks.stability import check_stability, continuous_stability
from tests.checks.designs import converted, monic, pulse, transfer

PERIOD_S = "0.1"


def compared(text: str, denominator: tuple[Fraction, ...], known: str | None = None) -> Check:
    poles = transfer(text).poles
    discrete = pulse([1], denominator, PERIOD_S)
    return check_stability(poles, continuous_stability(poles), discrete, "stored", known)


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("1/(s + 1)", "stable"),
        ("7", "stable"),
        ("1/s", "marginal"),
        ("(s + 1)/(s*(s^2 + 4))", "marginal"),
        ("1/s^2", "unstable"),
        ("1/(s^2 + 4)^2", "unstable"),
        ("1/(s - 1/1000000000)", "unstable"),
        ("1/(s^2 - s/1000000000 + 1)", "unstable"),
        ("1/(s^2 + s/1000000000 + 1)", "stable"),
    ],
)
def test_the_class_of_a_design_is_that_of_its_poles(text: str, expected: str) -> None:
    assert continuous_stability(transfer(text).poles) == expected


@pytest.mark.parametrize(
    ("text", "denominator", "verdict", "difference", "reason"),
    [
        ("1/(s + 1)", monic("1/2"), "within", 0, "decided exactly"),
        ("1/s", monic(1), "within", 0, "decided exactly"),
        ("1/s", monic("1/2"), "within", 0, "decided exactly"),
        ("1/(s + 1)", monic(1), "out", 1, "the design is stable, but a pole lies at z = 1"),
        ("1/(s + 1)", monic("-3/2", "1/2"), "out", 1, "the design is stable, but a pole lies at z = -1.5"),
        ("1/s", monic("1.0001"), "out", 1, "the design is marginal, but a pole lies at z = 1 + 0.0001"),
        ("1/s", monic(1, 1), "out", 1, "the design is marginal, but a pole lies at z = 1"),
        (
            "1/(s - 2)",
            monic("1.2"),
            "out",
            1,
            "the design itself grows: a pole at 0.31831 Hz (2 rad/s), real and positive",
        ),
        ("1/s^2", monic(1, 1), "out", 1, "the design itself grows: a repeated pole at s = 0"),
        ("1/s^2", monic("1/2", 1), "out", 1, "the design itself grows: a repeated pole at s = 0"),
    ],
)
def test_the_counterpart_may_be_no_worse_and_growth_is_named(
    text: str, denominator: tuple[Fraction, ...], verdict: str, difference: int, reason: str
) -> None:
    check = compared(text, denominator)
    assert (check.verdict, check.difference, check.reason) == (verdict, difference, reason)
    assert (check.check, check.of, check.tolerance, check.unit) == ("stability", "stored", 0.0, "")


def test_only_a_growing_mode_of_the_design_itself_leaves_both_classes_alike() -> None:
    lost, own = compared("1/(s + 1)", monic(2)), compared("1/(s - 1)", monic(2))
    assert (lost.reference, lost.obtained) == ("stable", "unstable")
    assert (own.reference, own.obtained) == ("unstable", "unstable")


def test_a_class_known_from_the_method_stands_for_the_carried_coefficients() -> None:
    # exp(+-jT) to a thousand bits is not on the circle exactly.
    poles = transfer("1/(s^2 + 1)").poles
    carried = converted("1/(s^2 + 1)", PERIOD_S, "step-invariant")
    check = check_stability(poles, "marginal", carried, "exact", "marginal")
    assert (check.obtained, check.verdict) == ("marginal", "within")
    rational = converted("1/(s^2 + 1)", PERIOD_S, "bilinear")
    assert check_stability(poles, "marginal", rational, "exact", None).obtained == "marginal"
