"""What people read in the terminal: at most 100 columns, whole sentences, no colour needed.

Every screen starts with yes or no, then says why, then what to do. Figures have at most five significant
digits.
"""

from __future__ import annotations

import re
from collections.abc import Callable, Mapping, Sequence, Set
from math import log, pi
from typing import TYPE_CHECKING, Any

from realize.algebra.expression.printing import format_transfer
from realize.algebra.roots import Root
from realize.checks import Check
from realize.checks.agreement import agreed_text
from realize.design import Design
from realize.design.schedule import nominal_note
from realize.quantity import format_engineering
from realize.realizability import Assessment
from realize.report.documents import natural_frequency_and_damping
from realize.report.paragraphs import AGREED, OUT, WIDTH, bullets, figures_table, heading, table, wrapped
from realize.rolloff import Proposal, rolloff_toml
from realize.workflow import Comparison, MethodResult
from realize.workflow.results import OF_ARITHMETIC

if TYPE_CHECKING:
    from realize.loop_design import LoopResult

#: An exponent of ten, as Python pads it.
_EXPONENT = re.compile(r"e\+?(-?)0*")

#: Longest transfer function printed in lowest terms: beyond it the user's own text says more.
_LONGEST_TRANSFER = 400

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

#: Checks without a column, named in words where they are out.
_UNSHOWN = (
    "stability",
    "saturation recovery",
    "loop stability",
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

#: Longest unit made of those of the signals that the table of checks has room for: two more than ``rad/s``.
_LONGEST_UNIT = 7

#: Digits of the values in the table of checks, fewer where it is too wide for the screen.
_DIGITS = (5, 4, 3, 2)

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

#: Below it a value of the table is written as a whole number rather than with an exponent, which is no shorter.
_WHOLE = 1e5

#: Checks whose difference is one of percentages: points.
_IN_POINTS = ("step overshoot", "loop overshoot")

#: Differences above this are lost causes, by whatever factor.
_MOST_SHOWN = 1e6

#: Figures below this are shown with decimals: five digits in all at the most.
_MOST_WITH_DECIMALS = 1000

_MULTIPLE = {1: "", 2: "double", 3: "triple"}

CAUTION = (
    "Controllers move machines: check on the bench with the actuator limited before closing the loop. This is no "
    "functional-safety process (IEC 61508 and its sector standards), and replaces neither local codes nor the "
    "judgement of a licensed engineer where one is required."
)


def assess_text(design: Design, assessment: Assessment) -> str:
    """The screen of `realize assess`."""
    blocks = [_verdict(design, assessment), _transfer_block(design, assessment)]
    blocks += _roots_block("Poles", assessment.transfer.poles), _roots_block("Zeros", assessment.transfer.zeros)
    if assessment.terms:
        blocks.append(heading("What makes it improper") + bullets(term.text for term in assessment.terms))
        blocks.append(_proposals_block(assessment.proposals) + _margins_list(assessment))
    notes = [*assessment.notes, *(_unmeasured(design) if assessment.terms else ()), *nominal_note(design)]
    if notes:
        blocks.append(heading("Notes") + bullets(notes))
    if assessment.proposals and design.rolloff is None:
        blocks.append(
            heading("To take the first proposal, add to the design file") + rolloff_toml(assessment.proposals[0])
        )
    return "\n".join(blocks)


def _unmeasured(design: Design) -> tuple[str, ...]:
    """Why the band edge is not the crossover around a measured plant."""
    if design.plant is None:
        return ()
    from realize.loop_design import unmeasured_crossover

    reason = unmeasured_crossover(design, design.transfer)
    return (f"the band edge is assumed: {reason}",) if reason else ()


def compare_text(comparison: Comparison) -> str:
    """The screen of `realize compare`."""
    blocks = [_comparison_verdict(comparison), setting_text(comparison), _methods_table(comparison.methods)]
    blocks += [_loops_table(comparison)] if comparison.design.plant else []
    refused = [m for m in comparison.methods if m.refused]
    if refused:
        blocks.append(heading("Refused") + bullets(f"{m.method}: {m.refused}" for m in refused))
    if comparison.closest and comparison.closest.refused is None:
        blocks.append(_checks_block(comparison.closest, comparison.design))
    if comparison.design.method == "auto" and comparison.recommended:
        blocks.append(pin_text(comparison.recommended))
    return "\n".join(blocks)


def pin_text(method: str) -> str:
    """The lines that keep a method that was recommended."""
    return heading("To pin the method, under [method]") + f'name = "{method}"\n'


def emit_text(comparison: Comparison, chosen: MethodResult, paths: Sequence[str]) -> str:
    """The screen of `realize emit`."""
    design = comparison.design
    assert chosen.realization is not None
    kept = "but for what is agreed" if chosen.accepted else "every check passed"
    reason = comparison.because if design.method == "auto" else f"named in the design, {kept}"
    first = f"yes: {design.name} is emitted by {chosen.method}: {reason}"
    what = (
        f"{chosen.realization.structure} structure in {design.target.arithmetic}, "
        f"{counted(len(chosen.realization.integral), 'integral state')}, "
        f"{counted(len(chosen.realization.sections), 'section')}"
    )
    blocks = [wrapped(first + _accepted_words(chosen)), setting_text(comparison), _checks_block(chosen, design)]
    blocks.append(heading(f"Written ({what})") + "".join(f"  {path}\n" for path in paths))
    blocks += [pin_text(chosen.method)] if design.method == "auto" else []
    return "\n".join([*blocks, wrapped(CAUTION)])


def _accepted_words(result: MethodResult) -> str:
    """For the first line: what is out but agreed to."""
    if not result.accepted:
        return ""
    names = dict.fromkeys(check.check for check, _ in result.accepted)
    return f"; with {counted(len(names), 'accepted deviation')}: {', '.join(names)}"


def _verdict(design: Design, assessment: Assessment) -> str:
    if assessment.realizable:
        return wrapped(
            f"yes: {design.name} is realizable: at least as many poles as zeros. "
            "Next: `realize compare` shows what each method makes of it."
        )
    if design.rolloff is not None:
        return wrapped(
            f"yes: {design.name} is realizable with the roll-off that it asks for; as it is written it is not: "
            f"{assessment.terms[0].text}. Next: `realize compare`."
        )
    best = assessment.proposals[0]
    lost = "" if best.phase_lost_deg is None else f" and costs {best.phase_lost_deg:.3g} deg at the band edge"
    fits = "" if best.within_window else " It lies outside its window: see below."
    return wrapped(
        f"no: {design.name} is not realizable: {assessment.terms[0].text}. Add a roll-off pole: the first proposal "
        f"below is at {_hz(float(best.pole_rad_s))}{lost}.{fits}"
    )


def _transfer_block(design: Design, assessment: Assessment) -> str:
    reduced = format_transfer(assessment.transfer.numerator, assessment.transfer.denominator)
    lines = [design.transfer_text]
    if len(reduced) <= _LONGEST_TRANSFER and reduced != design.transfer_text:
        lines.append(f"= {reduced}")
    lines.append(f"relative degree {assessment.transfer.relative_degree}")
    return heading("Transfer function") + "".join(wrapped(line, indent="  ") for line in lines)


def _roots_block(title: str, roots: Sequence[Root]) -> str:
    if not roots:
        return heading(title) + "  none\n"
    head = ["natural frequency", "damping ratio", "falls to 1 % in", "s in rad/s", ""]
    rows = [_root_row(root) for root in roots]
    return heading(title) + table([head, *rows])


def _root_row(root: Root) -> list[str]:
    frequency, damping = natural_frequency_and_damping(root.value)
    decay = -root.value.real
    time = format_engineering(_DECAYED / decay, "s") if decay > 0 else "never" if decay == 0 else "grows"
    shown = "-" if damping is None else f"{damping:.5g}"
    times = _MULTIPLE.get(root.multiplicity, f"{root.multiplicity}-fold")
    return [_in_hz(frequency), shown, time, _complex_text(root.value), times]


def _proposals_block(proposals: Sequence[Proposal]) -> str:
    head = ["placement", "order", "damping", "pole", "phase", "gain above", "converter", "window", "fits"]
    unit = ["", "", "", "rad/s", "lost", "band", "step", "rad/s", ""]
    rows = [
        [
            p.placement,
            str(p.order),
            f"{float(p.damping):.4g}",
            f"{float(p.pole_rad_s):.5g}",
            _optional(p.phase_lost_deg, " deg"),
            _optional(p.high_frequency_gain, ""),
            _optional(p.converter_step_percent, " %"),
            _window(p.window_rad_s),
            "yes" if p.within_window else "no",
        ]
        for p in proposals
    ]
    reasons = [f"{p.placement}, order {p.order}: {reason}" for p in proposals[:1] for reason in p.reasons]
    return heading("Roll-off proposals, best first") + table([head, unit, *rows]) + bullets(reasons)


def _margins_list(assessment: Assessment) -> str:
    """What each proposal leaves of the phase margin."""
    lines = (
        f"{_shape(p)}: phase margin of the loop {before:.3g} deg before, "
        + ("none" if after is None else f"{after:.3g} deg")
        + " after"
        for p, (before, after) in zip(assessment.proposals, assessment.phase_margins_deg, strict=False)
    )
    return bullets(lines)


def _shape(p: Proposal) -> str:
    damping = "" if p.damping == 1 else f", damping {float(p.damping):.4g}"
    return f"{p.placement}, order {p.order}{damping}"


def _window(window: tuple[float, float | None] | None) -> str:
    if window is None:
        return "empty"
    low, high = window
    return f"from {low:.5g}" if high is None else f"{low:.5g} to {high:.5g}"


def _comparison_verdict(comparison: Comparison) -> str:
    chosen, name = comparison.chosen, comparison.design.name
    if chosen is None:
        return wrapped(f"no: nothing can be emitted for {name}: {comparison.because}.")
    if chosen.refused:
        return wrapped(f"no: {chosen.method} does not apply to {name}: {chosen.refused}.")
    if comparison.design.method == "auto":
        agreed = _accepted_words(chosen)
        return wrapped(f"yes: {chosen.method} is recommended for {name}: {comparison.because}{agreed}.")
    if chosen.acceptable:
        agreed = _accepted_words(chosen)
        return wrapped(f"yes: {chosen.method}, which the design names, is within every tolerance{agreed}.")
    names = ", ".join(dict.fromkeys(check.check for check in chosen.blocking))
    also = f" Recommended instead: {comparison.recommended}." if comparison.recommended else ""
    return wrapped(f"no: {chosen.method}, which the design names, is out of tolerance on {names}.{also}")


def setting_text(comparison: Comparison) -> str:
    """Rate, band and roll-off: what every figure below rests on."""
    period = float(comparison.period_s)
    lines = [f"rate {format_engineering(1 / period, 'Hz')}, period {format_engineering(period, 's')}"]
    lines += [*nominal_note(comparison.design), comparison.band_rests_on]
    causal = comparison.causal
    if causal.proposal is not None:
        origin = "assumed, since the design has no [rolloff]" if causal.assumed else "as the design asks"
        p = causal.proposal
        lines.append(
            f"roll-off ({origin}): {p.placement}, order {p.order}, pole at {_hz(float(p.pole_rad_s))}"
            + ("" if p.phase_lost_deg is None else f", {p.phase_lost_deg:.3g} deg lost at the band edge")
        )
        lines += [causal.note] if causal.note else []
        if not p.within_window:
            outside = f"lies outside its window, {_window(p.window_rad_s)} rad/s" if p.window_rad_s else "has no window"
            lines.append(f"the roll-off pole {outside}: {p.reasons[0]}")
    return "".join(wrapped(line, indent="  ") for line in lines)


def _methods_table(methods: Sequence[MethodResult]) -> str:
    columns = _columns(methods)
    head = [["", "method", *(words[i] for _, words in columns)] for i in range(3)]
    head[1][:2] = head[2][:2] = ["", ""]
    rows = [[_good(m), m.method, *(_cell(m, name) for name, _ in columns)] for m in methods]
    lines = figures_table(head, [_tolerance_row(methods), *rows], first=2)
    key = (
        "Each figure is the difference between the stored numbers and the design; ! is out of tolerance, "
        "* out but accepted, - undefined (which does not block)."
    )
    return lines + wrapped(key) + bullets(_out_without_column(methods))


def _columns(methods: Sequence[MethodResult]) -> tuple[tuple[str, tuple[str, str, str]], ...]:
    """Checks with a column: those of integer arithmetic where there is any."""
    made = {check.check for method in methods for check in method.checks}
    return tuple(column for column in _COLUMNS if column[0] in made or column[0] != "round-off")


def _loops_table(comparison: Comparison) -> str:
    """What is left in the loop of every method, each figure that of the worst case of the plant."""
    loops = [m.loop for m in comparison.methods if m.loop]
    if not loops:
        return heading("In the loop") + "  no method has one\n"
    head = [["", "", *(words[i] for words in _LOOP_COLUMNS)] for i in range(3)]
    head[0][1] = "method"
    least, most = _loop_limits(comparison.design)
    limits = [
        "",
        "(tolerance)",
        "yes",
        f">={least:.3g}",
        f"<={most[0]:.3g}",
        f"<={most[1]:.3g}",
        "-",
        f"<={most[2]:.3g}",
    ]
    before = ["", "(continuous)", *_loop_figures(loops[0], "continuous", "-", "-")]
    rows = [[_good(m), m.method, *_loop_cells(m, least)] for m in comparison.methods]
    cases = len(loops[0].entries)
    title = f"In the loop, each figure the worst over the plant's {cases} cases" if cases > 1 else "In the loop"
    key = (
        "(continuous) is the loop without hold and compute delay, those of the methods are sampled with everything "
        "in them; lost and gained are against the continuous loop with hold and compute delay."
    )
    return heading(title) + figures_table(head, [limits, before, *rows], first=2) + wrapped(key)


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
        _decimals(_worst_of(margin, min), 1),
        lost,
        _decimals(_worst_of(sensitivity, max), 2),
        _decimals(_worst_of(overshoot, max), 1),
        gained,
    ]


def _worst_of(figures: Sequence[float | None], worst: Callable[[list[float]], float]) -> float | None:
    known = [figure for figure in figures if figure is not None]
    return worst(known) if known else None


def _decimals(value: float | None, count: int) -> str:
    """So many decimals, which stand below each other in a column; few digits where it is large."""
    if value is None or abs(value) >= _MOST_WITH_DECIMALS:
        return figure_text(value)
    # Adding 0 turns a rounded -0 into 0.
    return f"{round(value, count) + 0.0:.{count}f}"


def _loop_cells(method: MethodResult, least_deg: float) -> list[str]:
    """The figures of one method; a mark stands behind the one that is out."""
    if method.loop is None:
        return ["-"] * len(_LOOP_COLUMNS)
    checks = {check.check: check for check in method.loop.checks}
    marks = {name: _mark(method, check) for name, check in checks.items()}
    margin, overshoot = checks["loop phase margin"], checks["loop overshoot"]
    if marks["loop stability"]:
        return [f"no{marks['loop stability']}", *["-"] * (len(_LOOP_COLUMNS) - 1)]
    cells = _loop_figures(method.loop, "discrete", _decimals(_lost(margin), 2), _decimals(overshoot.difference, 2))
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


def _out_without_column(methods: Sequence[MethodResult]) -> list[str]:
    """What is out but has no column, methods with the same reason together."""
    names: dict[str, list[str]] = {}
    for method in methods:
        for check in method.blocking:
            if check.check in _UNSHOWN:
                names.setdefault(f"out on {check.check}: {check.reason}", []).append(method.method)
    return [f"{', '.join(who)}: {what}" for what, who in names.items()]


def _good(method: MethodResult) -> str:
    return "yes" if method.acceptable else "no"


def _tolerance_row(methods: Sequence[MethodResult]) -> list[str]:
    tolerances = {c.check: c.tolerance for m in methods for c in m.stored_checks if c.tolerance is not None}
    return ["", "(tolerance)", *(figure_text(tolerances.get(name)) for name, _ in _columns(methods))]


def _cell(method: MethodResult, name: str) -> str:
    check = next((c for c in method.stored_checks if c.check == name), None)
    if check is None or check.difference is None:
        return "-"
    return figure_text(check.difference, 2) + _mark(method, check)


def _mark(method: MethodResult, check: Check) -> str:
    accepted = any(c is check for c, _ in method.accepted)
    return AGREED if accepted else OUT if check.verdict == "out" else ""


def _checks_block(result: MethodResult, design: Design) -> str:
    """One row a check: what the method did, and what rounding the stored numbers made of it."""
    head = [
        ["check", "in", "design", "stored", "difference", "", "tolerance", "verdict"],
        ["", "", "", "", "by method", "as stored", "", ""],
    ]
    exact = {check.check: check for check in result.checks if check.of == "exact"}
    agreed = {check.check for check, _ in result.accepted}
    shown = [(check, exact.get(check.check, check)) for check in result.stored_checks]
    for digits in _DIGITS:
        rows = table([*head, *(_check_row(*pair, agreed, design, digits) for pair in shown)])
        if max(map(len, rows.splitlines())) <= WIDTH:
            break
    reasons = [f"{c.check}: {c.reason}" for c in result.stored_checks if c.reason and _wants_words(c)]
    block = heading(f"Checks of {result.method}") + rows + bullets(reasons)
    accepted = [f"{agreed_text(c, a.limit)}: {a.because} ({a.by})" for c, a in result.accepted]
    block += ("\n" + heading("Accepted deviations") + bullets(accepted)) if accepted else ""
    block += _loop_block(result.loop) if result.loop else ""
    return block + (heading("Notes") + bullets(result.notes) if result.notes else "")


def _loop_block(loop: LoopResult) -> str:
    """The loops before and after, and where the phase at the crossover went."""
    head = [
        ["loop", "stable", "phase", "gain", "gain cut", "delay", "crossover", "maximum", "step"],
        ["", "", "margin", "margin", "margin", "margin", "", "sensitivity", "overshoot"],
    ]
    kinds = ("continuous", "discrete")
    lines = table([*head, *(_loop_row(kind, entry[kind]) for entry in loop.entries for kind in kinds)]).splitlines()
    block = "\n" + "\n".join(lines[: len(head)]) + "\n"
    for i, entry in enumerate(loop.entries):
        first = len(head) + len(kinds) * i
        title = [f"  case {entry['case']}:"] if entry["case"] else []
        block += "\n".join([*title, *lines[first : first + len(kinds)]]) + "\n"
    if loop.ledger is not None:
        left = loop.entries[0]["discrete"]["phase_margin_deg"]
        items = [*loop.ledger.items, ("in all", loop.ledger.total_deg)]
        items += [("phase margin left", left)] if left is not None else []
        block += "\n" + heading(
            f"Phase at the crossover, {_hz(loop.ledger.w_rad_s)}, against controller and plant alone"
        )
        # Adding 0 turns a rounded -0 into 0.
        block += table([[name, f"{round(value, 2) + 0.0:.2f} deg"] for name, value in items])
    if loop.jitter is not None:
        margin = format_engineering(loop.jitter.jitter_s, "s")
        block += wrapped(f"jitter margin {margin}: delay may vary by so much (sufficient, not necessary)", indent="  ")
    return block


def _loop_row(kind: str, figures: Mapping[str, Any]) -> list[str]:
    stable, crossover, delay = figures["stable"], figures["crossover_rad_s"], figures["delay_margin_s"]
    return [
        kind,
        "-" if stable is None else "yes" if stable else "no",
        _with_unit(figures["phase_margin_deg"], " deg"),
        _with_unit(figures["gain_margin_db"], " dB"),
        _with_unit(figures["gain_reduction_margin_db"], " dB"),
        "-" if delay is None else format_engineering(delay, "s"),
        "-" if crossover is None else _in_hz(crossover),
        _with_unit(figures["maximum_sensitivity"], ""),
        _with_unit(figures["step_overshoot_percent"], " %"),
    ]


def _with_unit(value: float | None, unit: str) -> str:
    return "-" if value is None else f"{value:.3g}{unit}"


def _wants_words(check: Check) -> bool:
    """Whether a figure alone would puzzle: not within, or two values that differ by nothing."""
    differ = _value_text(check.reference) != _value_text(check.obtained)
    return check.verdict != "within" or (check.difference == 0 and differ)


def _check_row(stored: Check, exact: Check, agreed: Set[str], design: Design, digits: int) -> list[str]:
    verdict = "accepted" if stored.verdict == "out" and stored.check in agreed else stored.verdict
    return [
        stored.check,
        _value_unit(stored, design),
        _value_text(stored.reference, digits),
        _value_text(stored.obtained, digits),
        "-" if stored.check in OF_ARITHMETIC else figure_text(exact.difference),
        figure_text(stored.difference),
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
    if check.check == "loop sensitivity":
        return f"at most {_loop_limits(design)[1][1]:.3g}"
    if check.check == "loop phase margin" and check.tolerance < _loop_limits(design)[1][0]:
        return f"at least {_loop_limits(design)[0]:.3g} deg"
    tolerance = figure_text(check.tolerance)
    if check.check in _IN_POINTS:
        return f"{tolerance} point{'' if tolerance == '1' else 's'}"
    return f"{tolerance} {check.unit}".strip()


def figure_text(value: float | None, digits: int = 3) -> str:
    """A difference or tolerance: two or three digits tell how close it came."""
    if value is not None and value > _MOST_SHOWN:
        return f">{_MOST_SHOWN:g}"
    return "-" if value is None else f"{value:.{digits}g}"


def _value_text(value: float | complex | str | None, digits: int = 5) -> str:
    if isinstance(value, complex):
        return _complex_text(value, digits)
    return value if isinstance(value, str) else _optional(value, "")


def _complex_text(z: complex, digits: int = 5) -> str:
    if z.imag == 0:
        return f"{z.real:.5g}"
    # A real part below the last of five digits of the whole is not shown.
    imaginary = _short(abs(z.imag), digits)
    return f"{_short(z.real, digits - 1)}+-{imaginary}j" if abs(z.real) > 5e-6 * abs(z) else f"+-{imaginary}j"


def _short(value: float, digits: int) -> str:
    """So many digits, and no more characters than they take."""
    text = f"{value:.{digits}g}"
    if "e" in text and 1 <= abs(value) < _WHOLE:
        return f"{value:.0f}"
    return _EXPONENT.sub(r"e\1", text)


def _optional(value: float | None, unit: str) -> str:
    return "-" if value is None else f"{value:.5g}{unit}"


def _hz(rad_s: float) -> str:
    return f"{_in_hz(rad_s)} ({rad_s:.5g} rad/s)"


def _in_hz(rad_s: float) -> str:
    return format_engineering(rad_s / (2 * pi), "Hz")


def counted(n: int, noun: str) -> str:
    """A number of things."""
    return f"{n or 'no'} {noun}{'' if n == 1 else 's'}"
