"""``realize.discretize``: from ``G(s)`` to ``Gd(z)`` by a published method, with numpy at its edges."""

from __future__ import annotations

from fractions import Fraction
from functools import cached_property
from operator import index
from typing import Any

import numpy as np
import numpy.typing as npt

from realize.algebra.expression import format_transfer
from realize.algebra.irrational import pi
from realize.algebra.rounding import FLOAT64
from realize.api.entries import Arguments, Number, Reals, exactly, text_of
from realize.api.notebook import fraction, paragraph
from realize.api.response import ON_POLE
from realize.api.samples import step_samples
from realize.api.transfer import TransferFunction, exact_of
from realize.api.wording import in_keywords
from realize.arithmetic.realization import series
from realize.checks.counterpart import Counterpart
from realize.checks.frequency import factored
from realize.checks.modes import every
from realize.design.gate import checked_choice
from realize.design.model import LOOP_METHODS, Overrides
from realize.design.tables import read_sampling
from realize.errors import RealizeError
from realize.methods import METHODS, Discretization
from realize.methods import discretize as by_method
from realize.quantity import SHOWN_DIGITS, format_engineering, parse_quantity, round_significant

_PREWARPED = "bilinear-prewarped"

_TRANSFERS = "a TransferFunction, an expression in s, or a pair of coefficients (numerator, denominator)"


class PulseTransferFunction:
    """What :func:`discretize` makes: a transfer function in z at one period.

    Everything but the rounded coefficients is computed from the exact one.

    Attributes
    ----------
    method : str
        The method that made it.
    period_s : Fraction
        Sample period, exactly.
    notes : tuple of str
        What the method has to say.

    Examples
    --------
    >>> import realize
    >>> discrete = realize.discretize("4.2 + 18/s", rate="2 kHz")
    >>> print(discrete)
    (4.2045*z - 4.1955)/(z - 1), bilinear at 2 kHz
    >>> discrete.poles.real
    array([1.])
    """

    def __init__(self, made: Discretization) -> None:
        self._made = made
        self.method = made.method
        self.period_s = made.pulse.period_s
        self.notes = made.conversion.notes

    @cached_property
    def _coefficients(self) -> tuple[tuple[float, ...], tuple[float, ...]]:
        return self._made.rounded(FLOAT64)

    @property
    def numerator(self) -> npt.NDArray[np.float64]:
        """Descending powers of z, as long as the denominator, each coefficient correctly rounded.

        Raises
        ------
        Refused
            When a coefficient is beyond the largest double.

        Examples
        --------
        >>> import realize
        >>> realize.discretize("4.2 + 18/s", rate="2 kHz").numerator.tolist()
        [4.2045, -4.1955]
        """
        return np.array(self._coefficients[0])

    @property
    def denominator(self) -> npt.NDArray[np.float64]:
        """As :attr:`numerator`; the leading coefficient is 1."""
        return np.array(self._coefficients[1])

    @property
    def rate_hz(self) -> Fraction:
        """Sample rate, exactly."""
        return 1 / self.period_s

    @property
    def poles(self) -> npt.NDArray[np.complex128]:
        """Poles in z, each as often as its multiplicity."""
        return 1 + np.array(every(self._made.pulse.poles), dtype=np.complex128)

    @property
    def zeros(self) -> npt.NDArray[np.complex128]:
        """Finite zeros in z, each as often as its multiplicity."""
        return 1 + np.array(every(self._made.pulse.zeros), dtype=np.complex128)

    def response(self, frequency_hz: Reals | npt.ArrayLike) -> npt.NDArray[np.complex128]:
        """``Gd(exp(j 2 pi f T))``, from its factors in ``z - 1``, so that nothing is lost near z = 1.

        Parameters
        ----------
        frequency_hz : number or array
            Of any size and either sign.

        Returns
        -------
        array of complex
            Of the shape of the frequencies. On a pole ``inf + nan j``: infinite, without a phase.

        Raises
        ------
        RealizeError
            When a frequency is no finite real number.

        Notes
        -----
        A factor ``1 - v/r`` at ``v = z - 1`` loses digits only where z comes near the root itself.

        Examples
        --------
        >>> import realize
        >>> lag = realize.discretize("1/(0.05*s + 1)", rate="2 kHz")
        >>> abs(lag.response([0, 1000])).round(12).tolist()
        [1.0, 0.0]
        """
        frequencies = np.asarray(frequency_hz)
        turns = [exactly(f, "response, frequency_hz") * self.period_s % 1 for f in frequencies.ravel()]
        half = np.array([float(pi() * turn) for turn in turns])
        # Half the rate is z = -1, of which the sine form has all digits but the last.
        value = np.where(2 * half == np.pi, -2, 2j * np.sin(half) * np.exp(1j * half))
        factors = Counterpart(self._made.pulse)
        with np.errstate(divide="ignore", invalid="ignore"):
            found = factored(factors.gain, factors.zeros, factors.poles, value)
        found[~np.isfinite(found)] = ON_POLE
        return found.reshape(frequencies.shape)

    def step(self, samples: int) -> npt.NDArray[np.float64]:
        """The answer to a unit step from rest: so many samples, the first at time 0.

        Raises
        ------
        RealizeError
            When there are too many samples, or they grow beyond every double.

        Notes
        -----
        Rounded once from the exact difference equation; before that comes an error below 1e-30 of the largest sample
        among these and the first order + 1.

        Examples
        --------
        >>> import realize
        >>> realize.discretize("1/s", rate="10 Hz").step(4).tolist()
        [0.05, 0.15, 0.25, 0.35]
        """
        return step_samples(self._made.pulse, index(samples))

    def to_scipy(self) -> Any:
        """The same as discrete ``scipy.signal.TransferFunction``, with ``dt``.

        Examples
        --------
        >>> import realize
        >>> system = realize.discretize("1/s", rate="10 Hz").to_scipy()
        >>> system.num.tolist(), system.den.tolist(), system.dt
        ([0.05, 0.05], [1.0, -1.0], 0.1)
        """
        from realize.api.scipy_gate import scipy_objects

        return scipy_objects().discrete(self.numerator, self.denominator, float(self.period_s))

    def to_scipy_sections(self) -> npt.NDArray[np.float64]:
        """Sections of order 1 and 2 in series, as ``scipy.signal.sosfilt`` takes them; scipy is not needed for it.

        Returns
        -------
        array, (sections, 6)
            Rows of ``b0 b1 b2 1 a1 a2`` in ascending powers of 1/z. Poles go with the zeros nearest to them, each
            coefficient is correctly rounded, and roots at z = 1 and z = -1 stay where they are.

        Raises
        ------
        Refused
            When a coefficient is beyond the largest double.

        Examples
        --------
        >>> import realize
        >>> realize.discretize("1/s", rate="10 Hz").to_scipy_sections().tolist()
        [[0.05, 0.05, 0.0, 1.0, -1.0, 0.0]]
        """
        rows = [
            (*s.b, *(0.0,) * (3 - len(s.b)), 1.0, *s.a, *(0.0,) * (2 - len(s.a)))
            for s in series(self._made.pulse, FLOAT64)
        ]
        return np.array(rows or [(0.0, 0.0, 0.0, 1.0, 0.0, 0.0)])

    def __str__(self) -> str:
        return f"{format_transfer(*self._shown(), 'z')}, {self._made_by()}{self._rounding()}"

    def __repr__(self) -> str:
        return f"<PulseTransferFunction {self}>"

    def _repr_html_(self) -> str:
        """A fraction in MathML, to five digits."""
        formula = fraction("Gd(z)", *self._shown(), "z", format_transfer(*self._shown(), "z"))
        return formula + paragraph(f"{self._made_by()}{self._rounding()}")

    def _made_by(self) -> str:
        return f"{self.method} at {format_engineering(self.rate_hz, 'Hz')}"

    def _rounding(self) -> str:
        """A word of warning where the coefficients have more digits than are shown."""
        shown = tuple(tuple(map(float, p)) for p in self._shown())
        return "" if shown == self._coefficients else " (coefficients rounded)"

    def _shown(self) -> tuple[tuple[Fraction, ...], tuple[Fraction, ...]]:
        """Coefficients to five digits."""
        above, below = (tuple(round_significant(Fraction(c), SHOWN_DIGITS) for c in p) for p in self._coefficients)
        return above, below


def discretize(
    transfer: TransferFunction | str | tuple[Reals, Reals],
    *,
    rate: str | None = None,
    period: str | None = None,
    rate_hz: Number | None = None,
    period_s: Number | None = None,
    method: str = "bilinear",
    exact_at: str | None = None,
    exact_at_hz: Number | None = None,
) -> PulseTransferFunction:
    """Turn a proper transfer function into a pulse transfer function.

    Parameters
    ----------
    transfer : TransferFunction, str, or pair of coefficients
        What :class:`TransferFunction` or :meth:`TransferFunction.parse` make one from.
    rate, period : str
        With a unit, such as ``"2 kHz"`` or ``"500 us"``.
    rate_hz, period_s : number
        The same without one; exactly one of the four is given. Floats count as :class:`TransferFunction` says.
    method : str
        One of the published methods, by its name in the README: ``"step-invariant"``, ``"bilinear"``, ...
    exact_at, exact_at_hz : str, number
        For ``"bilinear-prewarped"``: where the response is kept exactly.

    Raises
    ------
    RealizeError
        When an argument cannot be understood.
    Refused
        When the transfer function is improper or the method does not apply.

    Examples
    --------
    >>> import realize
    >>> realize.discretize(([1], [0.05, 1]), rate_hz=2000, method="step-invariant")
    <PulseTransferFunction 0.0099502/(z - 0.99005), step-invariant at 2 kHz (coefficients rounded)>
    """
    given = transfer_of(transfer)
    period_given_s = _required_period(rate_of(rate, rate_hz), period_of(period, period_s))
    name = _known_method(method)
    at_rad_s = _exact_at(exact_at, exact_at_hz, name)
    return PulseTransferFunction(by_method(exact_of(given), period_given_s, name, at_rad_s))


def transfer_of(transfer: TransferFunction | str | tuple[Reals, Reals]) -> TransferFunction:
    """The transfer function that an argument stands for."""
    if isinstance(transfer, TransferFunction):
        return transfer
    if isinstance(transfer, str) and transfer.lower().endswith(".toml"):
        found, advice = "the name of a design file", f"realize.compare({transfer!r}).transfer, which is proper"
        raise RealizeError("transfer", found, _TRANSFERS, advice)
    if isinstance(transfer, str):
        return TransferFunction.parse(transfer)
    if isinstance(transfer, (tuple, list)) and len(transfer) == 2:
        return TransferFunction(*transfer)
    raise RealizeError(
        "transfer",
        f"an object of type {type(transfer).__name__}",
        _TRANSFERS,
        'such as TransferFunction([1], [0.05, 1]), "1/(0.05*s + 1)" or ([1], [0.05, 1])',
    )


def rate_of(text: str | None, number_hz: Number | None) -> str | None:
    """A rate as text with its unit, from one of its two keywords."""
    return _quantity("rate", text, "rate_hz", number_hz, "Hz", "2 kHz")


def period_of(text: str | None, number_s: Number | None) -> str | None:
    """A period as text with its unit, from one of its two keywords."""
    return _quantity("period", text, "period_s", number_s, "s", "500 us")


def _quantity(
    key: str, text: str | None, number_key: str, number: Number | None, unit: str, example: str
) -> str | None:
    if text is not None and number is not None:
        raise RealizeError(key, f"{key} and {number_key} at once", "exactly one of them", "drop one")
    if number is not None:
        return f"{text_of(number, number_key)} {unit}"
    if text is not None and not isinstance(text, str):
        allowed = f'a text with its unit, such as "{example}"'
        advice = f"{number_key}={text}, if it is in {unit}"
        raise RealizeError(key, f"{text!r}, which has no unit", allowed, advice)
    return text


def _required_period(rate: str | None, period: str | None) -> Fraction:
    with in_keywords():
        period_s = read_sampling(Arguments({}, "discretize"), Overrides(rate, period)).period_s
    if period_s is None:
        raise RealizeError("rate", "no sample rate", "one of rate, period, rate_hz and period_s", 'rate="2 kHz"')
    return period_s


def _known_method(method: str) -> str:
    if method in LOOP_METHODS:
        allowed = f"methods that need no loop: {', '.join(METHODS)}"
        advice = f'realize.compare(design, method="{method}") on a design with a plant'
        raise RealizeError("method", f'"{method}", which needs the loop', allowed, advice)
    return checked_choice(method, tuple(METHODS), "method")


def _exact_at(text: str | None, number_hz: Number | None, method: str) -> Fraction | None:
    """Where prewarping is exact, in rad/s."""
    given = _quantity("exact_at", text, "exact_at_hz", number_hz, "Hz", "20 Hz")
    if given is None:
        return None
    if method != _PREWARPED:
        raise RealizeError("exact_at", f"a frequency with {method}", f"with {_PREWARPED} only", "drop it")
    return parse_quantity(given, "angular frequency", "exact_at")
