"""The record of an emission in integers: the stored integers, their binary points, and what is proven of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from decimal import ROUND_CEILING, Context, Decimal
from fractions import Fraction
from typing import Any

from realize.arithmetic.integer.program import Program, Term
from realize.arithmetic.integer.proof import Bound
from realize.arithmetic.integer.quiet import Quiet, SectionCycles
from realize.arithmetic.integer.realization import IntegerRealization
from realize.arithmetic.sample import is_recursive
from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.record import FIGURE_DIGITS, assembled, document_text

#: Structures whose stored numbers are ``b`` and ``a``.
_DIRECT_FORMS = ("direct", "cascade", "error-feedback", "parallel")

Entry = dict[str, Any]


def record_text(emission: IntegerEmission, files: Mapping[str, str], silence: Quiet) -> str:
    """The record as JSON text.

    Parameters
    ----------
    emission : IntegerEmission
        What was emitted.
    files : mapping
        Name and text of the files it describes.
    silence : Quiet
        Deadband and limit cycles.

    Notes
    -----
    ``sections`` and ``integral`` are in counts of output per count of input; ``b`` and ``a`` in ascending powers of
    1/z, ``a`` without its 1 and for subtraction. Where other numbers are stored, ``b`` and ``a`` are what they come
    to and have ``stored`` null; the numbers stand under ``coefficients``, recursive ones for subtraction too.
    """
    realization = emission.realization
    stored = {
        "structure": realization.structure,
        "arithmetic": f"int{realization.widths.bits}",
        "integral": _integral(realization.program),
        "sections": [_section(realization, k) for k in range(1, len(realization.sections) + 1)],
        "direct_gain": _direct_gain(realization),
        "numerators_anew": realization.numerators_anew,
        "signals": _signals(emission),
        "output_error_counts": {
            "proven_most": float(ceiling_text(realization.proof.output_error)),
            "expected_rms": _figure(realization.proof.rms_error),
        },
        "quiet": _quiet(silence, realization.proof.output_error),
    }
    return document_text(assembled(emission, stored, files))


def ceiling_text(value: Fraction) -> str:
    """A bound to a few digits, rounded so that it stays one."""
    up = Context(prec=FIGURE_DIGITS, rounding=ROUND_CEILING)
    return f"{up.divide(Decimal(value.numerator), Decimal(value.denominator)):f}"


def _figure(value: float | None) -> float | None:
    return None if value is None else float(f"{value:.{FIGURE_DIGITS}g}")


# ---------------------------------------------------------------- coefficients


def _integral(program: Program) -> list[Entry]:
    if program.integral is None:
        return []
    return [_stored(gain, program.integral.word.fraction_bits) for gain in program.integral.stored]


def _section(realization: IntegerRealization, k: int) -> Entry:
    b, a = realization.sections[k - 1]
    named = {name: term for name, term in realization.program.coefficients.items() if name.startswith(f"section{k}_")}
    own = realization.structure in _DIRECT_FORMS or not named.keys() - _direct_names(k, len(a))
    if own and not (realization.structure == "delta" and len(a)):
        return {"b": _numbers(b, named, f"section{k}_b", 0), "a": _numbers(a, named, f"section{k}_a", 1)}
    return {
        "b": [_unstored(value) for value in b],
        "a": [_unstored(value) for value in a],
        "coefficients": {name.removeprefix(f"section{k}_"): _term(name, term) for name, term in named.items()},
    }


def _direct_names(k: int, order: int) -> set[str]:
    return {f"section{k}_{letter}{i}" for letter in "ba" for i in range(order + 1)}


def _numbers(values: Sequence[Fraction], named: Mapping[str, Term], start: str, first: int) -> list[Entry]:
    """Each as stored; what is not multiplied, as the dyadic number it is."""
    names = [f"{start}{i}" for i in range(first, first + len(values))]
    return [
        _term(name, named[name]) if name in named else _dyadic(value) for name, value in zip(names, values, strict=True)
    ]


def _direct_gain(realization: IntegerRealization) -> Entry | None:
    if not realization.direct_gain:
        return None
    term = realization.program.coefficients.get("direct_gain")
    return _dyadic(realization.direct_gain) if term is None else _term("direct_gain", term)


def _term(name: str, term: Term) -> Entry:
    return _stored(-term.stored if is_recursive(name) else term.stored, term.fraction_bits)


def _stored(stored: int, fraction_bits: int) -> Entry:
    value = Fraction(stored) / Fraction(2) ** fraction_bits
    return {"value": str(value), "stored": stored, "fraction_bits": fraction_bits}


def _dyadic(value: Fraction) -> Entry:
    return _stored(value.numerator, value.denominator.bit_length() - 1)


def _unstored(value: Fraction) -> Entry:
    return {"value": str(value), "stored": None, "fraction_bits": None}


# ---------------------------------------------------------------- signals


def _signals(emission: IntegerEmission) -> Entry:
    """Words and sums with their proven bounds, in their own units."""
    realization = emission.realization
    program = realization.program
    bounds = {bound.variable: bound for bound in realization.proof.bounds}
    points = {name: word.fraction_bits for name, word in program.words.items()}
    if program.integral:
        names = (f"state.integral{i}" for i in range(1, len(program.integral.stored) + 1))
        points |= dict.fromkeys(names, program.integral.word.fraction_bits)
    return {
        "words": [
            {"name": name.removeprefix("state."), "bits": bound.bits, "fraction_bits": points[name]} | _room(bound)
            for name, bound in bounds.items()
            if name in points
        ],
        "accumulators": [
            {"name": name.removesuffix(" (sum)").removeprefix("state."), "bits": bound.bits} | _room(bound)
            for name, bound in bounds.items()
            if name not in points
        ],
    }


def _quiet(silence: Quiet, error: Fraction) -> Entry:
    """Deadband in counts of the input, cycles in units of ``2**-fraction_bits`` counts; bounds are proven."""
    sides = ("positive", silence.positive), ("negative", silence.negative)
    return {
        "smallest_answered_counts": {side: {"counts": answer.counts, "exact": answer.exact} for side, answer in sides},
        "integration": None if silence.integration is None else silence.integration._asdict(),
        "limit_cycles": [_cycles(each) for each in silence.sections],
        "settles_within_counts": _settles_within(silence, error),
    }


def _settles_within(silence: Quiet, error: Fraction) -> float:
    """Of zero, or of what the integral holds, without input."""
    if silence.integration and not silence.dies_out:
        return float(ceiling_text(error))
    return 0 if silence.rests_at_zero else silence.largest_output


def _cycles(each: SectionCycles) -> Entry:
    bound = each.cycles.bound
    return {
        "section": each.section,
        "fraction_bits": each.fraction_bits,
        "proven_most_units": None if bound is None else float(ceiling_text(bound)),
        "searched": each.cycles.searched,
        "amplitude_units": each.cycles.amplitude,
        "period_samples": each.cycles.period,
    }


def _room(bound: Bound) -> Entry:
    return {"proven_least": -bound.largest - 1, "proven_most": bound.largest, "spare_bits": bound.spare_bits}
