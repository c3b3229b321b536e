"""The whole schedule: what is checked where, which method is taken, and what is refused in which words."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction
from functools import cache
from pathlib import Path

import pytest

from realize.algebra.rounding import FLOAT64
from realize.arithmetic.realization import Realization, Section
from realize.design import load_design
from realize.design.schedule import Place, design_at, variable_at
from realize.errors import RealizeError, Refused
from realize.schedule import Scheduled, scheduled
from realize.schedule.between import MIDDLE, Between, places
from realize.schedule.lookup import Lookup, flat
from realize.schedule.worst import severity
from realize.workflow import compare
from tests.schedule.designs import design

FIXTURE = Path(__file__).parents[2] / "fixtures" / "sheeter_gap.toml"


@cache
def sheeter() -> Scheduled:
    return scheduled(load_design(str(FIXTURE)))


def test_at_a_point_the_checks_are_those_of_its_design_alone() -> None:
    found = sheeter()
    for each in found.points:
        there = replace(design_at(found.design, each.place), method=found.method)
        alone = next(m for m in compare(there).methods if m.method == found.method)
        assert alone.realization == each.realization
        assert tuple(c for c in alone.checks if c.of == "stored") == tuple(c for c in each.checks if c.of == "stored")


def test_in_a_middle_the_looked_up_numbers_are_held_against_interpolated_values() -> None:
    found = sheeter()
    kp, ki = (dict(found.schedule.values)[name] for name in ("kp", "ki"))
    for i, each in enumerate(found.middles):
        assert each.place == Place(i, MIDDLE)
        ends = [flat(point.realization) for point in found.points[i : i + 2]]
        points = [float(point) for point in found.schedule.points[i : i + 2]]
        looked_up = Lookup(each.realization.format, points, ends).at(float(variable_at(found.schedule, each.place)))
        assert flat(each.realization) == looked_up
        gain = next(c for c in each.checks if c.check == "low-frequency gain")
        assert gain.reference == float(ki[i] + ki[i + 1]) / 2
        assert kp[i] > kp[i + 1]


def test_of_each_check_the_worst_over_all_places_is_kept() -> None:
    found = sheeter()
    everything = [(c, each.place) for each in (*found.points, *found.middles) for c in each.checks if c.of == "stored"]
    for worst in found.worst:
        same = [c for c, _ in everything if c.check == worst.check.check]
        assert len(same) == 2 * len(found.points) - 1
        assert (worst.check, worst.place) in everything
        assert severity(worst.check) == max(map(severity, same))
    assert {each.check.check for each in found.worst} == {c.check for c, _ in everything}
    assert found.places_between == (len(found.points) - 1) * (found.schedule.grid - 1)


def test_the_grid_and_the_middle_are_looked_at_in_every_interval() -> None:
    schedule = sheeter().schedule
    assert [p.share for p in places(schedule, 1)] == [Fraction(k, 8) for k in range(1, 8)]
    odd = [p.share for p in places(schedule._replace(grid=3), 1)]
    assert odd == [Fraction(1, 3), Fraction(1, 2), Fraction(2, 3)]


def unstable_between(second: tuple[float, float], worst: str) -> str | None:
    schedule = sheeter().schedule._replace(points=(Fraction(0), Fraction(1)))
    stored = [
        Realization(FLOAT64, "direct", (), (Section((1.0, 0.0, 0.0), a),), Fraction(1, 100))
        for a in ((-1.0, 0.5), second)
    ]
    check = Between(schedule, stored).stability(Place(0, Fraction(7, 8)), worst)
    return check.reason if check.verdict == "out" else None


def test_what_is_less_stable_between_than_the_designs_on_both_sides_is_out() -> None:
    assert unstable_between((-1.9, 0.95), "stable") is None
    # 1 - 2.5/z + 1.9/z^2 has its poles outside, and so has what is an eighth before it.
    found = unstable_between((-2.5, 1.9), "stable")
    assert found is not None
    assert found.startswith("at gap = 0.875 mm (between points 1 and 2) the interpolated coefficients are unstable")
    assert unstable_between((-2.5, 1.9), "unstable") is None
    assert "not finite" in str(unstable_between((float("inf"), 0.5), "stable"))


def test_a_method_that_is_out_at_a_later_point_gives_way_to_the_next() -> None:
    found = scheduled(
        design(
            "(s/z + 1)^2/(s/w + 1)^2",
            {"w": [603.85, 613.86, 624.03], "z": [720.41, 673.05, 628.8]},
            band="60 Hz",
        )
    )
    assert found.comparison.recommended == "bilinear"
    assert found.method == "pole-zero-mapped"
    assert found.because.startswith("the next in the order of recommendation: 3 methods that are preferred")
    assert [each.blocking for each in (*found.points, *found.middles)] == [()] * 5


def test_sections_in_delta_are_taken_where_rounding_spoils_the_cascade_at_any_point() -> None:
    fast = {"rate": "200 kHz", "band": "1 Hz"}
    assert scheduled(design("1/(t*s + 1)", {"t": [0.02, 0.021]}, **fast)).points[0].realization.structure == "direct"
    found = scheduled(design("1/(t*s + 1)", {"t": [2, 2.1]}, **fast))
    assert {each.realization.structure for each in found.points} == {"delta"}


def refused(*arguments: object, **options: str) -> Refused:
    with pytest.raises(Refused) as caught:
        scheduled(design(*arguments, **options))  # type: ignore[arg-type]
    return caught.value


def test_points_too_far_apart_are_refused_with_the_place_between_them() -> None:
    far = refused("1/(t*s + 1)", {"t": [0.01, 0.02, 0.1]})
    assert "is out of tolerance: at load = 2.5 (between points 2 and 3) pole shift differs by" in far.found
    assert far.found.endswith(" other methods")
    assert "at every point, and between them on the grid" in far.allowed
    assert far.advice.startswith("another point between the two where it is out")
    near = scheduled(design("1/(t*s + 1)", {"t": [0.01 * 1.3**k for k in range(9)]}, others="[tolerance]\n"))
    assert near.points[-1].blocking == ()


def test_a_named_method_is_refused_with_the_point_where_it_is_out() -> None:
    error = refused("w/(s + w)", {"w": [450, 500, 520]}, others='[method]\nname = "bilinear"\n', band="90 Hz")
    assert error.found.startswith("bilinear (direct) is out of tolerance: ")
    assert "at load = 3 (point 3) pole shift differs by 2." in error.found


PLANT = '[plant]\ntransfer = "1/(s*(0.05*s + 1))"\n'


def test_a_loop_that_is_not_stable_at_a_point_is_said_once_and_first() -> None:
    error = refused("k", {"k": [5, 5000, 6]}, others=PLANT)
    told = error.found.partition("is out of tolerance: ")[2]
    assert told.startswith("at load = 2 (point 2) loop stability: the sampled loop is not stable; ")
    assert told.count("(point 2)") == told.count("loop stability") == 1
    assert "at load = 1.5 (between points 1 and 2) likewise" in told
    assert not any(name in told for name in ("phase margin", "sensitivity", "overshoot"))
    assert "between" not in error.advice
    assert error.advice.startswith("other values where the loop is not stable")


@pytest.mark.parametrize(("values", "number"), [([0.01, 0, 0.02], 2), ([0, 0.01, 0.02], 1)])
def test_a_value_of_0_that_makes_a_point_improper_is_named(values: list[float], number: int) -> None:
    error = refused("k + 0.1*s/(t*s + 1)", {"k": [0, 0, 0.1], "t": values})
    assert error.where == "[schedule.values] t"
    assert f"0 at load = {number} (point {number})" in error.found
    assert error.advice == f"another number than 0 for point {number}"


def test_a_first_point_without_a_method_is_refused_by_name() -> None:
    error = refused("k*s", {"k": [1, 2]})
    assert error.where == "[schedule] load = 1 (point 1), transfer"
    assert "not realizable" in error.found


@pytest.mark.parametrize("arithmetic", ["int16", "int32"])
def test_integers_are_refused(arithmetic: str) -> None:
    error = refused("1/(t*s + 1)", {"t": [0.1, 0.11]}, others=f'[target]\narithmetic = "{arithmetic}"\n')
    assert error.where == "[target] arithmetic"
    assert "binary points differ from point to point" in error.found
    assert 'arithmetic = "float32"' in error.advice


def test_a_place_where_there_is_no_design_is_named() -> None:
    with pytest.raises(RealizeError, match=r"load = 1.5 \(between points 1 and 2\).*zero"):
        scheduled(design("k/(0.01*s + 1)", {"k": [-1, 1]}))


def test_an_agreed_deviation_holds_at_every_place_with_its_largest_figure() -> None:
    agreed = '[[accept]]\ncheck = "{}"\nlimit = "{}"\nbecause = "tried"\nby = "the author"\n'
    text = '[method]\nname = "bilinear"\n[tolerance]\npole_shift = "0.001 %"\n' + agreed.format("pole shift", "5 %")
    found = scheduled(design("1/(t*s + 1)", {"t": [0.01, 0.012, 0.015]}, others=text))
    (check, _) = next(pair for pair in found.accepted if pair[0].check == "pole shift")
    judged = [c for each in (*found.points, *found.middles) for c in each.checks if c.check == "pole shift"]
    assert check.difference == max(c.difference or 0 for c in judged)
    assert check.verdict == "out"
    assert check in [each.check for each in found.worst]


def test_a_schedule_that_changes_nothing_is_refused() -> None:
    error = refused("k/(0.01*s + 1)", {"k": [2, 2, 2]})
    assert error.where == "[schedule.values]"
    assert "leave every stored coefficient as it is" in error.found


@pytest.mark.parametrize(("transfer", "values"), [("k", [1, 2, 4]), ("k/s", [1, 2, 4]), ("k/s^2 + 1/s", [1, 1.5, 2])])
def test_gains_and_bare_integrals_can_be_scheduled(transfer: str, values: list[float]) -> None:
    growth = '[[accept]]\ncheck = "stability"\nbecause = "a loop closes it"\nby = "the author"\n'
    found = scheduled(design(transfer, {"k": values}, others=growth))
    assert len({each.realization for each in found.points}) == 3
