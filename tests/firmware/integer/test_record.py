"""The record in integers: every stored number, its binary point, and what is proven."""

from __future__ import annotations

import json
import re
from fractions import Fraction
from hashlib import sha256
from random import Random
from typing import Any

import pytest

from realize.arithmetic.integer import STRUCTURES, Widths, stored_integer_pulse
from realize.arithmetic.integer.quiet import FEW_SAMPLES, FEW_STATES, quiet
from realize.firmware.integer import IntegerEmission, render_integer_firmware
from realize.firmware.integer.c_header import FORMS
from realize.firmware.integer.record import ceiling_text
from tests.firmware.bench import rendered
from tests.firmware.integer.designs import WIDTHS, emission, grid

Entry = dict[str, Any]

#: Samples after which every pole of the designs has decayed to nothing of its first size, 1e-9 and less.
SETTLING = 3000


def document(one: IntegerEmission) -> Entry:
    return dict(json.loads(rendered(one)[f"{one.name}.record.json"]))


#: Designs of 16 and 32 bits with the widest sums, by what they are.
DESIGNS = {
    f"{one.name} {one.realization.structure} {one.realization.widths.bits}": one
    for one in grid()
    if one.realization.widths in WIDTHS[::2]
}


def chosen(transfer: str, structure: str, widths: Widths) -> IntegerEmission:
    return emission("x", transfer, structure, widths, options=("hold-integral", "table", "add"))


def value(entry: Entry) -> Fraction:
    return Fraction(entry["value"])


def numbers(node: Any) -> list[Entry]:
    """Every entry with a stored number, anywhere."""
    if isinstance(node, list):
        return [entry for each in node for entry in numbers(each)]
    if not isinstance(node, dict):
        return []
    if "stored" in node:
        return [node]
    return [entry for each in node.values() for entry in numbers(each)]


@pytest.mark.parametrize("name", DESIGNS)
def test_value_is_the_stored_integer_at_its_binary_point(name: str) -> None:
    record = document(DESIGNS[name])
    entries = [entry for key in ("integral", "sections", "direct_gain") for entry in numbers(record[key])]
    assert entries
    for entry in entries:
        if entry["stored"] is None:
            assert entry["fraction_bits"] is None
        else:
            assert value(entry) == entry["stored"] / Fraction(2) ** entry["fraction_bits"]


@pytest.mark.parametrize("name", DESIGNS)
def test_sections_and_integral_are_the_stored_pulse_transfer_function(name: str) -> None:
    """At a point of the z-plane, with the sections taken for subtraction although the C text adds."""
    one = DESIGNS[name]
    record, z = document(one), Fraction(7, 3)
    pulse = stored_integer_pulse(one.realization)
    parts = [
        sum(value(b) / z**i for i, b in enumerate(section["b"]))
        / (1 + sum(value(a) / z**i for i, a in enumerate(section["a"], 1)))
        for section in record["sections"]
    ]
    if one.realization.structure == "parallel":
        rest = sum(parts, value(record["direct_gain"]) if record["direct_gain"] else Fraction(0))
    else:
        rest = Fraction(1) if parts else Fraction(0)
        for part in parts:
            rest *= part
    total = rest + sum(value(gain) / (z - 1) ** i for i, gain in enumerate(record["integral"], 1))
    expected = evaluated(pulse.numerator, z) / evaluated(pulse.denominator, z)
    assert total == expected * one.realization.program.interface.scale


def evaluated(p: tuple[Fraction, ...], z: Fraction) -> Fraction:
    total = Fraction(0)
    for c in p:
        total = total * z + c
    return total


def test_delta_record_gives_the_stored_numbers_under_their_names() -> None:
    section = document(chosen("notch", "delta", WIDTHS[0]))["sections"][0]
    assert set(section["coefficients"]) == {"d", "c1", "c2", "a1", "a2"}
    stored = {name: value(entry) for name, entry in section["coefficients"].items()}
    # z^2 + a1 z + a2 = (z - 1)^2 + A1 (z - 1) + A2
    assert [value(a) for a in section["a"]] == [stored["a1"] - 2, 1 - stored["a1"] + stored["a2"]]
    assert {entry["stored"] for entry in (*section["a"], *section["b"])} == {None}


def test_normal_record_gives_the_stored_numbers_under_their_names() -> None:
    section = document(chosen("notch", "normal", WIDTHS[2]))["sections"][0]
    stored = {name: value(entry) for name, entry in section["coefficients"].items()}
    assert set(stored) == {"s", "w", "c1", "c2", "d"}
    assert [value(a) for a in section["a"]] == [-2 * stored["s"], stored["s"] ** 2 + stored["w"] ** 2]


def test_signals_are_the_words_and_sums_with_room_to_spare() -> None:
    signals = document(chosen("pid", "error-feedback", WIDTHS[0]))["signals"]
    words = {entry["name"]: entry for entry in signals["words"]}
    sums = {entry["name"]: entry for entry in signals["accumulators"]}
    assert {"input", "integral1", "section1_output"} <= set(words)
    assert {"unclamped", "section1_output"} <= set(sums)
    for entry in (*words.values(), *sums.values()):
        largest = max(entry["proven_most"], -entry["proven_least"] - 1)
        assert entry["spare_bits"] == entry["bits"] - 1 - largest.bit_length() >= 0


def test_files_are_those_of_the_emission_and_the_tool_is_named() -> None:
    one = chosen("pi", "cascade", WIDTHS[0])
    files = render_integer_firmware(one)
    record = document(one)
    own = {name: sha256(text.encode()).hexdigest() for name, text in files.items() if not name.endswith(".json")}
    assert record["files"] == own
    assert [record[key] for key in ("schema", "structure", "arithmetic")] == ["realize/1", "cascade", "int16"]


@pytest.mark.parametrize(
    ("bound", "text"),
    [("1/2", "0.5"), ("1/3", "0.33334"), ("123456", "123460"), ("2", "2"), ("100001/100000", "1.0001")],
)
def test_a_bound_is_rounded_so_that_it_stays_one(bound: str, text: str) -> None:
    assert ceiling_text(Fraction(bound)) == text


def test_every_structure_has_words_in_the_header() -> None:
    assert set(FORMS) == set(STRUCTURES)


@pytest.mark.parametrize("name", DESIGNS)
def test_the_header_says_how_sections_are_arranged_where_there_are_several(name: str) -> None:
    one = DESIGNS[name]
    count = len(one.realization.sections)
    text = re.sub(r"\s+\*\s+", " ", rendered(one)[f"{one.name}.h"])
    found = re.search(rf"{count or 'no'} sections?( in [^;]*)?;", text)
    assert found
    arranged = [words in (found[1] or "") for words in ("one after the other", "beside each other")]
    assert sum(arranged) == (count > 1)


@pytest.mark.parametrize("name", DESIGNS)
def test_deadband_and_cycles_are_those_of_the_realization(name: str) -> None:
    one = DESIGNS[name]
    found, expected = document(one)["quiet"], quiet(one.realization, FEW_SAMPLES, FEW_STATES)
    for side, answer in (("positive", expected.positive), ("negative", expected.negative)):
        assert found["smallest_answered_counts"][side] == answer._asdict()
    if expected.dies_out:
        assert found["settles_within_counts"] == 0
    elif expected.integration:
        assert found["settles_within_counts"] >= one.realization.proof.output_error
    else:
        assert found["settles_within_counts"] == expected.largest_output
    assert [each["section"] for each in found["limit_cycles"]] == [each.section for each in expected.sections]
    for each, cycles in zip(found["limit_cycles"], (each.cycles for each in expected.sections), strict=True):
        assert each["proven_most_units"] >= cycles.bound
        assert each["searched"] == (each["amplitude_units"] is not None)


@pytest.mark.parametrize("name", DESIGNS)
def test_without_input_the_model_settles_as_the_record_says(name: str) -> None:
    """From what noise at full scale left behind; with an integral, of where its state stands."""
    one = DESIGNS[name]
    most, model = document(one)["quiet"]["settles_within_counts"], one.recursion()
    port, integral = one.realization.program.interface, one.realization.program.integral
    draw = Random(7)
    model.run([draw.randint(port.input.low, port.input.high) + port.input.offset for _ in range(200)])
    model.run([port.input.offset] * SETTLING)
    if integral and len(integral.stored) > 1:
        return  # the second state moves the first on for ever
    held = model.state.integral1 / Fraction(2) ** integral.word.fraction_bits if integral else 0
    low, high = port.output.low - Fraction(1, 2), port.output.high + Fraction(1, 2)
    aimed = min(max(held, low), high)
    rounding = Fraction(1, 2) if integral and most == 0 else 0
    for output in model.run([port.input.offset] * 200):
        assert abs(output - port.output.offset - aimed) <= most + rounding
