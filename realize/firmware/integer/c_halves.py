"""Sums of long products for processors that multiply to 32 bits only: every product is made of four of 16-bit halves.

With ``coefficient = ch*2**16 + cl`` and ``value = vh*2**16 + vl``, where ``-2**15 <= cl < 2**15`` and
``0 <= vl < 2**16``, a sum of products is ``low + middle*2**16 + high*2**32`` with ``low = sum cl vl``,
``middle = sum ch vl + cl vh`` and ``high = sum ch vh``, of which the last 32 bits are enough. As the coefficients are
known, so is how many products of halves add up within 32 bits: that is how they are grouped, as every group costs an
addition to 64 bits.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from typing import NamedTuple

from realize.arithmetic.integer.program import Sum, Term
from realize.firmware.c_text import comment, wrapped
from realize.firmware.integer.c_statements import setting
from realize.firmware.integer.spelling import NARROW, WIDE, Spelling, joined

#: Bits of a half.
HALF = 16

#: No larger magnitude has the lower half of a value.
_LARGEST_LOW = (1 << HALF) - 1

#: What a sum of products of halves may come to, without a sign and with one.
_UNSIGNED, _SIGNED = (1 << NARROW) - 1, (1 << NARROW - 1) - 1

_SAYS = "Products of 16-bit halves. The lower half of a coefficient has a sign, that of a value has none."
_TOTAL = "The sum, which is proven to have room: low + middle * 2^16 + high * 2^32, modulo 2^64."


class Product(NamedTuple):
    """A product of halves: no larger magnitude is proven of it, and its text."""

    largest: int
    text: str


def halves_macro(c: Spelling) -> str:
    """Defined where sums are to be added up by halves."""
    return f"{c.name}_SHORT_PRODUCTS"


def halves_helpers(c: Spelling) -> list[str]:
    """The functions that sums by halves call."""
    name, given = c.name, "(int32_t coefficient, int32_t value)"
    return [
        f"#ifdef {halves_macro(c)}",
        *comment(wrapped(_SAYS)),
        *_inline(f"int32_t {name}_upper(int32_t value)", "(int32_t)(((uint32_t)value ^ 2147483648u) >> 16) - 32768"),
        *_inline(
            f"int32_t {name}_lower(int32_t coefficient)",
            "(int32_t)(((uint32_t)coefficient + 32768u) & 65535u) - 32768",
        ),
        *_inline(
            f"int32_t {name}_nearest(int32_t coefficient)",
            f"{name}_upper(coefficient) + ({name}_lower(coefficient) < 0)",
        ),
        *_inline(
            f"uint32_t {name}_low_low{given}", f"(uint32_t){name}_lower(coefficient) * ((uint32_t)value & 65535u)"
        ),
        *_inline(
            f"int32_t {name}_high_low{given}", f"{name}_nearest(coefficient) * (int32_t)((uint32_t)value & 65535u)"
        ),
        *_inline(f"int32_t {name}_low_high{given}", f"{name}_lower(coefficient) * {name}_upper(value)"),
        *_inline(
            f"uint32_t {name}_high_high{given}",
            f"(uint32_t){name}_nearest(coefficient) * (uint32_t){name}_upper(value)",
        ),
        *comment(wrapped(_TOTAL)),
        f"static inline int64_t {name}_total(uint64_t low, int64_t middle, uint32_t high)",
        "{",
        "    const uint64_t image = low + ((uint64_t)middle + (uint64_t)high * 65536u) * 65536u;",
        "    return image <= 9223372036854775807ull ? (int64_t)image : -(int64_t)~image - 1;",
        "}",
        "#endif",
        "",
    ]


def sum_by_halves(c: Spelling, each: Sum, name: str) -> list[str]:
    """Lines that set a local to a sum: a local for each group of products, then what they come to."""
    start = name.removesuffix("_sum")
    terms = [term for term in each.terms if c.in_halves(term)]
    plus, minus = _bottom(c, terms)
    middle = _middle(c, terms)
    high = [product.text for product in _products(c, "high_high", terms, [1] * len(terms))]
    groups = [
        *((f"{start}_plus{k}", "uint32_t", _summed(group)) for k, group in enumerate(plus, 1)),
        *((f"{start}_minus{k}", "uint32_t", _negated(group)) for k, group in enumerate(minus, 1)),
        *((f"{start}_middle{k}", "int32_t", _summed(group)) for k, group in enumerate(middle, 1)),
        (f"{start}_high", "uint32_t", _added(high)),
    ]
    return [
        *(line for local, kind, pieces in groups for line in setting(f"const {kind} {local} = ", pieces)),
        *setting(f"const uint64_t {start}_low = ", _low(c, each, start, len(plus), len(minus))),
        *setting(
            f"const int64_t {start}_middle = ", _added([f"(int64_t){start}_middle{k + 1}" for k in range(len(middle))])
        ),
        *setting(f"const int64_t {name} = ", [f"{c.name}_total({start}_low, {start}_middle, {start}_high)"]),
    ]


def halves(coefficient: int) -> tuple[int, int]:
    """Upper and lower half of a coefficient, the lower one with a sign."""
    low = (coefficient + (1 << HALF - 1)) % (1 << HALF) - (1 << HALF - 1)
    return coefficient - low >> HALF, low


def grouped(products: Iterable[Product], most: int) -> list[list[Product]]:
    """Products together, none of them with others that would take it beyond what is allowed: the largest first."""
    groups: list[list[Product]] = []
    for product in sorted(products, key=lambda each: -each.largest):
        room = (group for group in groups if sum(each.largest for each in group) + product.largest <= most)
        found = next(room, None)
        if found is None:
            groups.append([product])
        else:
            found.append(product)
    return groups


# ---------------------------------------------------------------- the columns


def _products(c: Spelling, which: str, terms: Sequence[Term], largest: Sequence[int]) -> list[Product]:
    """One of the four products of every term; those that are 0 are left out."""
    texts = [f"{c.name}_{which}({coefficient}, {variable})" for coefficient, variable in map(c.factors, terms)]
    return [Product(most, text) for most, text in zip(largest, texts, strict=True) if most]


def _bottom(c: Spelling, terms: Sequence[Term]) -> tuple[list[list[Product]], list[list[Product]]]:
    """Products of lower halves, without a sign: groups of those that are added, and of those that are subtracted."""
    lows = [halves(c.factor(term))[1] * _LARGEST_LOW for term in terms]
    plus, minus = ([max(0, sign * low) for low in lows] for sign in (1, -1))
    both = (_products(c, "low_low", terms, largest) for largest in (plus, minus))
    added, subtracted = (grouped(products, _UNSIGNED) for products in both)
    return added, subtracted


def _middle(c: Spelling, terms: Sequence[Term]) -> list[list[Product]]:
    """Products of an upper and a lower half."""
    sizes = [tuple(map(abs, halves(c.factor(term)))) for term in terms]
    crossed = _products(c, "high_low", terms, [high * _LARGEST_LOW for high, _ in sizes])
    inner = [low * c.largest_upper(term.variable) for term, (_, low) in zip(terms, sizes, strict=True)]
    return grouped([*crossed, *_products(c, "low_high", terms, inner)], _SIGNED)


def _low(c: Spelling, each: Sum, start: str, plus: int, minus: int) -> list[str]:
    """What is added at the bottom: groups of products, and whatever is no product of long words."""
    whole = [c.piece(term, WIDE) for term in each.terms if not c.in_halves(term)]
    signed = [
        *([(False, c.cast(each.remainder, WIDE))] if each.remainder else []),
        *((False, f"{start}_plus{k + 1}") for k in range(plus)),
        *((True, f"{start}_minus{k + 1}") for k in range(minus)),
        *whole,
    ]
    pieces = joined(
        [(is_less, f"(uint64_t)({text})" if " " in text else f"(uint64_t){text}") for is_less, text in signed]
    )
    return pieces or ["0u"]


def _summed(group: Sequence[Product]) -> list[str]:
    return _added([product.text for product in group])


def _negated(group: Sequence[Product]) -> list[str]:
    return [f"0u - {product.text}" if not k else f"- {product.text}" for k, product in enumerate(group)]


def _added(texts: Sequence[str]) -> list[str]:
    return joined([(False, text) for text in texts]) or ["0"]


def _inline(signature: str, value: str) -> list[str]:
    return [f"static inline {signature}", "{", f"    return {value};", "}", ""]
