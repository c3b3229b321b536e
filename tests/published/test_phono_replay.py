"""The replay characteristic of disc records, IEC 60098, against its table.

Source and provenance: ``fixtures/published/phono_replay.json``. Printed to 0.01 dB: half a unit is 0.005 dB.
The last row, 40 kHz, is printed one unit off (-25.60 for -25.607); it is held to that unit.
"""

from __future__ import annotations

from collections.abc import Callable
from fractions import Fraction
from math import log, pi, tan
from typing import Any

import pytest

from realize.methods import discretize
from realize.transfer import TransferFunction

#: Steepest slope of the characteristic, in dB per e-fold of frequency: its three corners add up to between
#: none and one of first order, 20 dB a decade.
_STEEPEST_DB = 20 / log(10)

Make = Callable[..., TransferFunction]
Gain = Callable[[Any, float], float]


def _replay(make: Make, table: Any, amendment: str = "") -> TransferFunction:
    t1, t2, t3 = table["time_constants_s"]
    t4 = table["amendment_time_constant_s"]
    text = "(1 + s*t2)/((1 + s*t1)*(1 + s*t3))" + amendment
    return make(text, t1=t1, t2=t2, t3=t3, t4=t4)


def _relative_db(gain_db: Gain, model: Any, frequency_hz: float) -> float:
    return gain_db(model, frequency_hz) - gain_db(model, 1000)


def test_analog_characteristic_rounds_to_every_entry_of_the_table(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool], gain_db: Gain
) -> None:
    table = published("phono_replay")
    replay = _replay(transfer, table)
    assert len(table["rows"]) == 30
    for row in table["rows"]:
        misprint = 0.005 if row["frequency_hz"] == "40000" else 0
        assert agrees(_relative_db(gain_db, replay, float(row["frequency_hz"])), row["gain_db"], misprint), row


def test_gain_at_1_khz_is_19_911_db_below_the_bass(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool], gain_db: Gain
) -> None:
    table = published("phono_replay")
    replay = _replay(transfer, table)
    assert replay.low_frequency_gain == 1
    assert agrees(gain_db(replay, 1000), table["gain_at_1_khz_relative_to_zero_frequency_db"])


def test_amended_characteristic_has_the_known_bass(
    transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool], gain_db: Gain
) -> None:
    """Relative to its own gain at 1 kHz; from memory, recomputed."""
    table = published("phono_replay")
    amended = _replay(transfer, table, "*s*t4/(1 + s*t4)")
    for row in table["amended_rows"]:
        assert agrees(_relative_db(gain_db, amended, float(row["frequency_hz"])), row["gain_db"]), row


@pytest.mark.parametrize("rate_hz", [48000, 96000])
def test_bilinear_characteristic_is_the_table_read_at_the_warped_frequency(
    rate_hz: int, transfer: Make, published: Callable[[str], Any], agrees: Callable[..., bool], gain_db: Gain
) -> None:
    """The slope never exceeds 20 dB a decade, so warping f to f tan(x)/x moves the gain by 20 log10(tan(x)/x)."""
    table = published("phono_replay")
    pulse = discretize(_replay(transfer, table), Fraction(1, rate_hz), "bilinear").pulse

    def moved_db(frequency_hz: float) -> float:
        x = pi * frequency_hz / rate_hz
        return _STEEPEST_DB * log(tan(x) / x)

    rows = [row for row in table["rows"] if float(row["frequency_hz"]) < rate_hz / 2]
    assert len(rows) >= 28
    for row in rows:
        f = float(row["frequency_hz"])
        assert agrees(_relative_db(gain_db, pulse, f), row["gain_db"], moved_db(f) + moved_db(1000)), row
