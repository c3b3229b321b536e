"""The table [design]: three forms of one transfer function, and values that refer to each other."""

from __future__ import annotations

import re
from fractions import Fraction
from itertools import pairwise

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.algebra import polynomial as poly
from realize.algebra.expression import evaluate_transfer
from realize.algebra.irrational import pi, square_root
from realize.design import Design, Overrides, design_from_text
from realize.design.values import MAX_VALUES
from realize.errors import RealizeError, Refused
from realize.transfer import TransferFunction

F = Fraction


def read(text: str, **values: str) -> Design:
    return design_from_text(f"[design]\n{text}", "servo.toml", Overrides(values=values))


def transfer(numerator: list[int | Fraction], denominator: list[int | Fraction]) -> TransferFunction:
    return TransferFunction.from_polynomials(numerator, denominator)


PID = transfer([9, 420, 1800], [100, 0])


@pytest.mark.parametrize(
    "text",
    [
        'transfer = "4.2 + 18/s + 0.09*s"',
        'transfer = "kp + ki/s + kd*s"\n[design.values]\nkp = 4.2\nki = 18\nkd = 0.09',
        'transfer = """\n  kp + ki/s\n  + 0.09*s\n"""\n[design.values]\nkp = "21/5"\nki = 1_8.0',
        "numerator = [0.09, 4.2, 18]\ndenominator = [1, 0]",
        'numerator = [0, "kd", "2*kp", "18"]\ndenominator = [1, 0]\n[design.values]\nkp = 2.1\nkd = "9/100"',
        'numerator = [9e-2, 42e-1, 0x12]\ndenominator = ["1", 0.0]',
        'gain = 0.09\npoles = [0]\nzeros = ["(-4.2+sqrt(11.16))/0.18", "(-4.2-sqrt(11.16))/0.18"]',
    ],
    ids=["numbers", "values", "lines", "coefficients", "expressions", "notations", "roots"],
)
def test_one_transfer_function_can_be_written_in_many_ways(text: str) -> None:
    if "sqrt" in text:
        # The zeros are right to 400 digits only, so the coefficients are.
        lead, middle, last = (F(c, read(text).transfer.numerator[0]) for c in read(text).transfer.numerator)
        assert lead == 1
        assert abs(middle - F(420, 9)) < F(1, 10**397)
        assert abs(last - 200) < F(1, 10**396)
    else:
        assert read(text).transfer == PID


def test_complex_roots_are_pairs_in_rad_per_s() -> None:
    design = read("gain = 2\nzeros = []\npoles = [[-3, 4], -1.5, [-3, -4]]")
    assert design.transfer == transfer([2], list(poly.multiply((F(1), F(6), F(25)), (F(1), F(3, 2)))))


def test_a_pair_may_be_repeated_and_roots_may_be_absent() -> None:
    design = read("gain = 1\npoles = [[0, 2], [0, -2], [0, -2], [0, 2]]")
    assert design.transfer == transfer([1], [1, 0, 8, 0, 16])


def test_the_text_is_what_the_user_wrote_on_one_line() -> None:
    assert read('transfer = """\n 1 +\n\t2/s """').transfer_text == "1 + 2/s"


def test_coefficients_are_told_as_an_expression() -> None:
    assert read("numerator = [0, 0.5, 1]\ndenominator = [2, 0]").transfer_text == "(0.5*s + 1)/(2*s)"


def test_coefficients_nobody_could_read_are_told_to_17_digits() -> None:
    text = read('numerator = ["pi"]\ndenominator = [1, "sqrt(2)"]').transfer_text
    assert text == "3.1415926535897932/(s + 1.414213562373095)"


def test_values_keep_their_order_and_may_refer_forward() -> None:
    design = read(
        'transfer = "(a + w + r)/s"\n[design.values]\na = "2*b"\nw = "2*pi*f"\nb = "f/5"\nf = 50\nr = "sqrt(2)"'
    )
    assert design.values == (
        ("a", F(20)),
        ("w", 100 * pi()),
        ("b", F(10)),
        ("f", F(50)),
        ("r", square_root(F(2))),
    )


def test_a_value_of_the_command_line_replaces_that_of_the_file_and_moves_what_refers_to_it() -> None:
    text = 'transfer = "kp + ki/s"\n[design.values]\nkp = 1\nki = "kp/2"'
    assert read(text, kp="3/2").values == (("kp", F(3, 2)), ("ki", F(3, 4)))


def test_a_value_of_the_command_line_may_supply_what_the_file_leaves_open() -> None:
    assert read('transfer = "kp + 1/s"', kp="2*w", w="4").transfer == transfer([8, 1], [1, 0])


def test_a_broken_value_that_is_replaced_does_no_harm() -> None:
    assert read('transfer = "k/s"\n[design.values]\nk = "2s"', k="3").transfer == transfer([3], [1, 0])


@pytest.mark.parametrize(
    ("text", "where", "found", "advice"),
    [
        ("about = 'x'", "[design]", "no transfer function", "add a line such as transfer"),
        ('transfer = "1"\nnumerator = [1]', "[design]", "transfer and numerator at once", "keep one"),
        ("numerator = [1]", "[design] denominator", "nothing", "add denominator"),
        ("zeros = [1]", "[design] gain", "nothing", "add gain"),
        ("transfer = 3", "[design] transfer", "the number 3", 'write transfer = "'),
        ("transfer = 3.5", "[design] transfer", "the number 3.5", 'write transfer = "'),
        ("transfer = ['1']", "[design] transfer", "a list", 'write transfer = "'),
        ('transfer = ""', "[design] transfer", "no expression", "write one"),
        ('transfer = "2s"', "[design] transfer, column 2", '"s" right after "2"', "write 2*s"),
        ('transfer = "2*exp(-s)"', "[design] transfer, column 3", "exp", "dead time belongs to the plant"),
        ('transfer = "0*s"', "[design] transfer", "that is zero", "check the values"),
        ("numerator = [0, 0.0]\ndenominator = [1]", "[design] numerator", "that is zero", "check the values"),
        ("numerator = []\ndenominator = [1]", "[design] numerator", "that is zero", "check the values"),
        ("numerator = [1]\ndenominator = [0]", "[design] denominator", "a denominator of zero", "coefficients"),
        ("numerator = 1\ndenominator = [1]", "[design] numerator", "the number 1", "write numerator = [..]"),
        ("numerator = [1]\ndenominator = [true]", "[design] denominator, entry 1", "true", "write a number"),
        ("numerator = [[1]]\ndenominator = [1]", "[design] numerator, entry 1", "a list", "write a number"),
        ("numerator = [1979-05-27]\ndenominator = [1]", "[design] numerator, entry 1", "a date", "a number"),
        ("numerator = [nan]\ndenominator = [1]", "[design] numerator, entry 1", "nan", "write a number"),
        ("numerator = [-inf]\ndenominator = [1]", "[design] numerator, entry 1", "-inf", "write a number"),
        (f"numerator = {[1] * 34}\ndenominator = [1]", "[design] numerator", "a list of 34", "in series"),
        (f"gain = 1\npoles = {[-1] * 33}", "[design] poles", "a list of 33", "in series"),
        ("gain = 1\npoles = [[1, 2]]", "[design] poles", "[1, 2] without its conjugate", "add [1, -2]"),
        ("gain = 1\npoles = [[1, 2], [1, -2], [1, 2]]", "[design] poles", "without its conjugate", "add"),
        ("gain = 1\npoles = [[1e400, 2]]", "[design] poles", "[1E+400, 2] without", "add [1E+400, -2]"),
        (
            "gain = 1\npoles = [" + ",".join(f'"1/(pi+{k})^9"' for k in range(9)) + "]",
            "[design] poles",
            "a number that becomes too long",
            "fewer digits",
        ),
        (
            "denominator = [1]\nnumerator = [" + ",".join(f'"1/(pi+{k})^40"' for k in range(30)) + "]",
            "[design] numerator",
            "a number that becomes too long",
            "fewer digits",
        ),
        (
            'gain = "1e300"\npoles = [' + ",".join(["1e-300"] * 32) + "]",
            "[design] zeros",
            "a pole too far from or too near",
            "powers of ten",
        ),
        ("gain = 1\npoles = [[1, 2, 3]]", "[design] poles, entry 1", "a list of 3", "write [-5, 8.7]"),
        ("gain = 0", "[design] zeros", "that is zero", "check the values"),
        ('gain = "k"', "[design] gain, column 1", 'the unknown name "k"', "define k"),
        ('transfer = "1/(s + 1e101)"', "[design] transfer", "a pole too far", "powers of ten"),
        ('transfer = "(s + 1e-101)/(s + 1)"', "[design] transfer", "a zero too far", "powers of ten"),
        ('transfer = "1e301/(s + 1)"', "[design] transfer", "a gain too large", "powers of ten"),
        ('transfer = "1e-301/(s + 1)"', "[design] transfer", "a gain too large", "powers of ten"),
        ('transfer = "(s + 1e99)^4/(s + 1)"', "[design] transfer", "a gain too large", "powers of ten"),
        ('transfer = "1"\nvalues = 3', "[design] values", "the number 3", "write [design.values]"),
        ('transfer = "1"\n[design.values]\ns = 1', "[design.values] s", "a meaning of its own", "s_value"),
        ('transfer = "1"\n[design.values]\nkp-1 = 1', "[design.values] kp-1", '"kp-1"', "rename"),
        ('transfer = "1"\n[design.values]\n"\u03c4" = 1', "[design.values] \u03c4", "\u03c4", "rename"),
        ('transfer = "1"\n[design.values]\n' + "k" * 49 + " = 1", "[design.values] kkk", "kkk", "rename"),
        ('transfer = "1"\n[design.values]\nk = "s"', "[design.values] k, column 1", "s where a constant", ""),
        ('transfer = "1"\n[design.values]\nk = ""', "[design.values] k", "no expression", "write one"),
        ('transfer = "1"\n[design.values]\nk = "1/0"', "[design.values] k", "a denominator of zero", "check"),
        ('transfer = "1"\n[design.values]\nk = 1e999', "[design.values] k", "the power of ten", "exponent"),
        ('transfer = "1"\n[design.values]\nk = -1e301', "[design.values] k", "too large", "powers of ten"),
        ('transfer = "1"\n[design.values]\nk = {a = 1}', "[design.values] k", "a table", "write a number"),
        ('transfer = "1"\n[design.values]\nk = "k"', "[design.values] k", "k -> k", "give one of k a number"),
        (
            'transfer = "1"\n[design.values]\na = "b"\nb = "2*c"\nc = "a+1"\nd = "a"',
            "[design.values] ",
            r"values that refer to each other: ",
            "a number",
        ),
        (
            'transfer = "1"\n[design.values]\n' + "\n".join(f"k{i} = 1" for i in range(MAX_VALUES + 1)),
            "[design.values]",
            f"{MAX_VALUES + 1} values",
            "write the numbers",
        ),
    ],
)
def test_each_mistake_names_file_table_and_key(text: str, where: str, found: str, advice: str) -> None:
    with pytest.raises(RealizeError) as caught:
        read(text)
    assert caught.value.where.startswith(f"servo.toml, {where}")
    assert found in caught.value.found
    assert advice in caught.value.advice
    assert caught.value.allowed
    assert caught.value.exit_status == 2


def test_a_cycle_is_shown_in_the_direction_it_refers() -> None:
    with pytest.raises(RealizeError) as caught:
        read('transfer = "1"\n[design.values]\na = "b"\nb = "2*c"\nc = "a+1"\nd = "a"')
    cycle = re.fullmatch(r"values that refer to each other: (.*)", caught.value.found)
    assert cycle is not None
    names = cycle[1].split(" -> ")
    assert sorted(names[1:]) == ["a", "b", "c"]
    assert names[0] == names[-1]
    assert all(pair in ("ab", "bc", "ca") for pair in map("".join, pairwise(names)))


@pytest.mark.parametrize(
    ("text", "values", "where", "found", "advice"),
    [
        ('transfer = "kp/s"', {"kp": "1", "kq": "2"}, "--value kq", "that nothing uses", "remove it"),
        ('transfer = "gain/s"', {"gain": "1", "gian": "2"}, "--value gian", "that nothing uses", "did you mean gain?"),
        ('transfer = "1/s"', {"zeta": "2"}, "--value zeta", "that nothing uses", "remove it"),
        ('transfer = "kp/s"', {"kp": "2s"}, "--value kp", '"2s"', "write 2 for s"),
        ('transfer = "kp/s"', {"kp": "2 ms"}, "--value kp", '"2 ms"', "write 0.002 for s"),
        ('transfer = "kp/s"', {"kp": "50 Hz"}, "--value kp", '"50 Hz"', 'write 50 for Hz, or "2*pi*50" for rad/s'),
        ('transfer = "kp*h/s"', {"kp": "2 h", "h": "3"}, "--value kp, column 3", "right after", "write 2*h"),
        ('transfer = "kp/s"', {"kp": "2 mm"}, "--value kp, column 3", "right after", "no unit: write the number alone"),
        ('transfer = "kp/s"', {"kp": "inf"}, "--value kp, column 1", "no finite number", "write a number"),
        ('transfer = "s"', {"s": "1"}, "--value s", "a meaning of its own", "s_value"),
        ('transfer = "s"', {"exp": "1"}, "--value exp", "a meaning of its own", "exp_value"),
        ('transfer = "kp/s"', {"kp": "1", "k2": "k3", "k3": "1"}, "--value k2", "that nothing uses", "remove it"),
    ],
)
def test_a_mistake_on_the_command_line_names_the_option(
    text: str, values: dict[str, str], where: str, found: str, advice: str
) -> None:
    with pytest.raises(RealizeError) as caught:
        read(text, **values)
    assert caught.value.where == where
    assert found in caught.value.found
    assert advice in caught.value.advice


def test_a_hidden_growing_mode_is_refused_by_the_name_of_its_place() -> None:
    with pytest.raises(Refused, match="hides a growing mode") as caught:
        read('transfer = "s/(s-1) - 1/(s-1)"')
    assert caught.value.where == "servo.toml, [design] transfer"
    assert caught.value.exit_status == 1


def test_a_decaying_mode_that_cancels_is_kept_for_the_report() -> None:
    design = read('transfer = "(s+1)/((s+1)*(s+2))"')
    assert design.transfer.cancelled == (1, 1)


roots = st.lists(
    st.tuples(st.integers(-9, 9), st.integers(0, 9)), max_size=4
)  # real ones, and pairs by their upper half


@given(roots, roots, st.integers(1, 9))
def test_zeros_and_poles_give_what_their_factors_give(
    zeros: list[tuple[int, int]], poles: list[tuple[int, int]], gain: int
) -> None:
    def listed(pairs: list[tuple[int, int]]) -> list[object]:
        return [entry for re_, im in pairs for entry in ([[re_, im], [re_, -im]] if im else [re_])]

    def product(pairs: list[tuple[int, int]]) -> str:
        factors = [f"((s - ({re_}))^2 + {im}^2)" if im else f"(s - ({re_}))" for re_, im in pairs]
        return "*".join(factors) or "1"

    try:
        design = read(f"gain = {gain}\nzeros = {listed(zeros)}\npoles = {listed(poles)}")
    except Refused:
        assert set(zeros) & set(poles)
        return
    expected = evaluate_transfer(f"{gain}*{product(zeros)}/({product(poles)})", {}, "here")
    assert design.transfer == TransferFunction.from_polynomials(*expected)


@pytest.mark.parametrize(
    "text", ["1e299/(s + 9e98)^3", "s/(s + 1e-98)", "(s + 1e8)^32/(s + 1)", "1/(s^32 + 1e256)", "1e-299*s^3"]
)
def test_corners_and_gains_far_beyond_any_machine_are_still_read(text: str) -> None:
    read(f'transfer = "{text}"')


@pytest.mark.parametrize(
    ("values", "name", "advice"),
    [
        ("kp = 1\nkd = 2", "kd", "remove it"),
        ("kp = 1\nfilter = 2", "filter", "remove it"),
        ('kp = "2*gain"\ngain = 1\ngian = 1', "gian", "did you mean gain?"),
        ('kp = 1\na = "2*b"\nb = 3', "a", "remove it"),
        ('kp = 1\nb = 3\na = "2*b"', "b", "remove it"),
    ],
)
def test_a_value_of_the_file_that_nothing_uses_is_refused_by_its_name(values: str, name: str, advice: str) -> None:
    """What only a value that is itself in no use refers to is in no use either."""
    with pytest.raises(RealizeError) as caught:
        read(f'transfer = "kp/s"\n[design.values]\n{values}')
    assert caught.value.where == f"servo.toml, [design.values] {name}"
    assert caught.value.found == "a value that nothing uses"
    assert caught.value.advice == advice


def test_a_value_of_the_file_stays_in_use_when_the_command_line_replaces_what_uses_it() -> None:
    text = 'transfer = "kp/s"\n[design.values]\nkp = "2*k"\nk = 3'
    assert read(text, kp="5").values == (("kp", F(5)), ("k", F(3)))


def test_a_value_of_the_file_may_be_used_by_one_of_the_command_line_alone() -> None:
    text = 'transfer = "kp/s"\n[design.values]\nkp = 1\nk = 3'
    assert read(text, kp="2*k").values == (("kp", F(6)), ("k", F(3)))


def test_a_mistyped_reference_is_told_before_the_value_it_leaves_in_no_use() -> None:
    with pytest.raises(RealizeError) as caught:
        read('transfer = "gian/s"\n[design.values]\ngain = 1')
    assert caught.value.found == 'the unknown name "gian"'
    assert caught.value.advice.startswith("did you mean gain?")


def test_an_unknown_name_of_two_letters_is_like_no_other() -> None:
    with pytest.raises(RealizeError) as caught:
        read('transfer = "kp + ki/s"\n[design.values]\nkp = 1')
    assert caught.value.found == 'the unknown name "ki"'
    assert "did you mean" not in caught.value.advice
