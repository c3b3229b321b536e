"""Every design in fixtures/ does what its comment says."""

from pathlib import Path

import pytest

from realize.design import load_design
from realize.errors import Refused
from realize.firmware.job import emit
from tests.schemas.validation import complaint

FIXTURES = Path(__file__).parent.parent / "fixtures"

REFUSED = {
    "roller_gap_improper": "0.09*s grows without bound",
    "sieve_resonance": "pole shift",
    "levitation": "stability",
}

#: Of the names of what is emitted.
ENDS = (".h", ".c", "_selftest.c", "_vectors.csv", ".record.json")

EMITTED = sorted(path.stem for path in FIXTURES.glob("*.toml") if path.stem not in REFUSED)


def test_there_are_at_least_seven_designs_that_emit() -> None:
    assert len(EMITTED) >= 7


@pytest.mark.parametrize("name", EMITTED)
def test_emits(name: str) -> None:
    emitted = emit(load_design(str(FIXTURES / f"{name}.toml")))
    table = ("_schedule.h",) if emitted.schedule else ()
    assert sorted(emitted.files) == sorted(f"{name}{end}" for end in (*ENDS, *table))
    assert emitted.chosen.acceptable
    assert complaint(emitted.record, "record") is None


@pytest.mark.parametrize("name", sorted(REFUSED))
def test_is_refused_for_the_reason_its_comment_gives(name: str) -> None:
    design = load_design(str(FIXTURES / f"{name}.toml"))
    with pytest.raises(Refused, match=REFUSED[name].replace("*", r"\*")):
        emit(design)


@pytest.mark.parametrize("name", sorted({*EMITTED, *REFUSED}))
def test_says_that_its_data_is_invented(name: str) -> None:
    comment = "".join((FIXTURES / f"{name}.toml").read_text(encoding="utf-8").splitlines()[:4])
    assert "invented" in comment
    assert "realize" in comment
