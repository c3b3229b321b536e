"""The grammar of expressions, by recursive descent.

::

    sum     = product { ("+" | "-") product }
    product = signed { ("*" | "/") signed }
    signed  = ("-" | "+") signed | power
    power   = atom [ "^" signed ]          (so -s^2 is -(s^2), and 2^3^2 is 2^(3^2))
    atom    = number | name | "sqrt" "(" sum ")" | "(" sum ")"
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from fractions import Fraction

from realize.algebra import polynomial as poly
from realize.algebra.expression import ratio
from realize.algebra.expression.ratio import Ratio, UnfitError
from realize.algebra.expression.tokens import Text, Token, listed, literal, nearest, shown, tokens
from realize.algebra.irrational import pi

#: Deepest nesting of parentheses, signs and powers: a level takes ten Python calls at the most, so 50 of them
#: use half of the thousand that the interpreter allows.
MAX_NESTING = 50

#: Most bits of all intermediate results together: a sum of 32 partial fractions whose poles are right to 400
#: digits writes 32 million on its way, and twice that is still read in a second or two.
MAX_WORK_BITS = 60_000_000

#: Names with a meaning of their own.
RESERVED_NAMES = ("s", "pi", "sqrt")

_OPERATIONS: dict[str, Callable[[Ratio, Ratio], Ratio]] = {
    "+": ratio.add,
    "-": lambda a, b: ratio.add(a, ratio.negate(b)),
    "*": ratio.multiply,
    "/": ratio.divide,
    "^": ratio.power,
}

_NOT_FINITE = ("nan", "inf", "infinity")


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
    numerator, denominator = _Reader(Text(text, where), values, with_variable=True).read()
    divisor = denominator[0] if len(denominator) == 1 else 1
    return tuple(Fraction(c, divisor) for c in numerator), tuple(Fraction(c, divisor) for c in denominator)


def evaluate_constant(text: str, values: Mapping[str, Fraction], where: str) -> Fraction:
    """Read an expression without s.

    Parameters
    ----------
    text, values, where
        As for :func:`evaluate_transfer`.

    Returns
    -------
    Fraction
        Its value; exact, and where ``pi`` or ``sqrt`` occurs, that of their 400 digits.

    Raises
    ------
    RealizeError
        As for :func:`evaluate_transfer`, and when ``s`` occurs.
    """
    value = ratio.value_of(_Reader(Text(text, where), values, with_variable=False).read())
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


class _Reader:
    """Walks over the tokens of one expression and evaluates as it goes."""

    def __init__(self, source: Text, values: Mapping[str, Fraction], *, with_variable: bool) -> None:
        self._source = source
        self._tokens = tokens(source)
        self._values = values
        self._with_variable = with_variable
        self._position = 0
        self._nesting = 0
        self._work_bits = 0

    def read(self) -> Ratio:
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

    def _sum(self) -> Ratio:
        return self._chain("+-", self._product)

    def _product(self) -> Ratio:
        return self._chain("*/", self._signed)

    def _chain(self, operators: str, operand: Callable[[], Ratio]) -> Ratio:
        """Operands joined by operators of one rank, from the left."""
        result = operand()
        while self._next.kind == "operator" and self._next.text in operators:
            operator = self._take()
            result = self._apply(operator, result, operand())
        return result

    def _signed(self) -> Ratio:
        self._nesting += 1
        if self._nesting > MAX_NESTING:
            raise self._complaint(
                self._next,
                UnfitError(
                    "parentheses, signs and powers nested too deeply",
                    f"at most {MAX_NESTING} levels",
                    "give the inner part a name under [design.values]",
                ),
            )
        result = self._power() if self._next.text not in ("-", "+") else self._sign()
        self._nesting -= 1
        return result

    def _sign(self) -> Ratio:
        minus = self._take().text == "-"
        operand = self._signed()
        return ratio.negate(operand) if minus else operand

    def _power(self) -> Ratio:
        base = self._atom()
        if self._next.text != "^":
            return base
        operator = self._take()
        return self._apply(operator, base, self._signed())

    def _atom(self) -> Ratio:
        token = self._take()
        if token.kind == "number":
            return self._located(token, lambda: ratio.constant(literal(token.text)))
        if token.kind == "name":
            return self._named(token)
        if token.text == "(":
            return self._until_closed(token)
        raise self._complaint(token, _missing_operand(token))

    def _named(self, token: Token) -> Ratio:
        if self._next.text == "(":
            return self._called(token)
        if token.text == "s" and self._with_variable:
            return ratio.VARIABLE
        if token.text == "pi":
            return ratio.constant(pi())
        if token.text in self._values:
            return ratio.constant(self._values[token.text])
        raise self._complaint(token, self._unknown(token.text))

    def _called(self, name: Token) -> Ratio:
        """A name with a parenthesis after it: ``sqrt``, or a mistake."""
        if name.text != "sqrt":
            raise self._complaint(name, self._no_function(name.text))
        argument = self._until_closed(self._take())
        return self._located(name, lambda: ratio.root(argument))

    def _until_closed(self, opened: Token) -> Ratio:
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

    def _apply(self, operator: Token, left: Ratio, right: Ratio) -> Ratio:
        return self._located(operator, lambda: _OPERATIONS[operator.text](left, right))

    def _located(self, token: Token, compute: Callable[[], Ratio]) -> Ratio:
        """Compute, and give the place to a complaint that knows none."""
        try:
            result = compute()
        except UnfitError as problem:
            raise self._complaint(token, problem) from None
        self._work_bits += ratio.bits_of(result)
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
        return UnfitError(
            f"{shown(token.text)} right after {shown(before.text)}",
            "an operator between two operands; a product is never implied",
            f"write {product}" if len(product) <= 40 else "write a * between them",
        )

    def _known(self) -> list[str]:
        return [*self._values, *(["s"] if self._with_variable else []), "pi", "sqrt(...)"]

    def _unknown(self, name: str) -> UnfitError:
        allowed = listed(self._known())
        if name == "sqrt":
            return UnfitError("sqrt without parentheses", allowed, "write sqrt(2)")
        if name == "s":
            return UnfitError("s where a constant is expected", allowed, "write a constant; s belongs in a transfer")
        if name.casefold() in _NOT_FINITE:
            return UnfitError(f"{name}, which is no finite number", "finite numbers", "write a number")
        like = next((r for r in RESERVED_NAMES if r == name.casefold()), None) or nearest(name, self._values)
        define = f"define {shown(name)[1:-1]} under [design.values], or give it with --value"
        return UnfitError(
            f"the unknown name {shown(name)}",
            allowed,
            f"did you mean {like}? If not, {define}" if like else define,
        )

    def _no_function(self, name: str) -> UnfitError:
        allowed = "sqrt(...) as the only function"
        if name in self._values or name in ("s", "pi"):
            return UnfitError(f"{name} used like a function", allowed, f"write {name}*( for a product")
        if name == "exp":
            return UnfitError(
                "exp(...), which is no ratio of polynomials",
                allowed,
                "dead time belongs to a plant and is not supported yet; a controller has none",
            )
        like = nearest(name, ("sqrt",))
        advice = "did you mean sqrt?" if like else "write it as a ratio of polynomials in s"
        return UnfitError(f"the unknown function {shown(name)}", allowed, advice)


def _missing_operand(token: Token) -> UnfitError:
    found = "the end of the expression" if token.kind == "end" else shown(token.text)
    return UnfitError(
        f"{found} where an operand is expected",
        "a number, a name or a parenthesis",
        "complete the expression",
    )
