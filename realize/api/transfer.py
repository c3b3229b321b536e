"""``realize.TransferFunction``: an exact ratio of polynomials in s, with numpy at its edges."""

from __future__ import annotations

from collections.abc import Callable
from decimal import Decimal
from fractions import Fraction
from typing import Any

import numpy as np
import numpy.typing as npt

from realize.algebra import polynomial as poly
from realize.algebra.expression import format_transfer, ratio
from realize.algebra.expression.ratio import Ratio, UnfitError
from realize.algebra.rounding import FLOAT64
from realize.api.entries import Arguments, Number, Real, Reals, Roots, coefficients, entry, exactly, row
from realize.api.notebook import fraction
from realize.api.response import exact_response
from realize.api.wording import in_keywords
from realize.checks.modes import every
from realize.design.controller import read_controller, reduced
from realize.errors import RealizeError
from realize.quantity import SHOWN_DIGITS, round_significant
from realize.transfer import TransferFunction as ExactTransferFunction

#: Longest text of a transfer function that is shown exactly; beyond it five digits tell people more.
_LONGEST = 400

_NAME = "TransferFunction"


class TransferFunction:
    """A transfer function in s: a ratio of two polynomials, exact and in lowest terms.

    Parameters
    ----------
    numerator, denominator : number, sequence or array
        Coefficients in descending powers of s. Numbers may be ``int``, ``float``, ``Fraction``, ``Decimal``, numpy's,
        or text as in a design file (``"1/3"``). A float counts as the decimal that Python prints for it: ``0.1`` is
        one tenth, and so is ``numpy.float32(0.1)``.

    Raises
    ------
    RealizeError
        When a coefficient is no finite real number, numerator or denominator are zero, the degree is above 32, or
        gains and corners lie beyond what float64 could hold.
    Refused
        When a factor that cancels hides a growing mode.

    Notes
    -----
    It never changes. Sums, differences, products, quotients and integer powers, of each other and of numbers, are exact
    too, and cancel what is common; a cancelled growing mode is refused, and so is a result of zero. To close a loop use
    :meth:`feedback`, which cancels nothing that the loop does not.

    Examples
    --------
    >>> import numpy as np
    >>> from realize import TransferFunction
    >>> TransferFunction([0.09, 4.2, 18], [1, 0])
    TransferFunction.parse('(9*s^2 + 420*s + 1800)/(100*s)')
    >>> lag = TransferFunction(np.array([1.0]), np.array([0.05, 1.0]))
    >>> print(2 * lag)
    40/(s + 20)
    """

    __slots__ = ("_exact",)

    #: Numbers of numpy leave arithmetic to this class.
    __array_ufunc__ = None

    def __init__(self, numerator: Reals, denominator: Reals = 1) -> None:
        given = {"numerator": numerator, "denominator": denominator}
        self._exact = _read({key: coefficients(value, f"{_NAME}, {key}") for key, value in given.items()}, _NAME)

    @classmethod
    def parse(cls, text: str, /, **values: Real) -> TransferFunction:
        """Read an expression in s, as in a design file, with values for its names.

        Raises
        ------
        RealizeError, Refused
            As for the class, and when the text is no such expression or a value has no use.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> print(TransferFunction.parse("kp + ki/s", kp=4.2, ki=18))
        (21*s + 90)/(5*s)
        """
        known = {name: entry(value, f"{_NAME}.parse, {name}") for name, value in values.items()}
        return public(_read({"transfer": text, "values": known}, f"{_NAME}.parse"))

    @classmethod
    def from_roots(cls, zeros: Roots = (), poles: Roots = (), gain: Real = 1) -> TransferFunction:
        """``gain * prod(s - zero) / prod(s - pole)``, roots in rad/s, complex ones in conjugate pairs.

        Raises
        ------
        RealizeError, Refused
            As for the class, and when a complex root stands without its conjugate.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> print(TransferFunction.from_roots(zeros=[-5], poles=[0, -1 + 2j, -1 - 2j], gain=3))
        (3*s + 15)/(s^3 + 2*s^2 + 5*s)
        """
        source = f"{_NAME}.from_roots"
        given = {key: row(value, f"{source}, {key}") for key, value in (("zeros", zeros), ("poles", poles))}
        return public(_read({**given, "gain": entry(gain, f"{source}, gain")}, source))

    @classmethod
    def s(cls) -> TransferFunction:
        """The variable itself, to write transfer functions with.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> s = TransferFunction.s()
        >>> print((s + 5) / (s**2 + 2 * s + 5))
        (s + 5)/(s^2 + 2*s + 5)
        """
        return cls((1, 0))

    @classmethod
    def from_scipy(cls, system: Any) -> TransferFunction:
        """Take over a continuous system of ``scipy.signal``: TransferFunction, ZerosPolesGain or StateSpace.

        Its floats count as everywhere here. A state space goes by an exact determinant, without scipy's own conversion,
        which rounds; modes that neither input nor output see cancel where the floats say so exactly.

        Raises
        ------
        RealizeError
            When it is discrete, has several inputs or outputs, or is no such system; as for the class.
        Refused
            When a mode that cancels grows.

        Examples
        --------
        >>> from scipy import signal
        >>> from realize import TransferFunction
        >>> print(TransferFunction.from_scipy(signal.StateSpace([[-2]], [[1]], [[3]], [[0.5]])))
        (s + 8)/(2*s + 4)
        """
        from realize.api.scipy_gate import scipy_objects

        return public(_read(scipy_objects().entries_of(system), f"{_NAME}.from_scipy"))

    @property
    def numerator(self) -> tuple[int, ...]:
        """Descending powers of s, exact; with the denominator in integers without a common divisor.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> TransferFunction([0.5, 1], [1, 0.25]).numerator
        (2, 4)
        """
        return self._exact.numerator

    @property
    def denominator(self) -> tuple[int, ...]:
        """As :attr:`numerator`; its leading coefficient is positive."""
        return self._exact.denominator

    @property
    def numerator_array(self) -> npt.NDArray[np.float64]:
        """Descending powers of s over a leading denominator coefficient of 1, each correctly rounded.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> TransferFunction([0.5, 1], [2, 0.5]).numerator_array
        array([0.25, 0.5 ])
        """
        return self._rounded(self._exact.numerator)

    @property
    def denominator_array(self) -> npt.NDArray[np.float64]:
        """As :attr:`numerator_array`; the leading coefficient is 1."""
        return self._rounded(self._exact.denominator)

    @property
    def order(self) -> int:
        """Degree of the denominator."""
        return self._exact.order

    @property
    def relative_degree(self) -> int:
        """Degree of the denominator minus degree of the numerator; negative means improper."""
        return self._exact.relative_degree

    @property
    def poles(self) -> npt.NDArray[np.complex128]:
        """Poles in rad/s, each as often as its multiplicity, to a double's precision; ascending in magnitude.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> TransferFunction.parse("1/(s*(s + 2)^2)").poles.real
        array([ 0., -2., -2.])
        """
        return np.array(every(self._exact.poles), dtype=np.complex128)

    @property
    def zeros(self) -> npt.NDArray[np.complex128]:
        """Finite zeros in rad/s, as :attr:`poles`."""
        return np.array(every(self._exact.zeros), dtype=np.complex128)

    def response(self, frequency_hz: Reals | npt.ArrayLike) -> npt.NDArray[np.complex128]:
        """``G(j 2 pi f)``, real and imaginary part correctly rounded.

        Parameters
        ----------
        frequency_hz : number or array
            Of either sign.

        Returns
        -------
        array of complex
            Of the shape of the frequencies. On a pole ``inf + nan j``: infinite, without a phase.

        Raises
        ------
        RealizeError
            When a frequency is no finite real number.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> notch = TransferFunction.parse("(s^2 + w^2)/(s^2 + w*s + w^2)", w="2*pi*50")
        >>> abs(notch.response([0, 50])).tolist()
        [1.0, 0.0]
        """
        frequencies = np.asarray(frequency_hz)
        exact = [exactly(f, f"{_NAME}.response, frequency_hz") for f in frequencies.ravel()]
        return exact_response(self._exact, exact).reshape(frequencies.shape)

    def feedback(self, other: TransferFunction | Number = 1) -> TransferFunction:
        """The closed loop ``G/(1 + G H)`` with H in the feedback path; every mode of the loop stays in it.

        Raises
        ------
        RealizeError
            When ``1 + G H`` is zero; as for the class.
        Refused
            When the loop itself hides a growing mode.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> print(TransferFunction([4], [1, -1]).feedback())
        4/(s + 3)
        """
        ahead, back = (_parts(each) for each in (_ratio(self), _operand(other, f"{_NAME}.feedback")))

        def closed() -> Ratio:
            loop = ratio.add(ratio.multiply(ahead[1], back[1]), ratio.multiply(ahead[0], back[0]))
            return ratio.divide(ratio.multiply(ahead[0], back[1]), loop)

        return _bounded(closed)

    def to_scipy(self) -> Any:
        """The same as ``scipy.signal.TransferFunction``: its coefficients are :attr:`numerator_array` and so on.

        Examples
        --------
        >>> from realize import TransferFunction
        >>> TransferFunction([1], [0.5, 1]).to_scipy().den
        array([1., 2.])
        """
        from realize.api.scipy_gate import scipy_objects

        return scipy_objects().continuous(self.numerator_array, self.denominator_array)

    def __add__(self, other: TransferFunction | Number) -> TransferFunction:
        return self._with(other, ratio.add)

    __radd__ = __add__

    def __sub__(self, other: TransferFunction | Number) -> TransferFunction:
        return self._with(other, lambda a, b: ratio.add(a, ratio.negate(b)))

    def __rsub__(self, other: Number) -> TransferFunction:
        return self._with(other, lambda a, b: ratio.add(b, ratio.negate(a)))

    def __mul__(self, other: TransferFunction | Number) -> TransferFunction:
        return self._with(other, ratio.multiply)

    __rmul__ = __mul__

    def __truediv__(self, other: TransferFunction | Number) -> TransferFunction:
        return self._with(other, ratio.divide)

    def __rtruediv__(self, other: Number) -> TransferFunction:
        return self._with(other, lambda a, b: ratio.divide(b, a))

    def __pow__(self, exponent: int) -> TransferFunction:
        power = ratio.constant(exactly(exponent, f"{_NAME}, exponent"))
        return _bounded(lambda: ratio.power(_ratio(self), power))

    def __neg__(self) -> TransferFunction:
        return _bounded(lambda: ratio.negate(_ratio(self)))

    def __pos__(self) -> TransferFunction:
        return self

    def __eq__(self, other: object) -> bool:
        if not isinstance(other, TransferFunction):
            return NotImplemented
        return (self.numerator, self.denominator) == (other.numerator, other.denominator)

    def __hash__(self) -> int:
        return hash((self.numerator, self.denominator))

    def __reduce__(self) -> tuple[type[TransferFunction], tuple[tuple[int, ...], tuple[int, ...]]]:
        return TransferFunction, (self.numerator, self.denominator)

    def __str__(self) -> str:
        text = format_transfer(*self._shown())
        return text if self._is_short() else f"{text} (coefficients rounded)"

    def __repr__(self) -> str:
        return f"TransferFunction.parse({str(self)!r})" if self._is_short() else f"<TransferFunction {self}>"

    def _repr_html_(self) -> str:
        """A fraction in MathML, its coefficients to five digits where they are long."""
        return fraction("G(s)", *self._shown(), "s", str(self))

    def _with(self, other: object, operation: Callable[[Ratio, Ratio], Ratio]) -> TransferFunction:
        if not isinstance(other, (TransferFunction, int, float, Fraction, Decimal, np.integer, np.floating)):
            return NotImplemented  # type: ignore[no-any-return]  # what Python asks of operators
        operand = _operand(other, _NAME)
        return _bounded(lambda: operation(_ratio(self), operand))

    def _rounded(self, p: poly.Integers) -> npt.NDArray[np.float64]:
        lead = self._exact.denominator[0]
        return np.array([FLOAT64.round_ratio(c, lead) for c in p])

    def _is_short(self) -> bool:
        return len(format_transfer(self.numerator, self.denominator)) <= _LONGEST

    def _shown(self) -> tuple[poly.Rationals, poly.Rationals]:
        """Exact where that is short; else over a leading denominator coefficient of 1, to five digits."""
        n, d = self.numerator, self.denominator
        if self._is_short():
            return poly.rationals(n), poly.rationals(d)
        above, below = (tuple(round_significant(Fraction(c, d[0]), SHOWN_DIGITS) for c in p) for p in (n, d))
        return above, below


def public(exact: ExactTransferFunction) -> TransferFunction:
    """The face of an exact transfer function."""
    made = object.__new__(TransferFunction)
    made._exact = exact
    return made


def exact_of(transfer: TransferFunction) -> ExactTransferFunction:
    """What is behind the face."""
    return transfer._exact


def _read(given: dict[str, object], source: str) -> ExactTransferFunction:
    """Read a transfer function in any of the forms of the table ``[design]``."""
    with in_keywords():
        return read_controller(Arguments(given, source), {}).transfer


def _operand(value: object, where: str) -> Ratio:
    return _ratio(value) if isinstance(value, TransferFunction) else ratio.constant(exactly(value, where))


def _ratio(transfer: TransferFunction) -> Ratio:
    return Ratio(transfer.numerator, transfer.denominator)


def _parts(r: Ratio) -> tuple[Ratio, Ratio]:
    """Numerator and denominator, each by itself."""
    return Ratio(r.numerator, (1,)), Ratio(r.denominator, (1,))


def _bounded(compute: Callable[[], Ratio]) -> TransferFunction:
    """Compute within the bounds of expressions, and reduce."""
    try:
        found = compute()
    except UnfitError as problem:
        raise RealizeError(_NAME, problem.found, problem.allowed, problem.advice) from None
    return public(reduced(poly.rationals(found.numerator), poly.rationals(found.denominator), _NAME))
