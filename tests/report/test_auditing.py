"""`realize audit` and `realize differ` from outside: screens, documents, exit status."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest

from realize.cli import main
from tests.firmware.audit.written import LEAD, document, rewrite, written
from tests.schemas.validation import validated

ROOT = Path(__file__).parents[2]


def run(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, str, str]:
    status = 0
    try:
        main(list(arguments))
    except SystemExit as ended:
        status = int(ended.code or 0)
    out, err = capsys.readouterr()
    return status, out, err


def spoiled(folder: Path) -> Path:
    record = written(folder)
    content = document(record)
    content["sections"][0]["b"][0]["value"] = "50"
    content["checks"][0]["reason"] = "guessed"
    rewrite(record, content)
    record.with_name("lead.h").unlink()
    return record


def test_an_audit_without_a_difference_is_one_line_and_status_0(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    record = written(tmp_path)
    content = document(record)
    files, checks = len(content["files"]) + 1, len(content["checks"])
    # b0, b1 and a1 of one section.
    line = f"yes: lead: {files} files, 3 coefficients and {checks} checks as designed; scipy agrees\n"
    assert run(capsys, "audit", str(record)) == (0, line, "")


def test_the_screens_of_the_readme_are_real(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    design = ROOT / "fixtures" / "roller_gap.toml"
    run(capsys, "emit", str(design), "--out", str(tmp_path))
    record = tmp_path / "roller_gap.record.json"
    status, out, _ = run(capsys, "audit", str(record), "--design", str(design))
    assert status == 0
    assert f"```text\n{out}```" in readme
    text = record.read_text(encoding="utf-8")
    record.write_text(text.replace("5254731/65536", "5254795/65536"), encoding="utf-8")
    status, out, _ = run(capsys, "audit", str(record))
    assert status == 1
    assert f"```text\n{out}```" in readme


def test_an_audit_with_differences_says_each_under_its_heading(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    status, out, err = run(capsys, "audit", str(spoiled(tmp_path)))
    assert (status, err) == (1, "")
    assert out.startswith("no: lead: 4 differences from what the design calls for.\n")
    headings = [line for line in out.splitlines() if line and not line.startswith((" ", "no:"))]
    assert headings == ["Files", "Coefficients", "Checks", "Second opinion"]
    assert max(map(len, out.splitlines())) <= 100


def strict(text: str) -> Any:
    def refuse(constant: str) -> None:
        raise AssertionError(f"{constant} is no JSON")

    return validated(json.loads(text, parse_constant=refuse))


def test_the_document_of_an_audit(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    status, out, _ = run(capsys, "audit", str(spoiled(tmp_path)), "--json")
    found = strict(out)
    assert status == 1
    assert (found["schema"], found["command"], found["equal"]) == ("realize/1", "audit", False)
    assert found["design"] == {"name": "lead", "transfer": "k*(0.2*s + 1)/(0.02*s + 1)"}
    assert [each["kind"] for each in found["differences"]] == ["file", "coefficient", "check", "second opinion"]
    assert all(set(each) == {"kind", "what", "recorded", "found", "text"} for each in found["differences"])
    assert {part["of"]: part["agrees"] for part in found["second_opinion"]} == {
        "frequency response": False,
        "step response": False,
    }


def test_the_screen_and_the_document_of_differing_records(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    old, new = written(tmp_path / "old"), written(tmp_path / "new", LEAD.replace("k = 5", "k = 6"))
    status, out, err = run(capsys, "differ", str(old), str(new))
    assert (status, err) == (1, "")
    assert out.startswith("no: lead: ")
    assert "\nDesign\n            before  now\n  values.k  5       6\n" in out
    assert max(map(len, out.splitlines())) <= 100
    status, out, _ = run(capsys, "differ", str(old), str(new), "--json")
    found = strict(out)
    assert (status, found["command"], found["equal"], found["old"]) == (1, "differ", False, str(old))
    assert found["changes"][0] == {"group": "Design", "what": "values.k", "old": "5", "new": "6"}
    assert run(capsys, "differ", str(old), str(old)) == (0, "yes: lead: nothing differs\n", "")


@pytest.mark.parametrize("command", ["audit", "differ"])
def test_what_is_no_record_is_one_clear_message(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], command: str
) -> None:
    path = tmp_path / "lead.record.json"
    path.write_text('{"schema": "realize/2"}', encoding="utf-8")
    arguments = [command, str(path)] + [str(path)] * (command == "differ")
    status, out, err = run(capsys, *arguments)
    assert (status, out) == (2, "")
    assert 'a record of the newer schema "realize/2"' in " ".join(err.split())
    status, out, err = run(capsys, *arguments, "--json")
    assert (status, err) == (2, "")
    assert set(strict(out)["error"]) == {"where", "found", "allowed", "try"}


def test_emit_writes_the_rule_where_it_is_asked_for(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    design, folder, rule = tmp_path / "lead.toml", tmp_path / "out", tmp_path / "build" / "lead.d"
    design.write_text(LEAD, encoding="utf-8")
    assert run(capsys, "emit", str(design), "--out", str(folder), "--dependencies", str(rule))[0] == 0
    targets, sources = rule.read_text(encoding="utf-8").replace("\\\n", "").split(": ")
    assert sorted(targets.split()) == sorted(str(path) for path in folder.iterdir())
    assert sources.split() == [str(design)]


@pytest.mark.parametrize(
    ("design", "name", "found"),
    [
        ("1/(s + 1)", "x.d", "--dependencies: the expression"),
        ("lead.toml", " ", "--dependencies: an empty name"),
        ("lead.toml", "no/../..", "cannot be written"),
    ],
)
def test_a_rule_that_cannot_be_leaves_no_file(
    tmp_path: Path,
    capsys: pytest.CaptureFixture[str],
    monkeypatch: pytest.MonkeyPatch,
    design: str,
    name: str,
    found: str,
) -> None:
    monkeypatch.chdir(tmp_path)
    Path("lead.toml").write_text(LEAD, encoding="utf-8")
    status, _, err = run(capsys, "emit", design, "--rate", "2 kHz", "--out", "out", "--dependencies", name)
    assert status == 2
    assert found in err
    assert [path.name for path in tmp_path.iterdir()] == ["lead.toml"]
