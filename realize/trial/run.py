"""The whole trial of a record: compile for each processor, run, compare."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from concurrent.futures import ThreadPoolExecutor
from pathlib import Path
from tempfile import TemporaryDirectory

from realize.errors import RealizeError
from realize.trial.c_types import same, written
from realize.trial.compile import LEVELS, MEASURED, compile_by, compile_for, place
from realize.trial.emitted import Code, Vectors, read_emitted
from realize.trial.extra import require
from realize.trial.native import run_native
from realize.trial.outcome import Attempt, Difference, Run, Trial
from realize.trial.targets import ALL, HOST, Target, targets_named


def trial(record: str, on: str = HOST, compiler: str | None = None) -> Trial:
    """Compile what a record describes and run it against its vectors.

    Parameters
    ----------
    record : str
        Path of the record; the files lie beside it.
    on : str
        Name of a processor, or ``all``.
    compiler : str, optional
        The user's own command; see :func:`realize.trial.compile.compile_by`.

    Raises
    ------
    RealizeError
        When something is missing, cannot be compiled, or crashes.
    """
    targets = targets_named(on)
    if compiler is not None and on == ALL:
        raise RealizeError(
            "--compiler", f"one command for --on {ALL}", "one processor", "name the one that the command compiles for"
        )
    emitted = read_emitted(record)
    require(*_needed(targets, compiler))
    return Trial(emitted, tuple(attempts(emitted.code, emitted.vectors, targets, compiler)))


def attempts(code: Code, vectors: Vectors, targets: Sequence[Target], compiler: str | None = None) -> Iterator[Attempt]:
    """Run code on processors, in their order; the compilers work ahead."""
    with TemporaryDirectory(prefix="realize-") as directory, ThreadPoolExecutor(os.cpu_count()) as pool:
        builds = [
            (target, level, pool.submit(_built, Path(directory), code, target, level, compiler))
            for target in targets
            for level in _levels(target, compiler)
        ]
        try:
            for target, level, build in builds:
                run = _run(build.result(), code, vectors, target)
                yield Attempt(target.name, level, run, first_difference(code, vectors, run))
        finally:
            for _, _, build in builds:
                build.cancel()


def _needed(targets: Sequence[Target], compiler: str | None) -> list[str]:
    emulated = any(target.name != HOST for target in targets)
    return (["ziglang"] if compiler is None else []) + (["unicorn", "elftools"] if emulated else [])


def _levels(target: Target, compiler: str | None) -> tuple[str | None, ...]:
    if compiler is not None:
        return (None,)
    return tuple(LEVELS) if target.name == HOST else (MEASURED,)


def _built(directory: Path, code: Code, target: Target, level: str | None, compiler: str | None) -> Path:
    """A program, in a directory of its own."""
    where = directory / f"{target.name}-{level or 'own'}"
    where.mkdir()
    sources = place(where, code, on_host=target.name == HOST)
    if compiler is not None:
        return compile_by(compiler, sources)
    assert level is not None
    return compile_for(target, level, sources)


def _run(program: Path, code: Code, vectors: Vectors, target: Target) -> Run:
    if target.name == HOST:
        return run_native(program, code, vectors)
    # Here, because they need packages that not every installation has.
    from realize.trial.emulate import emulate
    from realize.trial.image import read_image

    image = read_image(program, target.architecture, code.entry)
    return emulate(image, target, code, vectors)


def first_difference(code: Code, vectors: Vectors, run: Run) -> Difference | None:
    """The first answer that has not the bits of the vectors; an answer that is missing counts."""
    kind = code.output_type
    for sample, expected in enumerate(vectors.outputs):
        got = run.outputs[sample] if sample < len(run.outputs) else None
        if got is None or not same(kind, expected, got):
            given = written(code.input_type, vectors.inputs[sample])
            return Difference(sample, given, written(kind, expected), "nothing" if got is None else written(kind, got))
    return None
