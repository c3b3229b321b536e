"""Bad cases for integers, through the command line: each ends well, with a reason and a way out, or with honest code.

All data invented.
"""

from __future__ import annotations

import re
import shutil
import tomllib
from pathlib import Path
from typing import NamedTuple

import pytest

from realize.cli import main

WIDEST = 100

PORT = 'range = [-8.0, 8.0]\nper_count = "0.0005"\n'
BILINEAR = '[method]\nname = "bilinear"\n'
MEANT = '[[accept]]\ncheck = "stability"\nbecause = "the loop around it is stable"\nby = "tester"\n'

#: A corner of 1 Hz, of second order.
CORNER = "1/(s^2/(2*pi)^2 + 1.4*s/(2*pi) + 1)"


def design(
    transfer: str,
    rate: str = "2 kHz",
    *,
    incoming: str | None = PORT,
    outgoing: str | None = PORT,
    arithmetic: str = "int16",
    structure: str = "auto",
    more: str = "",
) -> str:
    text = f'[design]\nname = "bad"\ntransfer = "{transfer}"\n[sampling]\nrate = "{rate}"\n'
    text += f"[signals.input]\n{incoming}" if incoming is not None else ""
    text += f"[signals.output]\n{outgoing}" if outgoing is not None else ""
    return f'{text}[target]\narithmetic = "{arithmetic}"\nstructure = "{structure}"\n{more}'


class Answer(NamedTuple):
    status: int
    out: str
    err: str
    where: Path

    @property
    def said(self) -> str:
        """Without line breaks."""
        return re.sub(r"\s+", " ", self.err)

    def text(self, suffix: str) -> str:
        """Of an emitted file; comments without their line breaks."""
        return re.sub(r"\n \*? *|\s+", " ", (self.where / f"bad{suffix}").read_text())


class Emit:
    """`realize emit`, in a directory of the test's own."""

    def __init__(self, place: Path, capsys: pytest.CaptureFixture[str]) -> None:
        self.place, self.capsys = place, capsys

    def __call__(self, text: str) -> Answer:
        path, where = self.place / "bad.toml", self.place / "out"
        path.write_text(text)
        shutil.rmtree(where, ignore_errors=True)
        status: object = 0
        try:
            main(["emit", str(path), "--out", str(where)])
        except SystemExit as left:
            status = left.code
        assert isinstance(status, int)
        answer = Answer(status, *self.capsys.readouterr(), where)
        assert where.exists() == (answer.status == 0), "files are written if the answer is yes, else none"
        return answer


@pytest.fixture
def emit(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Emit:
    return Emit(tmp_path, capsys)


# ---------------------------------------------------------------- refused


def input_of(low: str, high: str, per_count: str, kind: str = "int16") -> str:
    return f'range = [{low}, {high}]\nper_count = "{per_count}"\ntype = "{kind}"\n'


VANISHED = (
    "[target] arithmetic: section 1 has a pole that does not decay once it is rounded to 16 bits: 1 + a1 + a2 = "
    "3.95e-09 becomes 0 or less with 14 fraction bits, and needs 28 (34 for 1 %)",
    "section1_b1 = 1.97e-09 becomes 0 with 15 fraction bits, and needs 29 (35 for 1 %)",
    'try: structure = "delta", arithmetic = "int32", or a lower sample rate',
)
NO_BOUND = "[target] arithmetic: section 1 has a pole that does not decay: no bound"

REFUSED = {
    **{
        f"1 Hz at 100 kHz, {name}": (design(CORNER, "100 kHz", structure=name), VANISHED)
        for name in ("direct", "cascade", "error-feedback", "parallel")
    },
    "1 Hz at 100 kHz, normal": (
        design(CORNER, "100 kHz", structure="normal"),
        (
            "rounding errors in section1_next1 add up to as much as",
            "words of 17 bits",
            'structure = "delta", arithmetic = "int32"',
        ),
    ),
    "1 Hz at 100 kHz, first order": (
        design("1/(s/(2*pi) + 1)", "100 kHz", structure="cascade"),
        (
            "pole shift differs by 2.8566 % (tolerance 2 %)",
            "1 + a1 = 6.28e-05 of section 1 is stored as 6.1e-05 with 15 fraction bits, and needs 20 for 1 %",
            'rounding is at fault, not the method: structure = "delta" (or "auto"), arithmetic = "int32" or "float32"',
        ),
    ),
    "structure that does not suit": (
        design("1/(s + 1)", structure="normal"),
        ("[target] structure: normal, without a pair of complex poles", 'structure = "cascade", or "auto"'),
    ),
    "gain far beyond a count": (
        design("1e6*(s + 5)/(s + 50)"),
        ("converter step differs by", "a finer per_count of [signals.input], a wider range of [signals.output]"),
    ),
    "gain below a count": (
        design("1e-9/(s + 1)", more=BILINEAR),
        (
            # 1e-9 of 16000 counts, but for what rounding does to the gain
            "[signals.output] per_count: the whole input range moves the output by at most 1.",
            "e-05 counts, so that it would stay at zero try: check the gain, or write a per_count of less than 1.",
        ),
    ),
    "one-sided input with an integral": (
        design("1 + 1/s", incoming=input_of("0", "8.0", "0.0005")),
        ("[signals.input] range: no negative value", "try: write range = [-8.0, 8.0], with your own ends"),
    ),
    "input one-sided the other way": (
        design("1 + 1/s", incoming=input_of("-8", "0", "0.0005")),
        ("[signals.input] range: no positive value", "would end at a limit"),
    ),
    "input of 20 bits": (
        design("1/(s + 1)", incoming=input_of("-8", "8", "1/32768", "int32")),
        (
            "[signals.input] range: counts from -262144 to 262144 from physical zero, which takes 20 bits",
            'try: arithmetic = "int32", or a coarser per_count',
        ),
    ),
    "unsigned input whose zero is at its end": (
        design("1/(s + 1)", incoming=input_of("0", "6", "1/10000", "uint16")),
        ("takes 17 bits", 'arithmetic = "int32", physical zero (offset) in the middle of the range, or a coarser'),
    ),
    "integral that vanishes": (
        design("1e-12/s", "100 kHz"),
        (
            "[target] arithmetic: R1, the gain of an integral state, 1e-17, becomes 0: its word of 64 bits has 48",
            "it needs 57",
            "a lower sample rate, a coarser per_count of the input, a narrower range of the output, or float32",
        ),
    ),
    "integral that all but vanishes": (
        design("1e-9/s", "100 kHz", more=BILINEAR),
        (
            "low-frequency gain differs by 6.58",
            "rounding is at fault, not the method: a lower sample rate, a coarser per_count of [signals.input]",
        ),
    ),
    "double integrator": (
        design("(s + 1)*(s + 2)/s^2", "100 Hz"),
        ("the design itself grows: a repeated pole at s = 0", "where the growing mode is meant, [[accept]] with check"),
    ),
    "undamped pair, named method": (
        design("s/(s^2 + 10000)", more=BILINEAR),
        (f"bilinear does not apply: {NO_BOUND}", 'arithmetic = "float32", or a transfer function whose poles decay'),
    ),
    "undamped pair": (
        design("s/(s^2 + 10000)", arithmetic="int32"),
        (
            f"7 of 9 methods do not apply: {NO_BOUND}",
            'try: arithmetic = "float32", or a transfer function whose poles decay: give a pair that rings some',
        ),
    ),
    "growing pole": (design("1/(s - 1)"), (NO_BOUND, 'try: arithmetic = "float32"')),
}


@pytest.mark.parametrize("name", REFUSED)
def test_refused_with_the_reason_and_the_way_out(name: str, emit: Emit) -> None:
    text, parts = REFUSED[name]
    answer = emit(text)
    assert answer.status == 1
    for part in parts:
        assert part in answer.said
    assert max(map(len, answer.err.splitlines())) <= WIDEST


def test_what_an_unsuited_structure_says_does_not_hide_the_reason(emit: Emit) -> None:
    for name in ("one-sided input with an integral", "input of 20 bits", "integral that vanishes"):
        assert "normal, without a pair" not in emit(REFUSED[name][0]).err


@pytest.mark.parametrize("transfer", ["1/(s/(2*pi) + 1)", CORNER])
def test_the_way_out_leads_out(transfer: str, emit: Emit) -> None:
    """Delta, named or found by `auto`, holds the corner that no direct structure does."""
    for structure in ("delta", "auto"):
        answer = emit(design(transfer, "100 kHz", structure=structure))
        assert answer.status == 0
        assert "delta: 1 section in the operator z - 1;" in answer.text(".h")


# ---------------------------------------------------------------- not understood


RANGE, PER_COUNT = "range = [-1.0, 1.0]", 'per_count = "1/1000"'

MISSING = {
    "no input": (None, PORT, {"input": {"range", "per_count"}}),
    "no output": (PORT, None, {"output": {"range", "per_count"}}),
    "neither": (None, None, {"input": {"range", "per_count"}, "output": {"range", "per_count"}}),
    "no per_count of the input": ("range = [-8.0, 8.0]\n", PORT, {"input": {"per_count"}}),
    "no range of the output": (PORT, 'per_count = "1/4000"\n', {"output": {"range"}}),
    "one of each": (
        "range = [-8.0, 8.0]\n",
        'per_count = "1/4000"\n',
        {"input": {"per_count"}, "output": {"range"}},
    ),
}


@pytest.mark.parametrize("name", MISSING)
def test_missing_signals_come_with_the_lines_to_paste(name: str, emit: Emit) -> None:
    incoming, outgoing, lacking = MISSING[name]
    answer = emit(design("1/(s + 1)", incoming=incoming, outgoing=outgoing))
    assert answer.status == 2
    lines = answer.err.partition("\n\n")[2]
    assert {end: set(keys) for end, keys in tomllib.loads(lines)["signals"].items()} == lacking
    assert " and ".join(f"[signals.{end}]" for end in lacking) in answer.err
    assert max(map(len, answer.err.splitlines())) <= WIDEST


def test_the_pasted_lines_are_understood(emit: Emit) -> None:
    answer = emit(design("1/(s/10 + 1)", incoming=None, outgoing=None, more=BILINEAR))
    lines = answer.err.partition("\n\n")[2]
    assert emit(design("1/(s/10 + 1)", incoming=None, outgoing=None, more=BILINEAR + lines)).status == 0


NOT_UNDERSTOOD = {
    "zero gain": (design("0*s/(s + 1)"), ("a transfer function that is zero", "check the values")),
    "input range without zero": (
        design("1/(s + 1)", incoming=input_of("2", "8", "0.0005")),
        ("[signals.input] range: from 2 to 8, without zero", "change range, and offset by as many counts"),
    ),
    "output range without zero": (
        design("1/(s + 1)", outgoing=input_of("-8", "-2", "0.0005")),
        ("[signals.output] range: from -8 to -2, without zero",),
    ),
    "a range of one count": (
        design("1/(s + 1)", incoming=input_of("-8", "8", "10")),
        ("[signals.input] per_count: a count of 10, of which the range from -8 to 8 holds one", "widen the range"),
    ),
    "a range of no count": (
        design("1/(s + 1)", outgoing=input_of("1/10", "1/5", "1").replace("1/10", "0.1").replace("1/5", "0.2")),
        ("[signals.output] per_count", "holds none"),
    ),
    "type too narrow": (
        design("1/(s + 1)", incoming=input_of("-8", "8", "0.0005", "int8")),
        ("[signals.input] type: int8, although the range reaches from count -16000 to 16000", 'write type = "int16"'),
    ),
    "unsigned type without an offset": (
        design("1/(s + 1)", outgoing=input_of("-8", "8", "0.0005", "uint16")),
        ("[signals.output] type: uint16", "counts from 0 to 65535", "offset = 16000 makes the lowest count 0"),
    ),
    "no type wide enough": (
        design("1/(s + 1)", incoming=input_of("-8", "8", "1/100000000000", "int32")),
        ("reaches from count -800000000000 to 800000000000", "a coarser per_count or a narrower range"),
    ),
}


@pytest.mark.parametrize("name", NOT_UNDERSTOOD)
def test_signals_that_cannot_be_are_told(name: str, emit: Emit) -> None:
    text, parts = NOT_UNDERSTOOD[name]
    answer = emit(text)
    assert answer.status == 2
    for part in parts:
        assert part in answer.said
    assert max(map(len, answer.err.splitlines())) <= WIDEST


# ---------------------------------------------------------------- emitted, and honest


EMITTED = {
    "coefficients larger than the word": (
        design("1e3*(s + 5)/(s + 50)", outgoing=input_of("-800", "800", "1/1000000", "int32"), more=BILINEAR),
        ("no state and no sum overflows",),
    ),
    "negative gain": (design("-3*(s + 5)/(s + 50)", more=BILINEAR), ("no state and no sum overflows",)),
    "pure gain": (
        design("1.7", more=BILINEAR),
        (
            "no integral states",
            "the smallest constant input that the output ever answers is 1 count",
            "without input, the output comes to rest at zero: there is no limit cycle",
        ),
    ),
    "pure integrator": (
        design("3/s", more=BILINEAR),
        (
            "1 integral state",
            # 3/2000 of a count a sample, and half of that at once: 667 samples for a count, 32000 counts of range
            "one count of input, held, moves it by one count of output within 667 samples, and by the whole output "
            "range within 2133",
            "without input, the output comes to rest: there is no limit cycle",
        ),
    ),
    "double integrator that is meant": (
        design("(s + 1)*(s + 2)/s^2", "100 Hz", more=BILINEAR + MEANT),
        (
            "2 integral states",
            "clamped to -8 to 8: counts -16000 to 16000",
            "those above the first stay within limits of their own",
            "stability, unstable obtained: the loop around it is stable (tester)",
            "no state and no sum overflows",
        ),
    ),
    "pole at z = 0": (
        # bilinear takes a pole at -2 rate to z = 0
        design("1/(s/4000 + 1)", more=BILINEAR + '[tolerance]\nstep_deviation = "5 %"\n'),
        ("without input, the output comes to rest at zero: there is no limit cycle",),
    ),
    "order eight": (
        design(
            "*".join(f"1/(s/{10 * k} + 1)" for k in range(1, 9)),
            "1 kHz",
            arithmetic="int32",
            structure="cascade",
            more=BILINEAR,
        ),
        ("8 sections in direct form I, one after the other", "no state and no sum overflows"),
    ),
    "pole and zero that all but cancel": (
        design("(s + 10.0000001)*(s + 60)/((s + 10)*(s + 50))", "1 kHz", more=BILINEAR),
        ("2 sections", "no state and no sum overflows"),
    ),
    "one-sided output": (
        design("1 + 3/s", "1 kHz", outgoing=input_of("0", "10", "1/1000", "uint16"), more=BILINEAR),
        (
            "clamped to 0 to 10: counts 0 to 10000",
            "the smallest constant positive input that the output ever answers is 1 count; no constant negative input "
            "within the range is answered",
        ),
    ),
}


@pytest.mark.parametrize("name", EMITTED)
def test_what_can_be_done_is_emitted_and_the_header_is_honest(name: str, emit: Emit) -> None:
    text, parts = EMITTED[name]
    answer = emit(text)
    assert answer.status == 0, answer.err
    header = re.sub(" +", " ", answer.text(".h"))
    for part in parts:
        assert part in header
    assert max(map(len, answer.out.splitlines())) <= WIDEST


def test_the_screen_shows_that_a_double_integrator_grows(emit: Emit) -> None:
    out = re.sub(r"\s+", " ", emit(EMITTED["double integrator that is meant"][0]).out)
    assert "the design itself grows: a repeated pole at s = 0" in out
    assert "the loop around it is stable" in out
