"""What changed between two records, in the words of a review."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from realize.errors import RealizeError
from realize.firmware.differ import Difference, Row, differ
from tests.firmware.audit.written import COUNTED, LEAD, document, rewrite, written

SERVO = """
[design]
name = "gap"
transfer = "kp + ki/s"
[design.values]
kp = 2
ki = 5
[sampling]
rate = "1 kHz"
[method]
name = "bilinear"
[plant]
transfer = "v/s"
[plant.values]
v = 20
[[plant.case]]
name = "slow"
values = { v = 10 }
"""


#: So that figures are those of the method.
FINE = LEAD + '[target]\narithmetic = "float64"\n'


def compared(folder: Path, old: str, new: str) -> Difference:
    return differ(str(written(folder / "old", old)), str(written(folder / "new", new)))


def rows(found: Difference, *groups: str) -> Iterator[tuple[str, str, str]]:
    return ((row.what, row.old, row.new) for row in found.rows if row.group in groups)


def test_a_record_does_not_differ_from_itself(tmp_path: Path) -> None:
    for text in (LEAD, LEAD + COUNTED, SERVO):
        found = compared(tmp_path, text, text)
        assert (found.rows, found.notes) == ((), ())


def test_a_changed_gain_is_told_as_value_behaviour_coefficients_and_files(tmp_path: Path) -> None:
    """5 (0.2 s + 1)/(0.02 s + 1): at once 5 (401 + 400)/(41 + 40), by hand, and 5 at rest; poles and zeros stay."""
    found = compared(tmp_path, FINE, FINE.replace("k = 5", "k = 6"))
    assert list(rows(found, "Design")) == [("values.k", "5", "6")]
    assert list(rows(found, "Behaviour")) == [("answer at once", "49.444", "59.333"), ("gain at rest", "5", "6")]
    assert [what for what, _, _ in rows(found, "Coefficients")] == ["section 1 b0", "section 1 b1"]
    assert [what for what, _, _ in rows(found, "Files")] == ["lead.h", "lead.c", "lead_selftest.c", "lead_vectors.csv"]
    # The same in every unit that the gain does not scale.
    assert {row.group for row in found.rows} <= {"Design", "Behaviour", "Checks", "Coefficients", "Files"}


def test_a_changed_rate_is_told_as_a_rate_and_moves_no_pole_in_hz(tmp_path: Path) -> None:
    found = compared(tmp_path, FINE, FINE.replace("2 kHz", "4 kHz").replace("bilinear", "pole-zero-mapped"))
    assert ("rate", "2 kHz", "4 kHz") in rows(found, "Design")
    assert ("method", "bilinear", "pole-zero-mapped") in rows(found, "Realization")
    # 50 and 5 rad/s: bilinear at 2 kHz moves them by (wT)^2/12, 5.2e-5 and 5.2e-7, by hand.
    assert ("pole 1", "7.9582 Hz (50.003 rad/s), real", "7.9577 Hz (50 rad/s), real") in rows(found, "Behaviour")


def test_words_and_fraction_bits_are_told_for_integers(tmp_path: Path) -> None:
    found = compared(tmp_path, LEAD + COUNTED, LEAD + COUNTED.replace("int16", "int32"))
    assert ("arithmetic", "int16", "int32") in rows(found, "Realization")
    assert ("words.input.bits", "16", "32") in rows(found, "Words")
    assert any("fraction bits" in new for _, _, new in rows(found, "Coefficients"))


def test_margins_are_told_by_case(tmp_path: Path) -> None:
    found = compared(tmp_path, SERVO, SERVO.replace("kp = 2", "kp = 3"))
    told = {what: (old, new) for what, old, new in rows(found, "Loop")}
    for case in ("nominal", "slow"):
        old, new = told[f"{case}.discrete.phase margin"]
        assert old.endswith(" deg")
        assert old != new
        assert all(text.endswith(" rad/s") for text in told[f"{case}.discrete.crossover"])
    assert all(text.endswith(" deg") for text in told["phase ledger.hold"])


def test_an_agreed_deviation_is_told_by_its_check(tmp_path: Path) -> None:
    agreed = "".join(
        f'[[accept]]\ncheck = "{check}"\nlimit = "9 %"\nbecause = "agreed"\nby = "initials"\n'
        for check in ("zero shift", "step deviation")
    )
    slow = LEAD.replace("2 kHz", "100 Hz").replace("bilinear", "forward-difference") + agreed
    found = compared(tmp_path, slow, slow.replace('"agreed"', '"agreed again"', 1))
    assert list(rows(found, "Accepted deviations")) == [("zero shift.because", "agreed", "agreed again")]


def test_a_check_is_told_with_verdict_and_figure(tmp_path: Path) -> None:
    found = compared(tmp_path, FINE, FINE.replace("2 kHz", "1 kHz"))
    # (wT)^2/12 of 50 rad/s, by hand.
    assert ("pole shift (stored)", "within: -50.003, 0.00521 % off", "within: -50.01, 0.0208 % off") in rows(
        found, "Checks"
    )


@pytest.mark.parametrize(
    ("entry", "row"),
    [
        ({"novel": {"x": [1]}}, Row("Other", "novel", "nothing", "a table of 1 entry")),
        ({"loop": {"cases": None}}, Row("Loop", "loop", "nothing", "a table of 1 entry")),
        ({"method": "euler"}, Row("Realization", "method", "bilinear", "euler")),
    ],
)
def test_nothing_that_differs_is_left_out(tmp_path: Path, entry: dict[str, object], row: Row) -> None:
    old = written(tmp_path / "old")
    new = written(tmp_path / "new")
    rewrite(new, document(new) | entry)
    assert differ(str(old), str(new)).rows == (row,)


def test_another_version_is_a_note(tmp_path: Path) -> None:
    old, new = written(tmp_path / "old"), written(tmp_path / "new")
    rewrite(new, document(new) | {"tool": {"name": "realize", "version": "9.9"}})
    found = differ(str(old), str(new))
    assert found.rows == ()
    assert found.notes[0].endswith(" before, 9.9 now")


def test_what_is_no_record_is_an_error(tmp_path: Path) -> None:
    record = written(tmp_path)
    with pytest.raises(RealizeError, match="there is no such file") as error:
        differ(str(record), str(tmp_path / "nowhere.record.json"))
    assert error.value.exit_status == 2
