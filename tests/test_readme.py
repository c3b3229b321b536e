"""What the README prints is what the commands print."""

import doctest
import os
import re
import shlex
import subprocess
from contextlib import suppress
from pathlib import Path

import pytest

from realize.cli import main
from tests.firmware.bench import ZIG

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
EXAMPLES = [
    block.split("\n", 1)
    for block in re.findall(r"^```console\n\$ realize (.*?)^```$", README, re.DOTALL | re.MULTILINE)
]


def test_there_are_worked_examples() -> None:
    assert len(EXAMPLES) >= 3


@pytest.mark.parametrize(("command", "output"), EXAMPLES, ids=[command for command, _ in EXAMPLES])
def test_the_output_of_the_worked_example_is_real(
    command: str,
    output: str,
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    capsys: pytest.CaptureFixture[str],
) -> None:
    os.symlink(ROOT / "fixtures", tmp_path / "fixtures")
    monkeypatch.chdir(tmp_path)
    for earlier in _emitted_for(command):
        main(shlex.split(earlier))
    capsys.readouterr()
    with suppress(SystemExit):  # the status of an answer that is no
        main(shlex.split(command))
    assert shown_in(output, capsys.readouterr().out)


def shown_in(shown: str, output: str) -> bool:
    """Whether an output is what is shown, where a line of three dots stands for lines that are left out."""
    first, *others = shown.split("...\n")
    if not others:
        return shown == output
    at = len(first)
    if not output.startswith(first):
        return False
    for part in others:
        found = output.find(part, at)
        if found < 0:
            return False
        at = found + len(part)
    return output.endswith(others[-1])


def test_what_is_left_out_is_marked_and_nothing_else() -> None:
    assert shown_in("a\nb\n", "a\nb\n")
    assert shown_in("a\n...\nd\n", "a\nb\nc\nd\n")
    assert shown_in("a\n...\n", "a\nb\n")
    assert not shown_in("a\n", "a\nb\n")
    assert not shown_in("b\n...\n", "a\nb\n")
    assert not shown_in("a\n...\nb\n", "a\nb\nc\n")


def _emitted_for(command: str) -> list[str]:
    """The example that writes the record another one reads."""
    records = [word for word in command.split() if word.endswith(".record.json")]
    names = {Path(record).name.removesuffix(".record.json") for record in records}
    return [other for other, _ in EXAMPLES if other.startswith("emit ") and Path(other.split()[1]).stem in names]


def test_the_examples_in_python_do_what_they_show(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    os.symlink(ROOT / "fixtures", tmp_path / "fixtures")
    monkeypatch.chdir(tmp_path)
    blocks = re.findall(r"^```python\n(>>> .*?)^```$", README, re.DOTALL | re.MULTILINE)
    runner = doctest.DocTestRunner()
    for block in blocks:
        runner.run(doctest.DocTestParser().get_doctest(block, {}, "README", "README.md", None))
    assert runner.tries > 0
    assert runner.failures == 0


@pytest.mark.parametrize("name", ["roller_gap", "roller_gap_int16"])
def test_the_emitted_code_it_quotes_is_real(name: str, tmp_path: Path) -> None:
    main(["emit", str(ROOT / "fixtures" / f"{name}.toml"), "--out", str(tmp_path)])
    emitted = (tmp_path / f"{name}.c").read_text(encoding="utf-8")
    quoted = re.findall(rf"^```c\n(\w+ {name}_update.*?)^```$", README, re.DOTALL | re.MULTILINE)
    assert quoted
    assert all(text in emitted for text in quoted)


@pytest.mark.parametrize("name", ["roller_gap", "sheeter_gap"])
def test_the_calls_it_shows_compile(name: str, tmp_path: Path) -> None:
    """With the warnings a careful firmware project has."""
    main(["emit", str(ROOT / "fixtures" / f"{name}.toml"), "--out", str(tmp_path)])
    (shown,) = re.findall(rf'^```c\n(#include "{name}.h".*?)^```$', README, re.DOTALL | re.MULTILINE)
    (tmp_path / "calls.c").write_text(shown, encoding="utf-8")
    flags = ["-std=c99", "-pedantic", "-Wall", "-Wextra", "-Wconversion", "-Werror", "-c", "calls.c", "-o", "calls.o"]
    subprocess.run([*ZIG, "cc", *flags], cwd=tmp_path, check=True)
