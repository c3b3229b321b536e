"""What the audit says of a record that was left alone, and of one that was spoiled in one place."""

from __future__ import annotations

import contextlib
from collections.abc import Callable
from hashlib import sha256
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from realize.errors import RealizeError
from realize.firmware.audit import audit
from realize.firmware.audit import second_opinion as opinion_module
from realize.firmware.changes import changes, telling
from realize.firmware.differ import differ
from tests.firmware.audit.written import COUNTED, LEAD, document, rewrite, written

Spoil = Callable[[Path], None]


@pytest.mark.parametrize("text", [LEAD, LEAD + COUNTED], ids=["float32", "int16"])
def test_nothing_differs_in_what_was_left_alone(tmp_path: Path, text: str) -> None:
    found = audit(str(written(tmp_path, text)))
    assert (found.findings, found.notes) == ((), ())
    assert found.opinion is not None
    assert [part.what for part in found.opinion.parts] == ["frequency response", "step response"]


def in_record(*place: Any, to: Any) -> Spoil:
    """Put something else at a place of the record."""

    def spoil(record: Path) -> None:
        content = document(record)
        entry: Any = content
        for key in place[:-1]:
            entry = entry[key]
        entry[place[-1]] = to
        rewrite(record, content)

    return spoil


def without(*place: Any) -> Spoil:
    def spoil(record: Path) -> None:
        content = document(record)
        entry: Any = content
        for key in place[:-1]:
            entry = entry[key]
        del entry[place[-1]]
        rewrite(record, content)

    return spoil


def in_file(name: str, old: str, new: str) -> Spoil:
    def spoil(record: Path) -> None:
        path = record.with_name(name)
        text = path.read_text(encoding="utf-8")
        assert old in text
        path.write_text(text.replace(old, new, 1), encoding="utf-8", newline="")

    return spoil


def remove(name: str) -> Spoil:
    return lambda record: record.with_name(name).unlink()


def cut_off(record: Path) -> None:
    path = record.with_name("lead_vectors.csv")
    lines = path.read_text(encoding="utf-8").splitlines(keepends=True)
    path.write_text("".join(lines[:10]), encoding="utf-8")


def go_on(record: Path) -> None:
    with record.with_name("lead.h").open("a", encoding="utf-8") as file:
        file.write("one more\n")


def carriage_returns(record: Path) -> None:
    path = record.with_name("lead.c")
    path.write_bytes(path.read_bytes().replace(b"\n", b"\r\n"))


def indent_otherwise(record: Path) -> None:
    record.write_text(record.read_text(encoding="utf-8").replace("\n  ", "\n    "), encoding="utf-8")


#: What is spoiled; the kind of the one difference, which one it is about, and words of its sentence. The coefficients
#: are (1 + 0.2 s)/(1 + 0.02 s) times 5 with s = 4000 (z - 1)/(z + 1), by hand: b0 = 5 801/81, b1 = -5 799/81,
#: a1 = -79/81.
SPOILED: list[tuple[str, Spoil, str, str, list[str]]] = [
    (
        "a stored word",
        in_record("sections", 0, "a", 0, "stored", to="0x0p+0"),
        "coefficient",
        "section 1 a1",
        ["-0.975308657", "0x0p+0", "in the record", "today"],
    ),
    (
        "a coefficient that is no number",
        in_record("sections", 0, "b", 0, "value", to="fifty"),
        "coefficient",
        "section 1 b0",
        ["fifty", "49.4444427"],
    ),
    ("the structure", in_record("structure", to="delta"), "record", "structure", ["delta in the record, direct today"]),
    (
        "the figure of a check",
        in_record("checks", 1, "obtained", to=-49.0),
        "check",
        "check pole shift (stored), obtained",
        ["-49.0 in the record"],
    ),
    (
        "the verdict of a check",
        in_record("checks", 1, "verdict", to="out"),
        "check",
        "check pole shift (stored), verdict",
        ["out in the record, within today"],
    ),
    ("a check", without("checks", 0), "check", "check stability (stored)", ["nothing in the record"]),
    (
        "a line of C",
        in_file("lead.c", "return", "RETURN"),
        "file",
        "lead.c",
        ["has changed since it was written: line ", '"    RETURN', '"    return'],
    ),
    ("a missing file", remove("lead_vectors.csv"), "file", "lead_vectors.csv", ["is missing beside the record"]),
    ("a file cut off", cut_off, "file", "lead_vectors.csv", ["it ends before line 11"]),
    ("a file that goes on", go_on, "file", "lead.h", ["it goes on at line ", "where what is emitted today ends"]),
    ("line ends", carriage_returns, "file", "lead.c", ["its lines end in CR LF, where LF is emitted"]),
    (
        "a hash",
        in_record("files", "lead.h", to="0" * 64),
        "file",
        "lead.h",
        ["is what is emitted today, but the record gives another SHA-256"],
    ),
    (
        "a file that is not in the record",
        without("files", "lead.h"),
        "file",
        "lead.h",
        ["emitted today, but not in the record"],
    ),
    (
        "a record in another layout",
        indent_otherwise,
        "file",
        "lead.record.json",
        ["the same content, otherwise written: line 2 "],
    ),
]


@pytest.mark.parametrize(
    ("spoil", "kind", "what", "words"), [case[1:] for case in SPOILED], ids=[c[0] for c in SPOILED]
)
def test_what_was_spoiled_is_the_one_thing_that_differs(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, spoil: Spoil, kind: str, what: str, words: list[str]
) -> None:
    record = written(tmp_path)
    spoil(record)
    monkeypatch.setattr("realize.firmware.audit.recompute.is_available", lambda: False)
    (finding,) = audit(str(record)).findings
    assert (finding.kind, finding.what) == (kind, what)
    for word in words:
        assert word in finding.text


def test_a_file_that_another_realize_would_write_otherwise_has_not_changed(tmp_path: Path) -> None:
    """Content and hash agree with each other, not with today's emission."""
    record = written(tmp_path)
    content = document(record)
    path = record.with_name("lead.c")
    path.write_text(path.read_text(encoding="utf-8").replace("return", "RETURN", 1), encoding="utf-8")
    content["files"]["lead.c"] = sha256(path.read_bytes()).hexdigest()
    rewrite(record, content)
    (finding,) = audit(str(record)).findings
    assert finding.text.startswith("lead.c: would be written otherwise today: line ")


def test_a_changed_coefficient_is_told_by_both_roads(tmp_path: Path) -> None:
    record = written(tmp_path)
    in_record("sections", 0, "b", 0, "value", to="50")(record)
    findings = audit(str(record)).findings
    assert [finding.kind for finding in findings] == ["coefficient", "second opinion"]
    assert "scipy disagrees with the stored numbers: frequency response at" in findings[1].text


def test_another_version_is_a_note_and_no_difference(tmp_path: Path) -> None:
    record = written(tmp_path)
    in_record("tool", "version", to="0.0.7")(record)
    found = audit(str(record))
    assert found.findings == ()
    assert found.notes[0].startswith("written by realize 0.0.7; this is realize ")


def test_a_design_that_is_refused_today_is_a_difference(tmp_path: Path) -> None:
    record = written(tmp_path)
    in_record("design", "tolerance", to={"pole_shift": "1/1000000"})(record)
    found = audit(str(record))
    (finding,) = found.findings
    assert finding.kind == "emission"
    assert "refused today: checks: bilinear is out of tolerance: pole shift" in finding.text
    assert any("no second opinion: nothing was computed" in note for note in found.notes)


def test_without_scipy_the_audit_says_what_is_left_out_and_what_to_install(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(opinion_module, "find_spec", lambda name: None)
    found = audit(str(written(tmp_path)))
    assert (found.findings, found.opinion) == ((), None)
    assert found.notes == ('no second opinion: scipy is not installed; pip install "realize[audit]"',)


# ---------------------------------------------------------------- the design file


@pytest.mark.parametrize(
    ("old", "new", "text"),
    [
        ("k = 5", "k = 6", "values.k: 5 in the record, 6 in "),
        ('"2 kHz"', '"4 kHz"', "sampling.period_s: 1/2000 in the record, 1/4000 in "),
        ('name = "bilinear"', 'name = "auto"', "method.name: bilinear in the record, auto in "),
        ("k*(0.2*s", "k*(0.3*s", "transfer: k*(0.2*s + 1)/(0.02*s + 1) in the record, k*(0.3*s + 1)/(0.02*s + 1) in "),
    ],
)
def test_a_design_file_that_changed_is_told_by_key(tmp_path: Path, old: str, new: str, text: str) -> None:
    record, design = written(tmp_path), tmp_path / "lead.toml"
    design.write_text(LEAD, encoding="utf-8")
    assert audit(str(record), str(design)).findings == ()
    assert old in LEAD
    design.write_text(LEAD.replace(old, new), encoding="utf-8")
    (finding,) = audit(str(record), str(design)).findings
    assert (finding.kind, finding.text) == ("design", text + str(design))


def test_a_comment_in_the_design_file_is_no_difference(tmp_path: Path) -> None:
    record, design = written(tmp_path), tmp_path / "lead.toml"
    design.write_text(LEAD + "# as agreed\n", encoding="utf-8")
    assert audit(str(record), str(design)).findings == ()


# ---------------------------------------------------------------- what is no record


@pytest.mark.parametrize(
    ("spoil", "found"),
    [
        (in_record("schema", to="realize/2"), 'a record of the newer schema "realize/2"'),
        (in_record("schema", to="other/1"), 'the unknown schema "other/1"'),
        (without("schema"), "no record: it names no schema"),
        (in_record("sections", to=None), "sections: nothing"),
        (in_record("design", to="lead"), 'design: "lead"'),
        (without("design", "name"), "design.name: nothing"),
        (in_record("design", "sampling", "period_s", to="0"), "a time above zero|period"),
        (in_record("files", to={"../lead.h": "0"}), "files: ../lead.h"),
        (lambda record: record.write_text("{"), "not JSON"),
        (lambda record: record.write_bytes(b"\xff\xfe"), "not JSON"),
        (lambda record: record.write_text("[" * 10000), "not JSON"),
        (lambda record: record.unlink(), "there is no such file"),
        (lambda record: (record.unlink(), record.mkdir()), "a directory"),
    ],
)
def test_what_is_no_record_is_an_error(tmp_path: Path, spoil: Spoil, found: str) -> None:
    record = written(tmp_path)
    spoil(record)
    with pytest.raises(RealizeError, match=found) as error:
        audit(str(record))
    assert error.value.exit_status == 2


# ---------------------------------------------------------------- any nonsense


def places(content: Any, place: tuple[Any, ...] = ()) -> list[tuple[Any, ...]]:
    inner = content.items() if isinstance(content, dict) else enumerate(content) if isinstance(content, list) else ()
    return [place, *(deeper for key, value in inner for deeper in places(value, (*place, key)))]


@pytest.fixture(scope="module")
def lead(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return written(tmp_path_factory.mktemp("lead"), LEAD)


@pytest.fixture(scope="module")
def servo(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A record that has everything a record can have."""
    text = LEAD + COUNTED + '[plant]\ntransfer = "1/(s*(0.01*s + 1))"\n'
    return written(tmp_path_factory.mktemp("servo"), text)


NONSENSE: list[Any] = [None, True, -1, "", "1/3", "x", [], [[]], {}, {"x": 1}]


def with_nonsense(record: Path, data: st.DataObject) -> tuple[Path, bool]:
    """A record with one entry replaced, and whether that is a difference."""
    content = document(record)
    place = data.draw(st.sampled_from(places(content)[1:]))
    spoiled = record.with_name("spoiled.record.json")
    spoiled.write_bytes(record.read_bytes())
    in_record(*place, to=data.draw(st.sampled_from(NONSENSE)))(spoiled)
    return spoiled, place[0] != "tool" and telling(changes(content, document(spoiled))) != []


@settings(max_examples=25)
@given(data=st.data())
def test_nonsense_anywhere_in_a_record_is_a_difference_or_an_error_and_never_a_crash(
    lead: Path, data: st.DataObject
) -> None:
    spoiled, differs = with_nonsense(lead, data)
    with contextlib.suppress(RealizeError):
        assert bool(audit(str(spoiled)).findings) == differs


@given(data=st.data())
def test_nonsense_anywhere_in_one_of_two_records_is_a_change_or_an_error_and_never_a_crash(
    servo: Path, data: st.DataObject
) -> None:
    spoiled, differs = with_nonsense(servo, data)
    with contextlib.suppress(RealizeError):
        assert bool(differ(str(servo), str(spoiled)).rows) == differs
