"""Exact numbers, polynomials and transfer functions as text that reads back the same.

Digits go through ``decimal``: Python's own conversion refuses integers above 4300 digits, and the exact
coefficients of a design that uses ``pi`` at order 11 are longer.
"""

from __future__ import annotations

import re
from collections.abc import Sequence
from decimal import MAX_EMAX, MIN_EMIN, ROUND_HALF_EVEN, Context, Decimal
from fractions import Fraction

from realize.algebra.expression.ratio import MAX_BITS, MAX_EXPONENT, UnfitError

#: Most characters of an exact number: sign, line, and above and below it the longest integer (log10(2) < 0.30103).
MAX_EXACT_DIGITS = 2 * (MAX_BITS * 30103 // 100000 + 1) + 2

#: Digits of the decimal twin of an exact number: a few more than the 17 that tell all doubles apart.
TWIN_DIGITS = 20

#: Longest terminating decimal that is printed as one; beyond, a quotient of integers is no harder to read.
_MAX_DECIMALS = 17

_EXACT = re.compile(r"(?P<numerator>-?[0-9]+)(?:/(?P<denominator>[0-9]+))?")


def exact_text(value: Fraction | int) -> str:
    """Write an exact number as an integer or as p/q in lowest terms."""
    exact = Fraction(value)
    if exact.denominator == 1:
        return _digits(exact.numerator)
    return f"{_digits(exact.numerator)}/{_digits(exact.denominator)}"


def read_exact(text: str) -> Fraction | None:
    """Read what :func:`exact_text` writes; ``None`` when the text is no such number.

    Raises
    ------
    UnfitError
        When it is one, but its denominator is zero or it has too many digits.
    """
    match = _EXACT.fullmatch(text)
    if match is None:
        return None
    if len(text) > MAX_EXACT_DIGITS:
        raise UnfitError(f"a number of {len(text)} characters", f"at most {MAX_EXACT_DIGITS} characters", "round it")
    numerator, denominator = (int(Decimal(part or "1")) for part in match.groups())
    if denominator == 0:
        raise UnfitError("a denominator of zero", "quotients p/q with q other than zero", "check the number")
    return Fraction(numerator, denominator)


def decimal_text(value: Fraction | int, digits: int = TWIN_DIGITS) -> str:
    """Write a number rounded to a number of significant digits, scientific where it is long."""
    return str(rounded(value, digits))


def rounded(value: Fraction | int, digits: int, rounding: str = ROUND_HALF_EVEN) -> Decimal:
    """Round to a number of significant digits, straight from the exact value.

    Parameters
    ----------
    value : Fraction or int
        Any number.
    digits : int
        At least 1.
    rounding : str
        A rounding mode of ``decimal``.

    Notes
    -----
    Without trailing zeros, and in a context of its own: what the host program does to the current one cannot
    change a figure.
    """
    exact = Fraction(value)
    context = Context(prec=digits, rounding=rounding, Emax=MAX_EMAX, Emin=MIN_EMIN)
    return context.divide(Decimal(exact.numerator), Decimal(exact.denominator)).normalize(context)


def format_polynomial(p: Sequence[Fraction | int], variable: str = "s") -> str:
    """Print a polynomial in the grammar of expressions.

    Parameters
    ----------
    p : sequence of Fraction or int
        Descending powers.
    variable : str
        Its variable.

    Returns
    -------
    str
        Such as ``0.09*s^2 - 4.2*s + 1/3``; ``0`` for the zero polynomial.
    """
    order = len(p) - 1
    terms = [_term(Fraction(c), order - i, variable) for i, c in enumerate(p) if c]
    if not terms:
        return "0"
    return terms[0] + "".join(f" - {t[1:]}" if t.startswith("-") else f" + {t}" for t in terms[1:])


def format_transfer(
    numerator: Sequence[Fraction | int], denominator: Sequence[Fraction | int], variable: str = "s"
) -> str:
    """Print a ratio of polynomials in the grammar of expressions.

    Parameters
    ----------
    numerator, denominator : sequence of Fraction or int
        Descending powers.
    variable : str
        Their variable.
    """
    above, below = format_polynomial(numerator, variable), format_polynomial(denominator, variable)
    if below == "1":
        return above
    above = f"({above})" if " " in above else above
    below = f"({below})" if set(below) & set(" */-") else below
    return f"{above}/{below}"


def _term(c: Fraction, exponent: int, variable: str) -> str:
    if exponent == 0:
        return _number(c)
    factor = variable if exponent == 1 else f"{variable}^{exponent}"
    if abs(c) == 1:
        return factor if c > 0 else f"-{factor}"
    return f"{_number(c)}*{factor}"


def _number(c: Fraction) -> str:
    """Shortest exact text: an integer, a terminating decimal, a power of ten, or p/q."""
    terminating = _terminating(c)
    if terminating is None:
        return exact_text(c)
    mantissa, exponent = terminating
    point = len(mantissa) + exponent
    if exponent >= 0 and point <= _MAX_DECIMALS:
        text = mantissa + "0" * exponent
    elif 0 < point <= len(mantissa):
        text = f"{mantissa[:point]}.{mantissa[point:]}"
    elif -4 < point <= 0:
        text = f"0.{'0' * -point}{mantissa}"
    else:
        text = f"{mantissa[0]}{'.' if mantissa[1:] else ''}{mantissa[1:]}e{point - 1}"
    return f"-{text}" if c < 0 else text


def _terminating(c: Fraction) -> tuple[str, int] | None:
    """Digits and power of ten of a short terminating decimal; ``None`` when ``c`` is none."""
    short = rounded(c, _MAX_DECIMALS)
    if not c or Fraction(short) != c:
        return None
    _, digits, exponent = short.as_tuple()
    assert isinstance(exponent, int)  # a quotient of finite numbers is finite
    if abs(exponent) + len(digits) > MAX_EXPONENT:
        return None
    return "".join(map(str, digits)), exponent


def _digits(n: int) -> str:
    return str(Decimal(n))
