"""The argument of a command: files, standard input, expressions, and every way to get it wrong."""

from __future__ import annotations

import io
import os
import subprocess
import sys
import time
from fractions import Fraction
from pathlib import Path
from types import SimpleNamespace

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from realize.design import (
    CHECK_UNITS,
    LOOP_METHODS,
    METHODS,
    TOLERANCE_KEYS,
    Design,
    Overrides,
    design_from_text,
    load_design,
)
from realize.design.gate import WrittenNumber
from realize.design.load import MAX_FILE_BYTES, MAX_LINE, design_from_document
from realize.errors import RealizeError, Refused

F = Fraction
DESIGN = '[design]\ntransfer = "kp + 2/s"\n[design.values]\nkp = 3\n[sampling]\nrate = "1 kHz"\n'

#: The reader of TOML needs a second for the worst file that is let in, on a slow machine a few.
NOT_A_HANG_S = 20.0


def refusal(argument: str) -> RealizeError:
    with pytest.raises(RealizeError) as caught:
        load_design(argument)
    return caught.value


# -- files ----------------------------------------------------------------------------------------------------


def test_a_file_is_read(tmp_path: Path) -> None:
    path = tmp_path / "servo.toml"
    path.write_text(DESIGN)
    design = load_design(str(path), Overrides(values={"kp": "5"}))
    assert design.source == str(path)
    assert design.values == (("kp", F(5)),)
    assert design.period_s == F(1, 1000)


def test_a_byte_order_mark_line_ends_of_another_system_and_a_capital_ending_do_no_harm(tmp_path: Path) -> None:
    path = tmp_path / "servo.TOML"
    path.write_bytes(b"\xef\xbb\xbf" + DESIGN.replace("\n", "\r\n").encode())
    assert load_design(str(path)) == design_from_text(DESIGN, "servo.toml")


def test_a_missing_file_is_named(tmp_path: Path) -> None:
    error = refusal(str(tmp_path / "servo.toml"))
    assert error.where == str(tmp_path / "servo.toml")
    assert error.found == "no such file"
    assert error.exit_status == 2


def test_a_directory_is_no_design(tmp_path: Path) -> None:
    (tmp_path / "servo.toml").mkdir()
    assert refusal(str(tmp_path / "servo.toml")).found == "a directory"


def test_a_file_that_may_not_be_read_is_named(monkeypatch: pytest.MonkeyPatch) -> None:
    def locked(*_: object) -> None:
        raise PermissionError

    monkeypatch.setattr("builtins.open", locked)
    assert refusal("servo.toml").found == "a file that may not be read"


@pytest.mark.parametrize(
    ("path", "found"),
    [
        ("a\0b.toml", "a file that cannot be read: its name is not possible"),
        ("x" * 300 + ".toml", "a file that cannot be read: File name too long"),
    ],
)
def test_an_impossible_name_is_refused(path: str, found: str) -> None:
    error = refusal(path)
    assert error.found == found
    assert str(error).replace("\n", "").isprintable()


def test_a_file_that_is_not_utf_8_names_the_line(tmp_path: Path) -> None:
    path = tmp_path / "servo.toml"
    path.write_bytes(DESIGN.encode() + b"# K\xfchler\n")
    error = refusal(str(path))
    assert error.where == f"{path}, line 7"
    assert error.found == "a byte that is not UTF-8"


def test_a_file_is_bounded_even_where_it_never_ends(tmp_path: Path) -> None:
    path = tmp_path / "servo.toml"
    path.write_bytes(b"#" * 80 + b"\n" * (MAX_FILE_BYTES - 79))
    assert refusal(str(path)).found == "a file that is too large"
    endless = tmp_path / "endless.toml"
    os.symlink("/dev/zero", endless)
    assert refusal(str(endless)).found == "a file that is too large"


def test_standard_input_is_read_like_a_file(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sys, "stdin", SimpleNamespace(buffer=io.BytesIO(DESIGN.encode())))
    design = load_design("-", Overrides(name="gap"))
    assert (design.source, design.name) == ("standard input", "gap")


@pytest.mark.parametrize(
    ("text", "where", "found"),
    [
        ("transfer = ", "s.toml", "Invalid value (at end of document)"),
        ("[design\n", "s.toml, line 1, column 8", "Expected ']' at the end of a table declaration"),
        ('[design]\ntransfer = "1" + 2\n', "s.toml, line 2, column 16", "Expected newline or end of document"),
        ("[design]\nvalues = {a = 1,\n", "s.toml, line 2, column 17", "Invalid initial character"),
        ('a = "\x00"', "s.toml, line 1, column 6", "Illegal character"),
        ("a = " + "9" * 4400, "s.toml", "an integer of thousands of digits"),
        ("a = " + "[\n" * 3000, "s.toml", "lists or tables nested too deeply"),
        ("# " + "x" * MAX_LINE, "s.toml, line 1", f"a line of {MAX_LINE + 2} characters"),
    ],
)  # fmt: skip
def test_a_mistake_in_the_toml_names_line_and_column(text: str, where: str, found: str) -> None:
    with pytest.raises(RealizeError) as caught:
        design_from_text(text, "s.toml")
    assert caught.value.where == where
    assert found in caught.value.found
    assert all(line.isprintable() for line in str(caught.value).split("\n"))


def test_a_mistake_in_the_toml_is_quoted_with_a_caret() -> None:
    with pytest.raises(RealizeError) as caught:
        design_from_text('[design]\ntransfer = "1" + 2\n', "s.toml")
    assert caught.value.excerpt == 'transfer = "1" + 2\n               ^'


def test_a_key_of_thousands_of_dots_is_answered_in_time() -> None:
    dots = ".a" * ((MAX_LINE - 5) // 2)
    text = "".join(f"a{i:02}{dots}=1\n" for i in range(MAX_FILE_BYTES // (MAX_LINE + 1)))
    started = time.perf_counter()
    with pytest.raises(RealizeError, match="the unknown table"):
        design_from_text(text, "s.toml")
    assert time.perf_counter() - started < NOT_A_HANG_S


# -- expressions ----------------------------------------------------------------------------------------------


def test_an_expression_is_a_design() -> None:
    design = load_design("kp + ki/s", Overrides("2 kHz", None, "gap", "bilinear", {"kp": "4.2", "ki": "2*kp"}))
    assert design.transfer.numerator == (21, 42)
    assert design.values == (("kp", F("4.2")), ("ki", F("8.4")))
    assert (design.period_s, design.name, design.method) == (F(1, 2000), "gap", "bilinear")
    assert (design.source, design.transfer_text) == ("expression", "kp + ki/s")


@pytest.mark.parametrize(
    ("argument", "where", "found"),
    [
        ("", "expression", "no expression"),
        ("2s", "expression, column 2", '"s" right after "2"'),
        ("kp/ki", "expression, column 1", 'the unknown name "kp"'),
        ("0", "expression", "a transfer function that is zero"),
        ("1/(s-s)", "expression, column 2", "a division by zero"),
    ],
)
def test_a_mistake_in_an_expression_names_its_column(argument: str, where: str, found: str) -> None:
    error = refusal(argument)
    assert error.where == where
    assert found in error.found


@pytest.mark.parametrize(
    "argument",
    ["servo.tml", "servo.json", "fixtures/servo.yaml", "./servo", "../servo", "/home/me/servo", "~/servo",
     "C:\\designs\\servo", "servo.toml~", "my servo.txt"],
)  # fmt: skip
def test_what_looks_like_a_path_gets_help_with_the_name(argument: str) -> None:
    error = refusal(argument)
    assert f'"{argument}", which is no expression in s' in error.found
    assert "no name of a design file" in error.found
    assert error.advice.startswith("for a design file, give a name that ends in .toml")
    assert "ends in .toml" in error.allowed


def test_a_forgotten_ending_is_noticed_where_the_file_exists(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    (tmp_path / "servo.toml").write_text(DESIGN)
    assert refusal("servo").advice.startswith("for the design file, write servo.toml; for an expression:")


@given(st.text(max_size=60))
@example("\x00")
@example("\ud800")
@example("x\x00/y")
def test_any_argument_that_names_no_file_is_read_or_refused(argument: str) -> None:
    outcome: object
    try:
        outcome = load_design(argument) if argument != "-" else None
    except RealizeError as error:
        outcome = error
        str(error).encode()
    assert outcome is None or isinstance(outcome, Design | RealizeError)


# -- anything at all ------------------------------------------------------------------------------------------

KEYS = (
    *("design", "sampling", "rolloff", "method", "plant", "loop", "signals", "target", "tolerance", "accept"),
    *("name", "transfer", "numerator", "denominator", "zeros", "poles", "gain", "about", "values", "rate"),
    *("period", "band", "placement", "order", "damping", "pole", "phase_budget", "exact_at", "input", "output"),
    *("range", "unit", "per_count", "offset", "type", "arithmetic", "anti_windup", "tracking_time", "limit"),
    *("check", "because", "by", "kp", "case", "sensor", "dead_time", "response", "compute_delay", "jitter"),
    *("compensate_delay", "exp", *TOLERANCE_KEYS),
)
words = st.sampled_from(
    (
        *("1 kHz", "1/3 ms", "20 Hz", "300 rad/s", "1 %", "6 deg", "auto", "kp + 2/s", "3*s", "1/(s+1)", "kp", "1/3"),
        *("float32", "int16", "back-calculation", "derivative", "2s", "", "\n", "1e999", "exp(-kp*s)/(s+1)"),
        *("1 sample", "0 s", *METHODS, *LOOP_METHODS, *CHECK_UNITS),
    )
)
scalars = st.one_of(
    words,
    st.text(max_size=8),
    st.integers(),
    st.booleans(),
    st.dates(),
    st.floats().map(lambda x: WrittenNumber(repr(x))),
)
values = st.recursive(
    scalars,
    lambda inner: st.one_of(
        st.lists(inner, max_size=4), st.dictionaries(st.one_of(st.sampled_from(KEYS), st.text()), inner, max_size=5)
    ),
    max_leaves=15,
)
documents = st.one_of(
    st.dictionaries(st.sampled_from(KEYS), values),
    st.fixed_dictionaries(
        {"design": st.fixed_dictionaries({"transfer": words}, optional={"values": values, "name": values})},
        optional={
            key: st.one_of(values, st.dictionaries(st.sampled_from(KEYS), values, max_size=4))
            for key in ("sampling", "rolloff", "method", "signals", "target", "tolerance", "accept", "plant", "loop")
        },
    ),
)


@given(documents)
def test_any_document_is_read_or_refused_clearly(document: dict[str, object]) -> None:
    outcome: object
    try:
        outcome = design_from_document(document, "s.toml")
    except RealizeError as error:
        outcome = error
        assert error.where.startswith("s.toml")
        assert error.found
    assert isinstance(outcome, Design | RealizeError)


lines = st.lists(
    st.one_of(
        st.sampled_from(["[design]", "[design.values]", "[sampling]", "[[accept]]", "[signals.input]", "[", "]", "#"]),
        st.builds("{} = {}".format, st.sampled_from(KEYS), st.one_of(words.map(repr), st.text(max_size=6))),
        st.text(max_size=10),
    ),
    max_size=10,
).map("\n".join)


@given(lines)
def test_any_text_is_read_or_refused_clearly(text: str) -> None:
    outcome: object
    try:
        outcome = design_from_text(text, "s.toml")
    except RealizeError as error:
        outcome = error
    assert isinstance(outcome, Design | RealizeError)


def test_reading_an_expression_loads_neither_toml_nor_help_with_mistakes() -> None:
    script = (
        "import sys; from realize.design import load_design; load_design('1/(s+1)')\n"
        "print([m for m in ('tomllib', 'difflib', 'logging', 'asyncio', 'scipy') if m in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=True)
    assert done.stdout == "[]\n"


def test_a_hidden_growing_mode_in_an_expression_is_refused_even_where_it_looks_like_a_path() -> None:
    with pytest.raises(Refused) as caught:
        load_design("s/(s-1) - 1/(s-1)")
    assert (caught.value.where, caught.value.exit_status) == ("expression", 1)


def test_an_integer_longer_than_any_number_of_a_design_is_refused() -> None:
    with pytest.raises(RealizeError, match="a very large number"):
        design_from_document({"design": {"numerator": [1 << 70000], "denominator": [1]}}, "s.toml")


@pytest.mark.parametrize(
    ("text", "line", "found", "advice", "excerpt"),
    [
        ("[method]\na = 1\n[method] # again\nb = 2\n", 3, "the table [method]", "join the two", "[method] # again"),
        ("[a]\n[a.b]\nc = 1\n[a.b]\n", 4, "the table [a.b]", "join the two", "[a.b]"),
        ("[[accept]]\na = 1\n[accept]\n", 3, "the table [accept]", "join the two", "[accept]"),
        ("[accept]\na = 1\n[[accept]]\n", 3, "the table [[accept]]", "join the two", "[[accept]]"),
        ("[a]\nrate = 1\nb = 2\n  rate = 3\n", 4, "the key rate", "keep the one", "  rate = 3"),
        ("[a]\nrate = 1\nrate = 2", 3, "the key rate", "keep the one", "rate = 2"),
        ("[a]\nrate = 1\nrate.low = 2\n", 3, "the key rate.low", "keep the one", "rate.low = 2"),
        ("[a]\nb = { J = 1, J = 2 }\n", 2, "the key J", "keep the one", "b = { J = 1, J = 2 }"),
        ("[a]\nb = 1\nb = [\n1,\n2]\n", 5, "a key", "keep the one", "2]"),
    ],
)
def test_what_stands_twice_is_named_with_its_line(text: str, line: int, found: str, advice: str, excerpt: str) -> None:
    with pytest.raises(RealizeError) as caught:
        design_from_text(text, "s.toml")
    assert caught.value.where == f"s.toml, line {line}"
    assert caught.value.found == f"{found} stands twice"
    assert caught.value.advice.startswith(advice)
    assert caught.value.excerpt == excerpt
