"""The table ``[design]``: the named values and the transfer function, in any of its three forms."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Collection, Iterable, Mapping
from fractions import Fraction
from functools import reduce
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.expression import decimal_text, evaluate_transfer, exact_text, format_transfer, ratio
from realize.algebra.expression.ratio import MAX_DEGREE, Ratio, UnfitError
from realize.design.gate import LARGEST, Table, checked_number
from realize.design.values import (
    LARGEST_GAIN,
    Values,
    names_of,
    refuse_unused,
    resolve,
    used_names,
    useless,
    written_values,
)
from realize.errors import RealizeError, Refused
from realize.quantity import SHOWN_DIGITS, round_significant
from realize.transfer import TransferFunction

#: Longest exact number that is readable: a quotient of two of 19 digits, more than a double has.
LONGEST_PLAIN = 40

#: Digits that tell every two doubles apart.
DOUBLE_DIGITS = 17

#: The forms of a transfer function, by their keys.
FORMS = (("transfer",), ("numerator", "denominator"), ("zeros", "poles", "gain"))

_FORMS_ALLOWED = "one of: transfer; numerator and denominator; zeros, poles and gain"


class Controller(NamedTuple):
    """The transfer function, how it was written, and the values it was written with."""

    transfer: TransferFunction
    text: str
    values: Values


def read_controller(table: Table, overrides: Mapping[str, str], elsewhere: Collection[str] = ()) -> Controller:
    """Read values and transfer function from the table ``[design]``.

    Parameters
    ----------
    table : Table
        The table; its unknown keys are already refused.
    overrides : mapping of str to str
        Values from the command line, by name.
    elsewhere : collection of str
        Names that a value of the command line may be meant for in another table.
    """
    form = _form(table)
    roots = [name for key in form for name in names_of(table.entries.get(key), table.where(key))]
    written = written_values(table.table("values"), overrides, roots)
    known = {*used_names({*roots, *written}, written), *elsewhere}
    for name in overrides:
        if name not in known:
            raise useless(name, f"--value {name}", known)
    values = resolve(written)
    numerator, denominator = _POLYNOMIALS[form](table, values)
    transfer = reduced(numerator, denominator, table.where(form[0]), table.where(form[1]) if form[1:] else "")
    refuse_unused(table.table("values"), overrides, roots)
    text = str(table.entries["transfer"]) if "transfer" in table else _readable(numerator, denominator)
    return Controller(transfer, " ".join(text.split()), tuple(values.items()))


def reduced(
    numerator: poly.Rationals, denominator: poly.Rationals, where: str, where_denominator: str = ""
) -> TransferFunction:
    """Reduce to lowest terms; what cannot be is refused by the name of the place.

    Parameters
    ----------
    numerator, denominator : tuple of Fraction
        Descending powers.
    where, where_denominator : str
        The places they stand in, as the user knows them; by default one for both.

    Raises
    ------
    RealizeError
        When numerator or denominator are zero.
    Refused
        When a cancellation hides a growing mode.
    """
    if not any(denominator):
        place = where_denominator or where
        raise RealizeError(place, "a denominator of zero", "a denominator other than zero", "check the coefficients")
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
    return evaluate_transfer(table.expression("transfer", "4.2 + 18/s"), values, table.where("transfer"))


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
