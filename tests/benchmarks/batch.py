"""What emitting many designs at once saves, against the same designs one after the other in one process.

Run from the top of the project, with how many copies of each fixture to emit as the only argument (default 2):
``python -m tests.benchmarks.batch 2``. The two take turns, so that a busy machine slows both; each writes into an empty
directory. Beside it stands what the shell would pay: one process for each design.
"""

from __future__ import annotations

import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

from realize.parallel import processors

FIXTURES = Path("fixtures")

#: Those that are refused end early, and say little about the work.
REFUSED = ("roller_gap_improper", "sieve_resonance", "levitation")

TURNS = 3


def copies(folder: Path, count: int) -> list[str]:
    """Design files with names of their own."""
    paths = []
    for path in sorted(FIXTURES.glob("*.toml")):
        for i in range(count if path.stem not in REFUSED else 0):
            copy = folder / f"{path.stem}_{i}.toml"
            text = path.read_text(encoding="utf-8").replace(f'name = "{path.stem}"', f'name = "{path.stem}_{i}"')
            copy.write_text(text, encoding="utf-8")
            paths.append(str(copy))
    return paths


def emitted_s(paths: list[str], workers: int) -> float:
    """Time of one run in a process of its own, which remembers nothing of another; it must write everything."""
    script = (
        "import sys; from pathlib import Path; from realize.design import Overrides\n"
        "from realize.firmware.batch import emit_all, exit_status\n"
        "sys.exit(exit_status(emit_all(sys.argv[3:], Path(sys.argv[1]), Overrides(), workers=int(sys.argv[2]))))\n"
    )
    with TemporaryDirectory() as out:
        command = [sys.executable, "-c", script, out, str(workers), *paths]
        return seconds(lambda: subprocess.run(command, check=True))


def commands_s(paths: list[str]) -> float:
    """Time of a command for each design."""
    with TemporaryDirectory() as out:
        command = [sys.executable, "-m", "realize", "emit", "--out", out]
        return seconds(lambda: [subprocess.run([*command, path], check=True, capture_output=True) for path in paths])


def seconds(run: Callable[[], object]) -> float:
    start = time.perf_counter()
    run()
    return time.perf_counter() - start


def main(count: int) -> None:
    """Print medians and ratios."""
    with TemporaryDirectory() as folder:
        paths = copies(Path(folder), count)
        turns = [(emitted_s(paths, processors()), emitted_s(paths, 1)) for _ in range(TURNS)]
        parallel, serial = (median(times) for times in zip(*turns, strict=True))
        each = commands_s(paths)
    print(f"{len(paths)} designs at once on {processors()} processors: {parallel:.2f} s")
    print(f"one after the other: {serial:.2f} s, ratio {parallel / serial:.2f}")
    print(f"a command for each: {each:.2f} s, ratio {parallel / each:.2f}")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 2)
