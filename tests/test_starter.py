"""The starter file: a design that can be realized as it stands, in lines that people can read."""

from __future__ import annotations

import re
from fractions import Fraction

import pytest

from realize.design import design_from_text, require_period
from realize.errors import RealizeError
from realize.starter import SCHEMA_FILE, starter_text

F = Fraction


def test_the_starter_is_a_proper_controller_with_everything_a_drive_needs() -> None:
    design = design_from_text(starter_text("roller_gap"), "roller_gap.toml")
    assert design.name == "roller_gap"
    assert design.transfer.relative_degree == 0
    assert design.transfer.cancelled == (1,)
    assert require_period(design) == F(1, 2000)
    assert design.input.range is not None
    assert design.output.range is not None
    assert design.rolloff is None
    assert (design.method, design.target.arithmetic, design.target.anti_windup) == (
        "auto",
        "float32",
        "hold-integral",
    )


def test_one_count_of_the_starter_moves_the_output_by_less_than_the_five_percent_allowed() -> None:
    design = design_from_text(starter_text("x"), "x.toml")
    assert design.input.per_count is not None
    assert design.output.range is not None
    low, high = design.output.range
    assert design.transfer.feed_through * design.input.per_count / (high - low) < F(5, 100)


def test_every_line_that_is_commented_out_is_right_when_it_is_not() -> None:
    text = starter_text("x")
    keys = re.sub(r"^# (?=\[+[\w.]+\]+$|\w+ = )", "", text, flags=re.MULTILINE)
    design = design_from_text(keys, "x.toml")
    assert design.requirement == "where this is asked for"
    assert design.author == "your initials"
    assert dict(design.tolerance) == {"pole_shift": F(2), "phase_in_band": F(5)}
    assert design.accept[0].check == "step deviation"
    assert design.schedule is not None
    assert [name for name, _ in design.schedule.values] == ["kp", "ki"]
    assert design.plant is not None
    assert design.loop.compute_delay_samples == 1
    assert (design.input.offset, design.output.offset, design.target.structure) == (0, 4200, "auto")


def test_the_lines_for_integers_are_right_when_they_take_the_place_of_floats() -> None:
    text = starter_text("x").replace('arithmetic = "float32"', "# float32")
    design = design_from_text(text.replace("# integers: ", ""), "x.toml")
    assert (design.target.arithmetic, design.input.type, design.output.type) == ("int16", "int16", "int16")


def test_the_lines_for_an_improper_transfer_are_right_when_it_has_no_pole() -> None:
    text = starter_text("x").replace("kd*s/(tau*s + 1)", "kd*s").replace("tau = ", "# tau = ")
    design = design_from_text(text.replace("# improper: ", ""), "x.toml")
    assert design.rolloff is not None
    assert design.rolloff.placement == "derivative"


def test_the_lines_fit_a_terminal_and_the_data_is_called_invented() -> None:
    text = starter_text("a" * 24)
    assert max(map(len, text.splitlines())) <= 100
    assert "invented" in text
    assert "NAME" not in text


def test_the_first_line_names_the_schema_to_an_editor_from_the_directory_of_the_file() -> None:
    assert starter_text("x").splitlines()[0] == f"#:schema ./{SCHEMA_FILE}"


@pytest.mark.parametrize("name", ["int", "a b", "../x", "", "NAME'"])
def test_a_name_that_c_would_trip_over_is_refused(name: str) -> None:
    with pytest.raises(RealizeError, match="a C identifier"):
        starter_text(name)
