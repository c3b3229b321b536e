"""Every other table of the design file: what it is read as, and what is refused by which name."""

from __future__ import annotations

import math
from fractions import Fraction

import pytest

from realize.algebra.irrational import pi
from realize.design import (
    LOOP_METHODS,
    METHODS,
    Accept,
    Design,
    Overrides,
    Rolloff,
    Signal,
    Target,
    checked_name,
    design_from_text,
    require_period,
)
from realize.design.model import FLOAT_STRUCTURES, INTEGER_STRUCTURES
from realize.errors import RealizeError

F = Fraction
PROPER = '[design]\ntransfer = "1 + 2/s"\n'
IMPROPER = '[design]\ntransfer = "1 + 2/s + 3*s"\n'


def read(text: str, before: str = PROPER, **overrides: str) -> Design:
    return design_from_text(before + text, "servo.toml", Overrides(**overrides))  # type: ignore[arg-type]


def refusal(text: str, before: str = PROPER, **overrides: str) -> RealizeError:
    with pytest.raises(RealizeError) as caught:
        read(text, before, **overrides)
    return caught.value


def test_a_transfer_alone_takes_every_default() -> None:
    design = read("")
    assert design.name == "controller"
    assert (design.about, design.revision, design.requirement, design.author) == (None,) * 4
    assert (design.period_s, design.band_rad_s, design.exact_at_rad_s, design.rolloff) == (None,) * 4
    assert (design.input, design.output, design.method) == (Signal(), Signal(), "auto")
    assert design.target == Target("float32", "auto", "inline", "subtract", "hold-integral", None, guard_nonfinite=True)
    assert (design.tolerance, design.accept) == ((), ())


def test_a_command_that_needs_a_rate_says_how_to_give_one() -> None:
    with pytest.raises(RealizeError, match="no sample rate") as caught:
        require_period(read(""))
    assert "--rate" in caught.value.advice
    assert require_period(read('[sampling]\nrate = "2 kHz"')) == F(1, 2000)


@pytest.mark.parametrize(
    ("text", "overrides", "period_s"),
    [
        ('rate = "2 kHz"', {}, F(1, 2000)),
        ('rate = "3 Hz"', {}, F(1, 3)),
        ('period = "500 us"', {}, F(1, 2000)),
        ('period = "1/3 ms"', {}, F(1, 3000)),
        ('period = "500 us"', {"rate": "1 kHz"}, F(1, 1000)),
        ('rate = "2 kHz"', {"period": "2 ms"}, F(1, 500)),
        ("", {"rate": "1e-5 Hz"}, F(10**5)),
    ],
)
def test_the_period_is_exact_and_the_command_line_replaces_it(
    text: str, overrides: dict[str, str], period_s: Fraction
) -> None:
    assert read(f"[sampling]\n{text}", **overrides).period_s == period_s


def test_the_band_is_in_rad_per_s() -> None:
    assert read('[sampling]\nband = "20 Hz"').band_rad_s == 40 * pi()
    assert read('[sampling]\nband = "20 rad/s"').band_rad_s == F(20)


def test_name_and_method_of_the_command_line_win() -> None:
    text = 'name = "gap"\n[method]\nname = "bilinear"'
    design = read(text, name="other", method="pole-zero-mapped")
    assert (design.name, design.method) == ("other", "pole-zero-mapped")
    assert (read(text).name, read(text).method) == ("gap", "bilinear")


@pytest.mark.parametrize("name", ["auto", *METHODS, *LOOP_METHODS])
def test_every_method_can_be_named(name: str) -> None:
    design = read(f'[method]\nname = "{name}"\ncompensate_delay = false')
    assert (design.method, design.exact_at_rad_s, design.compensate_delay) == (name, None, False)
    assert read("", method=name) == read(f'[method]\nname = "{name}"')


@pytest.mark.parametrize("text", ["", 'name = "auto"\n', 'name = "frequency-fit"\n'])
def test_delay_is_compensated_by_the_method_that_can_or_by_whichever_is_chosen(text: str) -> None:
    assert read(f"[method]\n{text}compensate_delay = true").compensate_delay
    assert not read(f"[method]\n{text}").compensate_delay


def test_a_rolloff_has_defaults() -> None:
    assert read("[rolloff]", IMPROPER).rolloff == Rolloff("derivative", None, F(1), None, F(6))


def test_a_rolloff_is_read_whole() -> None:
    text = """[rolloff]
placement = "whole"
order = 2
damping = 0.7071
pole = "1900 rad/s"
phase_budget = "4.5 deg"
"""
    assert read(text, IMPROPER).rolloff == Rolloff("whole", 2, F("0.7071"), F(1900), F(9, 2))


@pytest.mark.parametrize(("text", "hertz"), [("300 Hz", 300.0), ("0.3kHz", 300.0), ("7 Hz", 7.0)])
def test_a_rolloff_pole_in_hertz_has_17_digits_in_rad_per_s(text: str, hertz: float) -> None:
    rolloff = read(f'[rolloff]\npole = "{text}"', IMPROPER).rolloff
    assert rolloff is not None
    assert rolloff.pole_rad_s is not None
    exact = 2 * pi() * F(hertz)
    unit = F(10) ** (math.floor(math.log10(float(exact))) - 16)
    assert (rolloff.pole_rad_s / unit).denominator == 1
    assert abs(rolloff.pole_rad_s - exact) <= unit / 2


def test_an_automatic_pole_is_none() -> None:
    rolloff = read('[rolloff]\npole = "auto"', IMPROPER).rolloff
    assert rolloff is not None
    assert rolloff.pole_rad_s is None


def test_signals_are_exact() -> None:
    design = read(
        """[signals.input]
range = [-8.0, "25/3"]
unit = "\N{MICRO SIGN}m"
per_count = "0.0005"
offset = -2048
type = "float"
[signals.output]
range = [0, 4095]
per_count = 1e-3
"""
    )
    assert design.input == Signal((F(-8), F(25, 3)), "\N{MICRO SIGN}m", F(1, 2000), -2048, "float")
    assert design.output == Signal((F(0), F(4095)), "", F(1, 1000), 0, None)


def test_the_target_is_read_whole() -> None:
    text = """[target]
arithmetic = "float64"
structure = "direct"
coefficients = "table"
recursion_sign = "add"
anti_windup = "back-calculation"
tracking_time = "0.2 s"
guard_nonfinite = false
[signals.output]
type = "double"
"""
    design = read(text)
    assert design.target == Target(
        "float64", "direct", "table", "add", "back-calculation", F(1, 5), guard_nonfinite=False
    )
    assert design.output.type == "double"


def test_tolerances_come_in_their_units_and_in_a_fixed_order() -> None:
    text = """[tolerance]
converter_step = "10 %"
magnitude_in_band = "1/2 dB"
phase_in_band = "4 deg"
pole_shift = "0.5%"
"""
    assert read(text).tolerance == (
        ("pole_shift", F(1, 2)),
        ("magnitude_in_band", F(1, 2)),
        ("phase_in_band", F(4)),
        ("converter_step", F(10)),
    )


def test_tolerances_of_the_loop_come_in_their_units() -> None:
    text = """[tolerance]
loop_overshoot_rise = "3 %"
loop_sensitivity_most = 1.8
loop_phase_margin_least = "45 deg"
loop_phase_margin_loss = "1/3 deg"
"""
    assert read(text).tolerance == (
        ("loop_phase_margin_loss", F(1, 3)),
        ("loop_phase_margin_least", F(45)),
        ("loop_sensitivity_most", F(9, 5)),
        ("loop_overshoot_rise", F(3)),
    )


@pytest.mark.parametrize(
    ("check", "limit", "expected"),
    [
        ("loop stability", "", (None, "")),
        ("loop phase margin", 'limit = "12 deg"\n', (F(12), "deg")),
        ("loop sensitivity", "limit = 2.5\n", (F(5, 2), "")),
        ("loop sensitivity", 'limit = "5/2"\n', (F(5, 2), "")),
        ("loop overshoot", 'limit = "4 %"\n', (F(4), "%")),
    ],
)
def test_a_deviation_of_the_loop_can_be_agreed_to(
    check: str, limit: str, expected: tuple[Fraction | None, str]
) -> None:
    assert read(ACCEPT.format(check, limit)).accept == (Accept(check, *expected, "b", "x"),)


def test_agreed_deviations_carry_limit_reason_and_initials() -> None:
    text = """[[accept]]
check = "step overshoot"
limit = "4 %"
because = "the reference is ramped"
by = "bk"
[[accept]]
check = "saturation recovery"
because = "never saturates"
by = "bk"
"""
    assert read(text).accept == (
        Accept("step overshoot", F(4), "%", "the reference is ramped", "bk"),
        Accept("saturation recovery", None, "%", "never saturates", "bk"),
    )


ACCEPT = '[[accept]]\ncheck = "{}"\n{}because = "b"\nby = "x"\n'

LONG = "x" * 201


@pytest.mark.parametrize(
    ("text", "where", "found", "advice"),
    [
        ("[samplng]", "", 'the unknown table "samplng"', "did you mean sampling?"),
        ('[sampling]\nrte = "1 Hz"', "[sampling]", 'the unknown key "rte"', "did you mean rate?"),
        ('[sampling]\nxyzzy = "1 Hz"', "[sampling]", 'the unknown key "xyzzy"', "starter file"),
        ('nme = "x"', "[design]", 'the unknown key "nme"', "did you mean name?"),
        ("sampling = 3", "[design]", 'the unknown key "sampling"', ""),
        ("[sampling]\nrate = 2000", "[sampling] rate", "the number 2000", "in quotes"),
        ("[sampling]\nrate = 2e3", "[sampling] rate", "the number 2e3", "in quotes"),
        ('[sampling]\nrate = "0 Hz"', "[sampling] rate", '"0 Hz"', "check the number and its sign"),
        ('[sampling]\nrate = "2 kHzz"', "[sampling] rate", 'the unit "kHzz"', "did you mean kHz?"),
        ('[sampling]\nperiod = "-1 ms"', "[sampling] period", '"-1 ms"', "its sign"),
        ('[sampling]\nrate = "1 Hz"\nperiod = "1 s"', "[sampling] rate", "at once", "remove one"),
        ('[sampling]\nrate = "1e13 Hz"', "[sampling] rate", "a period of 0.0001 ns", "power of ten"),
        ('[sampling]\nperiod = "1e6 h"', "[sampling] period", "a period of 3.6e+9 s", "power of ten"),
        ('[sampling]\nband = "1e300 Hz"', "[sampling] band", "too large", "power of ten"),
        ('[sampling]\nband = "1e-300 Hz"', "[sampling] band", "too small", "power of ten"),
        ("[signals.input]\nper_count = 1e-101", "[signals.input] per_count", "too small", "power of ten"),
        ("[signals.input]\nrange = [0, 1e101]", "[signals.input] range, entry 2", "too large", "power of ten"),
        ('[sampling]\nband = "0 Hz"', "[sampling] band", '"0 Hz"', "its sign"),
        ('[sampling]\nrate = "2 kHz"\nband = "1 kHz"', "[sampling] band", "up to 1 kHz", "raise the rate"),
        ("[[sampling]]", "[sampling]", "a list", "write [sampling]"),
        ("[rolloff]", "[rolloff]", "for a transfer function that is proper", "remove the table"),
        ('name = "9x"', "[design] name", 'the name "9x"', "roller_gap"),
        ("name = 9", "[design] name", "the number 9", "in quotes"),
        ('about = ""', "[design] about", "an empty text", "remove the key"),
        ('about = "a\\nb"', "[design] about", "control characters", "plain line"),
        ('about = "a\\u202eb"', "[design] about", "control characters", "plain line"),
        ('about = "a\\u2028b"', "[design] about", "control characters", "plain line"),
        (f'author = "{LONG}"', "[design] author", "a text of 201 characters", "shorten"),
        ("revision = 1.0", "[design] revision", "the number 1.0", "in quotes"),
        ("requirement = ['a']", "[design] requirement", "a list", "in quotes"),
        ('[target]\narithmetic = "float"', "[target] arithmetic", '"float"', 'did you mean "float32"?'),
        ('[target]\narithmetic = "Double"', "[target] arithmetic", '"Double"', 'did you mean "float64"?'),
        ('[target]\narithmetic = "int"', "[target] arithmetic", '"int"', 'did you mean "int32"?'),
        ('[target]\narithmetic = "short"', "[target] arithmetic", '"short"', 'did you mean "int16"?'),
        ('[signals.input]\ntype = "int"', "[signals.input] type", '"int"', 'did you mean "int32"?'),
        ('[method]\nname = "bilinar"', "[method] name", '"bilinar"', 'did you mean "bilinear"?'),
        ("[method]\nname = 1", "[method] name", "the number 1", "one of these"),
        ('[method]\nexact_at = "0 Hz"', "[method] exact_at", '"0 Hz"', "its sign"),
        ('[method]\ncompensate_delay = "no"', "[method] compensate_delay", '"no"', "true"),
        (
            '[method]\nname = "bilinear"\ncompensate_delay = true',
            "[method] compensate_delay",
            "with the method bilinear",
            'name = "frequency-fit"',
        ),
        (
            '[method]\nname = "plant-input-mapped"\ncompensate_delay = true',
            "[method] compensate_delay",
            "with the method plant-input-mapped",
            "remove it",
        ),
        ('[method]\nname = "frequency-fitt"', "[method] name", '"frequency-fitt"', '"frequency-fit"?'),
        ("[signals.inptu]", "[signals]", 'the unknown key "inptu"', "did you mean input?"),
        ("[signals.input]\nrange = [1, 1]", "[signals.input] range", "not below", "range = [-1.0, 1.0]"),
        ("[signals.input]\nrange = [1]", "[signals.input] range", "a list of 1", "range = [-1.0, 1.0]"),
        ("[signals.input]\nrange = 1", "[signals.input] range", "the number 1", "with brackets"),
        ("[signals.input]\nrange = [0, inf]", "[signals.input] range, entry 2", "inf", "write a number"),
        ("[signals.input]\nper_count = 0", "[signals.input] per_count", "the number 0", "a count cannot be 0"),
        (
            '[signals.input]\nper_count = "2.44 mm"',
            "[signals.input] per_count",
            '"2.44 mm"',
            "write the number alone: per_count = 2.44",
        ),
        ('[signals.input]\nper_count = "1/3 %"', "[signals.input] per_count", '"1/3 %"', 'per_count = "1/3"'),
        (
            '[signals.input]\nper_count = "2 pi"',
            "[signals.input] per_count, column 3",
            '"pi" right after',
            "write 2*pi",
        ),
        ('[signals.input]\nrange = ["-5 mm", 5]', "[signals.input] range, entry 1", '"-5 mm"', "alone: -5"),
        ('[signals.input]\nrange = [5, "-5/3"]', "[signals.input] range", "not below", 'range = ["-5/3", 5]'),
        ('[signals.input]\nper_count = "-1/2"', "[signals.input] per_count", '"-1/2"', "check the sign"),
        ("[signals.input]\noffset = 0.5", "[signals.input] offset", "the number 0.5", "offset = 0 or 1"),
        ("[signals.input]\noffset = -1000.5", "[signals.input] offset", "-1000.5", "offset = -1001 or -1000"),
        ("[signals.input]\noffset = true", "[signals.input] offset", "true", "offset ="),
        ("[signals.input]\noffset = 9999999999", "[signals.input] offset", "9999999999", "offset = 2147483648"),
        ("[signals.input]\nunit = 1", "[signals.input] unit", "the number 1", "in quotes"),
        (f'[signals.input]\nunit = "{"m" * 25}"', "[signals.input] unit", "of 25 characters", "shorten"),
        ('[signals.input]\ntype = "double"', "[signals.input] type", "double, with float32", "[target]"),
        ('[signals.input]\ntype = "byte"', "[signals.input] type", '"byte"', "one of these"),
        ('[target]\narithmetic = "float23"', "[target] arithmetic", '"float23"', 'did you mean "float32"?'),
        ('[target]\nstructure = "parallel"', "[target] structure", '"parallel"', "one of these"),
        ("[target]\nguard_nonfinite = 1", "[target] guard_nonfinite", "the number 1", "true"),
        (
            '[target]\nanti_windup = "back-calculation"',
            "[target] tracking_time",
            "nothing",
            "tracking_time =",
        ),
        ('[target]\ntracking_time = "1 s"', "[target] tracking_time", "with anti_windup", "back-calculation"),
        ('[tolerance]\npole_shft = "1 %"', "[tolerance]", 'the unknown key "pole_shft"', "pole_shift?"),
        ('[tolerance]\nloop_sensitivity_most = "1 %"', "[tolerance] loop_sensitivity_most", '"1 %"', "a plain number"),
        ("[tolerance]\nloop_sensitivity_most = -1", "[tolerance] loop_sensitivity_most", "number -1", "the sign"),
        ('[tolerance]\nloop_overshoot_rise = "1 deg"', "[tolerance] loop_overshoot_rise", "an angle", "percentage"),
        (ACCEPT.format("loop sensitivity", ""), "[[accept]] number 1, limit", "nothing", "limit = 2.5"),
        ('[tolerance]\npole_shift = "1 dB"', "[tolerance] pole_shift", "belongs to a level", "a percentage"),
        ("[tolerance]\npole_shift = 1", "[tolerance] pole_shift", "the number 1", "in quotes"),
        ("[accept]", "[[accept]]", "a table", "two brackets"),
        ("[[accept]]", "[[accept]] number 1, check", "nothing", "add check"),
        (ACCEPT.format("step overshot", ""), "[[accept]] number 1, check", "overshot", '"step overshoot"?'),
        (ACCEPT.format("pole shift", ""), "[[accept]] number 1, limit", "nothing", 'limit = "4 %"'),
        (
            ACCEPT.format("pole shift", 'limit = "1 dB"\n'),
            "[[accept]] number 1, limit",
            "belongs to a level",
            "give a percentage",
        ),
        (
            ACCEPT.format("stability", 'limit = "1 %"\n'),
            "[[accept]] number 1, limit",
            "which has no figure",
            "remove the limit",
        ),
        (
            2 * ACCEPT.format("stability", ""),
            "[[accept]] number 2, check",
            'a second entry for "stability"',
            "keep the one",
        ),
        (
            ACCEPT.format("stability", "").replace('"b"', '" "'),
            "[[accept]] number 1, because",
            "an empty text",
            "plain line",
        ),
    ],
)
def test_each_mistake_names_file_table_and_key(text: str, where: str, found: str, advice: str) -> None:
    error = refusal(text)
    assert error.where == (f"servo.toml, {where}" if where else "servo.toml")
    assert found in error.found
    assert advice in error.advice
    assert error.allowed
    assert error.exit_status == 2


@pytest.mark.parametrize(
    ("text", "key", "found", "advice"),
    [
        ('placement = "all"', "placement", '"all"', "one of these"),
        ("order = 0", "order", "the number 0", "order ="),
        ("order = 1.0", "order", "the number 1.0", "order ="),
        ("order = 32", "order", "32 roll-off poles", "order = 1"),
        ("damping = 0.7", "damping", "for a roll-off of order 1", "order = 2"),
        ("order = 2\ndamping = 0", "damping", "the number 0", "check the sign"),
        ("order = 2\ndamping = 1.5", "damping", "the number 1.5", "0.7071"),
        ("pole = 300", "pole", "the number 300", "in quotes"),
        ('pole = "300"', "pole", "without a unit", "add the unit"),
        ('phase_budget = "90 deg"', "phase_budget", '"90 deg"', "can spare"),
        ('phase_budget = "6 %"', "phase_budget", "belongs to a percentage", "an angle"),
    ],
)
def test_each_mistake_in_a_rolloff_names_its_key(text: str, key: str, found: str, advice: str) -> None:
    error = refusal(f"[rolloff]\n{text}", IMPROPER)
    assert error.where == f"servo.toml, [rolloff] {key}"
    assert found in error.found
    assert advice in error.advice


def test_an_order_that_leaves_it_improper_is_refused() -> None:
    error = refusal("[rolloff]\norder = 1", '[design]\ntransfer = "s^2 + s"\n')
    assert error.allowed.startswith("from 2, which make it proper")


@pytest.mark.parametrize(
    ("overrides", "where", "found"),
    [
        ({"rate": "0 Hz"}, "--rate", '"0 Hz"'),
        ({"rate": "1 s"}, "--rate", "belongs to a time"),
        ({"period": "-1 s"}, "--period", '"-1 s"'),
        ({"rate": "1 Hz", "period": "1 s"}, "--rate", "at once"),
        ({"name": "while"}, "--name", "a kept word"),
        ({"method": "bilinar"}, "--method", '"bilinar"'),
    ],
)
def test_a_mistake_on_the_command_line_names_the_option(overrides: dict[str, str], where: str, found: str) -> None:
    error = refusal("", **overrides)
    assert error.where == where
    assert found in error.found


@pytest.mark.parametrize("name", ["a", "roller_gap", "x9", "A_b_C", "n" * 24, "integer", "classy"])
def test_a_c_identifier_is_a_name(name: str) -> None:
    assert checked_name(name, "NAME") == name


@pytest.mark.parametrize(
    "name",
    ["", "9a", "a-b", "a b", "_a", "a_", "a__b", "n" * 25, "int", "restrict", "xor_eq", "Class", "nul", "\u00e4",
     "a\n", "a;b", "../a"],
)  # fmt: skip
def test_what_c_or_a_file_system_would_trip_over_is_no_name(name: str) -> None:
    with pytest.raises(RealizeError) as caught:
        checked_name(name, "NAME")
    assert caught.value.where == "NAME"
    assert "C identifier" in caught.value.allowed


@pytest.mark.parametrize("arithmetic", ["int16", "int32"])
@pytest.mark.parametrize("structure", INTEGER_STRUCTURES)
def test_every_structure_of_integers_can_be_named_with_the_type_of_a_converter(arithmetic: str, structure: str) -> None:
    design = read(f'[target]\narithmetic = "{arithmetic}"\nstructure = "{structure}"\n[signals.input]\ntype = "uint16"')
    assert (design.target.arithmetic, design.target.structure) == (arithmetic, structure)
    assert (design.input.type, design.output.type) == ("uint16", None)


@pytest.mark.parametrize("arithmetic", ["float32", "float64"])
@pytest.mark.parametrize("structure", FLOAT_STRUCTURES)
def test_every_structure_of_floats_can_be_named(arithmetic: str, structure: str) -> None:
    design = read(f'[target]\narithmetic = "{arithmetic}"\nstructure = "{structure}"')
    assert (design.target.arithmetic, design.target.structure) == (arithmetic, structure)


@pytest.mark.parametrize(
    ("text", "key", "found"),
    [
        ('[target]\narithmetic = "float32"\nstructure = "normal"', "structure", "normal"),
        ('[target]\narithmetic = "int16"\nstructure = "lattice"', "structure", "lattice"),
        ('[signals.input]\ntype = "int16"', "type", "int16, with float32 arithmetic"),
        ('[target]\narithmetic = "int16"\n[signals.output]\ntype = "float"', "type", "float, with int16 arithmetic"),
    ],
)
def test_a_structure_or_type_of_another_arithmetic_is_refused(text: str, key: str, found: str) -> None:
    error = refusal(text)
    assert error.where.endswith(key)
    assert found in error.found


@pytest.mark.parametrize("text", ["", 'name = "auto"\n', 'name = "bilinear-prewarped"\n'])
def test_exact_at_is_for_the_method_that_is_exact_at_a_frequency(text: str) -> None:
    assert read(f'[method]\n{text}exact_at = "40 rad/s"').exact_at_rad_s == F(40)


@pytest.mark.parametrize("name", [name for name in (*METHODS, *LOOP_METHODS) if name != "bilinear-prewarped"])
def test_exact_at_that_the_named_method_would_ignore_is_refused(name: str) -> None:
    in_file = refusal(f'[method]\nname = "{name}"\nexact_at = "40 rad/s"')
    on_command_line = refusal('[method]\nexact_at = "40 rad/s"', method=name)
    assert str(in_file) == str(on_command_line)
    assert in_file.where == "servo.toml, [method] exact_at"
    assert in_file.found == f"a frequency, with the method {name}"
    assert in_file.allowed == "a frequency with the method bilinear-prewarped or auto only"
    assert in_file.advice == 'remove it, or write name = "bilinear-prewarped"'


SENSITIVITY = '[[accept]]\ncheck = "loop sensitivity"\nbecause = "b"\nby = "x"\nlimit = '


@pytest.mark.parametrize("written", ["2 dB", "2dB", " 2e0 dB", "20 %", "-2 dB"])
def test_a_ratio_with_a_unit_is_asked_for_as_a_plain_number(written: str) -> None:
    error = refusal(f'{SENSITIVITY}"{written}"')
    assert error.where == "servo.toml, [[accept]] number 1, limit"
    assert error.found == f'"{written}"'
    assert error.allowed.startswith("a plain number")
    assert error.advice == "write a plain number, such as limit = 2.5"


@pytest.mark.parametrize(
    ("written", "expected"), [("2e-1", F(1, 5)), ("25E-1", F(5, 2)), ("5/2", F(5, 2)), ("sqrt(4)", F(2))]
)
def test_a_ratio_may_be_an_expression(written: str, expected: Fraction) -> None:
    assert read(f'{SENSITIVITY}"{written}"').accept[0].limit == expected
