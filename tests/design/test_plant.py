"""The tables [plant] and [loop]: exact cases, dead time from every place it may stand in, measured responses."""

from __future__ import annotations

import io
import sys
from collections.abc import Mapping
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra.irrational import pi
from realize.design import Design, LoopTable, Overrides, PlantCase, PlantTable, design_from_text, load_design
from realize.design.plant import MAX_CASES, MAX_RESPONSE_BYTES
from realize.errors import RealizeError, Refused
from realize.transfer import TransferFunction

F = Fraction
DESIGN = '[design]\ntransfer = "kp + 2/s"\n[design.values]\nkp = 1\n'
UNITY = TransferFunction((1,), (1,))
TWICE = 'dead time stands twice: "1 ms" here, and 50 ms in transfer'
RESPONSE = "frequency_hz,magnitude_db,phase_deg\n1,0,-10\n10,-3,-40\n100,-20,-120\n"

ROLLER = """[plant]
transfer = "k/(J*s^2 + d*s)"
dead_time = "0.4 ms"
sensor = "1/(0.0002*s + 1)"
[plant.values]
k = 2
J = "m*r^2"
d = 0.5
m = 1
r = 0.1
[[plant.case]]
name = "light roller"
values = { m = 0.5 }
[[plant.case]]
name = "stiff, heavy"
values = { J = 0.03, d = "2*k" }
"""


def read(text: str, folder: str = "", **values: str) -> Design:
    return design_from_text(DESIGN + text, "servo.toml", Overrides(values=values), folder)


def plant_of(text: str, folder: str = "", **values: str) -> PlantTable:
    plant = read(text, folder, **values).plant
    assert plant is not None
    return plant


def case_of(text: str, **values: str) -> PlantCase:
    (case,) = plant_of(text, **values).cases
    return case


def refusal(text: str, **values: str) -> RealizeError:
    with pytest.raises(RealizeError) as caught:
        read(text, **values)
    return caught.value


# -- transfer functions and cases -----------------------------------------------------------------------------


def test_a_design_without_a_plant_has_none_and_the_usual_delay() -> None:
    design = read("")
    assert design.plant is None
    assert design.loop == LoopTable(F(1), None, None)


def test_a_transfer_alone_is_one_nameless_case_without_dead_time_behind_a_perfect_sensor() -> None:
    plant = plant_of('[plant]\ntransfer = """\n 1/\n (s + 2) """')
    assert plant == PlantTable(
        "1/ (s + 2)", (PlantCase("", TransferFunction((1,), (1, 2)), F(0), UNITY, ()),), None, None, None
    )


def test_cases_replace_values_and_move_what_refers_to_them() -> None:
    plant = plant_of(ROLLER)
    assert plant.transfer_text == "k/(J*s^2 + d*s)"
    assert plant.sensor_text == "1/(0.0002*s + 1)"
    assert [case.name for case in plant.cases] == ["nominal", "light roller", "stiff, heavy"]
    # J = m r^2: 0.01 and 0.005, then 0.03 with d = 2*k = 4.
    expected: list[tuple[list[int], list[Fraction | int]]] = [
        ([2], [F("0.01"), F("0.5"), 0]),
        ([2], [F("0.005"), F("0.5"), 0]),
        ([2], [F("0.03"), 4, 0]),
    ]
    assert [case.transfer for case in plant.cases] == [TransferFunction.from_polynomials(*e) for e in expected]
    assert [dict(case.values)["J"] for case in plant.cases] == [F("0.01"), F("0.005"), F("0.03")]
    assert [name for name, _ in plant.cases[1].values] == ["k", "J", "d", "m", "r"]
    assert {case.dead_time_s for case in plant.cases} == {F(4, 10000)}
    assert {case.sensor.denominator for case in plant.cases} == {(1, 5000)}


def test_the_sensor_and_the_dead_time_may_differ_from_case_to_case() -> None:
    plant = plant_of(
        '[plant]\ntransfer = "exp(-td*s)/s"\nsensor = "1/(tf*s + 1)"\n[plant.values]\ntd = 0.001\ntf = 0.5\n'
        '[[plant.case]]\nname = "far"\nvalues = { td = 0.004 }\n[[plant.case]]\nname = "slow"\nvalues = { tf = 2 }\n'
        '[[plant.case]]\nname = "none"\nvalues = { td = 0 }\n'
    )
    assert [case.dead_time_s for case in plant.cases] == [F(1, 1000), F(4, 1000), F(1, 1000), F(0)]
    assert [case.sensor.denominator for case in plant.cases] == [(1, 2), (1, 2), (2, 1), (1, 2)]


@pytest.mark.parametrize(
    ("text", "dead_time_s"),
    [
        ('transfer = "1/s"', F(0)),
        ('transfer = "1/s"\ndead_time = "0 s"', F(0)),
        ('transfer = "1/s"\ndead_time = "0.4 ms"', F(4, 10000)),
        ('transfer = "exp(-0.002*s)/s"', F(2, 1000)),
        ('transfer = "exp(-0.002*s)*exp(-s/3)/s"', F(2, 1000) + F(1, 3)),
        ('transfer = "exp(-0.002*s)/s"\nsensor = "exp(-s/3)"', F(2, 1000) + F(1, 3)),
        ('transfer = "1/s"\nsensor = "exp(-0.5*s)/(s + 1)"\ndead_time = "1 s"', F(3, 2)),
        ('transfer = "exp(-s)^2/s"\nsensor = "exp(-s)"', F(3)),
        ('transfer = "exp(-2*pi*s)/s"', 2 * pi()),
    ],
)
def test_dead_time_adds_up_from_every_place(text: str, dead_time_s: Fraction) -> None:
    assert case_of(f"[plant]\n{text}").dead_time_s == dead_time_s


def test_a_decaying_mode_that_cancels_in_a_plant_is_kept_for_the_report() -> None:
    assert case_of('[plant]\ntransfer = "(s+1)/((s+1)*(s+2))"').transfer.cancelled == (1, 1)


positive = st.fractions(min_value=F(1, 50), max_value=100, max_denominator=50)


@given(st.lists(st.tuples(positive, positive, positive), min_size=1, max_size=4))
def test_each_case_is_what_its_values_give_by_themselves(cases: list[tuple[Fraction, Fraction, Fraction]]) -> None:
    def written(values: tuple[Fraction, Fraction, Fraction]) -> Mapping[str, str]:
        return {name: f'"{value}"' for name, value in zip(("k", "tau", "td"), values, strict=True)}

    def alone(values: tuple[Fraction, Fraction, Fraction]) -> PlantCase:
        lines = [f"{name} = {value}" for name, value in written(values).items()]
        return case_of("\n".join(['[plant]\ntransfer = "k*exp(-td*s)/(tau*s + 1)"\n[plant.values]', *lines]))

    text = '[plant]\ntransfer = "k*exp(-td*s)/(tau*s + 1)"\n[plant.values]\nk = 1\ntau = 1\ntd = 1\n'
    for i, values in enumerate(cases):
        pairs = ", ".join(f"{name} = {value}" for name, value in written(values).items())
        text += f'[[plant.case]]\nname = "case {i}"\nvalues = {{ {pairs} }}\n'
    nominal, *corners = plant_of(text).cases
    assert nominal == alone((F(1), F(1), F(1)))._replace(name="nominal")
    assert corners == [alone(values)._replace(name=f"case {i}") for i, values in enumerate(cases)]


# -- values of the command line -------------------------------------------------------------------------------


def test_a_value_of_the_command_line_reaches_the_plant_and_leaves_a_case_its_own() -> None:
    text = '[plant]\ntransfer = "1/(J*s)"\n[plant.values]\nJ = 1\n[[plant.case]]\nname = "b"\nvalues = { J = 5 }'
    design = read(text, J="3")
    assert design.plant is not None
    assert [case.values for case in design.plant.cases] == [(("J", F(3)),), (("J", F(5)),)]
    assert design.values == (("kp", F(1)),)


def test_a_value_of_the_command_line_counts_wherever_its_name_is_used() -> None:
    design = read('[plant]\ntransfer = "kp/s"', kp="7")
    assert design.values == (("kp", F(7)),)
    assert design.plant is not None
    assert design.plant.cases[0].values == (("kp", F(7)),)


def test_a_value_of_the_command_line_may_be_used_through_another_or_by_a_case_alone() -> None:
    text = '[plant]\ntransfer = "1/(J*s)"\n[plant.values]\nJ = 1\n[[plant.case]]\nname = "b"\nvalues = { J = "2*m" }'
    assert [case.values[0] for case in plant_of(text, m="4").cases] == [("J", F(1)), ("J", F(8))]
    assert case_of('[plant]\ntransfer = "1/(J*s)"', J="2*m", m="4").transfer.denominator == (8, 0)


def test_a_value_of_the_command_line_that_neither_controller_nor_plant_uses_is_refused() -> None:
    error = refusal('[plant]\ntransfer = "1/(inertia*s)"\n[plant.values]\ninertia = 2', inertai="3")
    assert (error.where, error.found) == ("--value inertai", "a value that nothing uses")
    assert error.advice == "did you mean inertia?"


# -- delays ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("text", "loop"),
    [
        ("", LoopTable(F(1), None, None)),
        ('compute_delay = "1 sample"', LoopTable(F(1), None, None)),
        ('compute_delay = "1.5 samples"\njitter = "20 us"', LoopTable(F(3, 2), None, F(1, 50000))),
        ('compute_delay = "0 samples"', LoopTable(F(0), None, None)),
        ('compute_delay = "1/3 ms"', LoopTable(None, F(1, 3000), None)),
        ('compute_delay = "0 s"\njitter = "0 s"', LoopTable(None, F(0), F(0))),
    ],
)
def test_a_delay_is_in_samples_or_in_seconds(text: str, loop: LoopTable) -> None:
    assert read(f'[plant]\ntransfer = "1/s"\n[loop]\n{text}').loop == loop


# -- measured responses ---------------------------------------------------------------------------------------


def test_a_measured_response_is_read_beside_the_design_file(tmp_path: Path) -> None:
    (tmp_path / "data").mkdir()
    (tmp_path / "data" / "plant.csv").write_bytes(b"\xef\xbb\xbf" + RESPONSE.replace("\n", "\r\n").encode())
    path = tmp_path / "servo.toml"
    path.write_text(DESIGN + '[plant]\nresponse = "data/plant.csv"\ndead_time = "1 ms"\nsensor = "exp(-s)/(s+1)"\n')
    design = load_design(str(path))
    case = PlantCase("", UNITY, F(1001, 1000), TransferFunction((1,), (1, 1)), ())
    assert design.plant == PlantTable(None, (case,), "exp(-s)/(s+1)", "data/plant.csv", RESPONSE)


def test_a_measured_response_is_looked_for_in_the_current_directory_where_there_is_no_file(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    (tmp_path / "plant.csv").write_text(RESPONSE)
    monkeypatch.chdir(tmp_path)
    text = DESIGN + '[plant]\nresponse = "plant.csv"\n'
    monkeypatch.setattr(sys, "stdin", SimpleNamespace(buffer=io.BytesIO(text.encode())))
    plant = load_design("-").plant
    assert plant is not None
    assert (plant.response, plant.response_text) == ("plant.csv", RESPONSE)


def test_a_measured_response_may_have_an_absolute_path(tmp_path: Path) -> None:
    (tmp_path / "plant.csv").write_text(RESPONSE.replace("\n", "\r"))
    assert plant_of(f'[plant]\nresponse = "{tmp_path}/plant.csv"', "nowhere").response_text == RESPONSE


def test_a_measured_response_is_bounded(tmp_path: Path) -> None:
    text = '[plant]\nresponse = "plant.csv"'
    largest = "1" * MAX_RESPONSE_BYTES
    (tmp_path / "plant.csv").write_text(largest)
    assert plant_of(text, str(tmp_path)).response_text == largest
    (tmp_path / "plant.csv").write_text(largest + "1")
    with pytest.raises(RealizeError, match="a file that is too large"):
        read(text, str(tmp_path))


@pytest.mark.parametrize(
    ("content", "line", "found"),
    [
        (None, "", "no such file"),
        (b"", "", "nothing but blanks"),
        (b" \r\n\r\n", "", "nothing but blanks"),
        (RESPONSE.encode() + b"K\xfchler", ", line 5", "a byte that is not UTF-8"),
        (b"frequency_hz\r\n1\x00", ", line 2", "the character U+0000"),
        (b"a\n\x1b[31mb", ", line 2", "the character U+001B"),
        ("a\u202eb".encode(), ", line 1", "the character U+202E"),
    ],
    ids=["missing", "empty", "blank", "encoding", "zero", "escape", "direction"],
)
def test_a_mistake_with_a_measured_response_names_key_and_file(
    tmp_path: Path, content: bytes | None, line: str, found: str
) -> None:
    if content is not None:
        (tmp_path / "plant.csv").write_bytes(content)
    with pytest.raises(RealizeError) as caught:
        read('[plant]\nresponse = "plant.csv"', str(tmp_path))
    assert caught.value.where == f"servo.toml, [plant] response, plant.csv{line}"
    assert found in caught.value.found
    assert caught.value.allowed
    assert caught.value.advice


def test_a_directory_is_no_measured_response(tmp_path: Path) -> None:
    with pytest.raises(RealizeError, match="a directory"):
        read('[plant]\nresponse = "."', str(tmp_path))


# -- refusals -------------------------------------------------------------------------------------------------

CASE = '[[plant.case]]\nname = "{}"\nvalues = {{ {} }}\n'
J = '[plant]\ntransfer = "1/(J*s)"\n[plant.values]\nJ = 2\n'


@pytest.mark.parametrize(
    ("text", "where", "found", "advice"),
    [
        ("[plant]", "[plant]", "neither transfer nor response", "add a line such as transfer"),
        ("[[plant]]", "[plant]", "a list", "write [plant] on a line"),
        ('[plant]\ntransfer = "1"\nresponse = "p"', "[plant]", "at once", "remove one"),
        ('[plant]\ntransfr = "1"', "[plant]", 'the unknown key "transfr"', "did you mean transfer?"),
        ("[plant]\ntransfer = 1", "[plant] transfer", "the number 1", 'write transfer = "1/(0.05'),
        ("[plant]\ntransfer = 1.5", "[plant] transfer", "the number 1.5", 'write transfer = "1/(0.05'),
        ("[plant]\ntransfer = ['1']", "[plant] transfer", "a list", "write transfer"),
        ('[plant]\ntransfer = "0"', "[plant] transfer", "that is zero", "check the values"),
        (
            '[plant]\ntransfer = "1/J"',
            "[plant] transfer, column 3",
            'unknown name "J"',
            "define J under [plant.values]",
        ),
        ('[plant]\ntransfer = "1/kp"', "[plant] transfer, column 3", 'name "kp"', "define kp under [plant.values]"),
        ('[plant]\ntransfer = "1/(s + 1e101)"', "[plant] transfer", "a pole too far", "powers of ten"),
        ('[plant]\ntransfer = "1"\nsensor = "1/0"', "[plant] sensor, column 2", "division by zero", "zero"),
        ('[plant]\ntransfer = "1"\nsensor = 1', "[plant] sensor", "the number 1", 'sensor = "1/(0.0002*s + 1)"'),
        ('[plant]\ntransfer = "1"\nsensor = "0"', "[plant] sensor", "that is zero", "check the values"),
        ('[plant]\ntransfer = "1"\ndead_time = "-1 s"', "[plant] dead_time", '"-1 s"', "its sign"),
        ('[plant]\ntransfer = "1"\ndead_time = 1', "[plant] dead_time", "the number 1", "in quotes"),
        ('[plant]\ntransfer = "1"\ndead_time = "1 Hz"', "[plant] dead_time", "belongs to a rate", "a time"),
        ('[plant]\ntransfer = "exp(-1e101*s)"', "[plant] dead_time", "too large", "power of ten"),
        ('[plant]\ntransfer = "exp(0.1*s)/s"', "[plant] transfer, column 1", "acausal", "minus sign"),
        ('[plant]\ntransfer = "1 + exp(-s)"', "[plant] transfer, column 3", "one term of a sum", "measured response"),
        ('[plant]\ntransfer = "1"\nsensor = "exp(s)"', "[plant] sensor, column 1", "acausal", "minus sign"),
        ('[plant]\nresponse = ""', "[plant] response", "an empty text", "plain line"),
        ("[plant]\nresponse = 1", "[plant] response", "the number 1", "in quotes"),
        ('[plant]\nresponse = "no/such.csv"', "[plant] response, no/such.csv", "no such file", "directory"),
        ('[plant]\nresponse = "p"\n[plant.values]\nJ = 1', "[plant] values", "measured response", "remove them"),
        ('[plant]\nresponse = "p"\n' + CASE.format("a", "J = 1"), "[plant] case", "measured", "remove them"),
        ('[plant]\ntransfer = "1"\nvalues = 3', "[plant] values", "the number 3", "write [plant.values]"),
        ('[plant]\ntransfer = "1"\n[plant.values]\ns = 1', "[plant.values] s", "meaning of its own", "s_value"),
        ('[plant]\ntransfer = "1"\n[plant.values]\na = "b"', "[plant.values] a, column 1", '"b"', "[plant.values]"),
        (
            '[plant]\ntransfer = "1"\n[plant.values]\na = "b"\nb = "a"',
            "[plant.values]",
            "refer to each other",
            "number",
        ),
        ('[plant]\ntransfer = "1"\n[plant.values]\na = "s"', "[plant.values] a, column 1", "a constant", "constant"),
        ('[plant]\ntransfer = "1"\n[plant.values]\na = "exp(1)"', "[plant.values] a, column 1", "a constant", "number"),
        ('[plant]\ntransfer = "1"\n[plant.case]', "[[plant.case]]", "a table", "two brackets"),
        (J + "[[plant.case]]\nvalue = 1", "[[plant.case]] number 1", 'key "value"', "did you mean values?"),
        (J + "[[plant.case]]\nvalues = {J = 1}", "[[plant.case]] number 1, name", "nothing", 'name = "light'),
        (J + CASE.format("", "J = 1"), "[[plant.case]] number 1, name", "an empty text", "plain line"),
        (J + CASE.format("nominal", "J = 1"), "[[plant.case]] number 1, name", '"nominal", which', "rename"),
        (J + 2 * CASE.format("a", "J = 1"), "[[plant.case]] number 2, name", "a second case", "rename"),
        (J + '[[plant.case]]\nname = "a"', "[[plant.case]] number 1, values", "no values", "add values ="),
        (J + CASE.format("a", "K = 1"), "[[plant.case]] number 1, values, K", "nothing uses", "remove it"),
        (J + CASE.format("a", "JJ = 1"), "[[plant.case]] number 1, values, JJ", "nothing uses", "remove it"),
        (J + "K = 1", "[plant.values] K", "a value that nothing uses", "remove it"),
        (J + 'K = "2*M"\nM = 1', "[plant.values] K", "a value that nothing uses", "remove it"),
        ('[plant]\ntransfer = "exp(-0.05*s)/s"\ndead_time = "1 ms"', "[plant] dead_time", TWICE, "one of the two"),
        ('[plant]\ntransfer = "exp(-0.05*s)/s"\ndead_time = "0 s"', "[plant] dead_time", "stands twice", "their sum"),
        (J + CASE.format("a", '"K-1" = 1'), "[[plant.case]] number 1, values, K-1", '"K-1"', "rename"),
        (J + CASE.format("a", 'J = "2 pi"'), "[[plant.case]] number 1, values, J, column 3", "right after", "2*pi"),
        (J + CASE.format("a", 'J = "2s"'), "[[plant.case]] number 1, values, J", '"2s"', "write 2 for s"),
        (J + CASE.format("a", 'J = "M"'), "[[plant.case]] number 1, values, J, column 1", '"M"', "[plant.values]"),
        (J + CASE.format("a", "J = 0"), '[plant] transfer, case "a", column 2', "division by zero", "values"),
        (
            "".join([J, *(CASE.format(f"c{i}", "J = 1") for i in range(MAX_CASES + 1))]),
            "[plant] case",
            f"{MAX_CASES + 1} cases",
            "corners that matter",
        ),
        ("[loop]", "[loop]", "a loop without a plant", "add [plant]"),
        ('[loop]\njitter = "1 us"', "[loop]", "a loop without a plant", "or remove [loop]"),
        ('[plant]\ntransfer = "1"\n[loop]\ndelay = 1', "[loop]", 'the unknown key "delay"', "compute_delay?"),
        ('[plant]\ntransfer = "1"\n[loop]\ncompute_delay = 1', "[loop] compute_delay", "the number 1", "in quotes"),
        ('[plant]\ntransfer = "1"\n[loop]\ncompute_delay = "1 V"', "[loop] compute_delay", 'the unit "V"', "a time"),
        ('[plant]\ntransfer = "1"\n[loop]\ncompute_delay = "1 sampels"', "[loop] compute_delay", "sampels", "samples?"),
        ('[plant]\ntransfer = "1"\n[loop]\ncompute_delay = "-1 sample"', "[loop] compute_delay", '"-1 s', "sign"),
        ('[plant]\ntransfer = "1"\n[loop]\njitter = "1"', "[loop] jitter", "without a unit", "add the unit"),
        ('[plant]\ntransfer = "1"\n[loop]\njitter = "1 sample"', "[loop] jitter", "number of samples", "a time"),
    ],
)
def test_each_mistake_names_file_table_and_key(text: str, where: str, found: str, advice: str) -> None:
    error = refusal(text)
    assert error.where.startswith(f"servo.toml, {where}")
    assert found in error.found
    assert advice in error.advice
    assert error.allowed
    assert error.exit_status == 2


def test_a_compute_delay_of_the_wrong_kind_is_told_both_kinds() -> None:
    error = refusal('[plant]\ntransfer = "1"\n[loop]\ncompute_delay = "1 V"')
    assert error.allowed == 'a number of samples, or a time: "1 sample", "100 us"'


@pytest.mark.parametrize(
    ("text", "where", "found", "advice"),
    [
        ('transfer = "s + 1"', "[plant] transfer", "improper, degree 1 over degree 0", "every real plant has"),
        ('transfer = "s^3/(s+1)*exp(-s)"', "[plant] transfer", "improper, degree 3 over degree 1", "actuator"),
        ('transfer = "1"\nsensor = "s"', "[plant] sensor", "improper, degree 1 over degree 0", "0.0002*s + 1"),
        ('transfer = "s/(s-1) - 1/(s-1)"', "[plant] transfer", "hides a growing mode at s = 1", "apart"),
        ('transfer = "1"\nsensor = "(s-2)/((s-2)*(s+1))"', "[plant] sensor", "hides a growing mode at s = 2", "apart"),
        (
            'transfer = "(a*s^2 + 1)/(s + 1)"\n[plant.values]\na = 0\n' + CASE.format("soft", "a = 1"),
            '[plant] transfer, case "soft"',
            "improper, degree 2 over degree 1",
            "every real plant has",
        ),
    ],
)
def test_what_no_plant_can_be_is_refused(text: str, where: str, found: str, advice: str) -> None:
    error = refusal(f"[plant]\n{text}")
    assert isinstance(error, Refused)
    assert error.where == f"servo.toml, {where}"
    assert found in error.found
    assert advice in error.advice


def test_a_value_of_the_plant_that_only_a_case_uses_is_in_use() -> None:
    text = '[plant]\ntransfer = "1/(J*s)"\n[plant.values]\nJ = 1\nm = 4\n[[plant.case]]\nname = "b"\n'
    assert [case.values[0] for case in plant_of(text + 'values = { J = "2*m" }').cases] == [("J", F(1)), ("J", F(8))]


def test_a_value_that_both_tables_have_must_be_used_in_both() -> None:
    error = refusal('[plant]\ntransfer = "1/s"\n[plant.values]\nkp = 2')
    assert (error.where, error.found) == ("servo.toml, [plant.values] kp", "a value that nothing uses")
