"""``realize.TransferFunction``: exact arithmetic, constructors that agree, and a response that is rounded once."""

from __future__ import annotations

import copy
import pickle
from collections.abc import Callable
from fractions import Fraction
from operator import add, mul, sub, truediv
from typing import Any, cast

import html5lib
import mpmath
import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from realize import RealizeError, Refused, TransferFunction
from realize.algebra import polynomial as poly
from tests.strategies import Factored, sampled_designs

#: Polynomials whose roots decay or stay: what they cancel hides nothing that grows.
calm = st.sampled_from(((1,), (1, 2), (1, 0), (3, 1, 1), (1, 0, 4), (1, 4, 4), (1, 3, 2)))
numbers = st.builds(Fraction, st.integers(1, 60), st.integers(1, 9))
operations = st.sampled_from((add, sub, mul, truediv))


@st.composite
def transfers(draw: st.DrawFn) -> TransferFunction:
    """Ratios of a few calm factors."""
    above, below = ([poly.rationals(draw(calm)) for _ in range(2)] for _ in range(2))
    return TransferFunction(poly.scale(poly.multiply(*above), draw(numbers)), poly.multiply(*below))


def value(transfer: TransferFunction, x: Fraction) -> Fraction:
    above, below = (poly.evaluate(poly.rationals(p), x) for p in (transfer.numerator, transfer.denominator))
    return above / below


@given(transfers(), transfers(), operations, st.integers(1, 50))
def test_arithmetic_agrees_with_exact_values(
    a: TransferFunction, b: TransferFunction, operation: Callable[[Any, Any], Any], x: int
) -> None:
    point = Fraction(x, 7)
    assume(operation is not sub or a != b)
    assert value(operation(a, b), point) == operation(value(a, point), value(b, point))


@given(transfers(), st.one_of(numbers, st.integers(1, 99), st.floats(0.001, 999)), operations, st.integers(1, 50))
def test_arithmetic_with_numbers_agrees_from_both_sides(
    a: TransferFunction, number: Fraction | int | float, operation: Callable[[Any, Any], Any], x: int
) -> None:
    point, exact = Fraction(x, 7), Fraction(repr(number)) if isinstance(number, float) else Fraction(number)
    assume(operation is not sub or a != TransferFunction(number))
    assert value(operation(a, number), point) == operation(value(a, point), exact)
    assert value(operation(number, a), point) == operation(exact, value(a, point))
    if isinstance(number, float):
        assert operation(np.float64(number), a) == operation(number, a)


@given(transfers(), transfers(), st.integers(-3, 3), st.integers(1, 50))
def test_powers_and_closed_loops_agree_with_exact_values(
    a: TransferFunction, b: TransferFunction, exponent: int, x: int
) -> None:
    point = Fraction(x, 7)
    assert value(a**exponent, point) == value(a, point) ** exponent
    assert value(-a, point) == -value(+a, point)
    assert value(a.feedback(b), point) == value(a, point) / (1 + value(a, point) * value(b, point))


@given(transfers())
def test_the_representation_reads_back_the_same(a: TransferFunction) -> None:
    assert eval(repr(a)) == a
    assert TransferFunction.parse(str(a)) == a
    assert hash(TransferFunction.parse(str(a))) == hash(a)


@given(transfers())
def test_it_can_be_sent_to_another_process_once_its_roots_are_known(a: TransferFunction) -> None:
    assert len(a.poles) == a.order
    assert pickle.loads(pickle.dumps(a)) == copy.deepcopy(a) == a


@settings(max_examples=30)
@given(sampled_designs(6))
def test_roots_coefficients_and_text_make_the_same(drawn: tuple[Factored, Fraction]) -> None:
    design, _ = drawn
    zeros, poles = (
        [
            (str(root.re), str(sign * root.im)) if root.im else str(root.re)
            for root in roots
            for sign in ((1, -1) if root.im else (1,))
            for _ in range(root.multiplicity)
        ]
        for roots in (design.zeros, design.poles)
    )
    made = TransferFunction.from_roots(zeros, poles, design.gain)  # type: ignore[arg-type]  # pairs of exact texts
    exact = design.transfer()
    assert (made.numerator, made.denominator) == (exact.numerator, exact.denominator)
    assert made == TransferFunction(exact.numerator, exact.denominator)
    assert (made.order, made.relative_degree) == (design.order, design.relative_degree)
    assert len(made.poles) == design.order
    assert len(made.zeros) == design.order - design.relative_degree


def test_arrays_are_accepted_and_returned_and_nothing_changes_through_them() -> None:
    numerator = np.array([0.09, 4.2, 18.0])
    pid = TransferFunction(numerator, np.array([1, 0]))
    assert pid == TransferFunction.parse("kp + ki/s + kd*s", kp=4.2, ki=np.int64(18), kd=np.float32(0.09))
    numerator[0] = pid.numerator_array[0] = 7
    assert pid.numerator_array.tolist() == [0.09, 4.2, 18.0]
    assert (pid.poles.dtype, pid.numerator_array.dtype) == (np.complex128, np.float64)
    with pytest.raises(AttributeError):
        pid.numerator = (1,)  # type: ignore[misc]


def test_complex_roots_of_numpy_come_in_pairs() -> None:
    pair = TransferFunction.from_roots(poles=np.array([-0.1 + 2j, -0.1 - 2j]), gain=np.float32(0.1))
    assert pair == TransferFunction.parse("0.1/(s^2 + 0.2*s + 4.01)")
    with pytest.raises(RealizeError, match=r"the complex root \[-0\.1, 2\] without its conjugate"):
        TransferFunction.from_roots(poles=[-0.1 + 2j])


@given(sampled_designs(5), st.sampled_from((0.0, -0.3, -50.0)), st.floats(1e-3, 1e3))
def test_the_response_is_correctly_rounded(drawn: tuple[Factored, Fraction], low: float, high: float) -> None:
    exact = drawn[0].transfer()
    transfer = TransferFunction(exact.numerator, exact.denominator)
    found = transfer.response(np.array([[low], [high]]))
    assert found.shape == (2, 1)
    with mpmath.workdps(350):
        for f, got in zip((low, high), found.ravel(), strict=True):
            s = mpmath.mpc(0, 2 * mpmath.pi * mpmath.mpf(repr(f)))
            below = mpmath.polyval(exact.denominator[::-1], s, asc=True)
            if below == 0:
                assert abs(got) == np.inf
                continue
            wanted = mpmath.polyval(exact.numerator[::-1], s, asc=True) / below
            # A part that is 0 exactly leaves digits of mpmath's pi beyond all that counts.
            parts = [
                0.0 if abs(part) < abs(wanted) * mpmath.mpf(10) ** -300 else float(part)
                for part in (wanted.real, wanted.imag)
            ]
            assert [got.real, got.imag] == parts


def test_a_notch_is_exactly_zero_and_a_pole_infinite_without_a_phase() -> None:
    notch = TransferFunction.parse("(s^2 + w^2)/(s^2 + w*s + w^2)", w="2*pi*0.1")
    assert notch.response(0.1).tolist() == 0
    resonator = 1 / notch
    assert np.isinf(abs(resonator.response(0.1)))
    assert np.isnan(np.angle(resonator.response([0.1])[0]))
    assert abs(TransferFunction([1], [1, 0]).response(0)) == np.inf


def test_a_loop_around_an_unstable_plant_is_closed_but_division_would_hide_its_mode() -> None:
    plant = TransferFunction([4], [1, -1])
    assert plant.feedback() == TransferFunction([4], [1, 3])
    assert plant.feedback(TransferFunction([1, -1], [1, 2])).denominator == (1, 5, -6)
    with pytest.raises(Refused, match="hides a growing mode at s = 1"):
        plant / (1 + plant)


@pytest.mark.parametrize(
    ("make", "where", "found"),
    [
        (lambda g: g - g, "TransferFunction", "a transfer function that is zero"),
        (lambda g: g / 0, "TransferFunction", "a division by zero"),
        (lambda g: g * float("nan"), "TransferFunction", "nan, which is no finite number"),
        (lambda g: g**40, "TransferFunction", "a polynomial of degree 40 in s"),
        (lambda g: g**0.5, "TransferFunction", "an exponent that is not an integer"),
        (lambda g: TransferFunction([1], [0, 0]), "TransferFunction, denominator", "a denominator of zero"),
        (
            lambda g: TransferFunction([1, "x"]),
            "TransferFunction, numerator, entry 2, column 1",
            'the unknown name "x"',
        ),
        (lambda g: TransferFunction([1], np.eye(2)), "TransferFunction, denominator, entry 1", "a list"),
        (
            lambda g: TransferFunction(np.array([1, 2 - 3j])),
            "TransferFunction, numerator, entry 2",
            "the complex number 2-3j",
        ),
        (lambda g: TransferFunction([1] * 40), "TransferFunction, numerator", "a list of 40"),
        (lambda g: TransferFunction.parse("a/s", b=1), "TransferFunction.parse, column 1", 'the unknown name "a"'),
        (lambda g: TransferFunction.parse(cast(str, 5)), "TransferFunction.parse", "the number 5"),
        (lambda g: g.response("high"), "TransferFunction.response, frequency_hz, column 1", 'the unknown name "high"'),
    ],
)
def test_what_cannot_be_is_refused_by_its_place(
    make: Callable[[TransferFunction], object], where: str, found: str
) -> None:
    with pytest.raises(RealizeError) as refusal:
        make(TransferFunction([1, 2], [1, 3]))
    assert (refusal.value.where, refusal.value.found) == (where, found)
    assert "--" not in str(refusal.value)


def test_other_objects_are_left_to_python() -> None:
    lag = TransferFunction([1], [1, 1])
    with pytest.raises(TypeError, match="unsupported operand"):
        lag + "1"  # type: ignore[operator]
    with pytest.raises(TypeError):
        np.array([1.0]) * lag
    assert lag != "1/(s + 1)"


def test_what_is_too_long_to_read_is_shown_rounded_and_says_so() -> None:
    notch = TransferFunction.parse("(s^2 + (2*pi*50)^2)/(s + 1)")
    assert str(notch) == "(s^2 + 98696)/(s + 1) (coefficients rounded)"
    assert repr(notch) == f"<TransferFunction {notch}>"
    assert len(notch._repr_html_()) < 600


@given(transfers())
def test_the_html_is_strict_and_holds_every_coefficient(a: TransferFunction) -> None:
    root = html5lib.HTMLParser(strict=True).parseFragment(a._repr_html_())
    namespace = "{http://www.w3.org/1998/Math/MathML}"
    shown = [element.text for element in root.iter(f"{namespace}mn")]
    wanted = [str(abs(c)) for p in (a.numerator, a.denominator) for c in p if abs(c) > 1]
    assert all(text in shown for text in wanted)
    assert root.find(f".//{namespace}math").get("alttext") == str(a)
