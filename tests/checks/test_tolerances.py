from __future__ import annotations

from fractions import Fraction

import pytest

from realize.checks import DEFAULTS, Tolerances

#: As the page of defaults has them: key, unit, tolerance.
STATED = {
    "pole_shift": ("%", "2"),
    "zero_shift": ("%", "2"),
    "magnitude_in_band": ("dB", "0.5"),
    "phase_in_band": ("deg", "5"),
    "low_frequency_gain": ("%", "0.1"),
    "step_deviation": ("%", "1"),
    "step_overshoot": ("%", "1"),
    "converter_step": ("%", "5"),
    "round_off": ("%", "1"),
}


def test_the_defaults_are_as_stated_and_each_has_a_reason() -> None:
    assert {key: (d.unit, d.tolerance) for key, d in DEFAULTS.items()} == {
        key: (unit, Fraction(value)) for key, (unit, value) in STATED.items()
    }
    assert all(len(d.because.split()) > 5 for d in DEFAULTS.values())


@pytest.mark.parametrize("key", STATED)
def test_a_tolerance_of_the_design_takes_the_place_of_the_default(key: str) -> None:
    assert Tolerances.of([(key, Fraction(7, 3))]).exact(key) == Fraction(7, 3)
    others = Tolerances.of([("other", Fraction(7, 3))])
    assert others.exact(key) == DEFAULTS[key].tolerance


def test_the_low_frequency_gain_has_two_defaults_and_one_override() -> None:
    default = Tolerances.of(())
    assert (default.low_frequency_gain(0), default.low_frequency_gain(-1), default.low_frequency_gain(2)) == (0.1, 1, 1)
    given = Tolerances.of([("low_frequency_gain", Fraction(1, 4))])
    assert given.low_frequency_gain(0) == given.low_frequency_gain(-1) == 0.25


def test_the_overshoot_allows_one_point_or_a_hundredth_of_the_peak() -> None:
    assert Tolerances.of(()).step_overshoot(100.0) == 1.0
    assert Tolerances.of(()).step_overshoot(350.0) == 3.5
    assert Tolerances.of([("step_overshoot", Fraction(1, 2))]).step_overshoot(350.0) == 0.5
