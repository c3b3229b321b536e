"""The page of every fixture: valid, whole, without anything from elsewhere, and quiet in a browser."""

from __future__ import annotations

import re
import shutil
import subprocess
from functools import lru_cache
from pathlib import Path
from xml.etree import ElementTree

import html5lib
import pytest

from realize.design import Overrides, load_design
from realize.page.blocks import Section
from realize.page.job import Report

FIXTURES = Path(__file__).parents[2] / "fixtures"
DESIGNS = sorted(FIXTURES.glob("*.toml"))
BROWSER = shutil.which("chromium")

#: The order in which a reviewer asks.
PARTS = ["asked", "realizable", "methods", "figures", "numbers", "coefficients", "record"]

#: A busy machine may keep a browser from starting, which says nothing of the page.
STARTS = 3

#: Without a line to a network, a sandbox of its own (which root has not), or a trace.
QUIET = (
    "--headless",
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
    "--enable-logging=stderr",
    "--v=0",
    "--dump-dom",
)


@lru_cache(maxsize=4)
def report(path: Path) -> Report:
    return Report(load_design(str(path), Overrides()))


def parsed(text: str) -> ElementTree.Element:
    """The document as a browser would read it; any mistake of HTML is an error."""
    parser = html5lib.HTMLParser(strict=True, namespaceHTMLElements=False)
    document: ElementTree.Element = parser.parse(text)
    return document


def console(page: Path, profile: Path) -> list[str]:
    """What the page makes the browser say."""
    assert BROWSER is not None
    for start in range(STARTS):
        command = [BROWSER, *QUIET, f"--user-data-dir={profile}{start}", page.as_uri()]
        run = subprocess.run(command, capture_output=True, text=True, timeout=120)
        if run.returncode == 0:
            break
    assert run.returncode == 0
    assert "</html>" in run.stdout
    return [line for line in run.stderr.splitlines() if ":CONSOLE:" in line]


@pytest.mark.parametrize("path", DESIGNS, ids=lambda path: path.stem)
def test_every_fixture_has_a_valid_page_that_is_quiet_in_a_browser(path: Path, tmp_path: Path) -> None:
    text = report(path).html
    document = parsed(text)
    _has_no_outside(document, text)
    _has_unique_names(document)
    _has_words_for_every_figure(document)
    if BROWSER is not None:
        (tmp_path / "page.html").write_text(text, encoding="utf-8")
        assert console(tmp_path / "page.html", tmp_path / "profile") == []


@pytest.mark.skipif(BROWSER is None, reason="where there is no browser, none can be asked")
def test_the_browser_would_tell(tmp_path: Path) -> None:
    page = tmp_path / "page.html"
    page.write_text("<!DOCTYPE html><html lang=en><title>x</title><script>console.error('heard')</script></html>")
    assert any("heard" in line for line in console(page, tmp_path / "profile"))


def _has_no_outside(document: ElementTree.Element, text: str) -> None:
    assert document.find(".//script") is None
    assert document.find(".//link") is None
    references = [
        value
        for element in document.iter()
        for name, value in element.attrib.items()
        if str(name).endswith(("href", "src", "url"))
    ]
    assert all(value.startswith("#") for value in references)
    assert re.findall(r"url\((?!#)|@import", text) == []


def _has_unique_names(document: ElementTree.Element) -> None:
    names = [element.attrib["id"] for element in document.iter() if "id" in element.attrib]
    assert len(names) == len(set(names))
    pointed = re.findall(r"(?:url\(#|href=\"#)([^)\"]+)", ElementTree.tostring(document, encoding="unicode"))
    assert set(pointed) <= set(names)


def _has_words_for_every_figure(document: ElementTree.Element) -> None:
    figures = [element for element in document.iter() if str(element.tag).endswith("svg")]
    assert len(figures) == len(document.findall(".//figure"))
    names = {element.attrib["id"]: element for element in document.iter() if "id" in element.attrib}
    for figure in figures:
        assert figure.attrib["role"] == "img"
        words = [names[name].text or "" for name in figure.attrib["aria-labelledby"].split()]
        assert all(words)
        assert any(character.isdigit() for character in words[1])
        # Letters are letters, not outlines.
        assert any(str(element.tag).endswith("text") for element in figure.iter())


def test_a_page_says_everything_in_the_order_a_reviewer_asks() -> None:
    page = report(FIXTURES / "roller_gap.toml").page
    assert page.answer == "yes"
    assert [section.key for section in page.sections] == PARTS
    keys = ["window", "step", "loop", "frequency", "plane", "loopgain", "ledger"]
    assert [drawing.key for drawing in page.drawings] == keys
    assert report(FIXTURES / "roller_gap_int16.toml").page.drawings[-1].key == "words"


def test_a_page_without_an_emission_says_why_and_what_to_do() -> None:
    page = report(FIXTURES / "roller_gap_improper.toml").page
    assert page.answer == "no"
    assert "no [rolloff]" in page.verdict
    assert page.sections[-1].key == "emitted"
    assert "realize assess" in " ".join(page.sections[-1].sentences)
    assert 'placement = "derivative"' in next(s for s in page.sections if s.key == "realizable").code


def test_the_page_gives_the_record_that_emit_writes(tmp_path: Path) -> None:
    from hashlib import sha256

    from realize.firmware.job import emit

    path = FIXTURES / "roller_gap.toml"
    written = emit(load_design(str(path), Overrides())).files
    section = report(path).page.sections[-1]
    assert sha256(written["roller_gap.record.json"].encode()).hexdigest() in section.sentences[0]
    assert dict(section.tables[0].rows.cells) == {
        name: sha256(text.encode()).hexdigest() for name, text in written.items() if not name.endswith(".record.json")
    }


def test_same_design_same_page() -> None:
    design = load_design(str(FIXTURES / "sieve_resonance.toml"), Overrides())
    assert Report(design).html == Report(design).html


def test_text_of_a_design_cannot_become_part_of_the_page(tmp_path: Path) -> None:
    text = """
[design]
name = "bold"
transfer = "1/(s + 2)"
about = "<script>alert(1)</script> & | <b>"
[sampling]
rate = "100 Hz"
"""
    (tmp_path / "bold.toml").write_text(text, encoding="utf-8")
    found = Report(load_design(str(tmp_path / "bold.toml"), Overrides()))
    document = parsed(found.html)
    assert document.find(".//script") is None
    assert "<script>alert(1)</script> & | <b>" in "".join(document.itertext())
    assert "<script>" not in found.markdown.replace("\\<", "")


def test_markdown_holds_the_same_tables() -> None:
    made = report(FIXTURES / "roller_gap.toml")
    lines = made.markdown.splitlines()
    rows = [line for line in lines if line.startswith("| ")]
    tables = [table for section in made.page.sections for table in section.tables]
    assert len(rows) == sum(len(table.rows.cells) + 2 for table in tables)
    for line in rows:
        assert line.endswith(" |")
    bars = [len(re.findall(r"(?<!\\)\|", line)) for line in rows]
    at = 0
    for table in tables:
        count = len(table.rows.cells) + 2
        assert set(bars[at : at + count]) == {len(table.rows.head) + 1}
        at += count


@pytest.mark.parametrize(("kind", "start"), [("svg", b"<?xml"), ("png", b"\x89PNG\r\n")])
def test_figures_are_files_of_their_own(kind: str, start: bytes) -> None:
    made = report(FIXTURES / "sieve_resonance.toml")
    files = made.figures(kind)
    assert list(files) == [f"sieve_resonance_{drawing.key}.{kind}" for drawing in made.page.drawings]
    assert all(content.startswith(start) for content in files.values())


@pytest.mark.parametrize("path", sorted((FIXTURES / "page").glob("*.svg")), ids=lambda path: path.stem)
def test_figures_kept_for_the_readme_say_what_is_drawn_today(path: Path) -> None:
    """Letter by letter; where each line runs depends on the version of the drawing library."""
    drawn = report(FIXTURES / "roller_gap.toml").figures("svg")[path.name]
    assert _words(path.read_bytes()) == _words(drawn)
    assert f"fixtures/page/{path.name}" in (FIXTURES.parent / "README.md").read_text(encoding="utf-8")


def _words(svg: bytes) -> list[str]:
    return ["".join(e.itertext()) for e in ElementTree.fromstring(svg).iter() if str(e.tag).endswith("}text")]


@pytest.mark.parametrize(
    "transfer",
    ["5", "1/s", "1/s^2", "s^2", "1/(s - 2)", "1/(s + 1)^8", "(s + 1e6)/(s + 1e-6)", "1/(s^2 + 0.0001*s + 1)"],
)
def test_any_transfer_function_has_a_page(transfer: str) -> None:
    """Gains, integrals, growing modes, high orders, and poles that ask for sections in delta."""
    made = Report(load_design(transfer, Overrides(rate="100 Hz")))
    parsed(made.html)
    stored = [row[1] for section in made.page.sections if section.key == "coefficients" for row in _cells(section)]
    assert "None" not in stored
    assert bool(stored) == (made.page.answer == "yes")


def _cells(section: Section) -> list[list[str]]:
    return [row for table in section.tables for row in table.rows.cells]


def test_a_schedule_is_shown_by_the_method_that_is_emitted() -> None:
    """At the nominal values another one is recommended, which no point takes."""
    made = report(FIXTURES / "sheeter_gap.toml")
    titles = {section.key: section.title for section in made.page.sections}
    assert "by blended-difference" in made.page.verdict
    assert titles["figures"] == "What blended-difference makes of it at the nominal values, which are not emitted"
    assert [section.key for section in made.page.sections][-3:] == ["schedule", "coefficients", "record"]
