"""Spelling the integers of a program in C: types, constants, products and sums.

No operation is left open by the standards: factors are widened before they are multiplied, a power of two is
multiplied instead of shifted, a right shift works on an unsigned image. States and locals are 32 bits wide, or 64.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from itertools import groupby
from typing import NamedTuple

from realize.arithmetic.integer.interface import TYPES, Port
from realize.arithmetic.integer.program import COMMAND, INPUT, Program, Sum, Term, kept_bytes, stored_bytes
from realize.arithmetic.integer.proof import Bound
from realize.arithmetic.integer.settling import PRODUCT_BITS, Settling
from realize.arithmetic.sample import is_recursive
from realize.errors import RealizeError
from realize.firmware.c_text import LARGEST_LONG, integer_constant
from realize.firmware.integer.emission import IntegerEmission

#: Bits of a local, the narrow ones first.
NARROW, WIDE = 32, 64

#: Bits of a constant that processors hold in an instruction; they put longer ones together, or load them.
SHORT = 16

#: Terms of a sum of which the order does not matter.
_FEW = 2

#: Local of the input, less its offset and within its limits; the parameter has the shorter name.
INPUT_COUNT = "input_count"

#: Of what was applied, likewise.
APPLIED_COUNT = "applied_count"


class Stored(NamedTuple):
    """A number the C text stores: what it stands for is ``value = stored/2**fraction_bits``, held in ``bits``."""

    stored: int
    fraction_bits: int
    bits: int

    @property
    def value(self) -> Fraction:
        """What it stands for."""
        return Fraction(self.stored) / Fraction(2) ** self.fraction_bits


class Spelling:
    """How one emission spells its C.

    Parameters
    ----------
    emission : IntegerEmission
        What is emitted.
    settling : Settling
        Of its program.

    Attributes
    ----------
    fields : dict
        Name and number of every coefficient the C text stores, in the order of the text.
    looked_up : frozenset of str
        Fields that functions load from a constant table of this file.
    negates : bool
        Whether that table negates what the recursion is to subtract: processors have no instruction that multiplies
        long words and subtracts.
    """

    def __init__(self, emission: IntegerEmission, settling: Settling) -> None:
        name = emission.name
        if not (name.isascii() and name.isidentifier() and not name.startswith("_")):
            raise RealizeError("design.name", repr(name), "a C identifier", "use letters, digits and _")
        self.name = name
        self.program: Program = emission.realization.program
        self.table = emission.coefficients == "table"
        self.negates = self.program.bits > SHORT and not self.table and emission.recursion_sign != "add"
        self.adds = self.negates or emission.recursion_sign == "add"
        self.bounds: Mapping[str, Bound] = {bound.variable: bound for bound in emission.realization.proof.bounds}
        self.settling = settling
        fields: dict[str, Stored] = {}
        for term in self._multiplied():
            field, stored, _ = self._found(fields, term)
            fields[field] = Stored(stored, term.fraction_bits, max(self.program.bits, _bits_of(stored)))
        self.looked_up = frozenset(fields) if self.program.bits > SHORT and not self.table else frozenset()
        gains = (gain for section in settling.sections for gain in section.gains)
        for gain in gains:
            fields[gain.name] = Stored(gain.mantissa, gain.shift, _bits_of(gain.mantissa))
        self.fields = dict(sorted(fields.items(), key=_place))

    # ------------------------------------------------------------ types

    def field_bits(self, state: str) -> int:
        """Of a state's type."""
        if state.startswith("state.integral"):
            assert self.program.integral is not None
            return self.program.integral.word.bits
        return self.word_bits(state)

    def word_bits(self, variable: str) -> int:
        """Of the type that keeps a variable's word between samples."""
        return 8 * kept_bytes(self.program.words[variable].bits)

    def local_bits(self, variable: str) -> int:
        """Of a local's type; what is proven of the command may make it narrower than its sum."""
        if variable == INPUT:
            return NARROW
        if variable == COMMAND:
            return width(self.command_largest.bit_length() + 1)
        return width(self.program.words[variable].bits)

    def variable_bits(self, variable: str) -> int:
        """Of a variable's type."""
        return self.field_bits(variable) if variable.startswith("state.") else self.local_bits(variable)

    def accumulator(self, each: Sum) -> int:
        """Of a sum's type: narrower than what is there for it where the proof lets it, which no table may change."""
        variables = [*(term.variable for term in each.terms), *([each.remainder] if each.remainder else [])]
        bound = self.bounds.get(f"{each.target} (sum)")
        if self.table or bound is None or any(self.variable_bits(name) == WIDE for name in variables):
            return width(each.bits)
        return min(width(each.bits), width(bound.largest.bit_length() + 1))

    @property
    def command_largest(self) -> int:
        """No larger magnitude is rounded from the command's sum."""
        shift = self.program.command.shift
        return (self.bounds[f"{COMMAND} (sum)"].largest >> shift) + (1 if shift else 0)

    @property
    def command_bits(self) -> int:
        """Of the local of the command within its limits."""
        return count_bits(self.program.interface.output)

    def keeps_half(self, each: Sum) -> bool:
        """Whether a remainder is kept with the half that rounds to nearest added: then only its type must hold both."""
        return each.remainder is not None and each.shift < self.word_bits(each.remainder)

    @property
    def late_shift(self) -> int:
        """Of a variable that is the command but for a power of two: it is limited first, as it has room as it is.

        0 where the command is a sum, or has room itself, or is needed unlimited.
        """
        program, command = self.program, self.program.command
        if program.integral or command.shift or len(command.terms) != 1 or self.local_bits(COMMAND) == NARROW:
            return 0
        (term,) = command.terms
        narrow = self.local_bits(term.variable) == self.command_bits == NARROW
        return term.shift if narrow and term.name is None and term.stored == 1 else 0

    @property
    def limited_bits(self) -> int:
        """Of what is held to the command's limits."""
        return NARROW if self.late_shift else self.local_bits(COMMAND)

    # ------------------------------------------------------------ products and sums

    def coefficient(self, field: str) -> str:
        """How a function refers to a stored number."""
        return f"coefficients->{field}" if self.table or field in self.looked_up else f"{self.name}_{field}"

    def variable(self, name: str) -> str:
        """A variable of the program."""
        return INPUT_COUNT if name == INPUT else name.replace("state.", "state->")

    def pieces(self, terms: Sequence[Term], bits: int, first: str | None = None) -> list[str]:
        """A sum in an accumulator, each piece after the first with its operator: added from left to right.

        Notes
        -----
        Sums of long products alone begin with the recursion, the first product of it before ``first``, and end with
        the newest input: of all orders of the sums that ``tests/benchmarks`` measures that is the one which costs
        least on the whole. Its registers are free soon, and what is widened is added to a product instead of becoming
        an accumulator.
        """
        together = bits == WIDE and len(terms) > _FEW and all(self.in_halves(term) for term in terms)
        signed = []
        for _, run in groupby(_by_age(terms) if together else terms, key=lambda term: self._shared_shift(term, bits)):
            signed += self._run(tuple(run), bits)
        if first:
            signed.insert(1 if together else 0, (False, self.cast(first, bits)))
        return joined(signed) or ["0"]

    def by_halves(self, terms: Sequence[Term], bits: int) -> bool:
        """Whether a sum can be added up by halves: where its products are long and their factors known."""
        return bits == WIDE and any(self.in_halves(term) for term in terms)

    def in_halves(self, term: Term) -> bool:
        """Whether a term is a product of two long words with nothing to shift."""
        short = self.variable_bits(term.variable) == NARROW
        return term.name is not None and term.shift == 0 and short and bool(self.looked_up)

    def factors(self, term: Term) -> tuple[str, str]:
        """Coefficient, its sign included, and variable of a product."""
        field, _, minus = self._found(self.fields, term)
        return f"{'-' if minus else ''}{self.coefficient(field)}", self.variable(term.variable)

    def factor(self, term: Term) -> int:
        """The coefficient that :meth:`factors` names."""
        _, stored, minus = self._found(self.fields, term)
        return -stored if minus else stored

    def largest_upper(self, variable: str) -> int:
        """No larger magnitude has the upper half of a variable."""
        return max(1, self._size(variable) >> SHORT)

    def _shared_shift(self, term: Term, bits: int) -> int:
        """The shift that a product leaves to those beside it; 0 for one that has it in its constant."""
        named = term.name is not None and (bits == WIDE or self.table)
        return term.shift if named else 0

    def _run(self, terms: tuple[Term, ...], bits: int) -> list[tuple[bool, str]]:
        """Products that share a power of two, added up before they are multiplied by it, where that sum has room."""
        power = 1 << self._shared_shift(terms[0], bits)
        largest = sum(self._largest_factor(term) * self._size(term.variable) * power for term in terms if term.name)
        if power == 1 or len(terms) == 1 or largest >> bits - 1:
            return [self.piece(term, bits) for term in terms]
        (minus, first), *others = (self.piece(term._replace(shift=0), bits) for term in terms)
        others[-1] = (others[-1][0], f"{others[-1][1]}){times(power)}")
        return [(False, f"({'-' if minus else ''}{first}"), *others]

    def cast(self, variable: str, bits: int) -> str:
        """A variable, widened where its type is narrower."""
        own = self.variable_bits(variable)
        return f"{f'({ctype(bits)})' if own < bits else ''}{self.variable(variable)}"

    def piece(self, term: Term, bits: int) -> tuple[bool, str]:
        """Whether a term is subtracted, and what."""
        power = 1 << term.shift
        if term.name is None:
            return term.stored < 0, self.cast(term.variable, bits) + times(power)
        field, _, minus = self._found(self.fields, term)
        return minus, self._product(field, self._largest_factor(term), power, term.variable, bits)

    def _largest_factor(self, term: Term) -> int:
        """No larger magnitude can stand for a coefficient."""
        return 1 << self.program.bits - 1 if self.table else abs(term.stored)

    def _product(self, field: str, factor: int, power: int, variable: str, bits: int) -> str:
        """A product as narrow as it fits, and then widened; the power of two in the constant where that has room."""
        constant_here = not self.table and field not in self.looked_up
        size, early = factor * self._size(variable), constant_here and factor * power <= LARGEST_LONG
        narrow = size <= LARGEST_LONG
        start = f"({ctype(NARROW if narrow else bits)}){self.coefficient(field)}"
        named, power_text = self.variable(variable), times(power)
        product = f"{start}{power_text} * {named}" if early else f"{start} * {named}{power_text}"
        if bits == NARROW or not narrow:
            return product
        if size * power <= LARGEST_LONG:
            return f"({ctype(bits)})({product})"
        return f"({ctype(bits)})({start} * {named}){power_text}"

    def _size(self, variable: str) -> int:
        """The power of two that no magnitude of a variable exceeds, as is proven."""
        return 1 << self.bounds[variable].largest.bit_length()

    # ------------------------------------------------------------ what is stored

    def _multiplied(self) -> list[Term]:
        terms = [term for each in self.program.sums for term in each.terms if term.name]
        return terms + self.integral_terms()

    def integral_terms(self) -> list[Term]:
        """Gains of the integral: of the states in their order, then of tracking; none where they are zero."""
        integral = self.program.integral
        if integral is None:
            return []
        point = integral.word.fraction_bits
        gains = [(f"integral{i}_gain", gain, INPUT) for i, gain in enumerate(integral.stored, 1)]
        gains.append(("tracking_gain", integral.tracking, COMMAND))
        return [Term(name, gain, 0, variable, point) for name, gain, variable in gains if gain]

    def _found(self, fields: Mapping[str, Stored], term: Term) -> tuple[str, int, bool]:
        """Field of a term's coefficient, or a free name for it; the number there; whether its product is subtracted."""
        name, stored, minus = str(term.name), term.stored, False
        if is_recursive(name):
            name, stored, minus = (
                (name.replace("_a", "_minus_a"), stored, False) if self.adds else (name, -stored, True)
            )
        count, field = 1, name
        while field in fields:
            there = fields[field]
            if there.fraction_bits == term.fraction_bits and abs(there.stored) == abs(stored):
                return field, there.stored, minus != (there.stored != stored)
            count += 1
            field = f"{name}_{count}"
        return field, stored, minus


def _by_age(terms: Sequence[Term]) -> list[Term]:
    """A sum's terms, the recursion first, then from the oldest input to the newest."""
    recursion = [term for term in terms if is_recursive(str(term.name))]
    others = [term for term in terms if not is_recursive(str(term.name))]
    return [*recursion, *sorted(others, key=lambda term: str(term.name), reverse=True)]


def joined(signed: Sequence[tuple[bool, str]]) -> list[str]:
    """Pieces of a sum with their operators, from whether each is subtracted."""
    return [
        f"{'- ' if minus else '+ '}{text}" if k else f"{'-' if minus else ''}{text}"
        for k, (minus, text) in enumerate(signed)
    ]


def width(bits: int) -> int:
    """Bits of the local that holds so many."""
    return NARROW if bits <= NARROW else WIDE


def ctype(bits: int) -> str:
    """The signed C type of so many bits."""
    return f"int{bits}_t"


def port_type(port: Port) -> str:
    """The C type at an end."""
    return f"{port.type}_t"


def count_bits(port: Port) -> int:
    """Of the local of a count less its offset."""
    return width(max(port.high, -port.low - 1).bit_length() + 1)


def cast(text: str, own: str, wanted: str) -> str:
    """A value in a type other than its own."""
    return text if own == wanted else f"({wanted}){text}"


def is_wide(port: Port) -> bool:
    """Whether counts at an end need more than 32 bits with a sign."""
    bits, signed = TYPES[port.type]
    return bits == NARROW and not signed


def times(power: int) -> str:
    """Multiplication by a power of two, where it is not 1."""
    return "" if power == 1 else f" * {constant(power)}"


def constant(value: int) -> str:
    """An integer of 32 or 64 bits; the most negative ones are sums, as their magnitudes have no type."""
    if value in (-(1 << NARROW - 1), -(1 << WIDE - 1)):
        return f"({constant(value + 1)[1:-1]} - 1)"
    text = integer_constant(value)
    assert text is not None
    return text


def alone(value: int) -> str:
    """A constant where no operator stands before it."""
    return constant(value).removeprefix("(").removesuffix(")")


def _bits_of(value: int) -> int:
    """Of the narrowest C type, of those that programs use, that holds a value."""
    bits = 8 * stored_bytes(max(value, -value - 1).bit_length() + 1)
    assert bits <= PRODUCT_BITS
    return max(16, bits)


def _place(item: tuple[str, Stored]) -> tuple[bool, int, bool, str]:
    """Sections first, each as its coefficients are called, its gain last; then the integral's."""
    part, _, role = item[0].partition("_")
    number = part.lstrip("abcdefghijklmnopqrstuvwxyz")
    order = role.replace("minus_", "").replace("b", " ")
    return not part.startswith("section"), int(number or 1 << 30), role.startswith("gain"), order
