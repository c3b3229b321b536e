"""From the text of an expression to its tokens, and every complaint about them.

A complaint names the column, counted from 1, and quotes the text with a caret below the place.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from fractions import Fraction
from typing import NamedTuple

from realize.algebra.expression.ratio import MAX_EXPONENT, UnfitError
from realize.errors import RealizeError

#: Longest expression, in characters: a ratio of two polynomials of degree 32 written out has 66 terms, and 60
#: characters leave each a coefficient of 40 digits.
MAX_LENGTH = 4000

#: Most digits of a literal: a number right to 400 digits, pasted in full, and as much again.
MAX_DIGITS = 800

#: Characters shown to the left and to the right of the caret: with the indent they fit 100 columns.
_WINDOW = 40

#: Likeness (twice the letters in common over all letters) from which a known word is suggested: one letter wrong in
#: three leaves 2/3, and two in four would be a word of its own.
_LEAST_LIKENESS = 0.65

#: Letters of the shortest word that is like another (names of two, such as ki and kp, are meant to differ by one), and
#: of the shortest that is like a longer one because it is a part of it.
_SHORTEST_LIKE, _SHORTEST_PART = 3, 4

#: Most names listed in one message: two lines of them.
_MOST_LISTED = 16

_TOKEN = re.compile(
    r"(?P<number>(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[A-Za-z_][A-Za-z_0-9]*)"
    r"|(?P<operator>[-+*/^()])"
    r"|(?P<space>[ \t\r\n]+)"
)

_LITERAL = re.compile(r"(?P<whole>[0-9]*)\.?(?P<part>[0-9]*)(?:[eE](?P<exponent>[+-]?[0-9]+))?")

#: What people paste or type for an operator, and what to write for it.
_STAND_INS = {
    "\N{MINUS SIGN}": "-",
    "\N{EN DASH}": "-",
    "\N{EM DASH}": "-",
    "\N{MULTIPLICATION SIGN}": "*",
    "\N{MIDDLE DOT}": "*",
    "\N{DOT OPERATOR}": "*",
    "\N{DIVISION SIGN}": "/",
    "\N{DIVISION SLASH}": "/",
    "\N{SUPERSCRIPT TWO}": "^2",
    "\N{SUPERSCRIPT THREE}": "^3",
    "\N{GREEK SMALL LETTER PI}": "pi",
    "\N{SQUARE ROOT}": "sqrt(...)",
    "\N{NO-BREAK SPACE}": "a plain space",
    ",": ". (a decimal point)",
    "%": "/100",
    "[": "(",
    "]": ")",
    "{": "(",
    "}": ")",
}

_ALLOWED_CHARACTERS = "numbers, names, + - * / ^, parentheses, sqrt(...), pi and s"


#: Where the values of a controller are named.
VALUES_TABLE = "[design.values]"


class Token(NamedTuple):
    """A piece of an expression: its kind (number, name, operator or end), its text and where it starts."""

    kind: str
    text: str
    start: int


class Text(NamedTuple):
    """An expression, the place it stands in, as the user knows it, and the table that names values for it."""

    text: str
    where: str
    values_table: str = VALUES_TABLE

    def error(self, start: int, problem: UnfitError) -> RealizeError:
        """Compose the one complaint about the character at ``start``."""
        return RealizeError(
            f"{self.where}, column {start + 1}",
            problem.found,
            problem.allowed,
            problem.advice,
            _excerpt(self.text, start),
        )


def tokens(source: Text) -> list[Token]:
    """Split an expression into tokens; the last one is of kind "end".

    Raises
    ------
    RealizeError
        When the text is empty or too long, or holds a character that belongs to no token.
    """
    text = source.text
    if len(text) > MAX_LENGTH:
        raise RealizeError(
            source.where,
            f"an expression of {len(text)} characters",
            f"at most {MAX_LENGTH} characters",
            f"give parts of it names under {source.values_table}",
        )
    found: list[Token] = []
    position = 0
    while position < len(text):
        match = _TOKEN.match(text, position)
        if match is None or text.startswith("**", position):
            raise source.error(position, _stray(text, position))
        if match.lastgroup and match.lastgroup != "space":
            found.append(Token(match.lastgroup, match.group(), position))
        position = match.end()
    if not found:
        raise RealizeError(source.where, "no expression", _ALLOWED_CHARACTERS, "write one, such as 4.2 + 18/s")
    return [*found, Token("end", "", len(text.rstrip()))]


def literal(text: str) -> Fraction:
    """Read a decimal or scientific literal without sign, exactly.

    Raises
    ------
    UnfitError
        When its digits or its exponent are out of bounds, or it is no such literal.
    """
    match = _LITERAL.fullmatch(text)
    digits = match["whole"] + match["part"] if match else ""
    if match is None or not digits:
        raise UnfitError(
            f"{shown(text)}, which is no number", "decimal numbers such as 0.5 or 5e-1", "check the number"
        )
    if len(digits) > MAX_DIGITS or len(match["exponent"] or "") > MAX_DIGITS:
        raise UnfitError(f"a number of {len(text)} characters", f"at most {MAX_DIGITS} digits", "round it")
    exponent = int(match["exponent"] or 0)
    if abs(exponent) > MAX_EXPONENT:
        raise UnfitError(
            f"the power of ten in {shown(text)}",
            f"powers of ten from -{MAX_EXPONENT} to {MAX_EXPONENT}",
            "check the exponent: float64 ends at 1.8e308",
        )
    return int(digits) * Fraction(10) ** (exponent - len(match["part"]))


def nearest(word: str, known: Iterable[str]) -> str | None:
    """Known word most like ``word``, or ``None`` when nothing is like it."""
    candidates = list(known)
    folded = [candidate for candidate in candidates if candidate.casefold() == word.casefold()]
    if folded or not _SHORTEST_LIKE <= len(word) <= 4 * max(map(len, candidates), default=0):
        return next(iter(folded), None)
    # Only in the path of an error, and then it costs as much as the rest of the reading.
    from difflib import get_close_matches

    parts = [candidate for candidate in candidates if len(word) >= _SHORTEST_PART and word in candidate]
    return next(iter(get_close_matches(word, candidates, n=1, cutoff=_LEAST_LIKENESS) or parts), None)


def listed(words: Iterable[str]) -> str:
    """Words in one line, the first of many."""
    known = list(words)
    rest = ["..."] if len(known) > _MOST_LISTED else []
    return ", ".join(known[:_MOST_LISTED] + rest)


def shown(text: str) -> str:
    """Quote a text in one line, whatever it holds: at most 60 characters, none that a terminal acts on."""
    return f'"{printable(text if len(text) <= 60 else text[:57] + "...")}"'


def printable(text: str) -> str:
    """Replace what a terminal would not show, or act on."""
    return "".join(c if c.isprintable() else "?" for c in text)


def _stray(text: str, position: int) -> UnfitError:
    """Explain the character that belongs to no token."""
    c = text[position]
    if c == "*":
        return UnfitError("**", "^ for powers", "write s^2 instead of s**2")
    if c == ".":
        return UnfitError(
            "a point that belongs to no number",
            _ALLOWED_CHARACTERS,
            "names hold letters, digits and _ only, no points",
        )
    name = shown(c) if c.isascii() and c.isprintable() else f"{shown(c)} (U+{ord(c):04X})"
    stand_in = _STAND_INS.get(c)
    advice = f"write {stand_in}" if stand_in else "remove it, or write its name in ASCII letters"
    return UnfitError(f"the character {name}", _ALLOWED_CHARACTERS, advice)


def _excerpt(text: str, start: int) -> str:
    """Quote the text around a place, with a caret below it."""
    first = max(0, start - _WINDOW)
    last = min(len(text), start + _WINDOW)
    before = "... " if first else ""
    after = " ..." if last < len(text) else ""
    line = "".join(c if _one_column(c) else "?" for c in text[first:last].replace("\t", " ").replace("\n", " "))
    return f"{before}{line}{after}\n{' ' * (len(before) + start - first)}^"


def _one_column(c: str) -> bool:
    """Whether a terminal shows the character in one column: Latin and Greek, and the signs taken for ours."""
    return c.isprintable() and (ord(c) < 0x300 or 0x370 <= ord(c) < 0x400 or c in _STAND_INS)
