"""Emissions written by hand: the least that a trial takes, so that it can be seen to fail."""

from __future__ import annotations

import json
from collections.abc import Sequence
from hashlib import sha256
from pathlib import Path

Number = int | float

HEADER = """#include <stdint.h>
typedef struct {{ {output} last; }} hand_state;
void hand_clear(hand_state *state);
{output} hand_update(hand_state *state, {input} input);
{output} hand_output(hand_state *state, {input} input);
void hand_advance(hand_state *state, {input} input, {output} applied);
int hand_preset(hand_state *state, {input} input, {output} output);
"""

SOURCE = """#include "hand.h"
void hand_clear(hand_state *state) {{ state->last = 0; }}
{before}
{output} hand_update(hand_state *state, {input} input) {{ {update} }}
{output} hand_output(hand_state *state, {input} input) {{ (void)input; return state->last; }}
void hand_advance(hand_state *state, {input} input, {output} applied) {{ (void)input; state->last = applied; }}
int hand_preset(hand_state *state, {input} input, {output} output) {{ (void)input; state->last = output; return 1; }}
"""


def write(
    directory: Path,
    update: str,
    rows: Sequence[tuple[str | Number, str | Number]],
    types: tuple[str, str] = ("int32_t", "int32_t"),
    before: str = "",
) -> str:
    """Files and record of an emission called ``hand``; the path of the record."""
    kinds = {"input": types[0], "output": types[1]}
    files = {
        "hand.h": HEADER.format(**kinds),
        "hand.c": SOURCE.format(update=update, before=before, **kinds),
        "hand_vectors.csv": "input,output\n" + "".join(f"{x},{y}\n" for x, y in rows),
    }
    for name, text in files.items():
        (directory / name).write_text(text, newline="\n")
    record = {
        "schema": "realize/1",
        "design": {"name": "hand", "transfer": "1", "sampling": {"period_s": "1/100"}},
        "causal": {},
        "method": "",
        "structure": "",
        "arithmetic": "",
        "integral": [],
        "sections": [],
        "checks": [],
        "accepted": [],
        "tool": {},
        "files": {name: sha256(text.encode()).hexdigest() for name, text in files.items()},
    }
    path = directory / "hand.record.json"
    path.write_text(json.dumps(record))
    return str(path)
