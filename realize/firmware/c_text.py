"""Spelling C: names, numbers, and text from the design made harmless inside a comment."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence
from fractions import Fraction
from typing import TYPE_CHECKING, NamedTuple

from realize.arithmetic.sample import Step, Term, coefficients, is_recursive
from realize.errors import RealizeError

if TYPE_CHECKING:
    from realize.firmware.emission import Emission

#: Columns of the emitted text: what code reviews show side by side.
WIDTH = 100

#: An exact number longer than this is printed as a decimal figure in prose.
LONGEST_EXACT = 40

#: The largest value an integer constant can have in the preprocessor of C99 and C++11.
LARGEST_INTEGER = 2**63 - 1

#: The largest value of an ``int`` or ``long`` everywhere; above it the constant is marked ``LL``.
LARGEST_LONG = 2**31 - 1


class Dialect(NamedTuple):
    """How one emission spells its C.

    Attributes
    ----------
    name : str
        Prefix of every name.
    real : str
        The C type of every number.
    suffix : str
        Of its literals.
    digits : int
        Significant digits that read back to the same value.
    macros : str
        Prefix of its limits in ``<float.h>``.
    table : bool
        Coefficients come by pointer.
    adds : bool
        The recursion's coefficients are stored negated.
    """

    name: str
    real: str
    suffix: str
    digits: int
    macros: str
    table: bool
    adds: bool

    def literal(self, value: float) -> str:
        """Decimal text that reads back to the value, rounded once."""
        if value == 0:
            return f"0.0{self.suffix}"
        return f"{value:.{self.digits - 1}e}{self.suffix}"

    def stored(self, steps: Sequence[Step]) -> dict[str, float]:
        """Field name and stored value of every coefficient, in the order of first use."""
        return {
            self.field(name): -value if self._is_negated(name) else value for name, value in coefficients(steps).items()
        }

    def coefficient(self, name: str) -> str:
        """How a function refers to a coefficient."""
        return ("coefficients->" if self.table else f"{self.name}_") + self.field(name)

    def total(self, terms: Sequence[Term]) -> list[str]:
        """A sum as its pieces, each after the first with its operator: added from left to right."""
        pieces: list[str] = []
        for term in terms:
            factor = f"{self.coefficient(term.coefficient)} * " if term.coefficient else ""
            negated = term.coefficient is not None and self._is_negated(term.coefficient)
            minus = (term.sign < 0) != negated
            operator = ("- " if minus else "+ ") if pieces else ("-" if minus else "")
            pieces.append(operator + factor + variable(term.variable))
        return pieces or [self.literal(0.0)]

    def field(self, name: str) -> str:
        """Name under which a coefficient is stored."""
        return name.replace("_a", "_minus_a") if self._is_negated(name) else name

    def _is_negated(self, name: str) -> bool:
        return self.adds and is_recursive(name)


def dialect(emission: Emission) -> Dialect:
    """The spelling an emission asks for.

    Raises
    ------
    RealizeError
        When the name is not an identifier.
    """
    name = emission.name
    if not (name.isascii() and name.isidentifier() and not name.startswith("_")):
        raise RealizeError("design.name", repr(name), "a C identifier", "use letters, digits and _")
    table, adds = emission.coefficients == "table", emission.recursion_sign == "add"
    if emission.realization.format.name == "float32":
        return Dialect(name, "float", "f", 9, "FLT", table, adds)
    return Dialect(name, "double", "", 17, "DBL", table, adds)


def own_set(name: str, *, scheduled: bool) -> str:
    """The constant coefficients in a table: the design's own, or with a schedule those of its first point."""
    return f"{name}_first_point" if scheduled else f"{name}_nominal"


def variable(name: str) -> str:
    """A step's variable in C."""
    return name.replace("state.", "state->")


def hexadecimal(value: float) -> str:
    """C hexadecimal text of a value, exact, without trailing zeros; ``nan``, ``inf``, ``-inf`` as strtod reads them."""
    significand, p, exponent = value.hex().partition("p")
    if "." in significand:
        significand = significand.rstrip("0").rstrip(".")
    return significand + p + exponent


def statement(start: str, pieces: Sequence[str], indent: str = "    ") -> list[str]:
    """``start piece piece ...;`` on one line, or a line for each piece where that is too long."""
    line = f"{indent}{start}{' '.join(pieces)};"
    if len(line) <= WIDTH or len(pieces) == 1:
        return [line]
    return [
        f"{indent}{start}{pieces[0]}",
        *(f"{indent}    {piece}" for piece in pieces[1:-1]),
        f"{indent}    {pieces[-1]};",
    ]


def integer_constant(value: int) -> str | None:
    """An integer the preprocessor can use, or None where it has no room for it."""
    if abs(value) > LARGEST_INTEGER:
        return None
    text = f"{abs(value)}LL" if abs(value) > LARGEST_LONG else str(abs(value))
    return f"(-{text})" if value < 0 else text


def number_text(value: Fraction) -> str:
    """An exact number for a reader: a short decimal, a fraction, or five digits where neither is short."""
    decimal = f"{float(value):.15g}"
    if Fraction(decimal) == value:
        return decimal
    exact = str(value)
    return exact if len(exact) <= LONGEST_EXACT else f"about {float(value):.5g}"


def comment_safe(text: str) -> str:
    """Make any text harmless inside a C comment, on one line.

    Notes
    -----
    Runs of white space become one space. Characters outside printable ASCII, and the backslash (which joins lines and
    starts character names), become ``<U+hhhh>``. A space parts what would open or close a comment or form a trigraph.
    """
    line = " ".join(text.split())
    line = "".join(c if " " <= c <= "~" and c != "\\" else f"<U+{ord(c):04X}>" for c in line)
    for pair in ("*/", "/*", "??"):
        while pair in line:
            line = line.replace(pair, f"{pair[0]} {pair[1]}")
    return line


def wrapped(text: str, first: str = "", following: str = "") -> list[str]:
    """Text from the design or about it, safe and within the width, ready for :func:`comment`."""
    room = WIDTH - len("/* ") - len(" */")
    return textwrap.wrap(
        comment_safe(text), room, initial_indent=first, subsequent_indent=following, break_on_hyphens=False
    )


def comment(lines: Sequence[str]) -> list[str]:
    """A block comment; every line must already be safe."""
    if len(lines) == 1:
        return [f"/* {lines[0]} */"]
    return [f"/* {lines[0]}", *(f" * {line}".rstrip() for line in lines[1:]), " */"]


def definition(signature: str, body: Sequence[str]) -> list[str]:
    """A definition; parameters the body does not read are named as such."""
    names = [part.replace("*", " ").split()[-1] for part in signature.partition("(")[2].rstrip(")").split(",")]
    text = "\n".join(body)
    unread = [f"    (void){name};" for name in names if not reads(text, name)]
    return [signature, "{", *unread, *body, "}", ""]


def reads(text: str, name: str) -> bool:
    """Whether a name stands in the text as a word of its own."""
    words = "".join(c if c.isalnum() or c == "_" else " " for c in text).split()
    return name in words
