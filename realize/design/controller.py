"""The table ``[design]``: the named values and the transfer function, in any of its three forms."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterable, Mapping
from fractions import Fraction
from functools import reduce
from graphlib import CycleError, TopologicalSorter
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.expression import (
    RESERVED_NAMES,
    decimal_text,
    evaluate_transfer,
    exact_text,
    format_transfer,
    names_in,
    ratio,
    read_exact,
)
from realize.algebra.expression.ratio import MAX_DEGREE, Ratio, UnfitError
from realize.algebra.expression.tokens import listed, nearest, shown
from realize.design.gate import LARGEST, Table, WrittenNumber, checked_number, described
from realize.errors import RealizeError, Refused
from realize.quantity import SHOWN_DIGITS, round_significant
from realize.transfer import TransferFunction

#: Most named values: three for each of the 33 coefficients of a polynomial.
MAX_VALUES = 100

#: Longest name of a value: twice that of a design, so that a description fits.
MAX_VALUE_NAME = 48

#: Longest exact number that is readable: a quotient of two of 19 digits, more than a double has.
LONGEST_PLAIN = 40

#: Digits that tell every two doubles apart.
DOUBLE_DIGITS = 17

#: Largest value, and largest ratio of leading or of trailing coefficients (and one over the smallest ratio): they
#: must fit float64, which ends at 1.8e308.
LARGEST_GAIN = 10**300

#: The forms of a transfer function, by their keys.
FORMS = (("transfer",), ("numerator", "denominator"), ("zeros", "poles", "gain"))

_FORMS_ALLOWED = "one of: transfer; numerator and denominator; zeros, poles and gain"


class Controller(NamedTuple):
    """The transfer function, how it was written, and the values it was written with."""

    transfer: TransferFunction
    text: str
    values: tuple[tuple[str, Fraction], ...]


class _Written(NamedTuple):
    """A value as it stands somewhere: in the file or on the command line."""

    value: object
    where: str


def read_controller(table: Table, overrides: Mapping[str, str]) -> Controller:
    """Read values and transfer function from the table ``[design]``.

    Parameters
    ----------
    table : Table
        The table; its unknown keys are already refused.
    overrides : mapping of str to str
        Values from the command line, by name.
    """
    form = _form(table)
    written = _written_values(table.table("values"), overrides)
    _refuse_useless(overrides, written, table, form)
    values = _resolve(written)
    numerator, denominator = _POLYNOMIALS[form](table, values)
    transfer = reduced(numerator, denominator, table.where(form[0]))
    text = str(table.entries["transfer"]) if "transfer" in table else _readable(numerator, denominator)
    return Controller(transfer, " ".join(text.split()), tuple(values.items()))


def reduced(numerator: poly.Rationals, denominator: poly.Rationals, where: str) -> TransferFunction:
    """Reduce to lowest terms; what cannot be is refused by the name of the place.

    Raises
    ------
    RealizeError
        When numerator or denominator are zero.
    Refused
        When a cancellation hides a growing mode.
    """
    if not any(denominator):
        raise RealizeError(where, "a denominator of zero", "a denominator other than zero", "check the coefficients")
    if not any(numerator):
        raise RealizeError(
            where,
            "a transfer function that is zero",
            "a transfer function other than zero",
            "check the values: all terms cancel or are zero",
        )
    _refuse_out_of_range(numerator, denominator, where)
    try:
        return TransferFunction.from_polynomials(numerator, denominator)
    except Refused as refusal:
        raise Refused(where, refusal.found, refusal.allowed, refusal.advice) from None


def _refuse_out_of_range(numerator: poly.Rationals, denominator: poly.Rationals, where: str) -> None:
    """Refuse corners and gains that float64 could not hold; they are slips of an exponent."""
    n, d = (_without_origin(p) for p in (numerator, denominator))
    for p, name in ((n, "zero"), (d, "pole")):
        if not (_bounded_by(p, LARGEST) and _bounded_by(p[::-1], LARGEST)):
            raise RealizeError(
                where,
                f"a {name} too far from or too near to s = 0",
                f"zeros and poles at 0, or from {1 / LARGEST:.0e} to {LARGEST:.0e} rad/s",
                "check the powers of ten",
            )
    for gain in (abs(n[0] / d[0]), abs(n[-1] / d[-1])):
        if not Fraction(1, LARGEST_GAIN) <= gain <= LARGEST_GAIN:
            raise RealizeError(
                where,
                "a gain too large or too small",
                f"ratios of coefficients from {1 / LARGEST_GAIN:.0e} to {LARGEST_GAIN:.0e}",
                "check the powers of ten",
            )


def _without_origin(p: poly.Rationals) -> poly.Rationals:
    """Divide out the roots at s = 0, and drop leading zeros."""
    kept = poly.trimmed(p)
    return kept[: len(kept) - poly.trailing_zeros(kept)]


def _bounded_by(p: poly.Rationals, radius: int) -> bool:
    """Whether Fujiwara's bound (1916), twice the largest k-th root of ``|a_k/a_0|``, is at most the radius."""
    return all(abs(c) <= abs(p[0]) * Fraction(radius, 2) ** k for k, c in enumerate(p))


def _form(table: Table) -> tuple[str, ...]:
    """Which of the three forms the table uses."""
    present = [form for form in FORMS if any(key in table for key in form)]
    if len(present) != 1:
        keys = [key for form in present for key in form if key in table]
        found = f"{' and '.join(keys)} at once" if keys else "no transfer function"
        advice = "keep one of them" if keys else 'add a line such as transfer = "4.2 + 18/s"'
        raise RealizeError(f"{table.source}, {table.place}", found, _FORMS_ALLOWED, advice)
    # Zeros and poles may be absent: an integrator has no zeros.
    required = present[0] if "zeros" not in present[0] else ("gain",)
    for key in required:
        if key not in table:
            raise table.error(key, "nothing", _FORMS_ALLOWED, f"add {key}")
    return present[0]


def _readable(numerator: poly.Rationals, denominator: poly.Rationals) -> str:
    """Coefficients as an expression; those that nobody could read are rounded to the digits of a double."""
    above, below = (
        [c if len(exact_text(c)) <= LONGEST_PLAIN else round_significant(c, DOUBLE_DIGITS) for c in poly.trimmed(p)]
        for p in (numerator, denominator)
    )
    return format_transfer(above, below)


def _from_expression(table: Table, values: Mapping[str, Fraction]) -> tuple[poly.Rationals, poly.Rationals]:
    text = table.entries["transfer"]
    if not isinstance(text, str) or isinstance(text, WrittenNumber):
        raise table.error("transfer", described(text), "an expression in s, in quotes", 'write transfer = "4.2 + 18/s"')
    return evaluate_transfer(text, values, table.where("transfer"))


def _from_coefficients(table: Table, values: Mapping[str, Fraction]) -> tuple[poly.Rationals, poly.Rationals]:
    numerator, denominator = (_coefficients(table, key, values) for key in ("numerator", "denominator"))
    return numerator, denominator


def _coefficients(table: Table, key: str, values: Mapping[str, Fraction]) -> poly.Rationals:
    where = table.where(key)
    entries = _bounded_list(table, key, MAX_DEGREE + 1)
    read = tuple(checked_number(entry, values, f"{where}, entry {i}") for i, entry in enumerate(entries, 1))
    _within_bounds(lambda: ratio.polynomial(read), where)
    return read


def _from_roots(table: Table, values: Mapping[str, Fraction]) -> tuple[poly.Rationals, poly.Rationals]:
    gain = table.number("gain", values)
    assert gain is not None  # required by the form
    zeros, poles = (_product(table, key, values) for key in ("zeros", "poles"))
    scaled = _within_bounds(lambda: ratio.multiply(ratio.constant(gain), zeros), table.where("gain"))
    return _rationals(scaled), _rationals(poles)


def _product(table: Table, key: str, values: Mapping[str, Fraction]) -> Ratio:
    """``prod(s - root)``, pairs as real quadratics."""
    where = table.where(key)
    roots = [
        _root(entry, values, f"{where}, entry {i}") for i, entry in enumerate(_bounded_list(table, key, MAX_DEGREE), 1)
    ]
    _refuse_lone(roots, where)
    one = Fraction(1)
    factors: list[poly.Rationals] = [(one, -2 * re, re**2 + im**2) if im else (one, -re) for re, im in roots if im >= 0]
    return _within_bounds(
        lambda: reduce(ratio.multiply, (ratio.polynomial(f) for f in factors), ratio.constant(one)), where
    )


def _rationals(r: Ratio) -> poly.Rationals:
    """Coefficients of a ratio with a constant denominator."""
    return tuple(Fraction(c, *r.denominator) for c in r.numerator)


def _within_bounds(compute: Callable[[], Ratio], where: str) -> Ratio:
    """Compute, and give the place to a complaint that knows none."""
    try:
        return compute()
    except UnfitError as problem:
        raise RealizeError(where, problem.found, problem.allowed, problem.advice) from None


def _root(entry: object, values: Mapping[str, Fraction], where: str) -> tuple[Fraction, Fraction]:
    if not isinstance(entry, list):
        return checked_number(entry, values, where), Fraction(0)
    if len(entry) != 2:
        raise RealizeError(
            where,
            f"a list of {len(entry)}",
            "a real number, or a pair [re, im]",
            "write [-5, 8.7] for -5 + 8.7i",
        )
    re, im = (checked_number(part, values, where) for part in entry)
    return re, im


def _refuse_lone(roots: Iterable[tuple[Fraction, Fraction]], where: str) -> None:
    """Refuse a complex root without its conjugate."""
    counts = Counter(roots)
    for (re, im), count in counts.items():
        if im and counts[re, -im] != count:
            raise RealizeError(
                where,
                f"the complex root {_pair(re, im)} without its conjugate",
                "complex roots in conjugate pairs, as often the one as the other",
                f"add {_pair(re, -im)}",
            )


def _pair(re: Fraction, im: Fraction) -> str:
    return f"[{decimal_text(re, SHOWN_DIGITS)}, {decimal_text(im, SHOWN_DIGITS)}]"


def _bounded_list(table: Table, key: str, longest: int) -> list[object]:
    entries = table.numbers(key)
    if len(entries) > longest:
        raise table.error(
            key,
            f"a list of {len(entries)}",
            f"at most {longest} entries, for degree {MAX_DEGREE}",
            "split the transfer function into several designs in series",
        )
    return entries


_POLYNOMIALS = dict(zip(FORMS, (_from_expression, _from_coefficients, _from_roots), strict=True))


def _written_values(table: Table, overrides: Mapping[str, str]) -> dict[str, _Written]:
    """Values by name, those of the command line in place of the file's."""
    written = {name: _Written(value, table.where(name)) for name, value in table.entries.items()}
    written |= {name: _Written(text, f"--value {name}") for name, text in overrides.items()}
    if len(written) > MAX_VALUES:
        raise RealizeError(
            f"{table.source}, {table.place}",
            f"{len(written)} values",
            f"at most {MAX_VALUES} values",
            "write the numbers into the transfer",
        )
    for name, entry in written.items():
        checked_value_name(name, entry.where)
    return written


def checked_value_name(name: str, where: str) -> str:
    """Check the name of a value.

    Raises
    ------
    RealizeError
        When an expression could not refer to it.
    """
    if name in RESERVED_NAMES:
        raise RealizeError(
            where,
            f"a value named {name}, which has a meaning of its own",
            f"any name but {listed(RESERVED_NAMES)}",
            f"call it {name}_value",
        )
    if not (name.isascii() and name.isidentifier()) or len(name) > MAX_VALUE_NAME:
        raise RealizeError(
            where,
            f"a value named {shown(name)}",
            f"names of ASCII letters, digits and _, at most {MAX_VALUE_NAME} characters, no digit first",
            "rename it",
        )
    return name


def _refuse_useless(
    overrides: Mapping[str, str], written: Mapping[str, _Written], table: Table, form: tuple[str, ...]
) -> None:
    """A value on the command line that nothing uses is a slip of the pen."""
    used = {name for value, where in written.values() for name in _names(value, where)}
    used |= {name for key in form for name in _names(table.entries.get(key), table.where(key))}
    in_file = table.table("values").entries
    for name in overrides:
        if name not in used and name not in in_file:
            known = sorted(used | set(in_file))
            like = nearest(name, known)
            raise RealizeError(
                f"--value {name}",
                "a value that nothing uses",
                listed(known) or "no values: the transfer has no names",
                f"did you mean {like}?" if like else "remove it",
            )


def _names(value: object, where: str) -> tuple[str, ...]:
    """Names that an entry refers to, or a list of entries and pairs."""
    entries = value if isinstance(value, list) else [value]
    parts = [part for entry in entries for part in (entry if isinstance(entry, list) else [entry])]
    return tuple(name for part in parts for name in _names_in_number(part, where))


def _names_in_number(value: object, where: str) -> tuple[str, ...]:
    if not isinstance(value, str) or isinstance(value, WrittenNumber):
        return ()
    try:
        return names_in(value, where) if read_exact(value.strip()) is None else ()
    except UnfitError:
        return ()  # refused where it is read


def _resolve(written: Mapping[str, _Written]) -> dict[str, Fraction]:
    """Evaluate each value after those it refers to; the result keeps the order they were written in."""
    graph = {
        name: [other for other in _names(entry.value, entry.where) if other in written]
        for name, entry in written.items()
    }
    try:
        order = list(TopologicalSorter(graph).static_order())
    except CycleError as error:
        # The list runs from what is referred to, to what refers to it.
        cycle = list(reversed(error.args[1]))
        raise RealizeError(
            written[cycle[0]].where,
            f"values that refer to each other: {' -> '.join(cycle)}",
            "values that refer to numbers in the end",
            f"give one of {listed(cycle[1:])} a number",
        ) from None
    values: dict[str, Fraction] = {}
    for name in order:
        where = written[name].where
        values[name] = checked_number(written[name].value, values, where)
        if abs(values[name]) > LARGEST_GAIN:
            raise RealizeError(
                where,
                "a value that is too large",
                f"values from -{LARGEST_GAIN:.0e} to {LARGEST_GAIN:.0e}",
                "check the powers of ten",
            )
    return {name: values[name] for name in written}
