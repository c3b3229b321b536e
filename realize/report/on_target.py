"""The answer of `realize trial`, for people and for scripts."""

from __future__ import annotations

from collections.abc import Sequence
from fractions import Fraction

from realize.algebra.expression import exact_text
from realize.quantity import format_engineering
from realize.report.documents import SCHEMA, Document
from realize.report.paragraphs import bullets, heading, table, wrapped
from realize.trial.outcome import Attempt, Difference, Trial, least_median_most

#: What heads the table, two lines a column; and the column that is there with a clock only.
_HEAD = (
    ("", ""),
    ("same", "bits"),
    ("code", "bytes"),
    ("const.", "bytes"),
    ("state", "bytes"),
    ("stack", "bytes"),
    ("runtime", "bytes"),
    ("instr.", "least"),
    ("per", "median"),
    ("sample", "most"),
    ("at rate", "M/s"),
)
_WITH_CLOCK = (("share", "%"),)

#: What cannot be had there; a column of nothing else is left out.
_UNKNOWN = "-"

_KEY = (
    "Instructions retired from call to return over the vectors: instructions, not cycles. Bytes of code are those of "
    "every function, whether called or not; the runtime is what the compiler's library adds for all of the firmware "
    "(floating point, long products); the stack is measured below the caller's."
)


#: What the key adds where coefficients are looked up.
_LOOKUP = (
    " Instructions of a sample are those of {name}_at and {name}_update: the lookup before every sample, which is more "
    "often than it need be."
)


def trial_text(found: Trial, clock_hz: Fraction | None) -> str:
    """The screen of `realize trial`."""
    emitted = found.emitted
    rate = 1 / emitted.period_s
    samples = f"{len(emitted.vectors.inputs)} samples of {emitted.code.name}_vectors.csv"
    differing = [attempt for attempt in found.attempts if attempt.difference is not None]
    if differing:
        verdict = f"no: {emitted.code.name}: {_listed(differing)} does not answer the {samples} bit for bit."
    else:
        verdict = f"yes: {emitted.code.name}: the compiled code answers the {samples} bit for bit."
    counted = any(attempt.run.instructions for attempt in found.attempts)
    lookup = _LOOKUP.format(name=emitted.code.name) if emitted.code.scheduled else ""
    key = wrapped(_key(rate, clock_hz) + lookup, indent="  ") if counted else ""
    blocks = [wrapped(verdict), _table(found.attempts, rate, clock_hz) + key]
    if differing:
        blocks.append(heading("First difference") + bullets(map(_difference_text, differing)))
    if emitted.changed:
        blocks.append(heading("Notes") + bullets(_changed_text(name) for name in emitted.changed))
    return "\n".join(blocks)


def _listed(attempts: Sequence[Attempt]) -> str:
    return " and ".join(_label(attempt) for attempt in attempts)


def _label(attempt: Attempt) -> str:
    return attempt.target if attempt.level is None else f"{attempt.target} -{attempt.level}"


def _table(attempts: Sequence[Attempt], rate: Fraction, clock_hz: Fraction | None) -> str:
    columns = (*_HEAD, *_WITH_CLOCK) if clock_hz else _HEAD
    head = [[words[i] for words in columns] for i in range(2)]
    rows = [*head, *(_cells(attempt, rate, clock_hz) for attempt in attempts)]
    known = [i for i, cells in enumerate(zip(*rows, strict=True)) if set(cells[len(head) :]) != {_UNKNOWN}]
    return table([[row[i] for i in known] for row in rows], right_from=2)


def _cells(attempt: Attempt, rate: Fraction, clock_hz: Fraction | None) -> list[str]:
    run = attempt.run
    sizes = run.sizes
    code = [sizes.code, sizes.constants] if sizes else [None, None]
    figures = [*code, run.state_bytes, run.stack_bytes, sizes.runtime if sizes else None]
    counts = least_median_most(run.instructions) if run.instructions else (None, None, None)
    cells = [_label(attempt), "no" if attempt.difference else "yes"]
    cells += [_UNKNOWN if value is None else str(value) for value in (*figures, *counts)]
    per_second = _per_second(attempt, rate)
    cells.append(_UNKNOWN if per_second is None else f"{float(per_second) / 1e6:.4g}")
    if clock_hz:
        cells.append(_UNKNOWN if per_second is None else f"{float(100 * per_second / clock_hz):.3g}")
    return cells


def _per_second(attempt: Attempt, rate: Fraction) -> Fraction | None:
    """Instructions per second at the rate, where every sample takes the most."""
    return max(attempt.run.instructions) * rate if attempt.run.instructions else None


def _key(rate: Fraction, clock_hz: Fraction | None) -> str:
    at_rate = f" At the rate of {format_engineering(rate, 'Hz')}, in millions a second, every sample counts as the most"
    clock = f"; beside a clock of {format_engineering(clock_hz, 'Hz')}." if clock_hz else "."
    return _KEY + at_rate + clock


def _difference_text(attempt: Attempt) -> str:
    difference = attempt.difference
    assert difference is not None
    return (
        f"{_label(attempt)}: sample {difference.sample}, counted from 0, input {_shown(difference.given)}: expected "
        f"{_shown(difference.expected)}, got {_shown(difference.got)}"
    )


def _shown(text: str) -> str:
    """A value as the vectors write it, and a C hexadecimal float in decimals too."""
    return f"{text} ({float.fromhex(text):.9g})" if "0x" in text else text


def _changed_text(name: str) -> str:
    return f"{name} is not what the record describes: it has changed since it was written"


def trial_document(found: Trial, clock_hz: Fraction | None) -> Document:
    """The answer of `realize trial`."""
    emitted = found.emitted
    rate = 1 / emitted.period_s
    return {
        "schema": SCHEMA,
        "command": "trial",
        "design": {"name": emitted.code.name, "transfer": emitted.transfer_text},
        "period_s": exact_text(emitted.period_s),
        "clock_hz": None if clock_hz is None else float(clock_hz),
        "samples": len(emitted.vectors.inputs),
        "equal": found.equal,
        "changed_files": list(emitted.changed),
        "trials": [_attempt_document(attempt, rate, clock_hz) for attempt in found.attempts],
    }


def _attempt_document(attempt: Attempt, rate: Fraction, clock_hz: Fraction | None) -> Document:
    run, per_second = attempt.run, _per_second(attempt, rate)
    counts = least_median_most(run.instructions) if run.instructions else None
    return {
        "cpu": attempt.target,
        "optimization": attempt.level,
        "equal": attempt.difference is None,
        "first_difference": _difference_document(attempt.difference),
        "code_bytes": run.sizes.code if run.sizes else None,
        "constant_bytes": run.sizes.constants if run.sizes else None,
        "state_bytes": run.state_bytes,
        "stack_bytes": run.stack_bytes,
        "runtime_bytes": run.sizes.runtime if run.sizes else None,
        "instructions_per_sample": dict(zip(("least", "median", "most"), counts, strict=True)) if counts else None,
        "instructions_per_second": None if per_second is None else float(per_second),
        "share_of_clock": None if per_second is None or clock_hz is None else float(per_second / clock_hz),
    }


def _difference_document(difference: Difference | None) -> Document | None:
    """Values as the vectors write them."""
    if difference is None:
        return None
    return {
        "sample": difference.sample,
        "input": difference.given,
        "expected": difference.expected,
        "got": difference.got,
    }
