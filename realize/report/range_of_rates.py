"""The answer of `realize rates`, for people and for scripts; apart, because it loads what runs in parallel."""

from __future__ import annotations

from realize.design.schedule import nominal_note
from realize.quantity import format_engineering
from realize.rates import REFUSED, MethodRates, Rates, answer, lowest_text
from realize.report.documents import Document
from realize.report.documents import heading as document_heading
from realize.report.paragraphs import bullets, heading, table, wrapped


def rates_text(found: Rates) -> str:
    """The screen of `realize rates`."""
    able = any(method.lowest_hz is not None for method in found.methods)
    first = wrapped(f"{'yes' if able else 'no'}: {found.design.name}: {answer(found)}.")
    low, high = (format_engineering(rate, "Hz") for rate in (found.rates_hz[0], found.rates_hz[-1]))
    setting = [f"{len(found.rates_hz)} rates from {low} to {high}, on a logarithmic grid", found.rests_on]
    head = ["method", "lowest rate", "what binds there"]
    rows = [[m.method, lowest_text(m), _binding(m)] for m in found.methods]
    setting += [*_own_rate(found), *nominal_note(found.design)]
    blocks = [first, "".join(wrapped(line, indent="  ") for line in setting), table([head, *rows])]
    refused = [f"{m.method}: {(m.binding or '').removeprefix(REFUSED)}" for m in found.methods if _is_refused(m)]
    blocks += [heading("Refused") + bullets(refused)] if refused else []
    return "\n".join([*blocks, heading("Rules of thumb, for comparison") + bullets(found.rules)])


def _own_rate(found: Rates) -> list[str]:
    """Where the design's own rate lies."""
    able = [m for m in found.methods if m.lowest_hz is not None]
    if found.design.period_s is None or not able:
        return []
    own_hz = 1 / found.design.period_s
    chosen = next((m for m in able if m.method == found.design.method), min(able, key=lambda m: m.lowest_hz or 0))
    times = float(own_hz / (chosen.lowest_hz or 1))
    least = "at least " if chosen.binding is None else ""
    own = format_engineering(own_hz, "Hz")
    return [f"the design's own {own} is {least}{times:.3g} times the least for {chosen.method}"]


def _binding(method: MethodRates) -> str:
    if method.lowest_hz is not None:
        below = "refused: see below" if _is_refused(method) else method.binding
        return below or "nothing: it passes over the whole range"
    if _is_refused(method):
        return "refused at the highest rate: see below"
    return f"{method.binding}, still out at the highest rate"


def _is_refused(method: MethodRates) -> bool:
    """Whether it is a refusal that binds: a sentence, too long for a table."""
    return method.binding is not None and method.binding.startswith(REFUSED)


def rates_document(found: Rates) -> Document:
    """The answer of `realize rates`."""
    return document_heading("rates", found.design) | {
        "rates_hz": [float(rate) for rate in found.rates_hz],
        "rests_on": found.rests_on,
        "methods": [_method_rates(method, found) for method in found.methods],
        "answer": answer(found),
        "rules_of_thumb": list(found.rules),
    }


def _method_rates(method: MethodRates, found: Rates) -> Document:
    return {
        "method": method.method,
        "lowest_hz": None if method.lowest_hz is None else float(method.lowest_hz),
        "binding": method.binding,
        "outcomes": [
            {"rate_hz": float(rate), "acceptable": o.acceptable, "out": list(o.out), "refused": o.refused}
            for rate, o in zip(found.rates_hz, method.outcomes, strict=True)
        ],
    }
