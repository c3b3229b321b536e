"""Every document is as its schema says, and a schema takes nothing else: a new key needs a line in it.

The tests of each command hold its documents against the schemas, too; here are those that take all kinds of entries.
"""

from __future__ import annotations

import json
from collections.abc import Iterator
from copy import deepcopy
from pathlib import Path
from typing import Any

import pytest

from realize.cli import main
from tests.schemas.validation import complaint, takes, validated

FIXTURES = Path(__file__).parents[2] / "fixtures"

MEASURED = "frequency_hz,magnitude_db,phase_deg\n" + "".join(f"{f},-20,-30\n" for f in (0.001, 0.01, 0.1, 1, 10, 100))

#: A measured plant, back-calculation, long exact numbers, and tolerances.
MEASURED_LOOP = """
[design]
name = "gap"
transfer = "w/(s + w) + k/s"
[design.values]
w = "2*pi*20.598997"
k = "1/3"
[sampling]
rate = "1 kHz"
[method]
name = "bilinear-prewarped"
exact_at = "3 Hz"
[plant]
response = "plant.csv"
[loop]
compute_delay = "250 us"
jitter = "20 us"
[target]
anti_windup = "back-calculation"
tracking_time = "2 s"
[tolerance]
phase_in_band = "4 deg"
loop_sensitivity_most = 3
"""

#: A roll-off by a pair, asked for with a pole; an agreed deviation that is used.
ROLLED_OFF = """
[design]
name = "lead"
transfer = "2 + 0.01*s"
[sampling]
rate = "2 kHz"
band = "20 Hz"
[rolloff]
order = 2
damping = "1/sqrt(2)"
pole = "300 Hz"
[method]
name = "step-invariant"
[tolerance]
phase_in_band = "1 deg"
zero_shift = "0.1 %"
[[accept]]
check = "phase in band"
limit = "3 deg"
because = "a document needs one"
by = "invented"
"""

#: A slow pair whose sections in delta are stored as such.
SLOW_PAIR = """
[design]
name = "pair"
transfer = "4/(s^2 + 2*s + 4)"
[sampling]
rate = "2 kHz"
[method]
name = "bilinear"
[target]
structure = "delta"
"""

#: A pair in counts, for every structure of integers.
IN_COUNTS = """
[design]
name = "notch"
transfer = "(s^2 + 90000)/(s^2 + 150*s + 90000)"
[sampling]
rate = "2 kHz"
[method]
name = "bilinear"
[signals.input]
range = [-20, 20]
per_count = "1/80"
[signals.output]
range = [-20, 20]
per_count = "1/80"
[target]
arithmetic = "int32"
structure = "STRUCTURE"
"""

STRUCTURES = ("direct", "cascade", "error-feedback", "delta", "normal", "parallel")
DESIGNS = {"measured": MEASURED_LOOP, "rolled off": ROLLED_OFF, "slow pair": SLOW_PAIR} | {
    name: IN_COUNTS.replace("STRUCTURE", name) for name in STRUCTURES if name not in ("direct", "cascade")
}


def answer(capsys: pytest.CaptureFixture[str], *arguments: str) -> tuple[int, dict[str, Any]]:
    capsys.readouterr()
    status = 0
    try:
        main([*arguments, "--json"])
    except SystemExit as ended:
        status = int(ended.code or 0)
    return status, validated(json.loads(capsys.readouterr().out))


@pytest.mark.parametrize("name", DESIGNS)
def test_what_is_emitted_of_every_kind_is_as_the_schemas_say(
    name: str, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    (tmp_path / "plant.csv").write_text(MEASURED)
    design = tmp_path / "design.toml"
    design.write_text(DESIGNS[name])
    status, document = answer(capsys, "emit", str(design), "--out", str(tmp_path))
    assert status == 0, document
    record = document["record"]
    assert complaint(record, "record") is None
    kinds = {
        "measured": bool(record["loop"] and record["loop"]["measured"]),
        "rolled off": bool(record["accepted"] and "damping_decimal" in record["causal"]["rolloff"]),
        "slow pair": record["sections"][0].get("operator") == "delta",
        "normal": bool(record["sections"][0].get("coefficients")),
        "parallel": record.get("direct_gain") is not None,
    }
    assert kinds.get(name, True)


ANSWERS = [
    ("assess", "roller_gap_improper.toml"),
    ("assess", "roller_gap.toml"),
    ("compare", "levitation.toml"),
    ("emit", "load_cell_notch.toml"),
    ("emit", "crane_slewing.toml"),
    ("emit", "sieve_resonance.toml"),
]


@pytest.fixture(scope="module")
def documents(tmp_path_factory: pytest.TempPathFactory) -> list[dict[str, Any]]:
    """One document of each kind that fixtures give within a second."""
    out = tmp_path_factory.mktemp("out")
    written = []
    for command, design in ANSWERS:
        lines: list[str] = []
        with pytest.MonkeyPatch.context() as patch:
            patch.setattr("click.echo", lambda text="", lines=lines, **_: lines.append(str(text)))
            arguments = [command, str(FIXTURES / design), "--json"]
            try:
                main(arguments + ["--out", str(out)] * (command == "emit"))
            except SystemExit as ended:
                assert ended.code == 1
        written.append(json.loads("".join(lines)))
    return written


Path_ = tuple[str | int, ...]


def places(node: Any, above: Path_ = ()) -> Iterator[Path_]:
    yield above
    below = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    for key, value in below:
        yield from places(value, (*above, key))


def at(node: Any, place: Path_) -> Any:
    for key in place:
        node = node[key]
    return node


def name_of(document: dict[str, Any]) -> str:
    return "error" if "error" in document else str(document["command"])


def sampled(found: list[Path_]) -> list[Path_]:
    """A few dozen places all over a document: one of each kind of key."""
    kinds = {tuple(key for key in place if isinstance(key, str)): place for place in found}
    return list(kinds.values())


def test_a_key_that_no_schema_knows_is_refused_wherever_it_stands(documents: list[dict[str, Any]]) -> None:
    for document in documents:
        assert complaint(document, name_of(document)) is None
        for place in sampled([place for place in places(document) if isinstance(at(document, place), dict)]):
            copy = deepcopy(document)
            at(copy, place)["not_there"] = None
            assert not takes(copy, name_of(document)), place


def test_a_value_of_another_kind_is_refused_wherever_it_stands(documents: list[dict[str, Any]]) -> None:
    for document in documents:
        for place in sampled([place for place in places(document) if place])[::3]:
            copy = deepcopy(document)
            at(copy, place[:-1])[place[-1]] = [[["x"]]]
            assert not takes(copy, name_of(document)), place


#: Keys that are there in some documents of a kind only.
SOMETIMES = {"loop", "phase_ledger_deg", "phase_ledger_at_rad_s", "jitter_margin_s", "operator", "coefficients"}


def test_a_key_that_is_missing_is_missed(documents: list[dict[str, Any]]) -> None:
    for document in documents:
        for place in sampled([place for place in places(document) if place and isinstance(place[-1], str)])[1::3]:
            key = str(place[-1])
            may_lack = key.endswith(("_decimal", "_before_deg", "_after_deg")) or key in SOMETIMES or "files" in place
            if may_lack or "tolerance" in place[:-1] or "coefficients" in place:
                continue
            copy = deepcopy(document)
            del at(copy, place[:-1])[key]
            assert not takes(copy, name_of(document)), place


def test_an_integer_record_without_its_proofs_and_a_float_record_with_them_are_refused(
    documents: list[dict[str, Any]],
) -> None:
    integers, floats = documents[3]["record"], documents[4]["record"]
    assert complaint(integers, "record") is None
    assert complaint(floats, "record") is None
    assert not takes({key: integers[key] for key in integers if key != "quiet"}, "record")
    assert not takes({**floats, "quiet": integers["quiet"]}, "record")
    assert not takes({**floats, "structure": "normal"}, "record")
