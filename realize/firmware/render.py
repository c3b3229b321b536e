"""From an emission to the text of its files: five, and with a schedule the table."""

from __future__ import annotations

from collections.abc import Mapping

from realize.arithmetic.settling import settle
from realize.firmware.c_header import header_text
from realize.firmware.c_source import source_text, stored_coefficients
from realize.firmware.c_text import dialect
from realize.firmware.emission import Emission
from realize.firmware.record import record_text
from realize.firmware.selftest import selftest_text
from realize.firmware.vectors import vectors, vectors_text


def render_firmware(emission: Emission) -> dict[str, str]:
    """The files of an emission.

    Parameters
    ----------
    emission : Emission
        What to emit.

    Returns
    -------
    dict
        File name and text of header, source, table of the schedule if there is one, self-test, vectors and record, in
        this order. The same emission gives the same bytes everywhere.

    Raises
    ------
    RealizeError
        When the name is no identifier, the output range holds no value of the format, or rounding moved a pole of a
        section to z = 1.
    """
    name = emission.name
    sample = emission.recursion().sample
    settling = settle(emission.described, sample)
    stored = stored_coefficients(emission, sample, settling)
    inputs, outputs = vectors(emission)
    files = {
        f"{name}.h": header_text(emission, sample, stored),
        f"{name}.c": source_text(emission, sample, settling, stored),
        **_table(emission, stored),
        f"{name}_selftest.c": selftest_text(emission, inputs),
        f"{name}_vectors.csv": vectors_text(emission, inputs, outputs),
    }
    return files | {f"{name}.record.json": record_text(emission, files)}


def _table(emission: Emission, stored: Mapping[str, float]) -> dict[str, str]:
    if emission.schedule is None:
        return {}
    # Here, because a design without a schedule does not need it, and its start is short.
    from realize.firmware.schedule.c_lookup import schedule_header_text

    return {f"{emission.name}_schedule.h": schedule_header_text(dialect(emission), emission.schedule, stored)}
