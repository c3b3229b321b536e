"""The tables that screens and pages show, before they are set: words that head the columns, and rows of cells."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from math import log
from typing import TYPE_CHECKING, Any, NamedTuple

from realize.algebra.roots import Root
from realize.checks import Check
from realize.design import Design
from realize.quantity import format_engineering
from realize.report.documents import natural_frequency_and_damping
from realize.report.paragraphs import AGREED, OUT
from realize.report.sentences import window_text
from realize.report.values import complex_text, decimals, figure, in_hz, optional, value_text, with_unit
from realize.rolloff import Proposal
from realize.workflow import Comparison, MethodResult
from realize.workflow.results import OF_ARITHMETIC

if TYPE_CHECKING:
    from realize.loop_design import LoopResult

#: Decay that is called gone: 1 %.
_DECAYED = log(100)

#: Checks with a column of their own in the comparison, with the words that head it.
_COLUMNS = (
    ("pole shift", ("pole", "shift", "%")),
    ("zero shift", ("zero", "shift", "%")),
    ("magnitude in band", ("gain", "in band", "dB")),
    ("phase in band", ("phase", "in band", "deg")),
    ("low-frequency gain", ("gain", "at 0 Hz", "%")),
    ("step deviation", ("step", "deviates", "%")),
    ("step overshoot", ("over-", "shoot", "points")),
    ("converter step", ("converter", "step", "%")),
    ("round-off", ("round-", "off", "%")),
)

#: The words that head the table of the loops.
_LOOP_COLUMNS = (
    ("", "stable", ""),
    ("phase", "margin", "deg"),
    ("margin", "lost", "deg"),
    ("maximum", "sensitivity", ""),
    ("step", "overshoot", "%"),
    ("overshoot", "gained", "points"),
)

_MULTIPLE = {1: "", 2: "double", 3: "triple"}


#: Longest unit made of those of the signals that the table of checks has room for: two more than ``rad/s``.
_LONGEST_UNIT = 7

#: Unit of the values of a check, where it is not that of the difference.
_VALUE_UNITS = {
    "pole shift": "rad/s",
    "zero shift": "rad/s",
    "magnitude in band": "dB",
    "phase in band": "deg",
    "step overshoot": "%",
    "converter step": "%",
    "loop phase margin": "deg",
    "loop overshoot": "%",
}

#: Checks whose difference is one of percentages: points.
_IN_POINTS = ("step overshoot", "loop overshoot")


_LEDGER_HEAD = (("item",), ("phase",))

#: Words under a table of methods.
METHODS_KEY = (
    "Each figure is the difference between the stored numbers and the design; ! is out of tolerance, "
    "* out but accepted, - undefined (which does not block)."
)

#: Words under a table of loops.
LOOPS_KEY = (
    "(continuous) is the loop without hold and compute delay, those of the methods are sampled with everything "
    "in them; lost and gained are against the continuous loop with hold and compute delay."
)


class Rows(NamedTuple):
    """A table.

    Attributes
    ----------
    head : tuple of tuple of str
        For each column the words above it, one a line, all columns with as many.
    cells : list of list of str
        A row each.
    """

    head: tuple[tuple[str, ...], ...]
    cells: list[list[str]]

    @property
    def lines(self) -> list[list[str]]:
        """The head line by line, then the rows."""
        return [*([words[i] for words in self.head] for i in range(len(self.head[0]))), *self.cells]


def roots_rows(roots: Sequence[Root]) -> Rows:
    """Poles or zeros in s."""
    names = ("natural frequency", "damping ratio", "falls to 1 % in", "s in rad/s", "")
    return Rows(tuple((name,) for name in names), [_root_row(root) for root in roots])


def _root_row(root: Root) -> list[str]:
    frequency, damping = natural_frequency_and_damping(root.value)
    decay = -root.value.real
    time = format_engineering(_DECAYED / decay, "s") if decay > 0 else "never" if decay == 0 else "grows"
    shown = "-" if damping is None else f"{damping:.5g}"
    times = _MULTIPLE.get(root.multiplicity, f"{root.multiplicity}-fold")
    return [in_hz(frequency), shown, time, complex_text(root.value), times]


def methods_rows(methods: Sequence[MethodResult]) -> Rows:
    """Every method with its figures, the tolerances above them."""
    columns = _columns(methods)
    head = (("", "", ""), ("method", "", ""), *(words for _, words in columns))
    cells = [[_good(m), m.method, *(_cell(m, name) for name, _ in columns)] for m in methods]
    return Rows(head, [_tolerance_row(methods), *cells])


def _columns(methods: Sequence[MethodResult]) -> tuple[tuple[str, tuple[str, str, str]], ...]:
    """Checks with a column: those of integer arithmetic where there is any."""
    made = {check.check for method in methods for check in method.checks}
    return tuple(column for column in _COLUMNS if column[0] in made or column[0] != "round-off")


def loops_rows(comparison: Comparison) -> Rows | None:
    """What is left in the loop of every method, each figure that of the worst case; None where no method has one."""
    loops = [m.loop for m in comparison.methods if m.loop]
    if not loops:
        return None
    least, most = _loop_limits(comparison.design)
    limits = ["yes", f">={least:.3g}", f"<={most[0]:.3g}", f"<={most[1]:.3g}", "-", f"<={most[2]:.3g}"]
    before = _loop_figures(loops[0], "continuous", "-", "-")
    rows = [[_good(m), m.method, *_loop_cells(m, least)] for m in comparison.methods]
    head = (("", "", ""), ("method", "", ""), *_LOOP_COLUMNS)
    return Rows(head, [["", "(tolerance)", *limits], ["", "(continuous)", *before], *rows])


def loops_title(comparison: Comparison) -> str:
    """What stands above the table of loops."""
    cases = next((len(m.loop.entries) for m in comparison.methods if m.loop), 1)
    return f"In the loop, each figure the worst over the plant's {cases} cases" if cases > 1 else "In the loop"


def proposals_rows(proposals: Sequence[Proposal]) -> Rows:
    """Roll-off proposals with their price."""
    head = (
        ("placement", ""),
        ("order", ""),
        ("damping", ""),
        ("pole", "rad/s"),
        ("phase", "lost"),
        ("gain above", "band"),
        ("converter", "step"),
        ("window", "rad/s"),
        ("fits", ""),
    )
    return Rows(head, [_proposal_row(p) for p in proposals])


def _proposal_row(p: Proposal) -> list[str]:
    return [
        p.placement,
        str(p.order),
        f"{float(p.damping):.4g}",
        f"{float(p.pole_rad_s):.5g}",
        optional(p.phase_lost_deg, " deg"),
        optional(p.high_frequency_gain, ""),
        optional(p.converter_step_percent, " %"),
        window_text(p.window_rad_s),
        "yes" if p.within_window else "no",
    ]


def _loop_limits(design: Design) -> tuple[float, tuple[float, float, float]]:
    """Least phase margin; most that it may lose, sensitivity, and most that the overshoot may gain."""
    from realize.loop import LOOP_DEFAULTS

    given = dict(design.tolerance)
    keys = ("loop_phase_margin_least", "loop_phase_margin_loss", "loop_sensitivity_most", "loop_overshoot_rise")
    least, *most = (float(given.get(key, LOOP_DEFAULTS[key].tolerance)) for key in keys)
    return least, (most[0], most[1], most[2])


def _loop_figures(loop: LoopResult, kind: str, lost: str, gained: str) -> list[str]:
    """The worst over the cases, of the continuous or the discrete loops; margins of a loop that is lost say nothing."""
    stable, margin, sensitivity, overshoot = (
        [entry[kind][key] for entry in loop.entries]
        for key in ("stable", "phase_margin_deg", "maximum_sensitivity", "step_overshoot_percent")
    )
    if False in stable:
        return ["no", *["-"] * (len(_LOOP_COLUMNS) - 1)]
    return [
        "-" if None in stable else "yes",
        decimals(_worst_of(margin, min), 1),
        lost,
        decimals(_worst_of(sensitivity, max), 2),
        decimals(_worst_of(overshoot, max), 1),
        gained,
    ]


def _worst_of(figures: Sequence[float | None], worst: Callable[[list[float]], float]) -> float | None:
    known = [figure for figure in figures if figure is not None]
    return worst(known) if known else None


def _loop_cells(method: MethodResult, least_deg: float) -> list[str]:
    """The figures of one method; a mark stands behind the one that is out."""
    if method.loop is None:
        return ["-"] * len(_LOOP_COLUMNS)
    checks = {check.check: check for check in method.loop.checks}
    marks = {name: _mark(method, check) for name, check in checks.items()}
    margin, overshoot = checks["loop phase margin"], checks["loop overshoot"]
    if marks["loop stability"]:
        return [f"no{marks['loop stability']}", *["-"] * (len(_LOOP_COLUMNS) - 1)]
    cells = _loop_figures(method.loop, "discrete", decimals(_lost(margin), 2), decimals(overshoot.difference, 2))
    margins = [entry["discrete"]["phase_margin_deg"] for entry in method.loop.entries]
    low = _lost(margin) is None or any(value is not None and value < least_deg for value in margins)
    at_margin = marks["loop phase margin"]
    behind = (
        "",
        at_margin if low else "",
        "" if low else at_margin,
        marks["loop sensitivity"],
        "",
        marks["loop overshoot"],
    )
    return [cell + mark for cell, mark in zip(cells, behind, strict=True)]


def _lost(margin: Check) -> float | None:
    """Phase margin lost against the continuous loop with hold and delay; None where one of them has none."""
    if not isinstance(margin.reference, float) or not isinstance(margin.obtained, float) or margin.difference is None:
        return None
    # Where that loop is below the floor itself, the difference is what lies below the floor.
    return margin.difference if margin.tolerance else max(margin.reference - margin.obtained, 0.0)


def _good(method: MethodResult) -> str:
    return "yes" if method.acceptable else "no"


def _tolerance_row(methods: Sequence[MethodResult]) -> list[str]:
    tolerances = {c.check: c.tolerance for m in methods for c in m.stored_checks if c.tolerance is not None}
    return ["", "(tolerance)", *(figure(tolerances.get(name)) for name, _ in _columns(methods))]


def _cell(method: MethodResult, name: str) -> str:
    check = next((c for c in method.stored_checks if c.check == name), None)
    if check is None or check.difference is None:
        return "-"
    return figure(check.difference, 2) + _mark(method, check)


def _mark(method: MethodResult, check: Check) -> str:
    accepted = any(c is check for c, _ in method.accepted)
    return AGREED if accepted else OUT if check.verdict == "out" else ""


def loop_rows(loop: LoopResult) -> Rows:
    """The loops before and after, two rows a case."""
    head = (
        ("loop", ""),
        ("stable", ""),
        ("phase", "margin"),
        ("gain", "margin"),
        ("gain cut", "margin"),
        ("delay", "margin"),
        ("crossover", ""),
        ("maximum", "sensitivity"),
        ("step", "overshoot"),
    )
    kinds = ("continuous", "discrete")
    return Rows(head, [_loop_row(kind, entry[kind]) for entry in loop.entries for kind in kinds])


def ledger_rows(loop: LoopResult) -> Rows:
    """Where the phase at the crossover went, and what is left; without rows where there is no crossover."""
    if loop.ledger is None:
        return Rows(_LEDGER_HEAD, [])
    left = loop.entries[0]["discrete"]["phase_margin_deg"]
    items = [*loop.ledger.items, ("in all", loop.ledger.total_deg)]
    items += [("phase margin left", left)] if left is not None else []
    # Adding 0 turns a rounded -0 into 0.
    return Rows(_LEDGER_HEAD, [[name, f"{round(value, 2) + 0.0:.2f} deg"] for name, value in items])


def _loop_row(kind: str, figures: Mapping[str, Any]) -> list[str]:
    stable, crossover, delay = figures["stable"], figures["crossover_rad_s"], figures["delay_margin_s"]
    return [
        kind,
        "-" if stable is None else "yes" if stable else "no",
        with_unit(figures["phase_margin_deg"], " deg"),
        with_unit(figures["gain_margin_db"], " dB"),
        with_unit(figures["gain_reduction_margin_db"], " dB"),
        "-" if delay is None else format_engineering(delay, "s"),
        "-" if crossover is None else in_hz(crossover),
        with_unit(figures["maximum_sensitivity"], ""),
        with_unit(figures["step_overshoot_percent"], " %"),
    ]


def checks_rows(result: MethodResult, design: Design, digits: int = 5) -> Rows:
    """One row a check: what the method did, and what rounding the stored numbers made of it."""
    head = (
        ("check", ""),
        ("in", ""),
        ("design", ""),
        ("stored", ""),
        ("difference", "by method"),
        ("", "as stored"),
        ("tolerance", ""),
        ("verdict", ""),
    )
    exact = {check.check: check for check in result.checks if check.of == "exact"}
    agreed = {check.check for check, _ in result.accepted}
    rows = [_check_row(c, exact.get(c.check, c), c.check in agreed, design, digits) for c in result.stored_checks]
    return Rows(head, rows)


def _check_row(stored: Check, exact: Check, is_agreed: bool, design: Design, digits: int) -> list[str]:
    verdict = "accepted" if stored.verdict == "out" and is_agreed else stored.verdict
    return [
        stored.check,
        _value_unit(stored, design),
        value_text(stored.reference, digits),
        value_text(stored.obtained, digits),
        "-" if stored.check in OF_ARITHMETIC else figure(exact.difference),
        figure(stored.difference),
        tolerance_text(stored, design),
        verdict,
    ]


def _value_unit(check: Check, design: Design) -> str:
    """Unit of the values of a check, from those of the signals where these are known and short."""
    unit = _VALUE_UNITS.get(check.check, "")
    incoming, outgoing = design.input.unit, design.output.unit
    if check.check == "saturation recovery":
        unit = outgoing
    elif check.check == "low-frequency gain" and incoming and outgoing:
        unit = _gain_unit(outgoing, incoming, design.transfer.zeros_minus_poles_at_origin)
    is_told = check.reference is not None or check.obtained is not None
    return unit if is_told and len(unit) <= _LONGEST_UNIT else ""


def _gain_unit(outgoing: str, incoming: str, k: int) -> str:
    """Unit of the limit of ``s^-k G``, which is that of G without integral; one integral adds ``/s``."""
    if k not in (0, -1):
        return ""
    ratio = "1" if outgoing == incoming else f"{outgoing}/{incoming}"
    return f"{ratio}/s" if k else "" if ratio == "1" else ratio


def tolerance_text(check: Check, design: Design) -> str:
    """How far off the value may be; where a limit of its own rules, that one."""
    if check.tolerance is None:
        return "-"
    return _limit_text(check, check.tolerance, design) or difference_text(check, check.tolerance)


def room_text(check: Check, design: Design) -> str:
    """How far off the value may be, as a difference; where a limit of its own leaves so much, that one behind it."""
    if check.tolerance is None:
        return "-"
    limit = _limit_text(check, check.tolerance, design)
    return difference_text(check, check.tolerance) + (f" ({limit})" if limit else "")


def difference_text(check: Check, difference: float | None) -> str:
    """A difference of what a check compares, with its unit."""
    text = figure(difference)
    if difference is not None and check.check in _IN_POINTS:
        return f"{text} point{'' if text == '1' else 's'}"
    return text if difference is None else f"{text} {check.unit}".strip()


def _limit_text(check: Check, tolerance: float, design: Design) -> str:
    """The limit of a check that is held to one, rather than to a difference."""
    if check.check == "loop sensitivity":
        return f"at most {_loop_limits(design)[1][1]:.3g}"
    if check.check == "loop phase margin" and tolerance < _loop_limits(design)[1][0]:
        return f"at least {_loop_limits(design)[0]:.3g} deg"
    return ""
