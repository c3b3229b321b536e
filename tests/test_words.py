"""`realize words`: what it says is what `compare` and `emit` would find."""

import json
from dataclasses import replace
from fractions import Fraction
from pathlib import Path

import pytest

from realize.arithmetic.integer import WIDTHS
from realize.cli import main
from realize.design import Design, design_from_text, load_design
from realize.design.model import INTEGER_STRUCTURES, Overrides
from realize.errors import RealizeError
from realize.report.word_lengths import words_document, words_text
from realize.words import Words, words
from realize.workflow import choose
from tests.schemas.validation import validated

FIXTURES = Path(__file__).parent.parent / "fixtures"
ORDER_FOUR = """
[design]
name = "four"
transfer = "7500000/((s^2 + 20*s + 2500)*(s + 30)*(s + 100))"
[sampling]
rate = "2 kHz"
[method]
name = "bilinear"
[signals.input]
range = [-2, 2]
per_count = "0.001"
[signals.output]
range = [-2, 2]
per_count = "0.001"
"""


@pytest.fixture(scope="module")
def notch() -> Words:
    return words(load_design(str(FIXTURES / "load_cell_notch.toml"), Overrides()))


@pytest.fixture(scope="module")
def four() -> Words:
    return words(design_from_text(ORDER_FOUR, "four.toml"))


def as_target(found: Words, arithmetic: str, structure: str = "auto") -> Design:
    design = found.comparison.design
    return replace(
        design, method=found.method, target=design.target._replace(arithmetic=arithmetic, structure=structure)
    )


def test_every_verdict_is_that_of_a_design_with_that_target(notch: Words) -> None:
    for row in notch.rows:
        chosen = choose(as_target(notch, f"int{row.widths.bits}", row.structure)).chosen
        assert chosen is not None
        assert (chosen.refused is None, chosen.acceptable) == (row.refused is None, row.acceptable)


@pytest.mark.parametrize("which", ["notch", "four"])
def test_what_is_recommended_is_what_a_design_with_that_arithmetic_gets(
    which: str, request: pytest.FixtureRequest
) -> None:
    found: Words = request.getfixturevalue(which)
    assert found.recommended is not None
    chosen = choose(as_target(found, f"int{found.recommended.widths.bits}")).chosen
    assert chosen is not None
    assert chosen.acceptable
    assert chosen.realization is not None
    assert chosen.realization.structure == found.recommended.structure


def test_the_notch_needs_more_than_16_bits_in_direct_form_and_not_in_delta(notch: Words) -> None:
    # 1 + a1 + a2 = (w T)^2 = 2.5e-4 is 4 units of 2**-14, and the error of a 16-bit direct form is some 1/(w T)^2.
    needs = {each.structure: each for each in notch.structures}
    assert (needs["direct"].smallest_bits or 0) > 16
    assert (needs["delta"].smallest_bits or 99) <= 16


def test_a_shortest_word_suffices_and_coefficients_alone_need_no_more(four: Words) -> None:
    for each in four.structures:
        assert each.coefficient_bits is not None
        assert each.smallest_bits is not None
        assert each.coefficient_bits <= each.smallest_bits
        able = [row.widths.bits for row in four.rows if row.structure == each.structure and row.acceptable]
        assert each.smallest_bits <= min(able)


def test_every_structure_stands_there_once_for_each_target(four: Words) -> None:
    names = [name for name in INTEGER_STRUCTURES if name != "direct"]
    assert [(row.structure, row.widths.bits) for row in four.rows] == [
        (name, bits) for bits, _ in WIDTHS.values() for name in names
    ]


def test_floats_stand_beside_the_integers(notch: Words) -> None:
    assert [each.arithmetic for each in notch.floats] == ["float32", "float64"]
    assert all(each.smallest_answered == 1 and not each.out for each in notch.floats)


@pytest.mark.parametrize("which", ["notch", "four"])
def test_the_screen_fits_and_names_every_structure(which: str, request: pytest.FixtureRequest) -> None:
    found: Words = request.getfixturevalue(which)
    text = words_text(found)
    assert max(map(len, text.splitlines())) <= 100
    assert text.startswith("yes: ")
    assert all(f" {each.structure} " in text for each in found.structures)


def test_the_document_holds_what_the_screen_shows(four: Words) -> None:
    document = json.loads(json.dumps(validated(words_document(four)), allow_nan=False))
    assert (document["schema"], document["command"]) == ("realize/1", "words")
    assert len(document["rows"]) == len(four.rows)
    for row, entry in zip(four.rows, document["rows"], strict=True):
        assert row.realization is not None
        assert Fraction(entry["proven_error_counts"]) == Fraction(float(row.realization.proof.output_error))
        assert {"positive", "negative"} == set(entry["smallest_answered_counts"])
    assert document["recommended"]["structure"] in document["because"]


def test_a_signal_without_counts_is_answered_with_the_lines_to_add() -> None:
    text = ORDER_FOUR.replace('per_count = "0.001"', "", 1)
    with pytest.raises(RealizeError) as caught:
        words(design_from_text(text, "four.toml"))
    assert "[signals.input]" in caught.value.advice
    assert "per_count" in caught.value.advice


def test_the_exit_status_says_whether_there_is_a_structure(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    able = tmp_path / "able.toml"
    able.write_text(ORDER_FOUR.replace("7500000/((s^2 + 20*s + 2500)*(s + 30)*(s + 100))", "30/(s + 30)"))
    main(["words", str(able)])
    assert "yes: " in capsys.readouterr().out
    hopeless = tmp_path / "hopeless.toml"
    hopeless.write_text(able.read_text() + '[tolerance]\nround_off = "0.0001 %"\n')
    with pytest.raises(SystemExit) as stopped:
        main(["words", str(hopeless)])
    assert stopped.value.code == 1
    assert "no: four: no structure is within every tolerance" in capsys.readouterr().out.replace("\n", " ")
