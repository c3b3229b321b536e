"""Running a program of this machine on a vector, in a process of its own that may crash."""

from __future__ import annotations

import subprocess
from pathlib import Path

from realize.errors import RealizeError
from realize.trial.c_types import packed, size, unpacked
from realize.trial.emitted import Code, Vectors
from realize.trial.outcome import Run

#: Longest wait for the program: a thousand samples take milliseconds.
TIMEOUT_S = 60


def run_native(program: Path, code: Code, vectors: Vectors) -> Run:
    """Feed the vectors to a program with the harness for the host.

    Raises
    ------
    RealizeError
        When it cannot be started, crashes, or does not end.
    """
    inputs, answers = program.with_name("inputs"), program.with_name(f"{program.name}-answers")
    inputs.write_bytes(packed(code.input_type, vectors.given, "="))
    try:
        done = subprocess.run((program, inputs, answers), capture_output=True, timeout=TIMEOUT_S, check=False)
    except OSError as error:
        raise RealizeError(
            "host",
            f"the program cannot be started: {error.strerror or error}",
            "a program of this machine",
            "compile for this machine, or name the processor with --on",
        ) from None
    except subprocess.TimeoutExpired:
        raise _failed(f"no answer within {TIMEOUT_S} s", answers, code) from None
    if done.returncode:
        raise _failed(f"the program crashed (status {done.returncode})", answers, code)
    try:
        return Run(unpacked(code.output_type, answers.read_bytes(), "="), state_bytes=int(done.stdout))
    except (OSError, ValueError):
        raise RealizeError(
            "host", "the program gave no answers", "the program of the sources", "see that the command links {sources}"
        ) from None


def _failed(found: str, answers: Path, code: Code) -> RealizeError:
    done = answers.stat().st_size // size(code.output_type) if answers.exists() else 0
    return RealizeError(
        "host", f"{found}, at sample {done}", "code that returns from every sample", f"debug {code.name}_update there"
    )
