"""What ``realize.assess``, ``compare`` and ``emit`` answer: the results of the commands, with numpy at their edges.

Each prints as the screen of its command, shows as tables in a notebook, and gives the document of ``--json``.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from fractions import Fraction
from pathlib import Path
from types import MappingProxyType
from typing import Any, NamedTuple

from realize.api.discrete import PulseTransferFunction
from realize.api.notebook import figure, items, paragraph, table
from realize.api.transfer import TransferFunction, public
from realize.checks.check import Check
from realize.design import Design
from realize.firmware.job import Emitted
from realize.quantity import format_engineering
from realize.realizability import Assessment as Found
from realize.report.documents import assess_document, compare_document, emit_document
from realize.report.terminal import assess_text, compare_text, emit_text
from realize.rolloff import Proposal as FoundProposal
from realize.rolloff import rolloff_toml
from realize.workflow import Comparison as Compared
from realize.workflow import MethodResult as Result


class Proposal(NamedTuple):
    """One roll-off that would make an improper transfer function proper, and its price.

    Attributes
    ----------
    transfer : TransferFunction
        The proper result.
    placement, order, damping, pole_rad_s
        As under ``[rolloff]`` in a design file.
    phase_lost_deg, high_frequency_gain, converter_step_percent : float or None
        The price; None where it has no figure.
    within_window : bool
        Whether the pole costs neither too much phase nor too much noise.
    reasons : tuple of str
        What sets either end of that window, or the ways out.
    toml : str
        The lines to add to a design file.

    Examples
    --------
    >>> import realize
    >>> best = realize.assess("4.2 + 18/s + 0.09*s", rate="2 kHz").proposals[0]
    >>> print(best.toml)
    [rolloff]
    placement = "derivative"
    order = 1
    pole = "1070 rad/s"
    <BLANKLINE>
    >>> best.transfer.relative_degree
    0
    """

    transfer: TransferFunction
    placement: str
    order: int
    damping: Fraction
    pole_rad_s: Fraction
    phase_lost_deg: float | None
    high_frequency_gain: float | None
    converter_step_percent: float | None
    within_window: bool
    reasons: tuple[str, ...]
    toml: str


class Assessment:
    """Whether a design is realizable at all, and what would make it so.

    Attributes
    ----------
    transfer : TransferFunction
        As it was given.
    realizable : bool
        Whether it is proper.
    improper_terms : tuple of str
        What makes it improper, in words.
    proposals : tuple of Proposal
        Roll-off poles that would make it proper, best first.
    notes : tuple of str
        What else is worth knowing.

    Examples
    --------
    >>> import realize
    >>> found = realize.assess("4.2 + 18/s + 0.09*s", rate="2 kHz")
    >>> found
    <Assessment of controller: not realizable, 6 proposals>
    >>> proper = found.proposals[0].transfer
    >>> realize.assess(proper, rate="2 kHz").realizable
    True
    """

    def __init__(self, design: Design, found: Found) -> None:
        self._design, self._found = design, found
        self.transfer = public(found.transfer)
        self.realizable = found.realizable
        self.improper_terms = tuple(term.text for term in found.terms)
        self.proposals = tuple(_proposal(p) for p in found.proposals)
        self.notes = found.notes

    def document(self) -> dict[str, Any]:
        """What ``realize assess --json`` prints."""
        return assess_document(self._design, self._found)

    def __str__(self) -> str:
        return assess_text(self._design, self._found)

    def __repr__(self) -> str:
        answer = "realizable" if self.realizable else f"not realizable, {len(self.proposals)} proposals"
        return f"<Assessment of {self._design.name}: {answer}>"

    def _repr_html_(self) -> str:
        roots = [("pole", p) for p in self.transfer.poles] + [("zero", z) for z in self.transfer.zeros]
        blocks = [paragraph(_first_paragraph(str(self))), self.transfer._repr_html_()]
        blocks.append(table("Poles and zeros", ("kind", "s in rad/s"), [(kind, _root(r)) for kind, r in roots]))
        if self.proposals:
            head = ("placement", "order", "damping", "pole", "phase lost, deg", "gain above band", "in its window")
            blocks.append(table("Roll-off proposals, best first", head, map(_proposal_row, self.proposals)))
        return "".join([*blocks, items((*self.improper_terms, *self.notes))])


class MethodResult:
    """What one method makes of a design.

    Attributes
    ----------
    method : str
        Its name.
    acceptable : bool
        Whether code may be emitted from it.
    refused : str or None
        Why the method does not apply; then the rest is empty.
    discrete : PulseTransferFunction or None
        ``Gd(z)`` before its numbers are stored.
    checks : mapping of str to Check
        Every check by its name, on the numbers as stored: these decide.
    unrounded_checks : mapping of str to Check
        Those of the unrounded numbers that differ.
    blocking : tuple of Check
        Checks that are out, and not agreed to.
    notes : tuple of str
        What else is worth knowing.

    Examples
    --------
    >>> import realize
    >>> found = realize.compare("1/(0.05*s + 1)", rate="2 kHz").methods["backward-difference"]
    >>> found
    <MethodResult of backward-difference: acceptable>
    >>> found.discrete.poles.real.round(4).tolist()
    [0.9901]
    >>> check = found.checks["pole shift"]
    >>> check.verdict, check.tolerance, check.unit
    ('within', 2.0, '%')
    """

    def __init__(self, result: Result) -> None:
        self.method, self.acceptable, self.refused = result.method, result.acceptable, result.refused
        self.discrete = PulseTransferFunction(result.discretization) if result.discretization else None
        self.checks = _by_name(result.checks, "stored")
        self.unrounded_checks = _by_name(result.checks, "exact")
        self.blocking, self.notes = result.blocking, result.notes

    def __repr__(self) -> str:
        answer = "acceptable" if self.acceptable else "refused" if self.refused else "not acceptable"
        return f"<MethodResult of {self.method}: {answer}>"

    def _repr_html_(self) -> str:
        if self.refused:
            return paragraph(f"{self.method}: {self.refused}")
        return _checks_table(f"Checks of {self.method}", self.checks) + items(self.notes)


class Comparison:
    """Every method side by side at one rate.

    Attributes
    ----------
    transfer : TransferFunction
        What the methods were given: the design's, with the roll-off that makes it proper.
    period_s : Fraction
        Sample period.
    methods : mapping of str to MethodResult
        By name, in the order of the README.
    recommended : str or None
        The recommended method.
    because : str
        The reason, or what stands in the way.
    chosen : MethodResult or None
        Of the method that the design names, else of the recommended one.
    acceptable : bool
        Whether code may be emitted from that.

    Examples
    --------
    >>> import realize
    >>> found = realize.compare("4.2 + 18/s", rate="2 kHz")
    >>> found
    <Comparison of controller at 2 kHz: pole-zero-mapped recommended>
    >>> found.methods["bilinear"].checks["stability"].verdict
    'within'
    """

    def __init__(self, found: Compared) -> None:
        self._found = found
        self.transfer = public(found.causal.transfer)
        self.period_s, self.recommended, self.because = found.period_s, found.recommended, found.because
        self.methods: Mapping[str, MethodResult] = MappingProxyType({m.method: MethodResult(m) for m in found.methods})
        self.chosen = self.methods[found.chosen.method] if found.chosen else None
        self.acceptable = found.acceptable

    def document(self) -> dict[str, Any]:
        """What ``realize compare --json`` prints."""
        return compare_document(self._found)

    def __str__(self) -> str:
        return compare_text(self._found)

    def __repr__(self) -> str:
        answer = f"{self.recommended} recommended" if self.recommended else "no method is acceptable"
        rate = format_engineering(1 / self.period_s, "Hz")
        return f"<Comparison of {self._found.design.name} at {rate}: {answer}>"

    def _repr_html_(self) -> str:
        names = list(dict.fromkeys(name for method in self.methods.values() for name in method.checks))
        rows = [
            (m.method, "yes" if m.acceptable else "no", *(_judged(m.checks.get(name)) for name in names))
            for m in self.methods.values()
        ]
        refused = [f"{m.method}: {m.refused}" for m in self.methods.values() if m.refused]
        caption = "Each figure is the difference between the stored numbers and the design, in the unit of its check"
        blocks = [paragraph(_first_paragraph(str(self))), table(caption, ("method", "acceptable", *names), rows)]
        return "".join([*blocks, items(refused), self.chosen._repr_html_() if self.chosen else ""])


class Emission:
    """The files of a design, in memory or written.

    Attributes
    ----------
    method : str
        The method they were made by.
    files : mapping of str to str
        Name and text of every file.
    paths : tuple of Path
        Where they were written, in the same order; empty where they are in memory only.
    record : dict
        Content of the record.
    checks : mapping of str to Check
        Every check by its name, on the stored numbers.

    Examples
    --------
    >>> import realize
    >>> found = realize.emit("4.2 + 18/s", rate="2 kHz", name="gap")
    >>> list(found.files)
    ['gap.h', 'gap.c', 'gap_selftest.c', 'gap_vectors.csv', 'gap.record.json']
    """

    def __init__(self, emitted: Emitted, paths: Sequence[Path]) -> None:
        self._emitted = emitted
        self.method = emitted.chosen.method
        self.files: Mapping[str, str] = MappingProxyType(dict(emitted.files))
        self.paths = tuple(paths)
        self.record = emitted.record
        self.checks = _by_name(emitted.chosen.checks, "stored")

    def document(self) -> dict[str, Any]:
        """What ``realize emit --json`` prints; nothing is ``written`` where the files are in memory only."""
        return emit_document(self._emitted, [str(path) for path in self.paths])

    def __str__(self) -> str:
        return emit_text(self._emitted, self._places())

    def __repr__(self) -> str:
        where = str(self.paths[0].parent) if self.paths else "memory"
        return f"<Emission of {self._emitted.comparison.design.name}: {len(self.files)} files in {where}>"

    def _repr_html_(self) -> str:
        rows = [
            (place, str(len(text.encode()))) for place, text in zip(self._places(), self.files.values(), strict=True)
        ]
        first, caution = (paragraph(text) for text in (_first_paragraph(str(self)), _last_paragraph(str(self))))
        checks = _checks_table(f"Checks of {self.method}", self.checks)
        return first + checks + table("Files", ("file", "bytes"), rows) + caution

    def _places(self) -> list[str]:
        return [str(path) for path in self.paths] or [f"{name} (in memory)" for name in self.files]


def _proposal(found: FoundProposal) -> Proposal:
    return Proposal(
        transfer=public(found.transfer),
        placement=found.placement,
        order=found.order,
        damping=found.damping,
        pole_rad_s=found.pole_rad_s,
        phase_lost_deg=found.phase_lost_deg,
        high_frequency_gain=found.high_frequency_gain,
        converter_step_percent=found.converter_step_percent,
        within_window=found.within_window,
        reasons=found.reasons,
        toml=rolloff_toml(found),
    )


def _proposal_row(p: Proposal) -> tuple[str, ...]:
    pole = format_engineering(p.pole_rad_s, "rad/s")
    figures = figure(p.phase_lost_deg), figure(p.high_frequency_gain)
    return p.placement, str(p.order), figure(float(p.damping)), pole, *figures, "yes" if p.within_window else "no"


def _root(value: complex) -> str:
    return f"{value:.5g}" if value.imag else f"{value.real:.5g}"


def _by_name(checks: Sequence[Check], of: str) -> Mapping[str, Check]:
    return MappingProxyType({check.check: check for check in checks if check.of == of})


def _checks_table(caption: str, checks: Mapping[str, Check]) -> str:
    rows = [
        (check.check, figure(check.difference), figure(check.tolerance), check.unit, check.verdict, check.reason)
        for check in checks.values()
    ]
    return table(caption, ("check", "difference", "tolerance", "unit", "verdict", "where or why"), rows)


def _judged(check: Check | None) -> str:
    """A figure; the verdict in words where it is not within."""
    if check is None or check.verdict == "undefined":
        return "-"
    return figure(check.difference) if check.verdict == "within" else f"{figure(check.difference)} {check.verdict}"


def _first_paragraph(screen: str) -> str:
    """Yes or no, and why: what every screen starts with."""
    return screen.split("\n\n", 1)[0]


def _last_paragraph(screen: str) -> str:
    """The caution that the screen of an emission ends with."""
    return screen.rstrip().rsplit("\n\n", 1)[1]
