"""The grammar of expressions, by recursive descent.

::

    sum     = product { ("+" | "-") product }
    product = signed { ("*" | "/") signed }
    signed  = ("-" | "+") signed | power
    power   = atom [ "^" signed ]          (so -s^2 is -(s^2), and 2^3^2 is 2^(3^2))
    atom    = number | name | ("sqrt" | "exp") "(" sum ")" | "(" sum ")"

``exp`` is dead time, ``exp(-T*s)``: for a plant, and as a factor of the whole alone.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.algebra.expression import delayed, ratio
from realize.algebra.expression.delayed import Delayed
from realize.algebra.expression.ratio import Ratio, UnfitError
from realize.algebra.expression.tokens import VALUES_TABLE, Text, Token, listed, literal, nearest, shown, tokens
from realize.algebra.irrational import pi

#: Deepest nesting of parentheses, signs and powers: a level takes ten Python calls at the most, so 50 of them
#: use half of the thousand that the interpreter allows.
MAX_NESTING = 50

#: Most bits of all intermediate results together: a sum of 32 partial fractions whose poles are right to 400
#: digits writes 32 million on its way, and twice that is still read in a second or two.
MAX_WORK_BITS = 60_000_000

#: Names with a meaning of their own.
RESERVED_NAMES = ("s", "pi", "sqrt", "exp")

_OPERATIONS: dict[str, Callable[[Delayed, Delayed], Delayed]] = {
    "+": delayed.add,
    "-": delayed.subtract,
    "*": delayed.multiply,
    "/": delayed.divide,
    "^": delayed.power,
}

_Functions = Mapping[str, Callable[[Delayed], Delayed]]

_FUNCTIONS: _Functions = {"sqrt": delayed.root}
_FUNCTIONS_OF_A_PLANT: _Functions = {**_FUNCTIONS, "exp": delayed.exponential}

#: How each function is called, to show what is meant.
_CALLS = {"sqrt": "sqrt(2)", "exp": "exp(-0.002*s)"}

_NOT_FINITE = ("nan", "inf", "infinity")


class DelayedTransfer(NamedTuple):
    """Numerator and denominator, in descending powers of s, and the dead time in s that follows them."""

    numerator: poly.Rationals
    denominator: poly.Rationals
    dead_time_s: Fraction


def evaluate_transfer(text: str, values: Mapping[str, Fraction], where: str) -> tuple[poly.Rationals, poly.Rationals]:
    """Read an expression in s.

    Parameters
    ----------
    text : str
        The expression.
    values : mapping of str to Fraction
        What the names in it stand for.
    where : str
        The place the expression stands in, as the user knows it.

    Returns
    -------
    numerator, denominator : tuple of Fraction
        Descending powers of s, nothing cancelled: any common factor is one the user wrote. A constant
        denominator is 1; the numerator may be zero.

    Raises
    ------
    RealizeError
        When the text is no expression of the grammar or exceeds a bound, with the column.
    """
    return _polynomials(_Reader(Text(text, where), values, _FUNCTIONS, with_variable=True).read().ratio)


def evaluate_delayed_transfer(
    text: str, values: Mapping[str, Fraction], where: str, values_table: str = VALUES_TABLE
) -> DelayedTransfer:
    """Read an expression in s that may have dead time, ``exp(-T*s)``, as a factor of the whole.

    Parameters
    ----------
    text, values, where
        As for :func:`evaluate_transfer`.
    values_table : str
        Where the user may name values for it.

    Returns
    -------
    DelayedTransfer
        The polynomials as those of :func:`evaluate_transfer`; dead times of several factors added up.

    Raises
    ------
    RealizeError
        As for :func:`evaluate_transfer`, and for dead time in a sum or in a divisor, or with a positive exponent.
    """
    source = Text(text, where, values_table)
    read = _Reader(source, values, _FUNCTIONS_OF_A_PLANT, with_variable=True).read()
    return DelayedTransfer(*_polynomials(read.ratio), read.dead_time_s or Fraction(0))


def evaluate_constant(
    text: str, values: Mapping[str, Fraction], where: str, values_table: str = VALUES_TABLE
) -> Fraction:
    """Read an expression without s.

    Parameters
    ----------
    text, values, where, values_table
        As for :func:`evaluate_delayed_transfer`.

    Returns
    -------
    Fraction
        Its value; exact, and where ``pi`` or ``sqrt`` occurs, that of their 400 digits.

    Raises
    ------
    RealizeError
        As for :func:`evaluate_transfer`, and when ``s`` occurs.
    """
    source = Text(text, where, values_table)
    value = ratio.value_of(_Reader(source, values, _FUNCTIONS, with_variable=False).read().ratio)
    assert value is not None  # nothing but s makes a ratio other than a constant
    return value


def names_in(text: str, where: str) -> tuple[str, ...]:
    """Names an expression refers to, the reserved ones apart, in order of appearance.

    Raises
    ------
    RealizeError
        When the text cannot be split into tokens.
    """
    names = [token.text for token in tokens(Text(text, where)) if token.kind == "name"]
    return tuple(dict.fromkeys(name for name in names if name not in RESERVED_NAMES))


def _polynomials(r: Ratio) -> tuple[poly.Rationals, poly.Rationals]:
    """Numerator and denominator in fractions; a constant denominator is 1."""
    divisor = r.denominator[0] if len(r.denominator) == 1 else 1
    return tuple(Fraction(c, divisor) for c in r.numerator), tuple(Fraction(c, divisor) for c in r.denominator)


class _Reader:
    """Walks over the tokens of one expression and evaluates as it goes."""

    def __init__(
        self, source: Text, values: Mapping[str, Fraction], functions: _Functions, *, with_variable: bool
    ) -> None:
        self._source = source
        self._tokens = tokens(source)
        self._values = values
        self._functions = functions
        self._with_variable = with_variable
        self._position = 0
        self._nesting = 0
        self._work_bits = 0

    def read(self) -> Delayed:
        result = self._sum()
        if self._next.kind != "end":
            raise self._complaint(self._next, self._unexpected_after_operand())
        return result

    @property
    def _next(self) -> Token:
        return self._tokens[self._position]

    def _take(self) -> Token:
        token = self._next
        self._position += 1
        return token

    def _sum(self) -> Delayed:
        return self._chain("+-", self._product)

    def _product(self) -> Delayed:
        return self._chain("*/", self._signed)

    def _chain(self, operators: str, operand: Callable[[], Delayed]) -> Delayed:
        """Operands joined by operators of one rank, from the left."""
        result = operand()
        while self._next.kind == "operator" and self._next.text in operators:
            operator = self._take()
            result = self._apply(operator, result, operand())
        return result

    def _signed(self) -> Delayed:
        self._nesting += 1
        if self._nesting > MAX_NESTING:
            raise self._complaint(
                self._next,
                UnfitError(
                    "parentheses, signs and powers nested too deeply",
                    f"at most {MAX_NESTING} levels",
                    f"give the inner part a name under {self._source.values_table}",
                ),
            )
        result = self._power() if self._next.text not in ("-", "+") else self._sign()
        self._nesting -= 1
        return result

    def _sign(self) -> Delayed:
        minus = self._take().text == "-"
        operand = self._signed()
        return delayed.negate(operand) if minus else operand

    def _power(self) -> Delayed:
        base = self._atom()
        if self._next.text != "^":
            return base
        operator = self._take()
        return self._apply(operator, base, self._signed())

    def _atom(self) -> Delayed:
        token = self._take()
        if token.kind == "number":
            return self._located(token, lambda: _constant(literal(token.text)))
        if token.kind == "name":
            return self._named(token)
        if token.text == "(":
            return self._until_closed(token)
        raise self._complaint(token, _missing_operand(token))

    def _named(self, token: Token) -> Delayed:
        if self._next.text == "(":
            return self._called(token)
        if token.text == "s" and self._with_variable:
            return _VARIABLE
        if token.text == "pi":
            return _constant(pi())
        if token.text in self._values:
            return _constant(self._values[token.text])
        raise self._complaint(token, self._unknown(token.text))

    def _called(self, name: Token) -> Delayed:
        """A name with a parenthesis after it: a function, or a mistake."""
        function = self._functions.get(name.text)
        if function is None:
            raise self._complaint(name, self._no_function(name.text))
        argument = self._until_closed(self._take())
        return self._located(name, lambda: function(argument))

    def _until_closed(self, opened: Token) -> Delayed:
        inner = self._sum()
        if self._next.kind == "end":
            raise self._complaint(
                opened,
                UnfitError("a parenthesis that is never closed", "as many ) as (", "close it, or remove it"),
            )
        if self._next.text != ")":
            raise self._complaint(self._next, self._unexpected_after_operand())
        self._take()
        return inner

    def _apply(self, operator: Token, left: Delayed, right: Delayed) -> Delayed:
        return self._located(operator, lambda: _OPERATIONS[operator.text](left, right))

    def _located(self, token: Token, compute: Callable[[], Delayed]) -> Delayed:
        """Compute, and give the place to a complaint that knows none."""
        try:
            result = compute()
        except UnfitError as problem:
            raise self._complaint(token, problem) from None
        self._work_bits += ratio.bits_of(result.ratio)
        if self._work_bits > MAX_WORK_BITS:
            raise self._complaint(
                token,
                UnfitError(
                    "an expression that takes too much exact arithmetic",
                    f"at most {MAX_WORK_BITS} bits in all intermediate results",
                    "use fewer digits: write numbers in place of pi and sqrt, or multiply factors out",
                ),
            )
        return result

    def _complaint(self, token: Token, problem: UnfitError) -> Exception:
        return self._source.error(token.start, problem)

    def _unexpected_after_operand(self) -> UnfitError:
        before, token = self._tokens[self._position - 1], self._next
        if token.text == ")":
            return UnfitError("a ) without its (", "as many ) as (", "remove it, or open it")
        product = f"{before.text}*{token.text}"
        advice = f"write {product}" if len(product) <= 40 else "write a * between them"
        is_word = (before.kind, token.kind) == ("number", "name")
        looks_like_a_unit = is_word and token.text != "exp" and not self._like(token.text)
        return UnfitError(
            f"{shown(token.text)} right after {shown(before.text)}",
            "an operator between two operands; a product is never implied",
            self._without_unit(token.text, advice) if looks_like_a_unit else advice,
        )

    def _without_unit(self, name: str, product: str) -> str:
        """What to do about a number with an unknown word behind it: a unit, or in a transfer a name yet to be given."""
        if not self._with_variable:
            return "a value has no unit: write the number alone"
        return f"{product} and {self._define(name)}; a unit is not written"

    def _known(self) -> list[str]:
        return [
            *self._values,
            *(["s"] if self._with_variable else []),
            "pi",
            *(f"{name}(...)" for name in self._functions),
        ]

    def _unknown(self, name: str) -> UnfitError:
        allowed = listed(self._known())
        if name in self._functions:
            return UnfitError(f"{name} without parentheses", allowed, f"write {_CALLS[name]}")
        if name == "s":
            return UnfitError("s where a constant is expected", allowed, "write a constant; s belongs in a transfer")
        if name.casefold() in _NOT_FINITE:
            return UnfitError(f"{name}, which is no finite number", "finite numbers", "write a number")
        if name == "exp":
            return self._no_exponential(allowed)
        like, define = self._like(name), self._define(name)
        return UnfitError(
            f"the unknown name {shown(name)}",
            allowed,
            f"did you mean {like}? If not, {define}" if like else define,
        )

    def _like(self, name: str) -> str | None:
        """The name that was meant, where one is like it."""
        reserved = (*(["s"] if self._with_variable else []), "pi", *self._functions)
        return next((r for r in reserved if r == name.casefold()), None) or nearest(name, self._values)

    def _define(self, name: str) -> str:
        return f"define {shown(name)[1:-1]} under {self._source.values_table}, or give it with --value"

    def _no_exponential(self, allowed: str) -> UnfitError:
        if not self._with_variable:
            return UnfitError(
                "exp where a constant is expected",
                allowed,
                "write its value as a number; dead time, exp(-T*s), belongs in the transfer of a plant",
            )
        return UnfitError(
            "exp, which makes no ratio of polynomials",
            allowed,
            "dead time belongs to the plant: write it under [plant], as dead_time or as a factor of its transfer",
        )

    def _no_function(self, name: str) -> UnfitError:
        allowed = " and ".join(f"{known}(...)" for known in self._functions) + ", and no other function"
        if name in self._values or name in ("s", "pi"):
            return UnfitError(f"{name} used like a function", allowed, f"write {name}*( for a product")
        if name == "exp":
            return self._no_exponential(allowed)
        like = nearest(name, self._functions)
        advice = f"did you mean {like}?" if like else "write it as a ratio of polynomials in s"
        return UnfitError(f"the unknown function {shown(name)}", allowed, advice)


def _constant(value: Fraction) -> Delayed:
    return Delayed(ratio.constant(value))


_VARIABLE = Delayed(ratio.VARIABLE)


def _missing_operand(token: Token) -> UnfitError:
    found = "the end of the expression" if token.kind == "end" else shown(token.text)
    return UnfitError(
        f"{found} where an operand is expected",
        "a number, a name or a parenthesis",
        "complete the expression",
    )
