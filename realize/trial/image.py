"""A program for a processor as a file: what is loaded where, and what its symbols say."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import NamedTuple

from elftools.common.exceptions import ELFError
from elftools.elf.elffile import ELFFile
from elftools.elf.sections import SymbolTableSection

from realize.errors import RealizeError
from realize.trial.harness import RUN, STATE
from realize.trial.outcome import Sizes

#: What the harness adds to a program.
_HARNESS = ("trial_", "main")

#: Name of a file's architecture, by ours.
_MACHINES = {"thumb": "EM_ARM", "riscv": "EM_RISCV"}

_WRITABLE = 1


class Symbol(NamedTuple):
    """A named part of a program; the address without the mark of Thumb code."""

    address: int
    size: int
    kind: str
    constant: bool


class Image(NamedTuple):
    """A program.

    Attributes
    ----------
    segments : tuple of (int, bytes)
        Address and content, with what starts as zero.
    symbols : mapping
    """

    segments: tuple[tuple[int, bytes], ...]
    symbols: Mapping[str, Symbol]

    def sizes(self, name: str) -> Sizes:
        """Bytes of the functions and constants of an emission, of its state, and of the runtime."""
        parts = {(symbol.address, symbol.kind): (text, symbol) for text, symbol in self.symbols.items()}
        own = [(text, part) for text, part in parts.values() if not text.startswith(_HARNESS)]
        mine = [part for text, part in own if text.startswith(f"{name}_")]
        runtime = [part for text, part in own if not text.startswith(f"{name}_")]
        return Sizes(
            sum(part.size for part in mine if part.kind == "STT_FUNC"),
            sum(part.size for part in mine if part.kind == "STT_OBJECT" and part.constant),
            self.symbols[STATE].size,
            sum(part.size for part in runtime),
        )


def read_image(path: Path, architecture: str, entry: str) -> Image:
    """Read a linked program.

    Parameters
    ----------
    path : Path
    architecture : str
        Of the processor it must be for.
    entry : str
        The function that a sample begins with, which must be there.

    Raises
    ------
    RealizeError
        When it is no such program, or has lost the names of its functions.
    """
    try:
        with path.open("rb") as file:
            return _image(ELFFile(file), architecture, entry)
    except (ELFError, ValueError, UnicodeDecodeError) as error:
        if isinstance(error, RealizeError):
            raise
        raise _unfit("a file that is no program in the ELF format") from None


def _image(file: ELFFile, architecture: str, entry: str) -> Image:
    if file["e_machine"] != _MACHINES[architecture] or file.elfclass != 32 or not file.little_endian:
        raise _unfit(f"a program for another processor ({file['e_machine']}, {file.elfclass} bits)")
    if file["e_type"] == "ET_REL":
        raise _unfit("an object that is not linked")
    segments = tuple(
        (segment["p_vaddr"], segment.data().ljust(segment["p_memsz"], b"\0"))
        for segment in file.iter_segments("PT_LOAD")
        if segment["p_memsz"]
    )
    symbols = dict(_symbols(file))
    missing = [name for name in (RUN, STATE, entry) if name not in symbols]
    if missing:
        raise _unfit(f"a program without the symbol {missing[0]}")
    return Image(segments, symbols)


def _symbols(file: ELFFile) -> Iterator[tuple[str, Symbol]]:
    table = file.get_section_by_name(".symtab")
    for symbol in table.iter_symbols() if isinstance(table, SymbolTableSection) else ():
        kind, index = symbol["st_info"]["type"], symbol["st_shndx"]
        if kind in ("STT_FUNC", "STT_OBJECT") and isinstance(index, int):
            writable = file.get_section(index)["sh_flags"] & _WRITABLE
            address = symbol["st_value"] & ~1 if kind == "STT_FUNC" else symbol["st_value"]
            yield symbol.name, Symbol(address, symbol["st_size"], kind, not writable)


def _unfit(found: str) -> RealizeError:
    return RealizeError(
        "--compiler",
        found,
        "a linked program for the processor named with --on, with main and the names of its functions",
        "without start code of your own: -nostartfiles -Wl,-e,main -Wl,-T,{script}; and do not strip",
    )
