"""One layout for all points: sections of the same roots, and at every point the transfer function of its design."""

from __future__ import annotations

from fractions import Fraction
from functools import cache
from math import frexp

import pytest

from realize.algebra.rounding import FLOAT64
from realize.arithmetic.realization import Realization, realization, stored_pulse
from realize.checks.modes import every
from realize.design.schedule import Place
from realize.errors import Refused
from realize.schedule.layout import Layout, layout_of
from realize.schedule.points import Prepared, prepared
from tests.schedule.designs import design

#: Two real poles meet and become a pair, a third passes by; a notch whose zeros are a pair before its poles are.
MEETING = design("1/((s^2 + 2*d*30*s + 900)*(0.001*s + 1)*(0.1*s + 1))", {"d": [1.5, 1.2, 0.9, 0.6, 1.1]})
NOTCH = design(
    "(s^2 + 2*c*w*s + w^2)/((s^2 + 2*d*w*s + w^2)*(0.02*s + 1))",
    {"w": [100, 110, 120, 140], "c": [0.05, 0.1, 1.3, 0.1], "d": [1.4, 1.2, 0.9, 0.8]},
)
INTEGRATING = design("kp + ki/s + kd*s/(0.01*s + 1)", {"kp": [1, 2, 3], "ki": [5, 4, -3], "kd": [0.1, 0.3, 0.2]})
DESIGNS = {"meeting": MEETING, "notch": NOTCH, "integrating": INTEGRATING}

#: Of the roots of a stored float64 section: they move by some units in its last place over their distance to others.
CLOSE = 1e-7


@cache
def laid_out(name: str, method: str, structure: str) -> tuple[Layout, list[Realization]]:
    numbers = [each.made.pulse for each in series(name, method)]
    layout = layout_of([each.numbers for each in series(name, method)], FLOAT64, structure, lambda i: f"point {i + 1}")
    return layout, [layout.realized(i, FLOAT64) for i in range(len(numbers))]


@cache
def series(name: str, method: str) -> list[Prepared]:
    chosen = DESIGNS[name]
    assert chosen.schedule is not None
    return [prepared(chosen, Place(i), method) for i in range(len(chosen.schedule.points))]


CASES = [
    (name, method, structure)
    for name in DESIGNS
    for method in ("bilinear", "step-invariant")
    for structure in ("auto", "delta")
]


@pytest.mark.parametrize(("name", "method", "structure"), CASES)
def test_every_point_has_the_roots_and_the_gain_of_its_design(name: str, method: str, structure: str) -> None:
    _, stored = laid_out(name, method, structure)
    for there, realized in zip(series(name, method), stored, strict=True):
        found, wanted = stored_pulse(realized), there.made.pulse
        assert float(found.gain / wanted.gain) == pytest.approx(1, abs=1e-9)
        for ours, exact in ((found.poles, wanted.poles), (found.zeros, wanted.zeros)):
            left = every(exact)
            for root in every(ours):
                nearest = min(left, key=lambda each: abs(each - root))
                assert abs(nearest - root) < CLOSE * (1 + abs(nearest))
                left.remove(nearest)
            assert left == []


@pytest.mark.parametrize(("name", "method", "structure"), CASES)
def test_the_sections_are_alike_at_every_point(name: str, method: str, structure: str) -> None:
    _, stored = laid_out(name, method, structure)
    shapes = {
        (each.structure, len(each.integral), tuple((len(s.b), tuple(b == 0 for b in s.b)) for s in each.sections))
        for each in stored
    }
    assert len(shapes) == 1


def test_the_powers_of_two_are_the_same_at_every_point() -> None:
    layout, stored = laid_out("meeting", "bilinear", "auto")
    others = [k for k in range(len(layout.parts)) if k != layout.carrier]
    assert others
    for k in others:
        firsts = {each.sections[k].b[0] for each in stored}
        assert len(firsts) == 1
        assert frexp(firsts.pop())[0] == 0.5


def test_what_is_a_pair_at_one_point_has_one_section_at_all() -> None:
    _, stored = laid_out("meeting", "bilinear", "auto")
    assert [len(s.a) for s in stored[0].sections].count(2) == 1
    paired = next(k for k, s in enumerate(stored[0].sections) if len(s.a) == 2)
    kinds = [Fraction(s.a[0]) ** 2 < 4 * Fraction(s.a[1]) for s in (each.sections[paired] for each in stored)]
    assert kinds == [False, False, True, True, False]


def test_of_one_point_alone_the_layout_is_that_of_any_design() -> None:
    for name, method, structure in CASES:
        first = series(name, method)[:1]
        alone = layout_of([first[0].numbers], FLOAT64, structure, str).realized(0, FLOAT64)
        assert alone == realization(first[0].made.pulse, FLOAT64, structure)


@pytest.mark.parametrize(
    ("transfer", "values", "found"),
    [
        ("1 + k*s/(0.01*s + 1)", {"k": [0.1, 0, 0.2]}, "point 2: another layout than at point 1: poles beside"),
        ("1 + k/s", {"k": [2, 3, 0]}, "point 3: another layout than at point 1: integral states: 0, there 1"),
        ("(s + k)/((s + 1)*(s + 2))", {"k": [2, 3]}, "point 2: another layout than at point 1: poles beside"),
    ],
)
def test_a_point_of_another_order_is_refused_by_name(transfer: str, values: dict[str, list[float]], found: str) -> None:
    wanted = design(transfer, values)
    assert wanted.schedule is not None
    numbers = [prepared(wanted, Place(i), "bilinear").numbers for i in range(len(wanted.schedule.points))]
    with pytest.raises(Refused) as caught:
        layout_of(numbers, FLOAT64, "auto", lambda i: f"point {i + 1}")
    assert f"{caught.value.where}: {caught.value.found}".startswith(f"[schedule] {found}")
    assert "a small number in place of 0" in caught.value.advice


def test_a_pair_made_from_members_of_two_pairs_is_refused() -> None:
    """Four real roots, the outer and the inner two a pair first, the neighbours then."""
    wanted = design(
        "1/((s^2 + a*s + b)*(s^2 + c*s + d))",
        {
            # at first 1 and 4 real, 2 and 3 a pair; then all real; then pairs near 1.5 and 3.5
            "a": [5.0, 5.0, 3.0],
            "b": [6.3, 6.0, 2.3],
            "c": [5.0, 5.0, 7.0],
            "d": [4.0, 4.0, 12.3],
        },
        rate="10 Hz",
        band="0.1 Hz",
    )
    numbers = [prepared(wanted, Place(i), "bilinear").numbers for i in range(3)]
    with pytest.raises(Refused, match="a pair of complex poles made from poles of two pairs") as caught:
        layout_of(numbers, FLOAT64, "auto", lambda i: f"point {i + 1}")
    assert caught.value.where == "[schedule] point 3"
    assert "points closer together" in caught.value.advice
