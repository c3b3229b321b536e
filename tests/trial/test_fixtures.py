"""The designs of fixtures/, on every processor."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import pytest

from realize.design import load_design
from realize.firmware import write_all
from realize.firmware.job import emit
from realize.trial.run import trial
from realize.trial.targets import NAMES
from tests.trial.conftest import FIXTURES

#: Refused when emitted, as their comments say.
NOT_EMITTED = {"roller_gap_improper", "sieve_resonance", "levitation"}
DESIGNS = sorted(path.stem for path in FIXTURES.glob("*.toml") if path.stem not in NOT_EMITTED)

Record = Callable[[str], Path]


@pytest.mark.parametrize("name", DESIGNS)
def test_the_emitted_code_answers_its_vectors_bit_for_bit_on_every_processor(name: str, emitted: Record) -> None:
    found = trial(str(emitted(name)), "all")
    assert [attempt.difference for attempt in found.attempts] == [None] * len(found.attempts)
    assert [attempt.target for attempt in found.attempts] == ["host"] * 4 + list(NAMES[1:])
    assert found.emitted.changed == ()
    for attempt in found.attempts[4:]:
        assert len(attempt.run.instructions) == len(found.emitted.vectors.inputs)


@pytest.mark.parametrize("arithmetic", ["float32", "float64"])
def test_a_design_with_a_table_of_coefficients_is_given_its_own(arithmetic: str, tmp_path: Path) -> None:
    text = (FIXTURES / "roller_gap.toml").read_text(encoding="utf-8")
    target = f'[target]\ncoefficients = "table"\narithmetic = "{arithmetic}"\n'
    (tmp_path / "design.toml").write_text(text.replace('[target]\narithmetic = "float32"\n', target))
    write_all(tmp_path, emit(load_design(str(tmp_path / "design.toml"))).files)
    found = trial(str(tmp_path / "roller_gap.record.json"), "all")
    assert found.equal
    assert found.emitted.code.table
    # The table holds more than one number of this format.
    assert all(attempt.run.sizes.constants > 8 for attempt in found.attempts if attempt.run.sizes)


def test_instruction_counts_are_the_same_on_two_runs(emitted: Record) -> None:
    first, second = (trial(str(emitted("spindle_notch")), "cortex-m0").attempts[0].run for _ in range(2))
    assert first.instructions == second.instructions
    assert first == second


def test_a_corrupted_coefficient_is_found_on_every_processor_alike(emitted: Record, tmp_path: Path) -> None:
    record = emitted("roller_gap")
    for path in record.parent.iterdir():
        (tmp_path / path.name).write_bytes(path.read_bytes())
    stored = json.loads(record.read_text())["sections"][0]["b"][0]["stored"]
    source = tmp_path / "roller_gap.c"
    good = source.read_text()
    line = next(line for line in good.splitlines() if f"/* {stored} */" in line)
    digits = line.partition("= ")[2].partition("e")[0]
    # the fifth digit: many units in the last place of a float32
    bad = digits[:5] + ("1" if digits[5] != "1" else "2") + digits[6:]
    source.write_text(good.replace(line, line.replace(digits, bad)))
    found = trial(str(tmp_path / record.name), "all")
    assert found.emitted.changed == ("roller_gap.c",)
    differences = {attempt.difference for attempt in found.attempts}
    assert len(differences) == 1
    difference = differences.pop()
    assert difference is not None
    assert difference.expected != difference.got
    rows = (tmp_path / "roller_gap_vectors.csv").read_text().splitlines()
    assert rows[1 + difference.sample] == f"{difference.given},{difference.expected}"
