"""Compiling the code with its harness, by the compiler that pip installs or by the user's own.

Everything is made in a directory that the caller throws away. Only what every design needs, the compiler's runtime
for a processor, stays in that compiler's own cache: building it takes seconds, once.
"""

from __future__ import annotations

import os
import shlex
import subprocess
import sys
from collections.abc import Mapping, Sequence
from pathlib import Path

from realize.algebra.expression.tokens import printable, shown
from realize.errors import RealizeError
from realize.trial.emitted import Code
from realize.trial.harness import FILE, SCRIPT, harness_text
from realize.trial.targets import HOST, Target

#: Options for each optimisation level. The driver takes -O3 for -O2, so the compiler inside is told directly.
LEVELS: Mapping[str, tuple[str, ...]] = {
    "O0": ("-O0",),
    "O2": ("-O2",),
    "O3": ("-O2", "-Xclang", "-O3"),
    "Os": ("-Os",),
}

#: The level that is measured: what most firmware is built with.
MEASURED = "O2"

#: What a user's command may hold in braces.
PLACEHOLDERS = ("{sources}", "{output}", "{script}")

_EXAMPLE = 'such as --compiler "gcc -O2 {sources} -o {output}"'

#: The compiler's own checks of undefined behaviour, which it adds unasked at O0, are not part of the code; neither is
#: a frame pointer. Contraction stays as the compiler has it, so that what the source says about it is tried too.
_COMMON = ("-std=c99", "-fomit-frame-pointer", "-fno-sanitize=undefined")

#: The host's own library has all the code needs; the processors get the compiler's, and of that only what is called.
_HOST_LINK = ("-rtlib=none",)
_TARGET_LINK = ("-fno-unwind-tables", "-ffunction-sections", "-Wl,--gc-sections", "-Wl,-e,main")

#: Longest wait for a compiler: about twenty times what building the slowest runtime takes on a slow machine.
_COMPILE_TIMEOUT_S = 300

#: Lines of a compiler's message that are quoted.
_QUOTED_LINES = 12


def place(directory: Path, code: Code, *, on_host: bool) -> tuple[Path, ...]:
    """Write what is compiled into a directory; the sources, absolute."""
    for name, content in code.files.items():
        (directory / name).write_bytes(content)
    (directory / FILE).write_text(harness_text(code, on_host=on_host), encoding="ascii", newline="\n")
    (directory / _script(directory)).write_text(SCRIPT, encoding="ascii", newline="\n")
    return tuple(directory / name for name in (*sorted(name for name in code.files if name.endswith(".c")), FILE))


def compile_for(target: Target, level: str, sources: Sequence[Path]) -> Path:
    """Compile for a processor with the compiler that pip installs.

    Parameters
    ----------
    target : Target
    level : str
        Key of :data:`LEVELS`.
    sources : sequence of Path
        From :func:`place`; the program is made beside them.

    Raises
    ------
    RealizeError
        When the compiler refuses the code; its message is quoted.
    """
    directory = sources[0].parent
    output = f"{target.name}-{level}"
    on_host = target.name == HOST
    link = _HOST_LINK if on_host else (*_TARGET_LINK, f"-Wl,-T,{_script(directory).name}")
    command = [
        *(sys.executable, "-m", "ziglang", "cc"),
        *target.flags,
        *_COMMON,
        *LEVELS[level],
        *(source.name for source in sources),
        *link,
        *("-o", output),
    ]
    environment = os.environ | {"ZIG_LOCAL_CACHE_DIR": str(directory / "parts")}
    _run(command, f"compiling for {target.name} at -{level}", directory, directory, environment)
    return _made(directory / output, "the compiler")


def compile_by(command: str, sources: Sequence[Path]) -> Path:
    """Compile by the user's command, run where the user is.

    Parameters
    ----------
    command : str
        Words as a shell separates them; ``{sources}`` stands for the sources, ``{output}`` for the program and
        ``{script}`` for a linker script.
    sources : sequence of Path
        From :func:`place`.

    Raises
    ------
    RealizeError
        When a placeholder is missing, the command cannot be started, fails, or makes nothing.
    """
    directory = sources[0].parent
    output = directory / "program"
    script = str(_script(directory))
    words = [
        replaced
        for word in _words(command)
        for replaced in (
            map(str, sources)
            if word == "{sources}"
            else [word.replace("{output}", str(output)).replace("{script}", script)]
        )
    ]
    _run(words, "--compiler", directory, None, os.environ)
    return _made(output, "the command")


def _script(directory: Path) -> Path:
    return directory / "trial.ld"


def _words(command: str) -> list[str]:
    try:
        words = shlex.split(command, posix=os.name == "posix")
    except ValueError as error:
        raise RealizeError("--compiler", f"{shown(command)}: {error}", "closed quotes", _EXAMPLE) from None
    missing = [name for name in PLACEHOLDERS[:2] if not any(name in word for word in words)]
    if missing or "{sources}" not in words:
        found = f"a command without {' and '.join(missing)}" if missing else "{sources} as a part of a word"
        raise RealizeError("--compiler", found, "{sources} as a word of its own, and {output}", _EXAMPLE)
    return words


def _run(command: Sequence[str], where: str, sources: Path, start: Path | None, environment: Mapping[str, str]) -> None:
    """Run a compiler on what lies in one directory, started in another or here."""
    try:
        done = subprocess.run(
            command,
            cwd=start,
            env=environment,
            stdin=subprocess.DEVNULL,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            timeout=_COMPILE_TIMEOUT_S,
            check=False,
        )
    except subprocess.TimeoutExpired:
        raise RealizeError(
            where, f"not done within {_COMPILE_TIMEOUT_S} s", "", "run the command by hand to see what it waits for"
        ) from None
    except OSError as error:
        raise RealizeError(
            where,
            f"{shown(command[0])} cannot be started: {error.strerror or error}",
            "a compiler that this machine can run",
            _EXAMPLE,
        ) from None
    if done.returncode:
        raise RealizeError(
            where,
            f"the compiler ended with status {done.returncode}",
            "code and options that it accepts",
            "its message says what to change",
            _quoted(done.stdout, sources),
        )


def _quoted(output: bytes, sources: Path) -> str:
    """The first lines of what a compiler said, without the passing directory of the sources."""
    text = output.decode(errors="replace").replace(f"{sources}{os.sep}", "")
    lines = [printable(line) for line in text.splitlines() if line.strip()]
    more = [f"... and {len(lines) - _QUOTED_LINES} more lines"] if len(lines) > _QUOTED_LINES else []
    return "\n".join(lines[:_QUOTED_LINES] + more)


def _made(output: Path, who: str) -> Path:
    for path in (output, output.with_name(output.name + ".exe")):
        if path.is_file():
            return path
    raise RealizeError("--compiler", f"{who} ended well but made no program", "a program at {output}", _EXAMPLE)
