"""Results as HTML for notebooks: tables and formulas without style, script or anything from outside.

Whatever comes from a design is text, and escaped.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from fractions import Fraction
from html import escape

from realize.algebra.expression import format_polynomial
from realize.quantity import SHOWN_DIGITS, round_significant

#: Longest exact coefficient in a formula; beyond it five digits tell people more.
_LONGEST_COEFFICIENT = 12


def paragraph(text: str) -> str:
    """A paragraph, its line breaks joined."""
    return f"<p>{_text(text)}</p>\n"


def items(lines: Iterable[str]) -> str:
    """A list; nothing where it is empty."""
    inner = "".join(f"<li>{_text(line)}</li>\n" for line in lines)
    return f"<ul>\n{inner}</ul>\n" if inner else ""


def table(caption: str, head: Sequence[str], rows: Iterable[Sequence[str]]) -> str:
    """A table whose first column names its rows."""
    top = "".join(f'<th scope="col">{_text(cell)}</th>' for cell in head)
    body = "".join(f"<tr>{_row(cells)}</tr>\n" for cells in rows)
    return (
        f"<table>\n<caption>{_text(caption)}</caption>\n<thead>\n<tr>{top}</tr>\n</thead>\n"
        f"<tbody>\n{body}</tbody>\n</table>\n"
    )


def figure(value: float | None) -> str:
    """A figure of a table: three digits tell how close it came."""
    return "-" if value is None else f"{value:.3g}"


def fraction(
    name: str,
    numerator: Sequence[Fraction | int],
    denominator: Sequence[Fraction | int],
    variable: str,
    alternative: str,
) -> str:
    """``name = numerator/denominator`` in MathML.

    Parameters
    ----------
    name : str
        Left of the equals sign, such as ``G(s)``.
    numerator, denominator : sequence of Fraction or int
        Descending powers.
    variable : str
        Of the polynomials.
    alternative : str
        The same as text, for what shows no formulas.
    """
    above, below = (_polynomial(p, variable) for p in (numerator, denominator))
    whole = above if tuple(denominator) == (1,) else f"<mfrac>{above}{below}</mfrac>"
    return (
        f'<math display="block" alttext="{escape(alternative)}">'
        f"<mrow><mi>{escape(name)}</mi><mo>=</mo>{whole}</mrow></math>\n"
    )


def _row(cells: Sequence[str]) -> str:
    first, *others = cells
    return f'<th scope="row">{_text(first)}</th>' + "".join(f"<td>{_text(cell)}</td>" for cell in others)


def _text(text: str) -> str:
    return escape(" ".join(text.split()))


def _polynomial(p: Sequence[Fraction | int], variable: str) -> str:
    order = len(p) - 1
    terms = [(Fraction(c), order - i) for i, c in enumerate(p) if c]
    if not terms:
        return "<mn>0</mn>"
    shown = [
        f"<mo>{'-' if c < 0 else '+'}</mo>{_term(abs(c), power, variable)}" if i or c < 0 else _term(c, power, variable)
        for i, (c, power) in enumerate(terms)
    ]
    return f"<mrow>{''.join(shown)}</mrow>"


def _term(c: Fraction, power: int, variable: str) -> str:
    factor = "" if power == 0 else f"<mi>{variable}</mi>"
    if power > 1:
        factor = f"<msup>{factor}<mn>{power}</mn></msup>"
    return factor if factor and c == 1 else f"<mn>{_coefficient(c)}</mn>{factor}"


def _coefficient(c: Fraction) -> str:
    """Exact where that is short, as a decimal where it ends."""
    text = format_polynomial((c,))
    return text if len(text) <= _LONGEST_COEFFICIENT else format_polynomial((round_significant(c, SHOWN_DIGITS),))
