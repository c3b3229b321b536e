"""Whether a transfer function can run on a machine at all, and what stands in the way.

A machine knows the past only: a transfer function whose numerator outgrows its denominator holds derivatives
of the input, which need the future. Everything decided here is decided on exact numbers; figures appear in
texts, and in the prices of the roll-off proposals. Polynomials are in descending powers of s.
"""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction
from typing import NamedTuple, Unpack

from realize.algebra.expression.printing import exact_text, format_polynomial
from realize.algebra.irrational import pi
from realize.algebra.roots import Root
from realize.quantity import SHOWN_DIGITS, format_engineering, round_significant
from realize.rolloff import (
    Circumstances,
    Known,
    Proposal,
    circumstances,
    decimal_or_quotient,
    finite_figure,
    proposals,
    samples_per_band_period,
    shapes,
    split,
)
from realize.transfer import TransferFunction

#: Longest exact number quoted in a sentence; beyond it (thirds of large numbers, 400 digits of pi) the first
#: five significant digits tell people more.
_LONGEST_NUMBER = 12

_ORDINALS = {1: "pure", 2: "second", 3: "third"}


class Term(NamedTuple):
    """One power of s that a transfer function cannot be realized with.

    Attributes
    ----------
    power : int
        At least 1.
    coefficient : Fraction
        Its factor, exactly.
    phase_deg : int
        Phase it would have to sustain at every frequency.
    nyquist_gain : float or None
        Its gain at half the sample rate; ``None`` without a rate.
    text : str
        The same for people.
    """

    power: int
    coefficient: Fraction
    phase_deg: int
    nyquist_gain: float | None
    text: str


class Assessment(NamedTuple):
    """Everything known about a transfer function before a method is chosen.

    Attributes
    ----------
    transfer : TransferFunction
        As the user wrote it.
    realizable : bool
        Whether it is proper.
    terms : tuple of Term
        What makes it improper, highest power first.
    proposals : tuple of Proposal
        Roll-off poles that would make it proper, best first.
    notes : tuple of str
        Sentences for people.
    around : Circumstances
        Band edge, budget and signals the proposals were judged by.
    phase_margins_deg : tuple of (float, float or None)
        With a plant, for each proposal: the phase margin of the continuous loop before, at the highest crossover of
        the transfer function as written, and after; of the worst case.
    """

    transfer: TransferFunction
    realizable: bool
    terms: tuple[Term, ...]
    proposals: tuple[Proposal, ...]
    notes: tuple[str, ...]
    around: Circumstances
    phase_margins_deg: tuple[tuple[float, float | None], ...] = ()


def assess(
    transfer: TransferFunction,
    *,
    band_rad_s: Fraction | None = None,
    band_rests_on: str | None = None,
    **known: Unpack[Known],
) -> Assessment:
    """Say whether a transfer function is realizable, what is not, and what would make it so.

    Parameters
    ----------
    transfer : TransferFunction
        As the user wrote it.
    band_rad_s : Fraction or None
        Band edge, where the design names one.
    band_rests_on : str or None
        Where that figure comes from, if not from the design itself.
    **known
        What else the design says of itself, as for :func:`realize.rolloff.circumstances`.

    Raises
    ------
    RealizeError
        When the phase budget is not above 0 and below 90 deg.
    """
    around = circumstances(transfer, band_rad_s=band_rad_s, band_rests_on=band_rests_on, **known)
    terms = tuple(_term(power, coefficient, around.period_s) for power, coefficient in improper_terms(transfer))
    notes = [*_causality_notes(transfer), *_root_notes(transfer)]
    if terms:
        notes += [around.band_rests_on, *_window_notes(-transfer.relative_degree, around)]
    return Assessment(transfer, not terms, terms, proposals(transfer, around), tuple(notes), around)


def improper_terms(transfer: TransferFunction) -> tuple[tuple[int, Fraction], ...]:
    """Powers of s, from the first up, that exact division leaves outside the proper part.

    Parameters
    ----------
    transfer : TransferFunction
        Proper or improper.

    Returns
    -------
    tuple of (power, coefficient)
        Highest power first, coefficients not zero; empty for a proper transfer function.
    """
    improper = split(transfer).improper
    return tuple((len(improper) - 1 - i, c) for i, c in enumerate(improper) if c)


def polynomial_text(p: Sequence[Fraction | int]) -> str:
    """Write a polynomial in s for people: ``"2*s^2 - s + 0.5"``.

    Parameters
    ----------
    p : sequence of Fraction or int
        Descending powers of s. Coefficients that take more than a few characters are rounded to five
        significant digits.
    """
    return format_polynomial([_shown(Fraction(c)) for c in p])


def _shown(x: Fraction) -> Fraction:
    return x if len(exact_text(x)) <= _LONGEST_NUMBER else round_significant(x, SHOWN_DIGITS)


def _term(power: int, coefficient: Fraction, period_s: Fraction | None) -> Term:
    text = (
        f"{polynomial_text((coefficient,) + (0,) * power)} grows without bound; "
        f"a {_ORDINALS.get(power, f'{power}-fold')} derivative needs the future: "
        f"it would have to lead by {90 * power} deg at every frequency"
    )
    if period_s is None:
        return Term(power, coefficient, 90 * power, None, text)
    gain = abs(coefficient) * (pi() / period_s) ** power
    nyquist = format_engineering(1 / (2 * period_s), "Hz")
    text += f", with a gain of {format_engineering(gain, '')} at the Nyquist frequency of {nyquist}"
    return Term(power, coefficient, 90 * power, finite_figure(gain), text)


def _causality_notes(transfer: TransferFunction) -> list[str]:
    """What the relative degree means for the program, and what was cancelled to get it."""
    notes = []
    if len(transfer.cancelled) > 1:
        notes.append(f"numerator and denominator shared the factor {polynomial_text(transfer.cancelled)}: cancelled")
    if transfer.relative_degree == 0:
        notes.append(
            f"direct feed-through {polynomial_text((transfer.feed_through,))}: "
            "the output must be computed within the sample"
        )
    elif transfer.relative_degree > 0:
        notes.append(
            "strictly proper: the output does not answer at once; step-invariant and forward-difference keep "
            "it so and leave one sample free for computing, impulse-invariant from relative degree 2 on; the "
            "other methods answer within the sample"
        )
    return notes


def _root_notes(transfer: TransferFunction) -> list[str]:
    """Poles that do not decay, and zeros in the right half plane."""
    notes = []
    for root in transfer.poles:
        if root.value.real > 0:
            notes.append(f"unstable: its pole at {_root_text(root)} grows")
        elif root.value.real == 0 and root.multiplicity > 1:
            notes.append(f"unstable: its pole at {_root_text(root)} is {root.multiplicity}-fold and grows")
        elif root.value.real == 0 and root.value.imag > 0:
            notes.append(f"undamped: its pair of poles at {_root_text(root)} never decays")
    notes += [
        f"non-minimum-phase: its zero at {_root_text(root)} lies in the right half plane"
        for root in transfer.zeros
        if root.value.real > 0
    ]
    return notes


def _root_text(root: Root) -> str:
    re, im = root.value.real, root.value.imag
    if im == 0:
        return f"s = {re:.5g}"
    return f"s = +-{im:.5g}j" if re == 0 else f"s = {re:.5g} +- {im:.5g}j"


def _window_notes(excess: int, around: Circumstances) -> list[str]:
    """How far below the rate the band must lie for a roll-off to fit in between."""
    needs = [
        f"rate/{samples:.3g} for {_shape_text(order, damping)}"
        for order, damping in shapes(excess)
        if (samples := samples_per_band_period(order, damping, around)) is not None
    ]
    if around.period_s is None or not needs:
        return []
    here = float(2 * pi() / (around.band_rad_s * around.period_s))
    return [
        f"a roll-off of the whole has a window only for a band of at most {', '.join(needs)} "
        f"(phase budget {decimal_or_quotient(around.phase_budget_deg)} deg); this band is rate/{here:.3g}"
    ]


def _shape_text(order: int, damping: Fraction) -> str:
    if damping != 1:
        return f"a pair of damping ratio {decimal_or_quotient(damping)}"
    return "one pole" if order == 1 else f"{order} equal poles"
