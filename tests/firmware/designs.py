"""Realizations for the tests of the firmware: a grid over every option, and random ones. All data invented."""

from __future__ import annotations

from collections.abc import Iterator
from fractions import Fraction
from functools import cache
from itertools import product
from math import cos, pi
from random import Random
from typing import Any

from realize.arithmetic.formats import FORMATS, FloatFormat
from realize.arithmetic.realization import DeltaSection, Realization, Section
from realize.firmware import Emission
from realize.schedule import Table

Number = float | str | Fraction
PERIOD_S = Fraction(1, 2000)
UNIT_RANGE = (Fraction(-1), Fraction(1))

#: Ranges whose ends are integers, fractions that no format holds, zero at one end, and none.
RANGES = (UNIT_RANGE, (Fraction(-1, 3), Fraction(7, 10)), (Fraction(0), Fraction(10)), None)


#: Step through the options from design to design: prime to their number, so that all meet all kinds of realization.
STRIDE = 7


def rounded(target: FloatFormat, *values: Number) -> tuple[float, ...]:
    """Values of a format, from what a person would write."""
    return tuple(target.round(Fraction(value)) for value in values)


def section(target: FloatFormat, b: tuple[Number, ...], a: tuple[Number, ...] = ()) -> Section:
    return Section(rounded(target, *b), rounded(target, *a))


def parts(target: FloatFormat) -> dict[str, tuple[Section, ...]]:
    """Kinds of rest, by what is special about them."""
    second = section(target, ("1.3", "-2.1", "0.9"), ("-1.4", "0.55"))
    return {
        "nothing": (),
        "gain": (section(target, ("4.2",)),),
        "unit gain": (section(target, ("-1",)),),
        "first order": (section(target, ("4.2", "-3.1"), ("-0.38",)),),
        "second order": (second,),
        "zeros and ones": (
            section(target, ("0", "1", "-1"), ("-1.4", "0.55")),
            section(target, ("1", "0", "1"), ("0", "0.25")),
            section(target, ("0", "0.5"), ("0",)),
        ),
        "undamped": (second, section(target, ("0.125", "0", "-0.125"), ("-1.9", "1"))),
        "gain inside": (section(target, ("1", "0.5"), ("-0.5",)), section(target, ("0.75",)), second),
    }


def delta_section(target: FloatFormat, b: tuple[Number, ...], a: tuple[Number, ...] = ()) -> DeltaSection:
    return DeltaSection(rounded(target, *b), rounded(target, *a))


def delta_parts(target: FloatFormat) -> dict[str, tuple[DeltaSection, ...]]:
    """Kinds of rest in delta, by what is special about them."""
    slow = delta_section(target, ("1.6e-10", "6.3e-10", "6.3e-10"), ("3.6e-5", "6.3e-10"))
    return {
        "gain": (delta_section(target, ("4.2",)),),
        "first order": (delta_section(target, ("4.2", "1.1"), ("0.62",)),),
        "slow pair": (slow,),
        "zeros and ones": (
            delta_section(target, ("0", "1", "-1"), ("0.6", "0.15")),
            delta_section(target, ("1", "0", "1"), ("1", "0.25")),
            delta_section(target, ("0", "0.5"), ("1",)),
        ),
        "undamped": (slow, delta_section(target, ("0.125", "0.25", "0"), ("0.1", "0.1"))),
        "gain inside": (
            delta_section(target, ("1", "1.5"), ("0.5",)),
            delta_section(target, ("0.75",)),
            delta_section(target, ("1.3", "0.5", "0.1"), ("0.6", "0.15")),
        ),
    }


def chains(target: FloatFormat) -> tuple[tuple[float, ...], ...]:
    """Integral chains of 0, 1, 2 and 3 states, one with a gain of exactly 1 and one with a gain of 0."""
    gains = ((), ("0.009",), ("-1",), ("0.02", "0.0004"), ("0", "0.001"), ("0.1", "-0.01", "0.003"))
    return tuple(rounded(target, *chain) for chain in gains)


@cache
def grid() -> tuple[Emission, ...]:
    """What :func:`made` makes, once: every module has the same objects."""
    return tuple(made())


def made() -> Iterator[Emission]:
    """Every kind of rest, chain, range, anti-windup, guard, storage and sign, in both formats; then odd ones."""
    kinds = ("hold-integral", "back-calculation", "none")
    options = list(product(kinds, (True, False), ("inline", "table"), ("subtract", "add")))
    count = 0
    for target in FORMATS.values():
        for sections, chain in product(parts(target).values(), chains(target)):
            if not sections and not chain:
                continue
            anti_windup, guard, coefficients, sign = options[count * STRIDE % len(options)]
            yield emission(
                f"g{count}",
                Realization(target, "direct" if len(sections) < 2 else "cascade", chain, sections, PERIOD_S),
                output_range=RANGES[count % 5 % len(RANGES)],
                anti_windup=anti_windup,
                guard_nonfinite=guard,
                coefficients=coefficients,
                recursion_sign=sign,
            )
            count += 1
    for target in FORMATS.values():
        for in_series, chain in product(delta_parts(target).values(), chains(target)[:4]):
            anti_windup, guard, coefficients, sign = options[count * STRIDE % len(options)]
            yield emission(
                f"d{count}",
                Realization(target, "delta", chain, in_series, PERIOD_S),
                output_range=RANGES[count % 5 % len(RANGES)],
                anti_windup=anti_windup,
                guard_nonfinite=guard,
                coefficients=coefficients,
                recursion_sign=sign,
            )
            count += 1
    gain = Realization(FORMATS["float32"], "direct", (), (section(FORMATS["float32"], ("2.5",)),), PERIOD_S)
    yield emission("stateless", gain, guard_nonfinite=False)
    bare = Realization(FORMATS["float32"], "direct", (-1.0,), (), PERIOD_S)
    yield emission("tableless", bare, coefficients="table", output_range=UNIT_RANGE)
    for name in ("section1", "integral1", "state", "input", "applied", "coefficients", "zero"):
        yield emission(
            name, Realization(bare.format, "direct", (0.25,), gain.sections, PERIOD_S), output_range=UNIT_RANGE
        )
    yield from scheduled()


def scheduled() -> Iterator[Emission]:
    """Schedules of 2 to 5 points: coefficients that are 1 at one point alone, and at all; every structure."""
    single, double = FORMATS["float32"], FORMATS["float64"]
    stored = {
        "s0": [
            Realization(single, "direct", rounded(single, k), (section(single, (b, "-0.7"), (a,)),), PERIOD_S)
            for k, b, a in (
                ("0.01", "1", "-0.5"),
                ("0.02", "1.5", "-0.25"),
                ("0.025", "2.25", "0.125"),
                ("0.5", "3", "0"),
            )
        ],
        "s1": [
            Realization(
                double,
                "cascade",
                (),
                (section(double, ("1", b, "0.25"), (a, "0.5")), section(double, ("-0.3", b), ("-0.9",))),
                PERIOD_S,
            )
            for b, a in (("0.5", "-0.6"), ("-0.75", "-1.2"))
        ],
        "s2": [
            Realization(single, "delta", rounded(single, k), (delta_section(single, (k, "0.3"), (a,)),), PERIOD_S)
            for k, a in (("0.125", "0.0021"), ("0.3", "0.0034"), ("-0.7", "0.1"))
        ],
        "s3": [
            Realization(
                double,
                "direct",
                rounded(double, "0.02", k),
                (section(double, ("0", k, "-0.2"), (k, "0.1")),),
                PERIOD_S,
            )
            for k in ("0.1", "0.3", "-0.2", "0.7", "0.8")
        ],
    }
    options: dict[str, dict[str, Any]] = {
        "s0": {"output_range": UNIT_RANGE},
        "s1": {"recursion_sign": "add", "guard_nonfinite": False},
        "s2": {"output_range": UNIT_RANGE, "anti_windup": "back-calculation"},
        "s3": {"output_range": RANGES[1], "anti_windup": "none", "recursion_sign": "add"},
    }
    for name, points in stored.items():
        at = tuple(Fraction(k * k - 3, 7) for k in range(len(points)))
        table = Table("speed", "m/s", at, 8, tuple(points))
        yield emission(name, points[0], coefficients="table", schedule=table, **options[name])


def emission(name: str, realization: Realization, **options: Any) -> Emission:
    """An emission whose text tries to break out of its comment."""
    made = Emission(
        name,
        realization,
        "bilinear",
        "kp + ki/s */ int broken; /* ??/",
        about="an invented servo \\",
        author="??/\nZo\u00eb */ #error",
        input_range=(Fraction(-8), Fraction(8)),
        input_unit="mm",
    )
    if options.get("anti_windup") == "back-calculation":
        options["tracking_time_s"] = Fraction(1, 100)
    return made._replace(**options)


def random_emission(name: str, seed: int) -> Emission:
    """A random stable realization with random options."""
    draw = Random(seed)
    target = draw.choice(list(FORMATS.values()))
    sections = tuple(_random_section(draw, target) for _ in range(draw.choice((0, 1, 1, 2, 3))))
    order = draw.choice((0, 1, 1, 2, 3)) or (0 if sections else 1)
    chain = rounded(target, *(draw.choice((-1, 1)) * 10.0 ** draw.uniform(-6, 0) for _ in range(order)))
    low = draw.choice((0.0, -1.0, -(10.0 ** draw.uniform(-2, 3))))
    high = draw.choice((1.0, 10.0 ** draw.uniform(-2, 3)))
    return emission(
        name,
        Realization(target, "cascade", chain, sections, PERIOD_S),
        output_range=draw.choice((None, (Fraction(low), Fraction(high)))),
        input_range=draw.choice((None, (Fraction(-8), Fraction(8)), (Fraction(0), Fraction(1, 3)))),
        anti_windup=draw.choice(("hold-integral", "back-calculation", "none")),
        guard_nonfinite=draw.random() < 0.7,
        coefficients=draw.choice(("inline", "table")),
        recursion_sign=draw.choice(("subtract", "add")),
    )


def in_delta(emission: Emission) -> Emission:
    """The same with sections in delta, their coefficients converted and then rounded."""
    stored = emission.realization
    sections = tuple(
        delta_section(stored.format, _converted(section.b), _converted((1.0, *section.a))[1:])
        for section in stored.sections
    )
    return emission._replace(
        realization=Realization(stored.format, "delta", stored.integral, sections, stored.period_s)
    )


def _converted(p: tuple[float, ...]) -> tuple[Fraction, ...]:
    """``p(z)`` up to degree 2, descending, as a polynomial in ``z - 1``."""
    first, *others = map(Fraction, p)
    if not others:
        return (first,)
    if len(others) == 1:
        return first, first + others[0]
    return first, 2 * first + others[0], first + others[0] + others[1]


def _random_section(draw: Random, target: FloatFormat) -> Section:
    order = draw.choice((0, 1, 2, 2))
    b = [draw.choice((0.0, 1.0, -1.0, draw.gauss(0, 2), draw.gauss(0, 2))) for _ in range(order)]
    b.insert(draw.randint(0, order), draw.gauss(0, 2))
    r = draw.random()
    poles = ((), (r * draw.choice((-1, 1)),), (-2 * r * cos(draw.uniform(0, pi)), r * r))[order]
    return section(target, tuple(b), poles)
