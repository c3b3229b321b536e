"""How long a gain schedule takes, point by point: an order-3 controller at 125 to 1,000 points, and how that grows.

``python -m tests.benchmarks.schedule`` prints a row for each number of points: seconds of the whole emission, in
memory; milliseconds a point; how much longer it takes than with half the points; and bytes of the table and of the
record. Linear growth is a ratio of 2. It must end within :data:`MOST_S`.
"""

from __future__ import annotations

import sys
import time

from realize.design import design_from_text
from realize.firmware.job import emit

POINTS = (125, 250, 500, 1000)

#: What 1,000 points may take on two cores.
MOST_S = 60.0

#: Invented: a servo with a filtered derivative and a filtered error, whose gains fall with the load it moves.
DESIGN = """
[design]
name = "load_servo"
transfer = "(kp + ki/s + kd*s/(tf*s + 1))/(tn*s + 1)"
[design.values]
kp = 4.2
ki = 18
kd = 0.09
tf = 0.002
tn = 0.0007
[sampling]
rate = "4 kHz"
band = "40 Hz"
[schedule]
variable = "load"
unit = "kg"
points = [
{points}
]
[schedule.values]
kp = [
{kp}
]
ki = [
{ki}
]
kd = [
{kd}
]
[signals.input]
range = [-10, 10]
[signals.output]
range = [-10, 10]
"""


def design_text(count: int) -> str:
    """The design with so many points from 1 kg to 5 kg."""
    loads = [1 + 4 * i / (count - 1) for i in range(count)]
    lists = {
        "points": [f"{load:.6f}" for load in loads],
        "kp": [f"{4.2 / load**0.5:.6f}" for load in loads],
        "ki": [f"{18 / load:.6f}" for load in loads],
        "kd": [f"{0.09 / load**0.25:.6f}" for load in loads],
    }
    return DESIGN.format(**{name: ",\n".join(numbers) for name, numbers in lists.items()})


def main() -> None:
    """Print the rows; exit status 1 where the last takes too long."""
    print("points  seconds  ms/point  ratio  table bytes  record bytes")
    before = None
    for count in POINTS:
        design = design_from_text(design_text(count), "benchmark")
        started = time.perf_counter()
        files = emit(design).files
        taken = time.perf_counter() - started
        ratio = f"{taken / before:5.2f}" if before else "    -"
        sizes = [len(files[f"load_servo{ending}"]) for ending in ("_schedule.h", ".record.json")]
        print(f"{count:6}  {taken:7.2f}  {1000 * taken / count:8.2f}  {ratio}  {sizes[0]:11}  {sizes[1]:12}")
        before = taken
    sys.exit(taken > MOST_S)


if __name__ == "__main__":
    main()
