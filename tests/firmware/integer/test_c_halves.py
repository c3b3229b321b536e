"""Sums by halves: halves make the coefficient, groups hold what they must, and the emitted text is such a sum."""

from __future__ import annotations

import re
from collections.abc import Iterator

from hypothesis import given
from hypothesis import strategies as st

from realize.firmware.integer import IntegerEmission
from realize.firmware.integer.c_halves import Product, grouped, halves
from tests.firmware.bench import rendered
from tests.firmware.integer.designs import WIDTHS, grid

GRID = [one for one in grid() if one.realization.widths == WIDTHS[2] and one.coefficients == "inline"]


@given(st.integers(-(2**31), 2**31 - 1))
def test_halves_make_the_coefficient(coefficient: int) -> None:
    high, low = halves(coefficient)
    assert high * 65536 + low == coefficient
    assert -32768 <= low < 32768


@given(st.lists(st.integers(1, 2**31 - 1)), st.integers(2**31 - 1, 2**32 - 1))
def test_groups_hold_every_product_once_and_no_two_would_go_together(sizes: list[int], most: int) -> None:
    groups = grouped([Product(size, str(k)) for k, size in enumerate(sizes)], most)
    totals = [sum(product.largest for product in group) for group in groups]
    assert sorted(int(product.text) for group in groups for product in group) == [*range(len(sizes))]
    assert max(totals, default=0) <= most
    assert all(left + right > most for k, left in enumerate(totals) for right in totals[:k])


def table(source: str) -> dict[str, int]:
    """The table of coefficients by field, read from the text; ``-(-1)`` is what the compiler is to negate."""
    names = re.findall(r"int\d+_t (\w+);", source.partition("typedef struct {")[2].partition("}")[0])
    rows = source.partition("_stored = {\n")[2].partition("};")[0].splitlines()
    numbers = [row.partition(", /*")[0].strip().replace("-(-", "").removesuffix(")").removesuffix("LL") for row in rows]
    return {
        name: int(text.removesuffix(" - 1")) - text.endswith(" - 1") for name, text in zip(names, numbers, strict=True)
    }


def sums(source: str) -> Iterator[tuple[str, str]]:
    """Of every sum the text by halves and the text of long products."""
    for block in re.findall(r"#ifdef \w+_SHORT_PRODUCTS\n    (.*?)#endif", source, re.DOTALL):
        by_halves, _, long = block.partition("#else\n")
        yield by_halves, long


def products(text: str) -> list[tuple[str, str]]:
    """Coefficient and variable of long products."""
    return re.findall(r"\(int64_t\)coefficients->(\w+) \* ([\w>-]+)", text)


def checked(one: IntegerEmission) -> int:
    """The number of groups in the text of a design, each of which holds what it must, and together all products."""
    source = rendered(one)[f"{one.name}.c"]
    stored = table(source)
    largest = {bound.variable: bound.largest + 1 for bound in one.realization.proof.bounds}

    def size(kind: str, sign: str, field: str, variable: str) -> int:
        high, low = halves(-stored[field] if sign else stored[field])
        proven = largest["input" if variable == "input_count" else variable.replace("state->", "state.")]
        upper = min(32768, -(-proven // 65536))
        return {"low_low": low * 65535, "high_low": abs(high) * 65535, "low_high": abs(low) * upper}[kind]

    found = 0
    for by_halves, long in sums(source):
        calls = re.findall(r"_(low_low|high_low|low_high|high_high)\((-?)coefficients->(\w+), ([\w>-]+)\)", by_halves)
        parted = [(field, variable) for kind, _, field, variable in calls if kind == "high_high"]
        assert sorted([*parted, *products(by_halves)]) == sorted(products(long))
        assert len({*calls}) == len(calls)
        assert len([kind for kind, *_ in calls if kind == "low_low"]) == sum(stored[f] % 65536 != 0 for f, _ in parted)
        for local, pieces in re.findall(r"const u?int32_t \w+_(plus|minus|middle)\d+ =(.*?);", by_halves, re.DOTALL):
            sizes = [
                size(*call)
                for call in re.findall(r"_(low_low|high_low|low_high)\((-?)coefficients->(\w+), ([\w>-]+)\)", pieces)
            ]
            assert {each > 0 for each in sizes} == {local != "minus"}
            assert sum(map(abs, sizes)) < (2**31 if local == "middle" else 2**32)
            found += 1
    return found


def test_the_text_adds_the_same_products_and_no_group_exceeds_32_bits() -> None:
    assert sum(map(checked, GRID)) > 3 * len(GRID)
