"""Saturation on the compiled code: the cases in which a history that holds the clamped output goes wrong.

A PI, a PID with a filtered derivative, and a plant they drive; all invented, from common practice.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

import pytest

from realize.arithmetic.formats import FORMATS, FloatFormat
from realize.arithmetic.realization import Realization
from realize.firmware import Emission
from tests.firmware.bench import Bench, Program, toolchains, value
from tests.firmware.designs import PERIOD_S, UNIT_RANGE, emission, rounded, section

KP, KI, KD, POLE_RAD_S = Fraction("4.2"), Fraction(18), Fraction("0.09"), Fraction(1900)
#: Between derivative time kd/kp = 21 ms and integral time kp/ki = 233 ms (Astrom and Hagglund's rule, from memory).
TRACKING_TIME_S = Fraction("0.07")
KINDS = ("hold-integral", "back-calculation", "none")


def pid(target: FloatFormat, kd: Fraction) -> Realization:
    """Backward differences: ``kp + ki T z/(z-1) + kd p (z-1)/((1 + p T) z - 1)``."""
    integral = KI * PERIOD_S
    lag = 1 / (1 + POLE_RAD_S * PERIOD_S)
    kick = kd * POLE_RAD_S * lag
    proportional = KP + integral
    if kd == 0:
        rest = (section(target, (proportional,)),)
    else:
        rest = (section(target, (proportional + kick, -proportional * lag - kick), (-lag,)),)
    return Realization(target, "direct", rounded(target, integral), rest, PERIOD_S)


def controllers() -> list[Emission]:
    return [
        emission(
            f"{kind.partition('-')[0]}_{name}_{target.name}",
            pid(target, kd),
            output_range=UNIT_RANGE,
            anti_windup=kind,
        )._replace(tracking_time_s=TRACKING_TIME_S)
        for target in FORMATS.values()
        for name, kd in (("pi", Fraction(0)), ("pid", KD))
        for kind in KINDS
    ]


NAMES = [controller.name for controller in controllers()]
SAFE = [name for name in NAMES if not name.startswith("none")]
HOLDING = [name for name in NAMES if name.startswith("hold")]


@pytest.fixture(scope="module")
def program(bench: Bench) -> Program:
    return bench.build(controllers(), toolchains()[0])


def open_loop(program: Program, name: str, inputs: Sequence[float]) -> list[float]:
    return [value(said) for said in program.run([f"d {name}", "c", *(f"u {x.hex()}" for x in inputs)])]


def closed_loop(program: Program, name: str, references: Sequence[tuple[int, float]]) -> list[list[float]]:
    """Commands for a plant of gain 2 and a time constant of 0.5 s, for each stretch of a reference."""
    stretches = [f"l {float(count).hex()} {reference.hex()}" for count, reference in references]
    said = program.run([f"d {name}", "c", f"s {(0.999).hex()} {(0.002).hex()}", *stretches])
    commands = [value(s) for s in said]
    ends = [sum(count for count, _ in references[: k + 1]) for k in range(len(references))]
    return [commands[end - count : end] for end, (count, _) in zip(ends, references, strict=True)]


def clamped_history(realization: Realization, inputs: Sequence[float]) -> list[float]:
    """What a direct form answers that keeps its clamped output: the same transfer function over one denominator."""
    (b0, b1), (a1,) = realization.sections[0]
    r = realization.integral[0]
    top = (b0, b1 - b0 + r, -b1 + r * a1)
    bottom = (a1 - 1.0, -a1)
    x, y = [0.0, 0.0], [0.0, 0.0]
    answers = []
    for e in inputs:
        u = top[0] * e + top[1] * x[0] + top[2] * x[1] - bottom[0] * y[0] - bottom[1] * y[1]
        u = min(max(u, -1.0), 1.0)
        x, y = [e, x[0]], [u, y[0]]
        answers.append(u)
    return answers


STEP = [0.125] * 2000
PIDS = [name for name in SAFE if "_pid_" in name]


def test_a_clamped_history_drives_the_pid_to_the_wrong_limit() -> None:
    assert min(clamped_history(pid(FORMATS["float64"], KD), STEP)) == -1.0


@pytest.mark.parametrize("name", PIDS)
def test_a_step_that_saturates_the_pid_never_drives_it_the_wrong_way(program: Program, name: str) -> None:
    up, down = open_loop(program, name, STEP), open_loop(program, name, [-x for x in STEP])
    assert up[0] == 1.0
    assert up[-1] == 1.0
    # what P alone calls for, all of it where the integral is held; the kick pulls a tracking one down a little
    assert min(up) >= float(KP) * STEP[0] * (0.99 if name.startswith("hold") else 0.5)
    assert down == [-u for u in up]


@pytest.mark.parametrize("name", SAFE)
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_after_long_saturation_the_command_leaves_the_limit_when_the_error_reverses(
    program: Program, name: str, sign: float
) -> None:
    answers = open_loop(program, name, [sign * 0.5] * 20000 + [-sign * 0.125] * 2)
    assert answers[100:20000] == [sign] * 19900
    assert all(sign * u < 1.0 for u in answers[20000:])


@pytest.mark.parametrize("name", [name for name in HOLDING if "_pi_" in name])
def test_a_held_integral_is_where_it_was_when_the_limit_was_reached(program: Program, name: str) -> None:
    short, long = (open_loop(program, name, [0.125] * count + [0.0])[-1] for count in (2000, 20000))
    assert short == long
    # held within one increment of the value at which P and I reach the limit together
    assert abs(long - (1.0 - 0.125 * float(KP + KI * PERIOD_S))) <= 0.125 * float(KI * PERIOD_S)


@pytest.mark.parametrize("name", SAFE)
@pytest.mark.parametrize("sign", [1.0, -1.0])
def test_a_loop_that_could_not_follow_recovers_at_once(program: Program, name: str, sign: float) -> None:
    far, near = closed_loop(program, name, [(5000, sign * 5.0), (5000, sign * 1.0)])
    assert far[100:] == [sign] * 4900
    assert sign * near[0] < 1.0
    assert abs(near[-1] - sign * 0.5) < 1e-3  # the plant has gain 2


@pytest.mark.parametrize("name", [name for name in NAMES if name.startswith("none")])
def test_the_same_loop_without_anti_windup_stays_at_the_limit_for_long(program: Program, name: str) -> None:
    _, near = closed_loop(program, name, [(5000, 5.0), (5000, 1.0)])
    assert near[50:1000] == [1.0] * 950  # the kick of the derivative is over
