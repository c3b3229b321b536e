"""The answer of `realize emit` on several designs, for people and for scripts."""

from __future__ import annotations

import json
import os.path
from collections.abc import Sequence

from realize.algebra.expression.tokens import printable
from realize.design.tables import MAX_NAME
from realize.errors import RealizeError
from realize.firmware.batch import Result, Summary, shared_names
from realize.firmware.recorded import ENDING
from realize.report.documents import SCHEMA, Document, error_document
from realize.report.paragraphs import AGREED, WIDTH, bullets, heading, table, wrapped
from realize.report.sentences import CAUTION

#: What heads the table: two lines a column.
_HEAD = (
    ("design", ""),
    ("method", ""),
    ("structure", ""),
    ("arith-", "metic"),
    ("worst", "check"),
    ("of its", "tolerance"),
    ("verdict", ""),
)

#: What an exit status means for one design, and what heads those of which it is true.
_VERDICTS = {1: ("refused", "Refused"), 2: ("error", "Errors")}

_NONE = "-"

#: Longest name in the table: that of a design, and what is left of it where all other columns are as wide as can be.
_LONGEST = (MAX_NAME, 17)

_ALONE = "`realize emit` on one of these by itself says what is allowed and what to try."

_KEY = "The worst check is the one whose figure uses the largest share of its tolerance; * is out but accepted."


def several_text(results: Sequence[Result], out: str) -> str:
    """The screen of `realize emit` on several designs."""
    blocks = [wrapped(_first(results, out)), _table(results) + wrapped(_KEY)]
    agreed = [f"{r.name}: {', '.join(r.summary.agreed)}" for r in results if r.summary and r.summary.agreed]
    blocks += [heading("Accepted deviations") + bullets(agreed)] if agreed else []
    colliding = {path for paths in shared_names(results).values() for path in paths}
    for status, (_, title) in _VERDICTS.items():
        failed = [(r.path, r.error) for r in results if r.error and r.error.exit_status == status]
        told = [_error_text(path, error, with_advice=path in colliding) for path, error in failed]
        blocks += [heading(title) + bullets(told)] if told else []
    blocks += [wrapped(_ALONE)] if any(r.error and r.path not in colliding for r in results) else []
    return "\n".join([*blocks, wrapped(CAUTION)] if any(r.written for r in results) else blocks)


def _first(results: Sequence[Result], out: str) -> str:
    """Yes or no, and how many."""
    count, good = len(results), sum(1 for r in results if r.error is None)
    if good == count:
        return f"yes: {'the design is' if count == 1 else f'all {count} designs are'} written to {printable(out)}."
    failed = [r.error.exit_status for r in results if r.error]
    others = [_counted(failed.count(status), *words) for status, words in _VERDICTS.items() if status in failed]
    told = f"{good or 'none'} of {count} designs {'is' if good < 2 else 'are'} written to {printable(out)}"
    return f"no: {told}; {', '.join(others)}."


def _counted(count: int, one: str, several: str) -> str:
    return f"{count} {one if count == 1 else several.lower()}"


def _table(results: Sequence[Result]) -> str:
    """Names are cut short only where there is no room for them."""
    head = [[words[i] for words in _HEAD] for i in range(2)]
    for longest in _LONGEST:
        rows = table([*head, *(_cells(result, longest) for result in results)])
        if max(map(len, rows.splitlines())) <= WIDTH:
            break
    return rows


def _cells(result: Result, longest: int) -> list[str]:
    name = result.name or printable(os.path.basename(result.path))
    return [
        name if len(name) <= longest else name[: longest - 3] + "...",
        *(_emitted_cells(result.summary) if result.summary else [_NONE] * 5),
        _VERDICTS[result.error.exit_status][0] if result.error else "written",
    ]


def _emitted_cells(summary: Summary) -> list[str]:
    check, ratio = summary.worst or (_NONE, None)
    agreed = check in summary.agreed
    share = _NONE if ratio is None else f"{100 * ratio:.3g} %"
    return [summary.method, summary.structure, summary.arithmetic, check, share + (AGREED if agreed else "")]


def _error_text(path: str, error: RealizeError, *, with_advice: bool) -> str:
    """The first line of an error, with the file it is about; the advice where that design by itself has no error."""
    said = f"{error.where}: {error.found.splitlines()[0]}" + (f"; {error.advice}" if with_advice else "")
    return said if error.where.startswith(printable(path)) else f"{printable(path)}: {said}"


def several_document(results: Sequence[Result]) -> Document:
    """The answer of `realize emit` on several designs for scripts: what each alone would be, with its file."""
    return {
        "schema": SCHEMA,
        "command": "emit",
        "results": [{"file": result.path} | _document(result) for result in results],
    }


def _document(result: Result) -> Document:
    if result.summary is None:
        assert result.error is not None
        return error_document("emit", result.error)
    record = next(json.loads(text) for name, text in result.summary.files.items() if name.endswith(ENDING))
    design = {key: record["design"][key] for key in ("name", "transfer")}
    return {
        "schema": SCHEMA,
        "command": "emit",
        "design": design,
        "written": list(result.written),
        "record": record,
    }
