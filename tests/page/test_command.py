"""`realize report` from outside."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from realize.cli import main
from tests.schemas.validation import complaint

FIXTURES = Path(__file__).parents[2] / "fixtures"
SIEVE = str(FIXTURES / "sieve_resonance.toml")


def run(*arguments: str) -> int:
    try:
        main(list(arguments))
    except SystemExit as stop:
        return int(stop.code or 0)
    return 0


def test_it_writes_the_page_and_the_figures(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    page, figures = tmp_path / "deep" / "page.html", tmp_path / "figures"
    assert run("report", SIEVE, "--out", str(page), "--figures", str(figures)) == 0
    assert page.read_text(encoding="utf-8").startswith("<!DOCTYPE html>")
    names = ["sieve_resonance_frequency.svg", "sieve_resonance_plane.svg", "sieve_resonance_step.svg"]
    assert sorted(path.name for path in figures.iterdir()) == names
    said = capsys.readouterr().out
    assert said.startswith("no: bilinear, which the design names")
    assert str(page) in said


def test_json_names_what_was_written_and_what_the_figures_show(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run("report", SIEVE, "--out", str(tmp_path / "page.html"), "--json") == 0
    document = json.loads(capsys.readouterr().out)
    assert complaint(document, "report") is None
    assert document["command"] == "report"
    assert document["answer"] == "no"
    assert document["written"] == [str(tmp_path / "page.html")]
    assert [figure["figure"] for figure in document["figures"]] == ["step", "frequency", "plane"]


def test_markdown_is_alone_on_standard_output(capsys: pytest.CaptureFixture[str]) -> None:
    assert run("report", SIEVE, "--markdown") == 0
    out, err = capsys.readouterr()
    assert out.startswith("## sieve\\_resonance")
    assert err == ""


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        ((), "nothing to write"),
        (("--out", "page.txt"), "a name that ends in .html"),
        (("--figures", "figures", "--figure-type", "gif"), "svg or png"),
        (("--out", "page.html", "--method", "bilinar"), "bilinear"),
    ],
    ids=["nothing", "no page", "unknown type", "unknown method"],
)
def test_bad_input_is_answered_and_nothing_is_written(
    arguments: tuple[str, ...],
    said: str,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    monkeypatch.chdir(tmp_path)
    assert run("report", SIEVE, *arguments) == 2
    assert said in capsys.readouterr().err
    assert list(tmp_path.iterdir()) == []


def test_missing_packages_are_named_with_the_line_that_installs_them(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    monkeypatch.setattr("realize.extras.find_spec", lambda name: None)
    assert run("report", SIEVE, "--out", str(tmp_path / "page.html")) == 2
    said = capsys.readouterr().err
    assert "matplotlib and jinja2 not installed" in said
    assert 'pip install "realize[report]"' in said
    assert list(tmp_path.iterdir()) == []
