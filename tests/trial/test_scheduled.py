"""A schedule on trial: looked up before every sample, from the variable that the vectors name."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from realize.errors import RealizeError
from realize.report.on_target import trial_text
from realize.trial.emitted import Vectors, code_of, read_emitted, read_vectors
from realize.trial.harness import harness_text
from realize.trial.outcome import Attempt, Run, Trial
from realize.trial.run import attempts
from realize.trial.targets import HOST, targets_named

NAME = "sheeter_gap"


def test_what_is_read_has_the_variable_and_the_table(emitted: Callable[[str], Path]) -> None:
    found = read_emitted(str(emitted(NAME)))
    assert found.changed == ()
    assert sorted(found.code.files) == [f"{NAME}.c", f"{NAME}.h", f"{NAME}_schedule.h"]
    assert found.code.scheduled
    assert found.code.functions[-1] == "at"
    assert found.vectors.variables is not None
    assert len(found.vectors.variables) == len(found.vectors.inputs)
    assert found.vectors.given[:4] == [
        *(found.vectors.variables[0], found.vectors.inputs[0], found.vectors.variables[1], found.vectors.inputs[1])
    ]
    assert Vectors([1, 2], [3, 4]).given == [1, 2]
    for on_host in (True, False):
        assert f"{NAME}_at(given[0], &trial_coefficients)" in harness_text(found.code, on_host=on_host)


def test_a_number_of_the_table_that_was_changed_is_found(emitted: Callable[[str], Path]) -> None:
    found = read_emitted(str(emitted(NAME)))
    table = found.code.files[f"{NAME}_schedule.h"].decode()
    changed = table.replace("1.20000000e+01f", "1.30000000e+01f")
    assert changed != table
    code = code_of(NAME, {**found.code.files, f"{NAME}_schedule.h": changed.encode()})
    attempt = next(attempts(code, found.vectors, targets_named(HOST)))
    assert attempt.difference is not None
    variable = (found.vectors.variables or ())[attempt.difference.sample]
    # Between the neighbours of the point that was moved.
    assert 5 < variable < 30


def test_a_sample_begins_with_its_lookup_and_the_key_says_so(emitted: Callable[[str], Path]) -> None:
    found = read_emitted(str(emitted(NAME)))
    plain = found.code._replace(scheduled=False)
    assert (found.code.entry, plain.entry) == (f"{NAME}_at", f"{NAME}_update")
    attempt = Attempt("cortex-m4f", "O2", Run([], 28, instructions=(80, 100)), None)
    for code, said in ((found.code, True), (plain, False)):
        text = " ".join(trial_text(Trial(found._replace(code=code), [attempt]), None).split())
        assert (f"those of {NAME}_at and {NAME}_update" in text) == said


@pytest.mark.parametrize("text", ["input,output\n0x1p+0,0x1p+0\n", "variable,input,output\n0x1p+0,0x1p+0\n"])
def test_vectors_without_the_variable_are_refused(text: str, emitted: Callable[[str], Path]) -> None:
    code = read_emitted(str(emitted(NAME))).code
    with pytest.raises(RealizeError) as caught:
        read_vectors("vectors.csv", text.encode(), code)
    assert "variable" in caught.value.allowed
