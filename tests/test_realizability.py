"""The assessment: which terms need the future, what a proper design asks of the program, and the band edge."""

from __future__ import annotations

from fractions import Fraction
from math import pi, radians, tan

import pytest
from hypothesis import given
from hypothesis import strategies as st

from realize.band import band_edge, frequency_text, highest_corner_rad_s
from realize.errors import RealizeError
from realize.realizability import assess, improper_terms, polynomial_text
from realize.rolloff import proposals
from realize.transfer import TransferFunction

F = Fraction

#: An invented servo for a roller gap: 4.2 + 18/s + 0.09 s.
PID = TransferFunction.from_polynomials([F("0.09"), F("4.2"), 18], [1, 0])
LAG = TransferFunction.from_polynomials([1], [1, 5])


def made(n: list[Fraction | int], d: list[Fraction | int]) -> TransferFunction:
    return TransferFunction.from_polynomials(n, d)


# ---- improper terms ----------------------------------------------------------------------------------------


@given(
    st.lists(st.fractions(-100, 100, max_denominator=1000), min_size=1, max_size=4),
    st.lists(st.integers(-9, 9), min_size=1, max_size=3),
    st.integers(1, 9),
)
def test_terms_are_the_powers_a_design_was_made_with(q: list[Fraction], remainder: list[int], pole: int) -> None:
    """sum q_i s^i + (strictly proper rest over powers of s + pole), put together by hand over one denominator."""
    d = [F(1)]
    for _ in remainder:
        d = [a + pole * b for a, b in zip([*d, F(0)], [F(0), *d], strict=True)]
    n = [F(0)] * (len(q) + len(d))
    for i, a in enumerate(reversed([*q, F(0)])):
        for j, b in enumerate(reversed(d)):
            n[i + j] += a * b
    for i, c in enumerate(reversed(remainder)):
        n[i] += c
    if not any(n):
        return
    expected = [(len(q) - i, c) for i, c in enumerate(q) if c]
    transfer = made(list(reversed(n)), list(d))
    assert list(improper_terms(transfer)) == expected
    assert assess(transfer).realizable is not bool(expected)


def test_the_roller_gap_controller_is_held_up_by_its_derivative_alone() -> None:
    assert improper_terms(PID) == ((1, F(9, 100)),)
    (term,) = assess(PID, period_s=F(1, 2000)).terms
    assert term.text == (
        "0.09*s grows without bound; a pure derivative needs the future: it would have to lead by 90 deg at "
        "every frequency, with a gain of 565.49 at the Nyquist frequency of 1 kHz"
    )
    assert term.nyquist_gain == pytest.approx(0.09 * 1000 * 2 * pi, rel=1e-15)
    assert (term.power, term.coefficient, term.phase_deg) == (1, F(9, 100), 90)


@pytest.mark.parametrize(
    ("n", "texts"),
    [
        ([-2, 0, 1], ["-2*s^2 grows without bound; a second derivative needs the future"]),
        (
            [F(1, 3), 0, 1, 0],
            [
                "1/3*s^3 grows without bound; a third derivative needs the future",
                "s grows without bound; a pure derivative needs the future",
            ],
        ),
        ([1, 0, 0, 0, 0], ["s^4 grows without bound; a 4-fold derivative needs the future"]),
        ([F("3.14159265358979"), 0], ["3.1416*s grows without bound; a pure derivative needs the future"]),
    ],
)
def test_every_term_is_named_in_the_units_of_the_design(n: list[Fraction | int], texts: list[str]) -> None:
    terms = assess(made(n, [1])).terms
    assert [term.text.split(":")[0] for term in terms] == texts
    assert all(f"lead by {90 * term.power} deg at every frequency" in term.text for term in terms)
    assert all(term.nyquist_gain is None and "Nyquist" not in term.text for term in terms)


def test_a_nyquist_gain_beyond_double_range_is_no_figure() -> None:
    (term,) = assess(made([10**400, 0], [1]), period_s=F(1)).terms
    assert term.nyquist_gain is None
    assert "with a gain of 3.1416e400 at the Nyquist frequency of 0.5 Hz" in term.text.replace("e+", "e")


@given(st.lists(st.integers(-(10**9), 10**9), min_size=1, max_size=6).filter(lambda p: p[0] != 0))
def test_polynomials_are_written_so_that_they_read_back(p: list[int]) -> None:
    text = polynomial_text(p).replace("^", "**")
    assert eval(text, {"s": F(7)}) == sum(c * F(7) ** (len(p) - 1 - i) for i, c in enumerate(p))


# ---- the assessment ----------------------------------------------------------------------------------------


def test_an_improper_design_is_not_realizable_and_brings_its_proposals() -> None:
    assessment = assess(PID, period_s=F(1, 2000))
    assert not assessment.realizable
    assert assessment.transfer is PID
    assert assessment.proposals == proposals(PID, assessment.around)
    assert len(assessment.proposals) == 6


def test_what_is_known_of_the_design_reaches_the_proposals() -> None:
    assessment = assess(
        PID,
        period_s=F(1, 2000),
        band_rad_s=F(100),
        phase_budget_deg=F(5),
        converter_step_tolerance_percent=F(4),
        input_per_count=F(1, 2000),
        output_span=F(2),
        method="forward-difference",
    )
    one_on_the_whole = next(p for p in assessment.proposals if (p.placement, p.order) == ("whole", 1))
    assert one_on_the_whole.window_rad_s == pytest.approx((100 / tan(radians(5)), 160 / 0.09))
    two_on_the_whole = assessment.proposals[-1]
    assert two_on_the_whole.window_rad_s is None  # 100/tan(2.5 deg) = 2290 is above 1/T


def test_a_proper_design_is_realizable_and_needs_no_proposals() -> None:
    assessment = assess(LAG)
    assert assessment.realizable
    assert (assessment.terms, assessment.proposals) == ((), ())


@pytest.mark.parametrize(
    ("n", "d", "notes"),
    [
        ([3, 1], [2, 1], ["direct feed-through 1.5: the output must be computed within the sample"]),
        ([7], [1], ["direct feed-through 7: the output must be computed within the sample"]),
        ([1, 2], [1, 3, 2], ["numerator and denominator shared the factor s + 2: cancelled", "strictly proper"]),
        ([1], [1, -4], ["strictly proper", "unstable: its pole at s = 4 grows"]),
        ([1], [1, -2, 5], ["strictly proper", "unstable: its pole at s = 1 +- 2j grows"]),
        ([1], [1, 0, 0], ["strictly proper", "unstable: its pole at s = 0 is 2-fold and grows"]),
        ([1], [1, 0], ["strictly proper"]),
        ([1], [1, 0, 9], ["strictly proper", "undamped: its pair of poles at s = +-3j never decays"]),
        (
            [1],
            [1, 0, 18, 0, 81],
            ["strictly proper", "unstable: its pole at s = +-3j is 2-fold and grows"],
        ),
        ([-1, 2], [1, 1, 1], ["strictly proper", "non-minimum-phase: its zero at s = 2 lies in the right half"]),
    ],
)
def test_a_proper_design_is_told_what_it_asks_of_the_program(
    n: list[Fraction | int], d: list[Fraction | int], notes: list[str]
) -> None:
    found = assess(made(n, d)).notes
    assert len(found) == len(notes)
    assert [text.startswith(note) for text, note in zip(found, notes, strict=True)] == [True] * len(notes)


def test_a_strictly_proper_design_has_a_sample_free_under_methods_that_keep_it_so() -> None:
    (note,) = assess(LAG).notes
    assert "step-invariant and forward-difference keep it so and leave one sample free" in note


def test_an_improper_design_is_told_how_far_the_band_must_lie_below_the_rate() -> None:
    """pi/tan(6 deg) = 29.9, pi/tan(3 deg) = 59.9; a pair at 2 d x/(1 - x^2) = tan(6 deg): pi/x = 42.5."""
    notes = assess(PID, period_s=F(1, 2000), band_rad_s=F(126)).notes
    assert notes == (
        "band edge 20.054 Hz (126 rad/s): given by the design",
        "a roll-off of the whole has a window only for a band of at most rate/29.9 for one pole, rate/59.9 for 2 "
        "equal poles, rate/42.5 for a pair of damping ratio 0.7071 (phase budget 6 deg); this band is rate/99.7",
    )


@pytest.mark.parametrize("known", [{}, {"period_s": F(1, 2000), "method": "ramp-invariant"}])
def test_without_a_limit_from_the_rate_nothing_is_said_of_it(known: dict[str, object]) -> None:
    notes = assess(PID, band_rad_s=F(126), **known).notes  # type: ignore[arg-type]
    assert notes == ("band edge 20.054 Hz (126 rad/s): given by the design",)


def test_a_phase_budget_that_is_none_is_refused() -> None:
    with pytest.raises(RealizeError, match="phase_budget"):
        assess(PID, phase_budget_deg=F(0))


# ---- the band edge -----------------------------------------------------------------------------------------


def test_a_band_given_by_the_design_is_taken_as_it_is() -> None:
    assert band_edge(PID, F(1, 2000), F(126)) == (F(126), "band edge 20.054 Hz (126 rad/s): given by the design")


@pytest.mark.parametrize(
    ("transfer", "period_s", "edge_rad_s", "reason"),
    [
        (LAG, None, 15.0, "3 x the highest corner of the poles and zeros, 795.77 mHz (5 rad/s)"),
        (LAG, F(1, 2000), 15.0, "3 x the highest corner"),
        (LAG, F(1), 2 * pi / 30, "1/30 of the rate"),
        (made([1], [1, 0]), F(1, 100), 2 * pi * 100 / 30, "1/30 of the rate"),
        (made([1, 6, 25, 0], [1, 1]), None, 15.0, "3 x the highest corner"),
        (made([1, 0], [1]), None, 1.0, "there is neither a rate nor a corner to take it from"),
    ],
    ids=["corner", "corner below rate", "rate below corner", "rate alone", "pair of zeros", "neither"],
)
def test_an_assumed_band_edge_is_the_least_of_what_it_can_rest_on_and_says_so(
    transfer: TransferFunction, period_s: Fraction | None, edge_rad_s: float, reason: str
) -> None:
    edge, sentence = band_edge(transfer, period_s, None)
    assert float(edge) == pytest.approx(edge_rad_s, rel=1e-15)
    assert sentence.startswith(f"band edge {frequency_text(edge)}: assumed, ")
    assert reason.replace("795.77 mHz", "0.79577 Hz") in sentence


def test_a_thirtieth_of_the_rate_leaves_room_for_just_one_roll_off_pole() -> None:
    """atan((2 pi/(30 T))/(2/T)) = atan(pi/30) = 5.98 deg, within the budget of 6."""
    differentiator = made([1, 0], [1])
    found = {(p.placement, p.order, p.damping): p for p in assess(differentiator, period_s=F(1, 2000)).proposals}
    assert [key for key, proposal in found.items() if proposal.within_window] == [
        ("derivative", 1, F(1)),
        ("whole", 1, F(1)),
    ]


def test_the_origin_is_no_corner() -> None:
    assert highest_corner_rad_s(made([1, 0], [1])) == 0.0


@pytest.mark.parametrize(
    ("frequency", "text"),
    [(F(126), "20.054 Hz (126 rad/s)"), (2e6 * pi, "1 MHz (6.2832e+6 rad/s)")],
)
def test_frequencies_are_shown_in_hertz_first(frequency: Fraction | float, text: str) -> None:
    assert frequency_text(frequency) == text
