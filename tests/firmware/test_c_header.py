"""The header: what a stranger to the design needs, and macros a build can rely on."""

from __future__ import annotations

import re
from fractions import Fraction
from typing import Any

import pytest

from realize.arithmetic.formats import FLOAT32, FLOAT64, FloatFormat
from realize.arithmetic.realization import Realization, Section
from realize.firmware import Emission, render_firmware
from realize.firmware.c_text import WIDTH
from tests.firmware.bench import ZIG, Bench, rendered
from tests.firmware.designs import UNIT_RANGE, delta_section, grid, section


def servo(target: FloatFormat = FLOAT32, period_s: Fraction = Fraction(1, 2000), **options: Any) -> Emission:
    rest = (section(target, ("4.2", "-3.1"), ("-0.38",)),)
    realization = Realization(target, "direct", (target.round(Fraction("0.009")),), rest, period_s)
    made = Emission("roller_gap", realization, "bilinear", "kp + ki/s", output_range=UNIT_RANGE)
    return made._replace(**options)


def header(emission: Emission) -> str:
    return render_firmware(emission)["roller_gap.h"]


def said(emission: Emission) -> str:
    """The header's first comment as running text."""
    text = header(emission).partition(" */\n")[0]
    return " ".join(text.replace("\n *", " ").split())


@pytest.mark.parametrize(
    ("option", "value", "sentence"),
    [
        ("about", "roller gap of a dough sheeter (invented)", "roller gap of a dough sheeter (invented)"),
        ("revision", "B", "revision B"),
        ("requirement", "REQ-7", "requirement REQ-7"),
        ("author", "J. Doe", "author J. Doe"),
        ("transfer_text", "4.2 + 18/s", "transfer G(s) = 4.2 + 18/s"),
        ("particulars", (("roll-off", "1 pole at 300 Hz"),), "roll-off 1 pole at 300 Hz"),
        ("method", "ramp-invariant", "method ramp-invariant"),
        ("input_unit", "mm", "input the input (for a controller the error, reference minus measurement), in mm"),
        ("input_count", (Fraction(1, 2000), 0), "input count 1 count = 1/2000; converting is up to the caller"),
        ("input_count", (Fraction(1, 8), 2048), "1 count = 1/8; count 2048 stands for 0; converting"),
        ("output_count", (Fraction(1, 4200), 0), "output count 1 count = 1/4200; converting"),
        ("output_count", (Fraction(10**60, 3 * 10**60 + 1), 0), "output count 1 count = about 0.33333; converting"),
        (
            "input_range",
            (Fraction(-8), Fraction(8)),
            "reference minus measurement); range -8 to 8, declared but not enforced",
        ),
        ("output_range", None, "so called below); no range was given: nothing limits it"),
        ("output_range", None, "- without an output range nothing limits the command"),
        (
            "output_range",
            UNIT_RANGE,
            "output the output (for a controller the command; so called below); clamped to -1 to 1 anti-windup",
        ),
        ("output_range", (Fraction(-1, 3), Fraction(1)), "clamped to -1/3 to 1, rounded inward to the format"),
        ("anti_windup", "none", "anti-windup none: the integral goes on while the command is limited"),
        ("guard_nonfinite", False, "input guard none: an input that is NaN or infinite spoils the state"),
        ("notes", ("a remark from above",), "at the same time Method notes: - a remark from above Caution"),
        (
            "accepted",
            ({"check": "step overshoot", "limit": Fraction(4), "unit": "%", "because": "ramped", "by": "ab"},),
            "Accepted deviations: - step overshoot, up to 4 %: ramped (ab)",
        ),
        (
            "accepted",
            ({"check": "stability", "limit": None, "unit": "", "because": "so is the plant", "by": "ab"},),
            "Accepted deviations: - stability: so is the plant (ab)",
        ),
    ],
)
def test_the_header_says_what_the_design_says(option: str, value: Any, sentence: str) -> None:
    assert sentence in said(servo(**{option: value}))


def test_the_unit_of_a_count_is_that_of_its_signal() -> None:
    text = said(servo(input_count=(Fraction(1, 2000), 0), input_unit="mm", output_count=(Fraction(1), 0)))
    assert "1 count = 1/2000 mm; converting" in text
    assert "1 count = 1; converting" in text


FIGURES = {
    "stable": True,
    "phase_margin_deg": 200 / 3,
    "gain_margin_db": None,
    "gain_reduction_margin_db": None,
    "maximum_sensitivity": 1.25,
    "step_overshoot_percent": 17.0,
}


def loop(figures: dict[str, Any], case: str = "", **options: Any) -> dict[str, Any]:
    plain = {
        "compute_delay_s": Fraction(1, 2000),
        "compute_delay_samples": Fraction(1),
        "measured": False,
        "cases": ({"case": case, "discrete": FIGURES | figures},),
        "jitter_margin_s": None,
        "notes": (),
    }
    return plain | options


@pytest.mark.parametrize(
    ("given", "sentence"),
    [
        (
            loop({}),
            "Loop: checked with the command reaching the actuator 1 sample (500 us) after the input was sampled; "
            "margins hold only then. - stable, phase margin 66.667 deg, maximum sensitivity 1.25, step overshoot 17 % "
            "Not protected",
        ),
        (
            loop({}, compute_delay_s=Fraction(0), compute_delay_samples=Fraction(0)),
            "reaching the actuator 0 samples (0 s) after",
        ),
        (
            loop({}, compute_delay_s=Fraction(3, 4000), compute_delay_samples=Fraction(3, 2)),
            "reaching the actuator 1.5 samples (750 us) after",
        ),
        (
            loop({"gain_margin_db": 26.0}, "heavy */"),
            "- case heavy * /: stable, phase margin 66.667 deg, gain margin 26 dB,",
        ),
        (loop({"gain_reduction_margin_db": 6.0}), "deg, margin to a lower gain 6 dB, maximum"),
        (loop({"stable": False}), "- NOT STABLE, phase margin"),
        (loop({"stable": None}), "- stability not judged, phase margin"),
        (loop({}, measured=True), "- the plant is a measured response: whether the loop is stable was not judged Not"),
        (loop({}, jitter_margin_s=0.02), "- jitter margin 20 ms: the delay may grow by up to so much"),
        (loop({}, notes=("aliases",)), "overshoot 17 % - aliases Not protected"),
    ],
)
def test_the_header_says_in_which_loop_the_design_was_checked(given: dict[str, Any], sentence: str) -> None:
    assert sentence in said(servo(loop=given))


def test_the_jitter_margin_of_several_cases_is_the_nominal_ones() -> None:
    cases = tuple({"case": case, "discrete": FIGURES} for case in ("nominal", "heavy"))
    assert "jitter margin 20 ms (nominal case): the" in said(servo(loop=loop({}, cases=cases, jitter_margin_s=0.02)))


def test_without_a_plant_the_header_is_silent_about_loops() -> None:
    assert "Loop:" not in said(servo())


def test_without_notes_there_is_no_heading_for_them() -> None:
    assert "Method notes" not in said(servo())


@pytest.mark.parametrize(
    "sentence",
    [
        "sample period 1/2000 s (rate 2000 Hz)",
        "structure direct: 1 section in transposed direct form II; 1 integral state",
        "arithmetic float32, every operation rounded once, to nearest",
        "anti-windup hold-integral: an integral state is not updated while",
        "input guard an input that is NaN or infinite counts as the previous accepted input",
        "Calls: roller_gap_clear or roller_gap_preset once",
        "Feed-through: direct: the command depends on the input of the same sample",
        "Fused multiply-add is kept out",
        "does not flush subnormal numbers to zero",
        "finite inputs so large that a product overflows",
        "Check on the bench, with the actuator limited, before closing the loop.",
        "IEC 61508",
        "the judgement of a licensed engineer",
        "its account is roller_gap.record.json",
    ],
)
def test_the_header_of_every_design_says(sentence: str) -> None:
    assert sentence in said(servo())


def test_back_calculation_names_its_tracking_time() -> None:
    text = said(servo(anti_windup="back-calculation", tracking_time_s=Fraction(1, 5)))
    assert "back-calculation: the integral follows what was applied, tracking time 0.2 s" in text


def test_a_strictly_proper_design_has_no_feed_through() -> None:
    lag = Realization(FLOAT32, "direct", (), (section(FLOAT32, ("0", "0.5"), ("-0.5",)),), Fraction(1, 2000))
    assert "Feed-through: none" in said(servo()._replace(realization=lag))


@pytest.mark.parametrize(
    ("a", "protected"),
    [(("-1.9", "1"), False), (("-1.9", "0.99"), True), (("1",), False), (("-0.9",), True), (("0", "1"), False)],
)
def test_poles_that_do_not_decay_are_named_as_not_protected(a: tuple[str, ...], protected: bool) -> None:
    numerator = ("1",) * (len(a) + 1)
    rest = Realization(FLOAT64, "direct", (), (section(FLOAT64, numerator, a),), Fraction(1, 2000))
    assert ("section 1 has poles that do not decay" not in said(servo()._replace(realization=rest))) == protected


def macros(text: str) -> dict[str, str]:
    return dict(re.findall(r"#define roller_gap_(\w+) (.*)", text))


def test_macros_are_usable_by_the_preprocessor(bench: Bench) -> None:
    where = bench.emitted([servo()])
    (where / "uses.c").write_text(
        '#include "roller_gap.h"\n'
        "#if roller_gap_PERIOD_NUMERATOR != 1 || roller_gap_PERIOD_DENOMINATOR != 2000\n#error period\n#endif\n"
        "#if roller_gap_OUTPUT_LOW != -1 || roller_gap_OUTPUT_HIGH != 1\n#error limits\n#endif\n"
        "#if 0 - roller_gap_OUTPUT_LOW != 1\n#error sign\n#endif\n"
        "typedef int needed[roller_gap_OUTPUT_HIGH];\n"
    )
    bench.compile((*ZIG, "cc", "-std=c99", "-pedantic", "-Wall", "-Werror", "-c", "uses.c", "-o", "uses.o"), where)


@pytest.mark.parametrize(
    ("a", "protected"),
    [(("0.1", "0.09"), True), (("0.1", "0.1"), False), (("0.1", "0.11"), False), (("4", "4"), False), (("2",), False)],
)
def test_decay_in_delta_is_judged_by_the_poles_in_z(a: tuple[str, ...], protected: bool) -> None:
    # |z|^2 = 1 - a1 + a2 of a pair; delta = -2 is z = -1; the dyadic 0.1s of float64 are rounded as one number
    rest = Realization(FLOAT64, "delta", (), (delta_section(FLOAT64, ("1",) * (len(a) + 1), a),), Fraction(1, 2000))
    assert ("section 1 has poles that do not decay" not in said(servo()._replace(realization=rest))) == protected


def test_a_limit_that_is_no_integer_is_a_literal_inside_the_range() -> None:
    found = macros(header(servo(output_range=(Fraction(-1, 3), Fraction(7, 10)))))
    assert found["OUTPUT_LOW"] == "(-3.33333313e-01f) /* -0x1.555554p-2 */"
    assert found["OUTPUT_HIGH"] == "6.99999988e-01f /* 0x1.666666p-1 */"


def test_a_period_beyond_an_integer_constant_is_given_to_17_digits() -> None:
    found = macros(header(servo(period_s=Fraction(1, 3) + Fraction(1, 10**30))))
    assert found["PERIOD_NUMERATOR"] == "3.3333333333333331e-01"
    assert found["PERIOD_DENOMINATOR"] == "1"
    wide = macros(header(servo(period_s=Fraction(1, 10**12))))
    assert (wide["PERIOD_NUMERATOR"], wide["PERIOD_DENOMINATOR"]) == ("1", "1000000000000LL")


def test_without_a_range_there_are_no_limits_to_rely_on() -> None:
    assert "OUTPUT_LOW" not in macros(header(servo(output_range=None)))


def test_every_line_fits_and_every_field_says_what_it_holds() -> None:
    for emission in grid():
        files = rendered(emission)
        text = files[f"{emission.name}.h"]
        fields = text.partition("typedef struct {\n")[2].partition("}")[0].splitlines()
        assert fields
        assert all(re.fullmatch(r"    (float|double) \w+; /\* [\w ,']+ \*/", field) for field in fields)
        assert all(len(line) <= WIDTH for line in text.splitlines())


def test_a_static_gain_has_a_state_that_is_still_a_struct() -> None:
    gain = Realization(FLOAT32, "direct", (), (Section((2.5,), ()),), Fraction(1, 2000))
    assert "float unused;" in header(servo(guard_nonfinite=False)._replace(realization=gain))


def test_a_table_without_coefficients_is_still_a_struct(bench: Bench) -> None:
    bare = Realization(FLOAT32, "direct", (1.0,), (), Fraction(1, 2000))
    emission = servo(coefficients="table")._replace(realization=bare)
    where = bench.emitted([emission])
    assert "float unused; /* nothing is multiplied */" in header(emission)
    bench.compile((*ZIG, "cc", "-std=c99", "-pedantic", "-Wall", "-Werror", "-c", "roller_gap.c", "-o", "x.o"), where)


def test_the_table_names_every_multiplied_coefficient() -> None:
    text = header(servo(coefficients="table", recursion_sign="add"))
    table = text.partition("from the others. */\ntypedef struct {\n")[2] or text.rpartition("typedef struct {\n")[2]
    fields = re.findall(r"    float (\w+);", table.partition("}")[0])
    assert fields == ["section1_b0", "section1_b1", "section1_minus_a1", "section1_gain", "integral1_gain"]
    assert "(\n    roller_gap_state *state,\n    const roller_gap_coefficients *coefficients,\n    float input" in text


def test_an_accepted_deviation_of_a_loop_says_the_margin_that_is_left() -> None:
    check = {
        **{"check": "loop phase margin", "of": "stored", "reference": 49.1, "obtained": 43.0, "difference": 6.1},
        **{"tolerance": 5.0, "unit": "deg", "verdict": "out", "reason": ""},
    }
    entry = {"check": "loop phase margin", "difference": 6.1, "limit": Fraction(7), "unit": "deg"}
    assert (
        "Accepted deviations: - loop phase margin 43 deg, 6.1 deg less than the 49.1 deg of the continuous loop with "
        "hold and delay, agreed up to 7 deg: short moves (ab)"
    ) in said(servo(checks=(check,), accepted=(entry | {"because": "short moves", "by": "ab"},)))
