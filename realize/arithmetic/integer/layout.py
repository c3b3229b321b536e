"""Structures, before anything is rounded: which sums a sample is made of, with real coefficients.

A layout says what each structure computes, in counts; how many bits its variables and coefficients get is decided in
:mod:`realize.arithmetic.integer.quantize`. Each structure is one function from a parted pulse transfer function to a
layout; adding a structure touches this module alone.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from fractions import Fraction
from functools import lru_cache
from typing import NamedTuple

from realize.algebra import polynomial as poly
from realize.arithmetic.grouping import Rest, group
from realize.arithmetic.integer.coefficients import (
    Coefficients,
    cascaded_sections,
    coefficients_of,
    padded,
    partial_fractions,
    scaled,
)
from realize.arithmetic.integer.program import INPUT
from realize.arithmetic.realization import refuse_direct
from realize.errors import Refused

_ONE = Fraction(1)

#: What a variable is kept in: a factor of products, or a sum twice as wide.
SINGLE, DOUBLE = 1, 2

#: A section's stored numbers in ascending powers of 1/z, ``a`` without its leading 1.
Ratio = tuple[tuple[Fraction, ...], tuple[Fraction, ...]]


class Addend(NamedTuple):
    """``unit * multiple * variable``; without a name, ``unit`` is a power of two and nothing is multiplied.

    ``unit`` is what is rounded, so that a ratio of small integers between two coefficients survives it.
    """

    name: str | None
    unit: Fraction
    variable: str
    multiple: int = 1

    @property
    def value(self) -> Fraction:
        """The coefficient."""
        return self.unit * self.multiple


class Equation(NamedTuple):
    """``target = base + sum of addends``.

    Attributes
    ----------
    target : str
        Variable.
    addends : tuple of Addend
        Of the sum that is rounded.
    words : int
        :data:`SINGLE` or :data:`DOUBLE`.
    base : str or None
        Added unrounded.
    top_of : str or None
        The double word whose upper half the target is; then there are no addends.
    shaped : bool
        Whether what rounding discards is given back in the next sample.
    """

    target: str
    addends: tuple[Addend, ...]
    words: int = SINGLE
    base: str | None = None
    top_of: str | None = None
    shaped: bool = False


class Part(NamedTuple):
    """One section.

    Attributes
    ----------
    ratio : Ratio
        What it is to be.
    stored : callable
        From the stored values of its coefficients by name to what it then is.
    """

    ratio: Ratio
    stored: Callable[[Mapping[str, Fraction]], Ratio]


class Layout(NamedTuple):
    """The sums of a sample.

    Attributes
    ----------
    structure : str
        Name of the structure.
    outputs : tuple of Equation
        In order; what the command needs.
    command : tuple of Addend
        What the command is the sum of, but for the integral.
    updates : tuple of Equation
        In order.
    moves : tuple of (str, str)
        Target and source.
    parts : tuple of Part
        Sections, in the order of their numbers.
    parallel : bool
        Whether the sections stand beside each other; else one after the other.
    """

    structure: str
    outputs: tuple[Equation, ...]
    command: tuple[Addend, ...]
    updates: tuple[Equation, ...]
    moves: tuple[tuple[str, str], ...]
    parts: tuple[Part, ...]
    parallel: bool = False


class Form(NamedTuple):
    """One section's share: sums for its output, and for its states; ``kept`` where its output has a history."""

    tops: tuple[Equation, ...]
    output: tuple[Addend, ...]
    kept: bool
    shaped: bool
    updates: tuple[Equation, ...]
    moves: tuple[tuple[str, str], ...]
    part: Part


@lru_cache(maxsize=64)
def layouts(rest: Rest, structure: str, scales: tuple[Fraction, ...] | None = None) -> Layout:
    """Lay out the rest of a pulse transfer function; kept, because every width of words and sums asks for it.

    Parameters
    ----------
    rest : Rest
        In counts of output per count of input.
    structure : str
        Key of :data:`STRUCTURES`.
    scales : tuple of Fraction, optional
        A factor for the numerator of each section, where numerators are chosen anew.

    Raises
    ------
    Refused
        When the structure does not suit the poles.
    """
    return STRUCTURES[structure](rest, scales)


# ---------------------------------------------------------------- structures


def cascade(rest: Rest, scales: Sequence[Fraction] | None) -> Layout:
    """Sections in direct form I, one after the other."""
    return _in_series(
        "cascade", cascaded_sections(rest, scales), lambda k, s, source: _direct_form(k, s, source, shaped=False)
    )


def direct(rest: Rest, scales: Sequence[Fraction] | None) -> Layout:
    """The whole rest as one section in direct form I."""
    refuse_direct(rest)
    sections = [coefficients_of(group(rest.poles, rest.zeros), rest.gain)] if rest.gain else []
    return _in_series("direct", scaled(sections, scales), lambda k, s, source: _direct_form(k, s, source, shaped=False))


def error_feedback(rest: Rest, scales: Sequence[Fraction] | None) -> Layout:
    """As cascade, but what a section's rounding discards is added back in the next sample."""
    sections = cascaded_sections(rest, scales)
    return _in_series("error-feedback", sections, lambda k, s, source: _direct_form(k, s, source, shaped=True))


def delta(rest: Rest, scales: Sequence[Fraction] | None) -> Layout:
    """Sections in the operator ``z - 1``: states twice as wide, which take up increments."""
    return _in_series("delta", cascaded_sections(rest, scales), _delta_form)


def normal(rest: Rest, scales: Sequence[Fraction] | None) -> Layout:
    """Pairs of poles in normal (coupled) form, sections without one in direct form I."""
    sections = cascaded_sections(rest, scales)
    if not any(section.pair for section in sections):
        raise Refused(
            "[target] structure", "normal, without a pair of complex poles", "pairs", 'structure = "cascade", or "auto"'
        )

    def form(k: int, section: Coefficients, source: str) -> Form:
        return _normal_form(k, section, source) if section.pair else _direct_form(k, section, source, shaped=False)

    return _in_series("normal", sections, form)


def parallel(rest: Rest, scales: Sequence[Fraction] | None) -> Layout:
    """Partial fractions: sections in direct form I beside each other, and a direct gain."""
    direct_gain, sections = partial_fractions(rest)
    forms = [_direct_form(k, section, INPUT, shaped=False) for k, section in enumerate(scaled(sections, scales), 1)]
    through = (Addend("direct_gain", direct_gain, INPUT),) if direct_gain else ()
    outputs = tuple(equation for k, form in enumerate(forms, 1) for equation in _output(k, form))
    return Layout(
        "parallel",
        outputs,
        (*through, *(Addend(None, Fraction(1), f"section{k}_output") for k in range(1, len(forms) + 1))),
        (),
        _deepest([move for form in forms for move in form.moves]),
        tuple(form.part for form in forms),
        parallel=True,
    )


STRUCTURES: dict[str, Callable[[Rest, Sequence[Fraction] | None], Layout]] = {
    "direct": direct,
    "cascade": cascade,
    "error-feedback": error_feedback,
    "delta": delta,
    "normal": normal,
    "parallel": parallel,
}


def _in_series(name: str, sections: Sequence[Coefficients], form: Callable[[int, Coefficients, str], Form]) -> Layout:
    outputs: list[Equation] = []
    updates: list[Equation] = []
    moves: list[tuple[str, str]] = []
    parts: list[Part] = []
    source = INPUT
    command: tuple[Addend, ...] = ()
    for k, section in enumerate(sections, 1):
        made = form(k, section, source)
        last = k == len(sections) and not made.kept
        outputs += made.tops if last else _output(k, made)
        command = made.output if last else (Addend(None, Fraction(1), f"section{k}_output"),)
        updates += made.updates
        moves += made.moves
        parts.append(made.part)
        source = f"section{k}_output"
    return Layout(name, tuple(outputs), command, tuple(updates), _deepest(moves), tuple(parts))


def _output(k: int, form: Form) -> tuple[Equation, ...]:
    return (*form.tops, Equation(f"section{k}_output", form.output, shaped=form.shaped))


# ---------------------------------------------------------------- forms of a section


def _direct_form(k: int, section: Coefficients, source: str, *, shaped: bool) -> Form:
    """``y = sum b x - sum a y``; the input's history is that of the section before.

    Notes
    -----
    What is past comes first, the newest value last: it is known last, and that order needs the fewest registers.
    """
    output = f"section{k}_output"
    forward = [_forward(f"section{k}_b{i}", section, i, _past(source, i)) for i in range(section.order + 1)]
    back = [_addend(f"section{k}_a{i}", -a, _past(output, i)) for i, a in enumerate(section.a, 1)]

    def stored(values: Mapping[str, Fraction]) -> Ratio:
        b = tuple(values.get(f"section{k}_b{i}", c) for i, c in enumerate(section.b))
        return b, tuple(-values.get(f"section{k}_a{i}", -a) for i, a in enumerate(section.a, 1))

    return Form(
        (),
        _nonzero((*forward[1:], *back, forward[0])),
        kept=any(section.a),
        shaped=shaped and any(section.a),
        updates=(),
        moves=_histories([(source, _depth(section.b)), (output, _depth((_ONE, *section.a)))]),
        part=Part((section.b, section.a), stored),
    )


def _forward(name: str, section: Coefficients, i: int, variable: str) -> Addend:
    """Where all zeros lie on z = 1 or -1, the gain alone is rounded, and they stay."""
    c = section.numerator[i]
    if section.fixed and c and _is_multiplied(section.gain):
        return Addend(name, section.gain, variable, int(c))
    return _addend(name, section.b[i], variable)


def _delta_form(k: int, section: Coefficients, source: str) -> Form:
    """``w1 += x - a1 w1 - a2 w2; w2 += w1; y = d x + c1 w1 + c2 w2``, the factors being upper halves of the states.

    Notes
    -----
    With ``A(z) = delta^2 + a1 delta + a2`` in ``delta = z - 1`` (Middleton & Goodwin 1990, from memory).
    """
    if not any(section.a):
        return _direct_form(k, section, source, shaped=False)
    a = _in_delta((Fraction(1), *section.a))[1:]
    b = _in_delta(section.b)
    c = tuple(b[i] - b[0] * a[i - 1] for i in range(1, len(b)))
    states = [f"state.section{k}_{i}" for i in range(1, section.order + 1)]
    tops = [f"section{k}_top{i}" for i in range(1, section.order + 1)]
    output = (
        _addend(f"section{k}_d", b[0], source),
        *(_addend(f"section{k}_c{i}", c[i - 1], top) for i, top in enumerate(tops, 1)),
    )
    back = _nonzero([_addend(f"section{k}_a{i}", -a[i - 1], top) for i, top in enumerate(tops, 1)])
    chain = [
        Equation(states[i], (Addend(None, Fraction(1), states[i - 1]),), DOUBLE, base=states[i])
        for i in range(section.order - 1, 0, -1)
    ]
    first = Equation(states[0], (Addend(None, Fraction(1), source), *back), DOUBLE, base=states[0])

    def stored(values: Mapping[str, Fraction]) -> Ratio:
        d = values.get(f"section{k}_d", b[0])
        ai = tuple(-values.get(f"section{k}_a{i}", -x) for i, x in enumerate(a, 1))
        ci = tuple(values.get(f"section{k}_c{i}", x) for i, x in enumerate(c, 1))
        below = (Fraction(1), *ai)
        above = (d, *(d * x + y for x, y in zip(ai, ci, strict=True)))
        return _from_delta(above), _from_delta(below)[1:]

    return Form(
        tuple(Equation(top, (), top_of=state) for top, state in zip(tops, states, strict=True)),
        _nonzero(output),
        kept=False,
        shaped=False,
        updates=(*chain, first),
        moves=(),
        part=Part((section.b, section.a), stored),
    )


def _normal_form(k: int, section: Coefficients, source: str) -> Form:
    """``x1' = s x1 + w x2; x2' = -w x1 + s x2 + u; y = d u + c1 x1 + c2 x2`` for the poles ``s +- jw``.

    Notes
    -----
    With ``B = (0, 1)'``: ``adj(zI - A) B = (w, z - s)'``, so ``c1 = (n0 + n1 s)/w``, ``c2 = n1`` give ``n1 z + n0``.
    """
    assert section.pair is not None
    s, w = section.pair
    d = section.b[0]
    n1, n0 = (b - d * a for b, a in zip(section.b[1:], section.a, strict=True))
    one, two = f"state.section{k}_1", f"state.section{k}_2"
    following = f"section{k}_next1"
    c1 = (n0 + n1 * s) / w
    output = (
        _addend(f"section{k}_d", d, source),
        _addend(f"section{k}_c1", c1, one),
        _addend(f"section{k}_c2", n1, two),
    )
    turned = _nonzero([_addend(f"section{k}_s", s, one), _addend(f"section{k}_w", w, two)])
    driven = _nonzero([_addend(f"section{k}_w", w, one, -1), _addend(f"section{k}_s", s, two)])

    def stored(values: Mapping[str, Fraction]) -> Ratio:
        d_, c1_, c2_, s_, w_ = (
            values.get(f"section{k}_{name}", given)
            for name, given in (("d", d), ("c1", c1), ("c2", n1), ("s", s), ("w", w))
        )
        a = (-2 * s_, s_ * s_ + w_ * w_)
        return (d_, d_ * a[0] + c2_, d_ * a[1] + c1_ * w_ - c2_ * s_), a

    return Form(
        (),
        _nonzero(output),
        kept=False,
        shaped=False,
        updates=(Equation(following, turned), Equation(two, (*driven, Addend(None, Fraction(1), source)))),
        moves=((one, following),),
        part=Part((section.b, section.a), stored),
    )


def _addend(name: str, value: Fraction, variable: str, multiple: int = 1) -> Addend:
    """A coefficient times a variable; a power of two is not multiplied."""
    if value and not _is_multiplied(value):
        return Addend(None, abs(value), variable, multiple if value > 0 else -multiple)
    return Addend(name, value, variable, multiple)


def _is_multiplied(value: Fraction) -> bool:
    """Whether it is not a power of two, nor minus one."""
    return any(n & (n - 1) for n in (abs(value.numerator), value.denominator))


def _nonzero(addends: Sequence[Addend]) -> tuple[Addend, ...]:
    return tuple(addend for addend in addends if addend.value)


def _past(signal: str, i: int) -> str:
    return f"state.{signal}_{i}" if i else signal


def _histories(depths: Sequence[tuple[str, int]]) -> tuple[tuple[str, str], ...]:
    """Copies that move histories on, the oldest first."""
    return tuple((f"state.{signal}_{i}", _past(signal, i - 1)) for signal, depth in depths for i in range(depth, 0, -1))


def _depth(p: Sequence[Fraction]) -> int:
    """How far back the last coefficient other than 0 reaches."""
    return max((i for i, c in enumerate(p) if c), default=0)


def _deepest(moves: Sequence[tuple[str, str]]) -> tuple[tuple[str, str], ...]:
    """Every move once; where sections share a history, the older values first."""
    ordered = sorted(dict.fromkeys(moves), key=lambda move: _age(move[0]), reverse=True)
    return tuple(ordered)


def _age(name: str) -> int:
    return int(name.rsplit("_", 1)[1])


def _in_delta(p: Sequence[Fraction]) -> tuple[Fraction, ...]:
    """Coefficients of a polynomial in descending powers of z, in those of ``z - 1``, equally many."""
    return padded(poly.shift(tuple(p), Fraction(1)), len(p))


def _from_delta(p: Sequence[Fraction]) -> tuple[Fraction, ...]:
    return padded(poly.shift(tuple(p), Fraction(-1)), len(p))
