"""The rule for make and ninja; make itself reads it where it is installed."""

from __future__ import annotations

import re
import shutil
import subprocess
import sys
import time
from pathlib import Path

import pytest

from realize.design import load_design
from realize.errors import RealizeError
from realize.firmware.dependencies import prerequisites, rule_text

ROOT = Path(__file__).parents[2]

MEASURED = "frequency_hz,magnitude_db,phase_deg\n" + "".join(f"{f},-20,-30\n" for f in (0.001, 0.01, 0.1, 1, 10, 100))

DESIGN = """
[design]
name = "roller_gap"
transfer = "5/(0.1*s + 1)"
[sampling]
rate = "1 kHz"
[plant]
response = "plant.csv"
[method]
name = "bilinear"
"""


def test_the_record_stands_first_and_every_path_as_it_was_given() -> None:
    assert rule_text(["out/a.h", "out/a.c", "out/a.record.json"], ["a.toml", "../plant.csv"]) == (
        "out/a.record.json \\\n  out/a.h \\\n  out/a.c: \\\n  a.toml \\\n  ../plant.csv\n"
    )


def test_blanks_number_signs_and_dollars_are_escaped() -> None:
    assert rule_text(["my out/a#1.c"], ["$a.toml"]) == "my\\ out/a\\#1.c: \\\n  $$a.toml\n"


@pytest.mark.parametrize("path", ["50%.toml", "a*.toml", "a;b.toml", "a=b.toml", "a\nb.toml", "a|b.toml", "a[1].toml"])
def test_what_make_would_act_on_is_refused(path: str) -> None:
    with pytest.raises(RealizeError, match="in which make would act on") as error:
        rule_text(["a.c"], [path])
    assert error.value.where == "--dependencies"
    assert error.value.exit_status == 2


def test_a_measured_plant_is_a_prerequisite_beside_its_design_file(tmp_path: Path) -> None:
    (tmp_path / "plant.csv").write_text(MEASURED, encoding="utf-8")
    path = tmp_path / "roller_gap.toml"
    path.write_text(DESIGN, encoding="utf-8")
    assert prerequisites(str(path), load_design(str(path))) == [str(path), str(tmp_path / "plant.csv")]


@pytest.mark.parametrize(("argument", "found"), [("-", "standard input"), ("1/(s + 1)", 'the expression "1/')])
def test_a_design_that_is_no_file_is_refused(argument: str, found: str) -> None:
    design = load_design(str(ROOT / "fixtures" / "extruder_heater.toml"))
    with pytest.raises(RealizeError) as error:
        prerequisites(argument, design)
    assert error.value.found.startswith(found)
    assert error.value.exit_status == 2


# ---------------------------------------------------------------- make


def makefile() -> str:
    """The lines of the README."""
    readme = (ROOT / "README.md").read_text(encoding="utf-8")
    (found,) = re.findall(r"^```make\n(.*?)^```$", readme, re.DOTALL | re.MULTILINE)
    return str(found)


def test_the_rules_of_the_readme_are_there() -> None:
    text = makefile()
    assert "realize emit $< --out firmware --dependencies firmware/roller_gap.d\n\ttouch $@" in text
    assert "-include firmware/roller_gap.d" in text


if shutil.which("make"):

    @pytest.fixture
    def folder(tmp_path: Path) -> Path:
        """A project with the makefile of the README, and commands that note that they ran instead of the tools."""
        (tmp_path / "realize").write_text(
            f'#!/bin/sh\necho emitted >> log\nexec {sys.executable} -m realize "$@" > /dev/null\n', encoding="utf-8"
        )
        (tmp_path / "cc").write_text("#!/bin/sh\necho compiled >> log\ntouch roller_gap.o\n", encoding="utf-8")
        for name in ("realize", "cc"):
            (tmp_path / name).chmod(0o755)
        (tmp_path / "Makefile").write_text(makefile(), encoding="utf-8")
        (tmp_path / "plant.csv").write_text(MEASURED, encoding="utf-8")
        (tmp_path / "roller_gap.toml").write_text(DESIGN, encoding="utf-8")
        return tmp_path

    def made(folder: Path) -> list[str]:
        """What ran."""
        (folder / "log").write_text("", encoding="utf-8")
        subprocess.run(
            ["make", "roller_gap.o", "CC=./cc"],
            cwd=folder,
            env={"PATH": f"{folder}:/usr/bin:/bin", "PYTHONPATH": str(ROOT)},
            check=True,
            capture_output=True,
            timeout=60,
        )
        return (folder / "log").read_text(encoding="utf-8").split()

    def rewrite(path: Path, old: str, new: str) -> None:
        """A change that is later than all that was made, also where times of change are coarse."""
        text = path.read_text(encoding="utf-8")
        assert old in text
        time.sleep(0.02)
        path.write_text(text.replace(old, new), encoding="utf-8")

    def test_make_emits_and_compiles_when_it_has_to_and_not_else(folder: Path) -> None:
        assert made(folder) == ["emitted", "compiled"]
        assert made(folder) == []
        rewrite(folder / "roller_gap.toml", "[sampling]", "# as agreed\n[sampling]")
        assert made(folder) == ["emitted"]
        assert made(folder) == []
        rewrite(folder / "plant.csv", "-20", "-21")
        assert made(folder)[0] == "emitted"
        rewrite(folder / "roller_gap.toml", "0.1*s", "0.2*s")
        assert made(folder) == ["emitted", "compiled"]
        assert made(folder) == []
