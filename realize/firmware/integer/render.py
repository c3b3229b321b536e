"""From an emission in integers to the text of its five files."""

from __future__ import annotations

from realize.arithmetic.integer.quiet import FEW_SAMPLES, FEW_STATES, quiet
from realize.arithmetic.integer.settling import settle
from realize.firmware.integer.c_header import header_text
from realize.firmware.integer.c_source import source_text
from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.integer.record import record_text
from realize.firmware.integer.selftest import selftest_text
from realize.firmware.integer.spelling import Spelling
from realize.firmware.integer.vectors import vectors, vectors_text


def render_integer_firmware(emission: IntegerEmission) -> dict[str, str]:
    """The five files of an emission.

    Parameters
    ----------
    emission : IntegerEmission
        What to emit.

    Returns
    -------
    dict
        File name and text of header, source, self-test, vectors and record, in this order. The same emission gives the
        same bytes everywhere.

    Raises
    ------
    RealizeError
        When the name is no identifier.
    """
    name = emission.name
    spelling = Spelling(emission, settle(emission.realization.program))
    silence = quiet(emission.realization, FEW_SAMPLES, FEW_STATES)
    inputs, outputs = vectors(emission)
    files = {
        f"{name}.h": header_text(emission, spelling, silence),
        f"{name}.c": source_text(spelling),
        f"{name}_selftest.c": selftest_text(emission, inputs),
        f"{name}_vectors.csv": vectors_text(inputs, outputs),
    }
    return files | {f"{name}.record.json": record_text(emission, files, silence)}
