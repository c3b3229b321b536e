"""A design is the same whichever way a call is given it."""

from __future__ import annotations

import tomllib
from collections.abc import Callable
from fractions import Fraction
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize import RealizeError, TransferFunction, assess, compare, emit
from realize.api.designs import design_of
from realize.design import load_design

FIXTURES = Path(__file__).parents[2] / "fixtures"
DESIGNS = sorted(path for path in FIXTURES.glob("*.toml"))


@pytest.mark.parametrize("path", DESIGNS, ids=lambda path: path.stem)
def test_a_file_is_read_alike_by_name_by_path_and_from_the_tables_of_tomllib(
    path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    # Where paths in a mapping start from.
    monkeypatch.chdir(FIXTURES)
    wanted = load_design(str(path))
    assert design_of(str(path)) == wanted
    assert design_of(path) == wanted
    assert design_of(tomllib.loads(path.read_text(encoding="utf-8"))) == wanted


@given(st.floats(1e-3, 1e3), st.floats(1e-3, 1e3))
def test_floats_of_a_mapping_count_as_their_decimals_in_a_file(kp: float, ki: float) -> None:
    tables = {
        "design": {"transfer": "kp + ki/s", "values": {"kp": kp, "ki": np.float64(ki)}},
        "signals": {"input": {"range": np.array([-kp, kp])}},
    }
    text = f'[design]\ntransfer = "kp + ki/s"\n[design.values]\nkp = {kp!r}\nki = {ki!r}\n'
    text += f"[signals.input]\nrange = [{-kp!r}, {kp!r}]\n"
    assert design_of(tables) == design_of(tomllib.loads(text, parse_float=str))


def test_a_transfer_function_stands_for_itself_and_in_tables() -> None:
    lag = TransferFunction([2], [0.05, 1])
    alone, in_tables = design_of(lag, rate="2 kHz"), design_of({"design": {"transfer": lag}}, period_s=0.0005)
    assert alone == in_tables == design_of("40/(s + 20)", rate_hz=2000)
    assert alone == design_of((np.array([2.0]), [0.05, 1]), rate_hz=2000)
    plant = {"transfer": TransferFunction([1], [1, 0])}
    assert design_of({"design": {"transfer": lag}, "plant": plant}).plant is not None


def test_what_a_call_says_stands_in_place_of_the_design() -> None:
    found = design_of(
        FIXTURES / "roller_gap.toml",
        rate_hz=Fraction(4000),
        name="gap",
        method="bilinear",
        values={"kp": 5, "kd": np.float32(0.1)},
    )
    assert (found.period_s, found.name, found.method) == (Fraction(1, 4000), "gap", "bilinear")
    assert dict(found.values)["kp"] == 5
    assert dict(found.values)["kd"] == Fraction(1, 10)


@pytest.mark.parametrize(
    ("design", "changes", "where", "found"),
    [
        (5, {}, "design", "an object of type int"),
        ("-", {}, "design", "'-'"),
        (Path("gap.txt"), {}, "design", "the path gap.txt"),
        (Path("missing.toml"), {}, "missing.toml", "no such file"),
        ("1/(s + q)", {}, "expression, column 8", 'the unknown name "q"'),
        ("1/s", {"values": {"q": 2}}, "values q", "a value that nothing uses"),
        ("1/s", {"method": "bilinera"}, "method", '"bilinera"'),
        ("1/s", {"values": ["kp"]}, "values", "['kp']"),
        ("1/s", {"name": 5}, "name", "5"),
        ("1/s", {"name": "2fast"}, "name", 'the name "2fast"'),
        ("1/s", {"rate": "1 Hz", "period": "1 s"}, "rate", "rate= and period= at once"),
        ("1/s", {"period_s": 1, "period": "1 s"}, "period", "period and period_s at once"),
        (
            {"design": {"transfer": "1/s"}, "sampling": {"rate": 2000.0}},
            {},
            "design, [sampling] rate",
            "the number 2000.0",
        ),
        ({"design": {"transfer": "1/s"}, "sampled": {}}, {}, "design", 'the unknown table "sampled"'),
        (
            {"design": {"numerator": [1], "denominator": [1, {}]}},
            {},
            "design, [design] denominator, entry 2",
            "a table",
        ),
        ({"design": {"numerator": {1}}}, {}, "[design] numerator", "an object of type set"),
    ],
)
def test_what_cannot_be_read_is_refused_by_its_place(
    design: Any, changes: dict[str, Any], where: str, found: str
) -> None:
    with pytest.raises(RealizeError) as refusal:
        design_of(design, **changes)
    assert (refusal.value.where, refusal.value.found) == (where, found)
    assert "--" not in str(refusal.value)


@pytest.mark.parametrize(
    ("call", "keyword", "advice"),
    [
        (assess, "rat", "did you mean rate?"),
        (compare, "mehtod", "did you mean method?"),
        (emit, "ouut", "did you mean out?"),
        (compare, "xyzzy", "help(realize.compare)"),
    ],
)
def test_an_unknown_keyword_is_python_s_error_and_names_the_function(
    call: Callable[..., object], keyword: str, advice: str
) -> None:
    with pytest.raises(TypeError) as caught:
        call("1/s", **{keyword: "1 Hz"})
    first, allowed, last = str(caught.value).splitlines()
    assert first == f'{call.__name__}: the unknown keyword "{keyword}"'
    assert allowed.startswith("  allowed: rate, period, ")
    assert last == f"  try: {advice}"


def test_a_design_without_a_rate_is_told_in_keywords() -> None:
    with pytest.raises(RealizeError) as refusal:
        compare("1/s")
    assert refusal.value.allowed == "rate or period under [sampling], or rate= or period="
    assert refusal.value.advice == 'add rate = "2 kHz" under [sampling], or rate="2 kHz" to the call'
