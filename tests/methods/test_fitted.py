"""The fit of the frequency response against the nine methods, an independent optimiser and what must be exact."""

from __future__ import annotations

import re
from collections.abc import Callable
from fractions import Fraction
from functools import cache
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st
from scipy.optimize import least_squares

from realize.algebra import polynomial as poly
from realize.algebra.irrational import pi
from realize.algebra.roots import Root
from realize.algebra.rounding import FLOAT32, FLOAT64
from realize.arithmetic.realization import realization
from realize.checks.schur import CLASSES, MARGINAL, STABLE, UNSTABLE, stability
from realize.checks.stability import continuous_stability
from realize.errors import RealizeError, Refused
from realize.methods import METHODS, Discretization, discretize
from realize.methods.fitted import METHOD, Compensation, frequency_fit
from realize.transfer import PulseTransferFunction, TransferFunction
from tests.strategies import ExactRoot, Factored, factored

Complex = npt.NDArray[np.complex128]
Real = npt.NDArray[np.float64]


class Design(NamedTuple):
    """A transfer function by its factors, the sample period, and the band edge in rad/s."""

    factors: Factored
    period_s: Fraction
    band_rad_s: Fraction

    @property
    def transfer(self) -> TransferFunction:
        return self.factors.transfer()

    def fitted(self, **options: Any) -> Discretization:
        return frequency_fit(self.transfer, self.period_s, band_rad_s=self.band_rad_s, **options)


def real(*values: float | str) -> tuple[ExactRoot, ...]:
    return tuple(ExactRoot(Fraction(v), Fraction(0), values.count(v)) for v in dict.fromkeys(values))


def pair(re: float | str, im: float | str, multiplicity: int = 1) -> tuple[ExactRoot, ...]:
    return (ExactRoot(Fraction(re), Fraction(im), multiplicity),)


def design(
    gain: float | str, zeros: tuple[ExactRoot, ...], poles: tuple[ExactRoot, ...], rate_hz: int, band_rad_s: float
) -> Design:
    return Design(Factored(Fraction(gain), zeros, poles), Fraction(1, rate_hz), Fraction(band_rad_s))


#: Lead, PI, PID, double integrator, notch, resonances, unstable, non-minimum-phase, weighting: as controllers come.
DESIGNS = {
    "lead": design("24.5", real("-1.6"), real("-11.2"), 250, 25),
    "PI, slow": design("0.08", real("-0.025"), real(0), 10000, 50),
    "PID": design(90, real(-5, -42), real(0, -1250), 2000, 125),
    "double integrator": design(9e5, real("-1.5", "-1.5"), real(0, 0, -60, -60), 1000, 30),
    "notch": design(1, pair(-100, 2580), pair(-1300, 2230), 16000, 6000),
    "resonance near Nyquist": design(1e6, (), pair(-50, 998), 400, 1200),
    "resonant controller": design("6.5", pair(-72, 300), pair("-1.5", 314), 20000, 4000),
    "undamped": design(2, real(-30), (*real(0), *pair(0, 200)), 1000, 300),
    "undamped notch": design(2, pair(0, 200), (*pair(-60, 190), *real(-50)), 1000, 400),
    "unstable": design("0.02", real(-40, -90), real(6, -1500), 10000, 2000),
    "growing pair": design(3, real(-5), (*pair(4, 40), *real(-500)), 1000, 200),
    "non-minimum-phase": design(5, real(20), real(-10, -40), 1000, 200),
    "weighting, zeros at s = 0": design(
        7e9, real(0, 0, 0, 0), real("-129.4", "-129.4", -676, -4636, -76618), 48000, 9000
    ),
    "low-pass": design(1, (), (*real(-1), *pair("-0.5", "0.866")), 5, 2),
    "order 8, low corners": design(1, real("-0.5"), real(*(f"-{3**k / 1000}" for k in range(8))), 10000, 20),
}
every_design = pytest.mark.parametrize("design", DESIGNS.values(), ids=list(DESIGNS))

#: The grid of the tests is finer than that of the fit and spaced evenly, so that sums differ by a few percent.
GRIDS_DIFFER = 1.05

#: What evaluation in doubles may add to a relative error.
DOUBLES = 1e-12


def single(roots: tuple[Root, ...]) -> list[complex]:
    """Every root by itself."""
    members = [
        (r.value, r.value.conjugate()) if r.is_pair else (r.value,) for r in roots for _ in range(r.multiplicity)
    ]
    return [value for values in members for value in values]


def continuous(transfer: TransferFunction, w: Real) -> Complex:
    s = 1j * w
    value: Complex = np.full(len(w), float(transfer.gain), complex)
    for zero in single(transfer.zeros):
        value = value * (s - zero)
    for pole in single(transfer.poles):
        value = value / (s - pole)
    return value


def discrete(pulse: PulseTransferFunction, w: Real) -> Complex:
    half = w * float(pulse.period_s) / 2
    delta = 2j * np.sin(half) * np.exp(1j * half)
    value: Complex = np.full(len(w), float(pulse.gain), complex)
    for zero in single(pulse.zeros):
        value = value * (delta - zero)
    for pole in single(pulse.poles):
        value = value / (delta - pole)
    return value


def wanted(asked: Design, w: Real, compensation: Compensation | None) -> Complex:
    value = continuous(asked.transfer, w)
    if compensation is None:
        return value
    value = value * np.exp(1j * w * float(compensation.delay_s))
    # The hold, averaged over the period it holds for: (1 - exp(-j w T))/(j w T).
    turn = 1j * w * float(asked.period_s)
    held: Complex = value * turn / (1 - np.exp(-turn))
    return held if compensation.hold else value


def grid(asked: Design, count: int = 3000) -> Real:
    """Evenly in ln w, from a tenth of the lowest corner, without what lies on an undamped root."""
    roots = single(asked.transfer.poles) + single(asked.transfer.zeros)
    edge = float(asked.band_rad_s)
    lowest = min([edge, *(abs(r) for r in roots if r)]) / 10
    w: Real = np.geomspace(lowest, edge, count)
    on_axis = [r.imag for r in roots if r.real == 0 and r.imag > 0]
    return w[[all(abs(v - axis) > 1e-4 * axis for axis in on_axis) for v in w]]


def residual(asked: Design, pulse: PulseTransferFunction, compensation: Compensation | None = None) -> float:
    """Relative error over the band, rms over ln w."""
    w = grid(asked)
    return float(np.sqrt(np.mean(np.abs(discrete(pulse, w) / wanted(asked, w, compensation) - 1) ** 2)))


def least_of_nine(asked: Design, compensation: Compensation | None = None) -> float:
    """Least residual of the nine methods that do not lose stability."""
    found = []
    for name in METHODS:
        made = discretize(asked.transfer, asked.period_s, name, asked.band_rad_s)
        if name != "forward-difference" or not loses_stability(asked, made):
            found.append(residual(asked, made.pulse, compensation))
    return min(found)


def loses_stability(asked: Design, made: Discretization) -> bool:
    return CLASSES.index(stability(made.pulse.denominator)) > CLASSES.index(continuous_stability(asked.transfer.poles))


def is_another_method(made: Discretization) -> bool:
    return any("itself" in note for note in made.conversion.notes)


def options_of(asked: Design) -> tuple[Compensation | None, ...]:
    return None, Compensation(False, asked.period_s), Compensation(True, asked.period_s / 2)


@cache
def cached_fit(name: str, choice: int) -> Discretization:
    asked = DESIGNS[name]
    return asked.fitted(compensation=options_of(asked)[choice])


every_fit = pytest.mark.parametrize("choice", [0, 1, 2], ids=["plain", "for a delay", "for hold and delay"])
every_name = pytest.mark.parametrize("name", DESIGNS)


@every_fit
@every_name
def test_no_method_of_the_nine_is_closer_over_the_band(name: str, choice: int) -> None:
    asked = DESIGNS[name]
    compensation = options_of(asked)[choice]
    own = residual(asked, cached_fit(name, choice).pulse, compensation)
    assert own <= GRIDS_DIFFER * least_of_nine(asked, compensation) + DOUBLES


@every_fit
@every_name
def test_a_note_tells_both_residuals(name: str, choice: int) -> None:
    asked, made = DESIGNS[name], cached_fit(name, choice)
    compensation = options_of(asked)[choice]
    if is_another_method(made):
        assert (name, choice) == ("PI, slow", 0)
        return
    found = re.fullmatch(
        r"relative error over the band, weighted: (\S+) % rms, where (\S+), the best of the nine methods, has (\S+) %; "
        "measured",
        made.conversion.notes[0],
    )
    assert found is not None
    own, other, best = found.groups()
    compared = discretize(asked.transfer, asked.period_s, other, asked.band_rad_s)
    for told, pulse in ((own, made.pulse), (best, compared.pulse)):
        measured = residual(asked, pulse, compensation)
        assert float(told) / 100 == pytest.approx(measured, rel=GRIDS_DIFFER - 1, abs=DOUBLES)


@every_fit
@every_name
def test_it_is_as_stable_as_the_design(name: str, choice: int) -> None:
    asked, made = DESIGNS[name], cached_fit(name, choice)
    assert stability(made.pulse.denominator) == continuous_stability(asked.transfer.poles)


@every_fit
@every_name
def test_the_low_frequency_gain_is_exact(name: str, choice: int) -> None:
    assert cached_fit(name, choice).pulse.low_frequency_gain == DESIGNS[name].transfer.low_frequency_gain


@every_fit
@every_name
def test_it_has_the_order_of_the_design_and_causes_no_effect_ahead_of_time(name: str, choice: int) -> None:
    asked, pulse = DESIGNS[name], cached_fit(name, choice).pulse
    assert len(pulse.numerator) == len(pulse.denominator) == asked.transfer.order + 1
    assert pulse.denominator[0] == 1
    assert len(single(pulse.poles)) == asked.transfer.order


@every_fit
@every_name
def test_its_roots_are_those_of_its_polynomials(name: str, choice: int) -> None:
    pulse = cached_fit(name, choice).pulse
    w = np.linspace(0.01, 3.1, 50)
    z = np.exp(1j * w)
    ratio = np.polyval([float(c) for c in pulse.numerator], z) / np.polyval([float(c) for c in pulse.denominator], z)
    assert discrete(pulse, w / float(pulse.period_s)) == pytest.approx(ratio, rel=1e-6)


@every_fit
@every_name
def test_roots_at_the_origin_are_at_z_1_exactly(name: str, choice: int) -> None:
    asked, pulse = DESIGNS[name].transfer, cached_fit(name, choice).pulse
    for roots, polynomial, own in (
        (asked.poles, pulse.denominator, pulse.poles),
        (asked.zeros, pulse.numerator, pulse.zeros),
    ):
        count = sum(root.multiplicity for root in roots if root.value == 0)
        assert sum(root.multiplicity for root in own if root.value == 0) == count
        assert poly.trailing_zeros(poly.shift(polynomial, Fraction(1))) == count


@pytest.mark.parametrize("name", ["undamped", "undamped notch", "unstable", "growing pair"])
@every_fit
def test_what_does_not_decay_is_kept_at_its_image(name: str, choice: int) -> None:
    asked, pulse = DESIGNS[name], cached_fit(name, choice).pulse
    for roots, images in ((asked.transfer.poles, pulse.poles), (asked.transfer.zeros, pulse.zeros)):
        for root in roots:
            if root.value.real > 0 and roots is asked.transfer.zeros:
                continue
            if root.value.real >= 0:
                image = np.expm1(root.value * float(asked.period_s))
                assert min(abs(r.value - image) for r in images) <= 1e-15 * abs(image)


def test_an_undamped_pair_is_on_the_unit_circle_exactly() -> None:
    assert stability(cached_fit("undamped", 2).pulse.denominator) == MARGINAL
    (zero,) = (r for r in cached_fit("undamped notch", 2).pulse.zeros if r.is_pair)
    re_, im, rad = zero.enclosure(200)
    one = 1 << 200
    assert abs((one + re_) ** 2 + im**2 - one**2) <= 4 * (rad + 1) * one


@every_fit
@every_name
def test_no_fitted_pole_rings_where_the_design_does_not(name: str, choice: int) -> None:
    asked, made = DESIGNS[name], cached_fit(name, choice)
    rings = [
        r.value * float(asked.period_s)
        for r in asked.transfer.poles
        if r.is_pair and -r.value.real < 0.5 * abs(r.value)
    ]
    for root in made.pulse.poles:
        x = root.value / (2 + root.value)
        if (
            root.value == 0
            or x.real >= 0
            or abs(x.real) < 1e-15
            or any(abs(np.tanh(p / 2) - x) < 0.2 * abs(x) for p in rings)
        ):
            continue
        assert -x.real >= 0.3 * abs(x) * (1 - 1e-12), root
        assert abs(x) <= 2 * (1 + 1e-12), root


def test_forward_difference_does_not_count_where_it_loses_stability() -> None:
    # It leads, which suits the compensation, but takes the pole at -2500 rad/s to z = -1.5.
    asked, compensation = design(1, real(-1), real(-2500), 1000, 200), Compensation(False, Fraction(1, 2000))
    made = asked.fitted(compensation=compensation)
    forward, stable = (
        residual(asked, discretize(asked.transfer, asked.period_s, name).pulse, compensation)
        for name in ("forward-difference", "bilinear")
    )
    assert forward < stable
    assert "forward" not in made.conversion.notes[0]
    assert stability(made.pulse.denominator) == STABLE


def test_poles_that_would_ring_are_moved_and_a_note_says_so() -> None:
    # A-weighting (IEC 61672-1) up to 16 kHz at 48 kHz: its pole pair is at a quarter of the rate, and the fit with the
    # least error has a pole at z = -0.99.
    poles = real("-129.4", "-129.4", "-676.4", -4636, -76618, -76618)
    asked = design(7e9, real(0, 0, 0, 0), poles, 48000, 100531)
    made = asked.fitted()
    assert any("grow or ring" in note for note in made.conversion.notes)
    assert stability(made.pulse.denominator) == STABLE
    assert all(abs(1 + pole.value) <= 0.34 for pole in made.pulse.poles if pole.value.real < -1)
    assert residual(asked, made.pulse) <= 0.5 * least_of_nine(asked)


@pytest.mark.parametrize(
    ("name", "choice"),
    [
        ("lead", 0),
        ("PID", 0),
        ("PID", 1),
        ("notch", 0),
        ("notch", 2),
        ("resonance near Nyquist", 0),
        ("resonance near Nyquist", 1),
        ("resonant controller", 0),
        ("non-minimum-phase", 0),
        ("low-pass", 0),
    ],
)
def test_an_independent_optimiser_finds_nothing_closer_nearby(name: str, choice: int) -> None:
    # The same norm on another grid: the band, and above it a tenth of the residual of the best of the nine.
    asked, made = DESIGNS[name], cached_fit(name, choice)
    compensation = options_of(asked)[choice]
    edge, top = float(asked.band_rad_s), 0.95 * np.pi / float(asked.period_s)
    inside, above = grid(asked, 1000), np.geomspace(edge, top, 60)[1:] if edge < top else np.empty(0)
    w = np.append(inside, above)
    share = 0.1 * least_of_nine(asked, compensation)
    weights = np.append(np.full(len(inside), len(inside) ** -0.5), share * np.full(len(above), len(above)) ** -0.5)
    half = w * float(asked.period_s) / 2
    delta = 2j * np.sin(half) * np.exp(1j * half)
    goal = wanted(asked, w, compensation)
    tops, bottoms = (
        np.array([float(c) for c in reversed(poly.shift(p, Fraction(1)))])
        for p in (made.pulse.numerator, made.pulse.denominator)
    )
    # Relative changes of the coefficients in z - 1, but for those that the low-frequency gain fixes.
    free = [np.flatnonzero(np.cumsum(p != 0) > 1) for p in (tops, bottoms)]

    def errors(changes: Real) -> Real:
        n, d = tops.copy(), bottoms.copy()
        n[free[0]] *= 1 + changes[: len(free[0])]
        d[free[1]] *= 1 + changes[len(free[0]) :]
        found = weights * (np.polyval(n[::-1], delta) / np.polyval(d[::-1], delta) / goal - 1)
        return np.append(found.real, found.imag)

    start = np.zeros(sum(map(len, free)))
    best = least_squares(errors, start, x_scale="jac", xtol=1e-14, ftol=1e-14, gtol=1e-14)
    assert np.linalg.norm(errors(start)) <= 1.02 * np.linalg.norm(best.fun) + DOUBLES


def test_a_response_that_a_pulse_transfer_function_has_is_recovered() -> None:
    # An integrator times the inverse of the hold, jwT/(1 - exp(-jwT)), is T/(1 - 1/z) at every frequency.
    asked = design(3, (), real(0), 1000, 1000)
    made = asked.fitted(compensation=Compensation(True, Fraction(0)))
    assert made.pulse.denominator == (Fraction(1), Fraction(-1))
    assert [float(c) for c in made.pulse.numerator] == pytest.approx([0.003, 0], abs=1e-30)


def test_a_smooth_response_at_a_high_rate_is_met_to_the_digits_of_a_double() -> None:
    asked = DESIGNS["order 8, low corners"]
    made = cached_fit("order 8, low corners", 0)
    assert stability(made.pulse.denominator) == STABLE
    images = [np.log1p(r.value.real) / float(asked.period_s) for r in made.pulse.poles]
    assert sorted(images) == pytest.approx(
        sorted(r.re.numerator / r.re.denominator for r in asked.factors.poles), rel=1e-6
    )


def test_a_low_corner_at_a_high_rate_keeps_its_place() -> None:
    asked = design(2, real("-1e-4"), real("-1e-6", -2), 1000, 200)
    slow = min(asked.fitted().pulse.poles, key=lambda root: abs(root.value))
    assert slow.value.real == pytest.approx(np.expm1(-1e-9), rel=1e-6)


@pytest.mark.parametrize("name", ["PID", "low-pass", "double integrator", "weighting, zeros at s = 0"])
@pytest.mark.parametrize("periods", [Fraction(1, 2), Fraction(1)])
@pytest.mark.parametrize("hold", [False, True])
def test_compensation_leads_by_hold_and_delay_within_the_band(name: str, periods: Fraction, hold: bool) -> None:
    asked = DESIGNS[name]
    made = asked.fitted(compensation=Compensation(hold, periods * asked.period_s))
    w = grid(asked, 200)
    turn = w * float(asked.period_s)
    lead = np.angle(discrete(made.pulse, w) / continuous(asked.transfer, w))
    expected = turn * (float(periods) + (0.5 if hold else 0))
    # A lead has to be paid for with an amplitude that rises above the band: so it is not had in full.
    assert lead == pytest.approx(expected, rel=0.2, abs=3e-3)


def test_compensating_the_hold_restores_the_magnitude_it_loses() -> None:
    asked = DESIGNS["low-pass"]
    made = asked.fitted(compensation=Compensation(True, Fraction(0)))
    w = grid(asked, 200)
    loss = np.sinc(w * float(asked.period_s) / (2 * np.pi))
    size = np.abs(discrete(made.pulse, w) / continuous(asked.transfer, w))
    assert size == pytest.approx(1 / loss, rel=2e-3)
    assert max(1 / loss) > 1.006


def test_compensation_of_nothing_changes_nothing() -> None:
    asked = DESIGNS["PID"]
    assert asked.fitted(compensation=Compensation(False, Fraction(0))).pulse == asked.fitted().pulse


@every_name
def test_notes_say_what_is_compensated(name: str) -> None:
    notes = [cached_fit(name, choice).conversion.notes for choice in (0, 1, 2)]
    period = f"{float(DESIGNS[name].period_s):.5g}"
    half = f"{float(DESIGNS[name].period_s / 2):.5g}"
    assert not any("make up" in note for note in notes[0])
    assert f"leads the design within the band, to make up for {period} s of compute delay" in notes[1]
    assert f"leads the design within the band, to make up for the hold and {half} s of compute delay" in notes[2]


def around(w0: float) -> Callable[[Real], Real]:
    return lambda w: 1 / (1 + (10 * np.log(w / w0)) ** 2)


@pytest.mark.parametrize("share", [0.05, 1.0])
def test_weight_brings_the_fit_closer_where_it_is_large(share: float) -> None:
    asked = DESIGNS["notch"]
    w0 = share * float(asked.band_rad_s)
    w = w0 * np.linspace(0.98, 1.0, 5)
    plain, weighted = (
        np.abs(discrete(made.pulse, w) / continuous(asked.transfer, w) - 1).max()
        for made in (cached_fit("notch", 0), asked.fitted(weight=around(w0)))
    )
    assert weighted < 0.5 * plain


def test_default_weight_is_the_inverse_of_the_magnitude() -> None:
    asked = DESIGNS["PID"]
    given = asked.fitted(weight=lambda w: 5 / np.abs(continuous(asked.transfer, w)))
    found, expected = (
        [value for root in made.pulse.poles + made.pulse.zeros for value in (root.value.real, root.value.imag)]
        for made in (given, cached_fit("PID", 0))
    )
    # Weights are rounded to 24 bits of the largest.
    assert found == pytest.approx(expected, rel=1e-4)


@pytest.mark.parametrize("choice", [0, 2])
@pytest.mark.parametrize("name", ["PID", "notch", "order 8, low corners"])
def test_noise_in_the_last_bits_of_the_weight_changes_no_byte(name: str, choice: int) -> None:
    asked, noise = DESIGNS[name], np.random.default_rng(7)

    def weight(w: Real) -> Real:
        return 1 / (1 + (w / 50) ** 2)

    def noisy(w: Real) -> Real:
        return 3 * weight(w) * (1 + 1e-13 * noise.standard_normal(len(w)))

    first, second = (asked.fitted(weight=f, compensation=options_of(asked)[choice]) for f in (weight, noisy))
    assert first.pulse.numerator == second.pulse.numerator
    assert first.pulse.denominator == second.pulse.denominator
    assert first.conversion.notes == second.conversion.notes


def test_no_linear_algebra_library_and_no_function_of_the_machine_takes_part(monkeypatch: pytest.MonkeyPatch) -> None:
    asked = DESIGNS["PID"]
    compensation = options_of(asked)[2]
    expected = asked.fitted(compensation=compensation)

    def refuse(*_: Any, **__: Any) -> Any:
        raise AssertionError("differs between machines in the last bits")

    for name in ("lstsq", "solve", "qr", "svd", "inv", "eig", "eigvals", "cholesky", "norm"):
        monkeypatch.setattr(np.linalg, name, refuse)
    for name in ("sin", "cos", "tan", "exp", "log", "arctan", "hypot", "power", "geomspace", "logspace", "roots"):
        monkeypatch.setattr(np, name, refuse)
    found = asked.fitted(compensation=compensation)
    assert found.pulse.numerator == expected.pulse.numerator
    assert found.pulse.denominator == expected.pulse.denominator


def test_it_is_exact_and_rounds_to_every_format() -> None:
    made = cached_fit("PID", 0)
    assert made.method == METHOD == "frequency-fit"
    assert made.has_exact_denominator
    for target in (FLOAT32, FLOAT64):
        expected = tuple(tuple(map(target.round, p)) for p in (made.pulse.numerator, made.pulse.denominator))
        assert made.rounded(target) == expected


@every_fit
@every_name
def test_it_can_be_realized(name: str, choice: int) -> None:
    stored = realization(cached_fit(name, choice).pulse, FLOAT64)
    at_one = sum(r.multiplicity for r in DESIGNS[name].transfer.poles if r.value == 0)
    assert len(stored.integral) == at_one


def test_where_no_fit_is_closer_the_best_of_the_nine_stands_and_a_note_says_so() -> None:
    # One coefficient beside the gain: bilinear, and ramp-invariant, have its best value already.
    asked = design(-3, (), real(0), 1000, 100)
    made = asked.fitted()
    same = discretize(asked.transfer, asked.period_s, "ramp-invariant")
    assert made.method == METHOD
    assert made.pulse == same.pulse
    assert made.conversion.notes == (
        "is ramp-invariant itself: no fit of this order was found closer to the design over the band than that, "
        "0.0275 % rms, weighted",
    )


LEAD = DESIGNS["lead"]


@pytest.mark.parametrize(
    ("transfer", "band_rad_s", "where", "found", "advice"),
    [
        (
            TransferFunction((1, 2), (3,)),
            10,
            "transfer",
            "it is improper: its numerator has 1 more than its denominator's degree",
            "add a roll-off pole first",
        ),
        (
            TransferFunction((7,), (2,)),
            10,
            "method",
            "frequency-fit finds nothing to fit in a pure gain",
            "use any other method",
        ),
        (
            LEAD.transfer,
            250 * pi(),
            "method",
            "frequency-fit fits up to the band edge, 125 Hz, which is not below half the sample rate, 125 Hz",
            "lower the band, or raise the sample rate",
        ),
        (
            TransferFunction((1,), (1, -(10**6))),
            10,
            "method",
            "a root at s = 1e+06+0j rad/s grows by exp(4000) in one period",
            "raise the sample rate, or use a bilinear or difference method",
        ),
    ],
    ids=["improper", "pure gain", "band up to Nyquist", "growth"],
)
def test_refusals(transfer: TransferFunction, band_rad_s: Fraction, where: str, found: str, advice: str) -> None:
    with pytest.raises(Refused) as caught:
        frequency_fit(transfer, Fraction(1, 250), band_rad_s=Fraction(band_rad_s))
    assert (caught.value.where, caught.value.found, caught.value.advice) == (where, found, advice)


@pytest.mark.parametrize(
    "weight",
    [
        lambda w: w * 0,
        lambda w: -w,
        lambda w: w * np.nan,
        lambda w: np.where(w > 1, np.inf, 1),
        lambda w: w[:-1],
        lambda w: 1.0,
    ],
    ids=["all 0", "negative", "NaN", "infinite", "too few", "a single number"],
)
def test_a_weight_that_is_none_is_an_error(weight: Callable[[Real], Real]) -> None:
    with pytest.raises(RealizeError) as caught:
        LEAD.fitted(weight=weight)
    assert str(caught.value) == (
        "weight: it is not a weight for every frequency\n"
        "  allowed: as many finite numbers as frequencies, none negative, not all 0\n"
        "  try: leave it out: the relative error counts then"
    )


KINDS = ("ordinary", "damped", "light", "undamped", "growing", "origin", "slow", "stiff")


@given(factored(Fraction(1000), 3, KINDS, KINDS), st.integers(2, 300), st.booleans())
@settings(max_examples=40)
def test_any_design_keeps_its_class_its_gain_and_its_roots_at_the_origin(
    factors: Factored, samples_per_band: int, compensated: bool
) -> None:
    assume(factors.order > 0)
    asked = Design(factors, Fraction(1, 1000), 2 * pi() * 1000 / (2 * samples_per_band + 1))
    made = asked.fitted(compensation=Compensation(True, asked.period_s) if compensated else None)
    if is_another_method(made):
        return
    own, design_class = stability(made.pulse.denominator), continuous_stability(asked.transfer.poles)
    above = any(r.value.real == 0 and r.value.imag > 1000 * np.pi for r in asked.transfer.poles)
    assert own == design_class or (above and own != UNSTABLE)
    assert made.pulse.low_frequency_gain == asked.transfer.low_frequency_gain
    assert made.pulse.zeros_minus_poles_at_one == asked.transfer.zeros_minus_poles_at_origin
