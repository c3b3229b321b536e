"""Cold start of a whole ``realize emit`` against the yardstick ``python -c "import numpy, click"``.

Run from the top of the project, with the number of runs of each as the only argument (default 15):
``python tests/benchmarks/startup.py 15``. The two take turns, so that a busy machine slows both. One run of each
comes first and does not count: it compiles every module into a folder of the benchmark's own, as an installation
does, so that neither side is timed compiling.
"""

from __future__ import annotations

import os
import subprocess
import sys
import time
from pathlib import Path
from statistics import median
from tempfile import TemporaryDirectory

DESIGN = Path("fixtures/extruder_heater.toml")
YARDSTICK = [sys.executable, "-c", "import numpy, click"]

#: What the project allows itself.
MOST_RATIO = 2.0
DEFAULT_RUNS = 15


def wall_time_s(command: list[str], compiled: str) -> float:
    """Run a command, which must succeed, with its bytecode kept in the folder ``compiled``."""
    environment = {name: value for name, value in os.environ.items() if name != "PYTHONDONTWRITEBYTECODE"}
    environment["PYTHONPYCACHEPREFIX"] = compiled
    start = time.perf_counter()
    subprocess.run(command, check=True, env=environment, stdout=subprocess.DEVNULL)
    return time.perf_counter() - start


def emit_time_s(compiled: str) -> float:
    """Emit the design into an empty folder, as a person would from the command line."""
    realize = str(Path(sys.executable).with_name("realize"))
    with TemporaryDirectory() as out:
        return wall_time_s([realize, "emit", str(DESIGN), "--out", out], compiled)


def main(runs: int) -> None:
    """Print both medians and their ratio."""
    with TemporaryDirectory() as compiled:
        pairs = [(emit_time_s(compiled), wall_time_s(YARDSTICK, compiled)) for _ in range(runs + 1)][1:]
    emit, yardstick = (median(times) for times in zip(*pairs, strict=True))
    print(f"realize emit {DESIGN}: {1000 * emit:.0f} ms (median of {runs} alternating runs)")
    print(f'yardstick, python -c "import numpy, click": {1000 * yardstick:.0f} ms')
    print(f"ratio {emit / yardstick:.2f}, at most {MOST_RATIO} wanted")


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else DEFAULT_RUNS)
