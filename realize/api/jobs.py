"""``realize.assess``, ``compare`` and ``emit``: the jobs of the command line, as functions."""

from __future__ import annotations

import os
from typing import Unpack

from realize.api.designs import Changes, DesignLike, design_for
from realize.api.results import Assessment, Comparison, Emission
from realize.api.wording import in_keywords
from realize.errors import RealizeError
from realize.firmware.files import write_all
from realize.firmware.job import emit as emit_design
from realize.workflow import assess_design
from realize.workflow import compare as compare_methods


def assess(design: DesignLike, **changes: Unpack[Changes]) -> Assessment:
    """Say whether a design is realizable, which terms are not, and what would make it so.

    Parameters
    ----------
    design : str, path, TransferFunction, pair or mapping
        The path of a design file (ends in ``.toml``), an expression in s, a transfer function or the pair of its
        coefficients, or the tables of a design file as ``tomllib`` reads them; arrays and transfer functions may stand
        in a mapping too.
    rate, period : str, optional
        In place of the design's, with a unit: ``"2 kHz"``, ``"500 us"``.
    rate_hz, period_s : number, optional
        The same without one.
    name, method : str, optional
        In place of the design's.
    values : mapping of str to number, optional
        Named values, in place of the design's.

    Raises
    ------
    RealizeError
        When the design cannot be read or understood; it has ``where``, ``found``, ``allowed`` and ``advice``.
    Refused
        When a cancellation in it hides a growing mode, or its plant is improper.
    TypeError
        When there is no such keyword.

    Examples
    --------
    >>> import realize
    >>> found = realize.assess("kp + ki/s + kd*s", rate_hz=2000, values={"kp": 4.2, "ki": 18, "kd": 0.09})
    >>> found.realizable, found.proposals[0].pole_rad_s
    (False, Fraction(1070, 1))
    """
    read = design_for("assess", design, changes)
    with in_keywords():
        return Assessment(read, assess_design(read))


def compare(design: DesignLike, **changes: Unpack[Changes]) -> Comparison:
    """Put every method side by side at one rate, with what it does to the design.

    Parameters
    ----------
    design, rate, period, rate_hz, period_s, name, method, values
        As for :func:`assess`.

    Raises
    ------
    RealizeError
        As for :func:`assess`, and when the design has no sample rate.
    Refused, TypeError
        As for :func:`assess`.

    Examples
    --------
    >>> import realize
    >>> lag = {"design": {"numerator": [1], "denominator": [0.05, 1]}, "sampling": {"rate": "2 kHz"}}
    >>> found = realize.compare(lag)
    >>> found.acceptable, found.chosen.discrete.denominator.tolist()
    (True, [1.0, -0.9900498337491681])
    """
    read = design_for("compare", design, changes)
    with in_keywords():
        return Comparison(compare_methods(read))


def emit(design: DesignLike, out: str | os.PathLike[str] | None = None, **changes: Unpack[Changes]) -> Emission:
    """Do the whole job: the C files, the vectors and the record.

    Parameters
    ----------
    design, rate, period, rate_hz, period_s, name, method, values
        As for :func:`assess`.
    out : str or path, optional
        Directory that the files are written into, made if missing; all of them or none. Without it nothing is written.

    Raises
    ------
    RealizeError
        As for :func:`compare`, and when a file cannot be written.
    Refused
        When the design is improper without a roll-off, unstable, or out of tolerance.
    TypeError
        As for :func:`assess`.

    Examples
    --------
    >>> import realize
    >>> found = realize.emit("4.2 + 18/s", rate="2 kHz", name="gap", method="bilinear")
    >>> found.paths, "float gap_update(gap_state *state, float input)" in found.files["gap.c"]
    ((), True)
    """
    if out is not None and not os.fspath(out).strip():
        raise RealizeError("out", "an empty name", "a directory for the files", 'out="firmware", or out="." for here')
    read = design_for("emit", design, changes, "out")
    with in_keywords():
        emitted = emit_design(read)
        return Emission(emitted, () if out is None else write_all(os.fspath(out), emitted.files))
