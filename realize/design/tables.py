"""The other tables of the design file, each read by one function."""

from __future__ import annotations

import re
from fractions import Fraction
from typing import NamedTuple

from realize.algebra.expression.ratio import MAX_DEGREE
from realize.algebra.expression.tokens import shown
from realize.algebra.irrational import pi
from realize.design.gate import (
    DIMENSIONS,
    Table,
    checked_choice,
    checked_number,
    checked_quantity,
    described,
    within_range,
)
from realize.design.model import (
    CHECK_UNITS,
    COUNT_TYPES,
    DEFAULT_TARGET,
    FLOAT_STRUCTURES,
    INTEGER_STRUCTURES,
    LOOP_METHODS,
    METHODS,
    TOLERANCE_KEYS,
    Accept,
    Overrides,
    Rolloff,
    Signal,
    Target,
)
from realize.errors import RealizeError
from realize.quantity import format_engineering, round_significant
from realize.transfer import TransferFunction

#: Longest name of a design: C99 promises to tell apart the first 31 characters of a name that files share, and
#: the suffixes the code adds differ within their first seven.
MAX_NAME = 24

#: Longest unit of a signal: a unit, not a sentence.
MAX_UNIT = 24

#: Farthest offset of a converter in counts: a 32-bit count.
MAX_OFFSET = 2**31

#: Shortest and longest period in s: a terahertz is beyond any converter, and thirty years between two samples beyond
#: any process.
SHORTEST_PERIOD_S = Fraction(1, 10**12)
LONGEST_PERIOD_S = Fraction(10**9)

#: Digits a roll-off pole in Hz is rounded to in rad/s: those that tell every two doubles apart, so that the pole
#: can be pasted from the record into a design file.
POLE_DIGITS = 17

#: Most phase a roll-off may be allowed to take, in degrees: that of one pole far above its corner.
MOST_PHASE_BUDGET_DEG = 90

_DEFAULT_NAME = "controller"

_INTEGER_TYPES = ("int16", "int32")
_FLOAT_TYPES = {"float": "float32", "float32": "float32", "double": "float64", "float64": "float64"}

#: What is meant by the names C has for numbers, where a width is asked for; int is 32 bits wide on most processors.
_C_NAMES = {"float": "float32", "double": "float64", "int": "int32", "short": "int16"}

_TARGET_KEYS = (
    *("arithmetic", "structure", "coefficients", "recursion_sign"),
    *("anti_windup", "tracking_time", "guard_nonfinite"),
)

#: The method that can make up for delay, and the one that is exact at a frequency.
_COMPENSATING = "frequency-fit"
_PREWARPED = "bilinear-prewarped"

#: A number with a unit behind it, where no unit is wanted; 2e-3 and 2*pi are none.
_WITH_UNIT = re.compile(r"\s*[-+]?[0-9.]++(?:[eE][-+]?[0-9]++)?+\s*[A-Za-z%].*", re.DOTALL)

#: A number, or a quotient of two, with the unit of a signal behind it; ``2 pi`` and ``2 sqrt(3)`` are products.
_NUMBER_AND_UNIT = re.compile(
    r"\s*(?P<number>[-+]?\s*[0-9.]++(?:[eE][-+]?[0-9]++)?+(?:\s*/\s*[0-9.]++(?:[eE][-+]?[0-9]++)?+)?+)"
    r"\s*+(?!pi\b|sqrt\b)(?:[^\W\d_]|[%\xb0]).*",
    re.DOTALL,
)

#: A number that needs no quotes.
_UNQUOTED = re.compile(r"[-+]?(?:0|[1-9][0-9]*)(?:\.[0-9]+)?(?:[eE][-+]?[0-9]+)?")

#: Checks that may be accepted without a figure: what went wrong is a matter of yes or no.
_LIMIT_OPTIONAL = ("saturation recovery",)

_CHECKS_WITHOUT_FIGURE = tuple(check for check, unit in CHECK_UNITS.items() if unit is None)

#: Words C99 and C++11 keep for themselves, and the file names some systems keep for devices.
_KEPT_WORDS = frozenset(
    """
    alignas alignof and and_eq asm auto bitand bitor bool break case catch char char16_t char32_t class compl
    const const_cast constexpr continue decltype default delete do double dynamic_cast else enum explicit export
    extern false float for friend goto if inline int long mutable namespace new noexcept not not_eq nullptr
    operator or or_eq private protected public register reinterpret_cast restrict return short signed sizeof
    static static_assert static_cast struct switch template this thread_local throw true try typedef typeid
    typename union unsigned using virtual void volatile wchar_t while xor xor_eq
    aux con nul prn
    """.split()  # noqa: SIM905 -- a list of quoted words hides a missing one
)


class Sampling(NamedTuple):
    """Sample period and band edge."""

    period_s: Fraction | None
    band_rad_s: Fraction | None


class Method(NamedTuple):
    """Name of a method, and what only some methods ask for."""

    name: str
    exact_at_rad_s: Fraction | None
    compensate_delay: bool


def checked_name(name: str, where: str) -> str:
    """Check the name of a design, which becomes the prefix of everything in the C code.

    Raises
    ------
    RealizeError
        When it is no C identifier, too long, or kept by the languages or by operating systems.
    """
    allowed = f"a C identifier of at most {MAX_NAME} letters, digits and single _ between them, a letter first"
    if len(name) > MAX_NAME:
        raise RealizeError(where, f"a name of {len(name)} characters", allowed, "shorten it")
    # A _ at an end or a double one would make names that C and C++ keep for themselves.
    if not re.fullmatch(r"[A-Za-z][A-Za-z0-9]*(?:_[A-Za-z0-9]+)*", name):
        raise RealizeError(where, f"the name {shown(name)}", allowed, "write one such as roller_gap")
    if name.lower() in _KEPT_WORDS:
        raise RealizeError(where, f"the name {shown(name)}, a kept word", allowed, f"write {name}_control")
    return name


def read_name(table: Table, override: str | None) -> str:
    """Read the name of the design."""
    if override is not None:
        return checked_name(override, "--name")
    name = table.text("name")
    return _DEFAULT_NAME if name is None else checked_name(name, table.where("name"))


def read_sampling(table: Table, overrides: Overrides) -> Sampling:
    """Read rate or period, and the band; the command line replaces the period however the file gives it."""
    table.only(("rate", "period", "band"))
    given = _overridden_period(overrides)
    period_s = _period(table) if given is None else given
    band_rad_s = table.quantity("band", "angular frequency")
    if period_s is not None and band_rad_s is not None and band_rad_s * period_s >= pi():
        raise table.error(
            "band",
            f"a band up to {format_engineering(band_rad_s / (2 * pi()), 'Hz')}",
            f"a band below half the rate, {format_engineering(1 / (2 * period_s), 'Hz')}",
            "raise the rate, or lower the band",
        )
    return Sampling(period_s, band_rad_s)


def read_rolloff(table: Table, transfer: TransferFunction) -> Rolloff:
    """Read how an improper transfer function is to be made causal."""
    table.only(("placement", "order", "damping", "pole", "phase_budget"))
    if transfer.relative_degree >= 0:
        raise RealizeError(
            f"{table.source}, {table.place}",
            "a roll-off for a transfer function that is proper",
            "a roll-off for an improper one only",
            f"remove the table {table.place}; write a filter you want into the transfer",
        )
    asked = Rolloff(
        placement=table.choice("placement", ("derivative", "whole"), Rolloff().placement),
        order=_rolloff_order(table, transfer),
        damping=table.positive_number("damping") or Rolloff().damping,
        pole_rad_s=_rolloff_pole(table),
        phase_budget_deg=table.quantity("phase_budget", "angle") or Rolloff().phase_budget_deg,
    )
    _check_damping(table, asked, -transfer.relative_degree)
    if asked.phase_budget_deg >= MOST_PHASE_BUDGET_DEG:
        raise table.error(
            "phase_budget",
            described(table.entries["phase_budget"]),
            f"an angle below {MOST_PHASE_BUDGET_DEG} deg",
            "write what the phase margin of the loop can spare",
        )
    return asked


def read_method(table: Table, override: str | None) -> Method:
    """Read the name of the method, the frequency of exact prewarping, and whether it compensates delay."""
    table.only(("name", "exact_at", "compensate_delay"))
    value, where = (table.entries.get("name", "auto"), table.where("name"))
    if override is not None:
        value, where = override, "--method"
    name = checked_choice(value, ("auto", *METHODS, *LOOP_METHODS), where)
    compensate_delay = table.flag("compensate_delay", False)
    if compensate_delay:
        _refuse_other_method(table, "compensate_delay", "true", name, _COMPENSATING)
    exact_at_rad_s = table.quantity("exact_at", "angular frequency")
    if exact_at_rad_s is not None:
        _refuse_other_method(table, "exact_at", "a frequency", name, _PREWARPED)
    return Method(name, exact_at_rad_s, compensate_delay)


def read_target(table: Table) -> Target:
    """Read what the code is written for."""
    default = DEFAULT_TARGET
    table.only(_TARGET_KEYS)
    arithmetic = table.choice("arithmetic", ("float32", "float64", *_INTEGER_TYPES), default.arithmetic, _C_NAMES)
    target = Target(
        arithmetic=arithmetic,
        structure=table.choice("structure", _structures(arithmetic), default.structure),
        coefficients=table.choice("coefficients", ("inline", "table"), default.coefficients),
        recursion_sign=table.choice("recursion_sign", ("subtract", "add"), default.recursion_sign),
        anti_windup=table.choice("anti_windup", ("hold-integral", "back-calculation", "none"), default.anti_windup),
        tracking_time_s=table.quantity("tracking_time", "time"),
        guard_nonfinite=table.flag("guard_nonfinite", default.guard_nonfinite),
    )
    _check_tracking_time(table, target)
    return target


def _structures(arithmetic: str) -> tuple[str, ...]:
    return ("auto", *(INTEGER_STRUCTURES if arithmetic in _INTEGER_TYPES else FLOAT_STRUCTURES))


def read_signals(table: Table, target: Target) -> tuple[Signal, Signal]:
    """Read what is known of input and output."""
    table.only(("input", "output"))
    first, second = (_signal(table.table(key), target) for key in ("input", "output"))
    return first, second


def read_tolerance(table: Table) -> tuple[tuple[str, Fraction], ...]:
    """Read the tolerances that differ from their defaults."""
    table.only(TOLERANCE_KEYS)
    read = {key: _figure(table, key, unit) for key, unit in TOLERANCE_KEYS.items() if key in table}
    return tuple(read.items())


def read_accept(tables: list[Table]) -> tuple[Accept, ...]:
    """Read the agreed deviations."""
    accepted: dict[str, Accept] = {}
    for table in tables:
        entry = _accept(table)
        if entry.check in accepted:
            raise table.error(
                "check",
                f'a second entry for "{entry.check}"',
                "one entry for each check",
                "keep the one that holds",
            )
        accepted[entry.check] = entry
    return tuple(accepted.values())


def _refuse_other_method(table: Table, key: str, found: str, name: str, only: str) -> None:
    """Refuse a key that the named method would ignore."""
    if name not in ("auto", only):
        raise table.error(
            key,
            f"{found}, with the method {name}",
            f"{found} with the method {only} or auto only",
            f'remove it, or write name = "{only}"',
        )


def _overridden_period(overrides: Overrides) -> Fraction | None:
    if overrides.rate is not None and overrides.period is not None:
        raise RealizeError("--rate", "--rate and --period at once", "exactly one of them", "drop one")
    if overrides.rate is not None:
        return _checked_period(1 / checked_quantity(overrides.rate, "rate", "--rate"), "--rate")
    if overrides.period is not None:
        return _checked_period(checked_quantity(overrides.period, "time", "--period"), "--period")
    return None


def _period(table: Table) -> Fraction | None:
    if "rate" in table and "period" in table:
        raise table.error("rate", "rate and period at once", "exactly one of them", "remove one")
    rate_hz, period_s = table.quantity("rate", "rate"), table.quantity("period", "time")
    if rate_hz is not None:
        return _checked_period(1 / rate_hz, table.where("rate"))
    return None if period_s is None else _checked_period(period_s, table.where("period"))


def _checked_period(period_s: Fraction, where: str) -> Fraction:
    if not SHORTEST_PERIOD_S <= period_s <= LONGEST_PERIOD_S:
        raise RealizeError(
            where,
            f"a period of {format_engineering(period_s, 's')}",
            f"from {float(SHORTEST_PERIOD_S):.0e} s to {float(LONGEST_PERIOD_S):.0e} s",
            "check the power of ten and the unit",
        )
    return period_s


def _rolloff_order(table: Table, transfer: TransferFunction) -> int | None:
    lowest = -transfer.relative_degree
    order = table.integer("order", 1, MAX_DEGREE)
    if order is not None and not lowest <= order <= MAX_DEGREE - transfer.order:
        raise table.error(
            "order",
            f"{order} roll-off pole{'' if order == 1 else 's'}",
            f"from {lowest}, which make it proper, to {MAX_DEGREE - transfer.order}, for degree {MAX_DEGREE}",
            f"write order = {lowest}, or remove the key",
        )
    return order


def _rolloff_pole(table: Table) -> Fraction | None:
    """The pole in rad/s; in Hz it is rounded to the digits that a person can carry over."""
    if table.entries.get("pole", "auto") == "auto":
        return None
    pole_rad_s = table.quantity("pole", "angular frequency")
    in_hertz = str(table.entries["pole"]).rstrip().endswith("Hz")
    return round_significant(pole_rad_s, POLE_DIGITS) if pole_rad_s and in_hertz else pole_rad_s


def _check_damping(table: Table, asked: Rolloff, lowest_order: int) -> None:
    if asked.damping == Rolloff().damping:
        return
    if (asked.order or lowest_order) != 2:
        raise table.error(
            "damping",
            f"a damping ratio for a roll-off of order {asked.order or lowest_order}",
            "a damping ratio for a pair only",
            "write order = 2, or remove the damping",
        )
    if asked.damping > 1:
        raise table.error(
            "damping", described(table.entries["damping"]), "a damping ratio above 0, at most 1", "write 0.7071"
        )


def _check_tracking_time(table: Table, target: Target) -> None:
    wanted = target.anti_windup == "back-calculation"
    if wanted and target.tracking_time_s is None:
        raise table.error(
            "tracking_time",
            "nothing",
            "a time, because anti_windup is back-calculation",
            'add a line such as tracking_time = "0.2 s"',
        )
    if not wanted and target.tracking_time_s is not None:
        raise table.error(
            "tracking_time",
            f"a tracking time with anti_windup {target.anti_windup}",
            "a tracking time with back-calculation only",
            'remove it, or write anti_windup = "back-calculation"',
        )


def _signal(table: Table, target: Target) -> Signal:
    table.only(("range", "unit", "per_count", "offset", "type"))
    return Signal(
        range=_range(table),
        unit=table.text("unit", MAX_UNIT) or "",
        per_count=_per_count(table),
        offset=table.integer("offset", -MAX_OFFSET, MAX_OFFSET) or 0,
        type=_signal_type(table, target),
    )


def _per_count(table: Table) -> Fraction | None:
    written = table.entries.get("per_count")
    _refuse_unit(written, table.where("per_count"), "per_count = {}")
    if table.number("per_count") == 0:
        advice = 'a count cannot be 0; write its physical size, such as per_count = "1/1000"'
        raise table.error("per_count", described(written), "a number above zero", advice)
    return table.positive_number("per_count")


def _refuse_unit(written: object, where: str, line: str) -> None:
    """Refuse a number with a unit, which has a key of its own."""
    match = _NUMBER_AND_UNIT.fullmatch(written) if isinstance(written, str) else None
    if match is not None:
        advice = f"units stand under unit; write the number alone: {line.format(_shortest(match['number']))}"
        raise RealizeError(where, described(written), "a number without a unit", advice)


def _shortest(number: object) -> str:
    """A number as a file holds it, without quotes where it needs none."""
    text = "".join(str(number).split())
    return text if _UNQUOTED.fullmatch(text) else f'"{text}"'


def _range(table: Table) -> tuple[Fraction, Fraction] | None:
    if "range" not in table:
        return None
    where = table.where("range")
    written = table.numbers("range")
    ends = [_range_end(end, f"{where}, entry {i}") for i, end in enumerate(written, 1)]
    if len(ends) != 2 or ends[0] >= ends[1]:
        found = f"a list of {len(ends)}" if len(ends) != 2 else "a low end that is not below the high one"
        turned = len(ends) == 2 and ends[0] > ends[1]
        advice = ", ".join(_shortest(end) for end in reversed(written)) if turned else "-1.0, 1.0"
        raise table.error("range", found, "[low, high] with low below high", f"write range = [{advice}]")
    return ends[0], ends[1]


def _range_end(value: object, where: str) -> Fraction:
    _refuse_unit(value, where, "{}")
    return within_range(checked_number(value, {}, where), where)


def _signal_type(table: Table, target: Target) -> str | None:
    """The C type at the interface: of counts in integer arithmetic, else that of the arithmetic."""
    if "type" not in table:
        return None
    name = table.choice("type", (*_FLOAT_TYPES, *COUNT_TYPES), target.arithmetic, _C_NAMES)
    if target.arithmetic in _INTEGER_TYPES and name in COUNT_TYPES:
        return name
    if target.arithmetic in _INTEGER_TYPES:
        raise table.error(
            "type",
            f"{name}, with {target.arithmetic} arithmetic",
            "a type of counts: " + ", ".join(COUNT_TYPES),
            "name the type of the converter, or change arithmetic under [target]",
        )
    if _FLOAT_TYPES.get(name) != target.arithmetic:
        raise table.error(
            "type",
            f"{name}, with {target.arithmetic} arithmetic",
            f"the type of the arithmetic, {target.arithmetic}",
            "remove it, or change arithmetic under [target]",
        )
    return name


def _figure(table: Table, key: str, unit: str) -> Fraction:
    """A tolerance or limit above zero, in its unit."""
    written = table.entries[key]
    if not unit and isinstance(written, str) and _WITH_UNIT.fullmatch(written):
        raise table.error(
            key,
            described(written),
            "a plain number above zero: a ratio, which has no unit",
            f"write a plain number, such as {key} = 2.5",
        )
    value = table.quantity(key, DIMENSIONS[unit]) if unit else table.positive_number(key)
    assert value is not None  # the key is there
    return value


def _accept(table: Table) -> Accept:
    table.only(("check", "limit", "because", "by"))
    for key in ("check", "because", "by"):
        if key not in table:
            raise table.error(key, "nothing", "check, because and by in every entry", f'add {key} = ".."')
    check = table.choice("check", tuple(CHECK_UNITS), "")
    because, by = table.text("because"), table.text("by")
    assert because is not None and by is not None  # noqa: PT018 -- both keys are there
    return Accept(check, _limit(table, check), CHECK_UNITS[check] or "", because, by)


def _limit(table: Table, check: str) -> Fraction | None:
    unit = CHECK_UNITS[check]
    if unit is not None and "limit" in table:
        return _figure(table, "limit", unit)
    if unit is not None and check not in _LIMIT_OPTIONAL:
        allowed, line = (f"a limit in {unit}", f'limit = "4 {unit}"') if unit else ("a limit", "limit = 2.5")
        raise table.error("limit", "nothing", allowed, f"add a line such as {line}")
    if "limit" in table:
        raise table.error(
            "limit",
            f'a limit for "{check}", which has no figure',
            f"limits for every check but {', '.join(_CHECKS_WITHOUT_FIGURE)}",
            "remove the limit",
        )
    return None
