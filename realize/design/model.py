"""The design: everything one controller or filter is made from, exact and checked.

Lengths of time are in s, angular frequencies in rad/s, as the names say; tolerances and limits in the unit of
their check. A design that exists has passed the gate: what reads it need not check again.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from fractions import Fraction
from types import MappingProxyType
from typing import Any, NamedTuple

from realize.transfer import TransferFunction

#: Published methods, in the order of their table in the README.
METHODS = (
    "step-invariant",
    "ramp-invariant",
    "impulse-invariant",
    "forward-difference",
    "backward-difference",
    "bilinear",
    "bilinear-prewarped",
    "blended-difference",
    "pole-zero-mapped",
)

#: Methods that know about the loop, in the order of their table in the README.
LOOP_METHODS = ("frequency-fit", "plant-input-mapped")

#: Structures in floating point, and in integers.
FLOAT_STRUCTURES = ("direct", "cascade", "delta")
INTEGER_STRUCTURES = ("direct", "cascade", "error-feedback", "delta", "normal", "parallel")

#: C types of counts, at the interface of integer arithmetic.
COUNT_TYPES = ("int8", "uint8", "int16", "uint16", "int32", "uint32")

#: Every check by name, with the unit its deviation is measured in; ``None`` where it has no figure.
CHECK_UNITS: Mapping[str, str | None] = MappingProxyType(
    {
        "stability": None,
        "pole shift": "%",
        "zero shift": "%",
        "magnitude in band": "dB",
        "phase in band": "deg",
        "low-frequency gain": "%",
        "step deviation": "%",
        "step overshoot": "%",
        "converter step": "%",
        "saturation recovery": "%",
        "round-off": "%",
        "loop stability": None,
        "loop phase margin": "deg",
        "loop sensitivity": "",
        "loop overshoot": "%",
    }
)

#: Keys of the table ``[tolerance]``, with their unit; "" for a plain number.
TOLERANCE_KEYS: Mapping[str, str] = MappingProxyType(
    {
        "pole_shift": "%",
        "zero_shift": "%",
        "magnitude_in_band": "dB",
        "phase_in_band": "deg",
        "low_frequency_gain": "%",
        "step_deviation": "%",
        "step_overshoot": "%",
        "converter_step": "%",
        "round_off": "%",
        "loop_phase_margin_loss": "deg",
        "loop_phase_margin_least": "deg",
        "loop_sensitivity_most": "",
        "loop_overshoot_rise": "%",
    }
)


#: The transfer function of a wire.
UNITY = TransferFunction((1,), (1,))


@dataclass(frozen=True)
class Signal:
    """What is known of the input or the output.

    Attributes
    ----------
    range : pair of Fraction or None
        Lowest and highest physical value.
    unit : str
        Physical unit, as text; may be empty.
    per_count : Fraction or None
        Physical size of one count of the converter or timer.
    offset : int
        Count at physical zero.
    type : str or None
        C type at the interface, where it was named.
    """

    range: tuple[Fraction, Fraction] | None = None
    unit: str = ""
    per_count: Fraction | None = None
    offset: int = 0
    type: str | None = None


class Rolloff(NamedTuple):
    """How an improper transfer function is to be made causal.

    ``order`` is ``None`` for as many poles as make it proper, ``pole_rad_s`` for the automatic choice.
    """

    placement: str = "derivative"
    order: int | None = None
    damping: Fraction = Fraction(1)
    pole_rad_s: Fraction | None = None
    phase_budget_deg: Fraction = Fraction(6)


class Target(NamedTuple):
    """What the code is written for; ``tracking_time_s`` goes with back-calculation alone."""

    arithmetic: str = "float32"
    structure: str = "auto"
    coefficients: str = "inline"
    recursion_sign: str = "subtract"
    anti_windup: str = "hold-integral"
    tracking_time_s: Fraction | None = None
    guard_nonfinite: bool = True


DEFAULT_TARGET = Target()


class PlantCase(NamedTuple):
    """The plant for one set of values.

    Attributes
    ----------
    name : str
        "nominal" or as given; empty where there is one case only.
    transfer : TransferFunction
        From the controller's output to the plant's output, proper, without dead time; 1 for a measured plant.
    dead_time_s : Fraction
        Zero or more: all of it, that of the sensor too.
    sensor : TransferFunction
        In the feedback path, before the sampler; proper.
    values : tuple of (str, Fraction)
        Named values, in the order they were written.
    """

    name: str
    transfer: TransferFunction
    dead_time_s: Fraction = Fraction(0)
    sensor: TransferFunction = UNITY
    values: tuple[tuple[str, Fraction], ...] = ()


class PlantTable(NamedTuple):
    """What the controller is connected to: transfer functions, or a measured response.

    Attributes
    ----------
    transfer_text : str or None
        The transfer function as the user wrote it, on one line; ``None`` for a measured plant.
    cases : tuple of PlantCase
        The nominal one first. A measured plant has one, whose dead time and sensor multiply the response.
    sensor_text : str or None
        The sensor as the user wrote it, on one line.
    response : str or None
        Path of the measured response, as written.
    response_text : str or None
        What stands in that file, lines ended by a line feed; not yet parsed.
    """

    transfer_text: str | None
    cases: tuple[PlantCase, ...]
    sensor_text: str | None = None
    response: str | None = None
    response_text: str | None = None


class LoopTable(NamedTuple):
    """Delay from sampling to output, in samples or in s (the other one is ``None``), and its jitter in s."""

    compute_delay_samples: Fraction | None = Fraction(1)
    compute_delay_s: Fraction | None = None
    jitter_s: Fraction | None = None


DEFAULT_LOOP = LoopTable()


class Accept(NamedTuple):
    """An agreed deviation: the check, up to which figure (if any) in which unit, why, and who agreed."""

    check: str
    limit: Fraction | None
    unit: str
    because: str
    by: str


class Schedule(NamedTuple):
    """Operating points: what changes with a variable that is measured while the controller runs.

    Attributes
    ----------
    variable : str
        Its name, a C identifier.
    unit : str
        Its unit, as text; may be empty.
    points : tuple of Fraction
        Where the values are given; each larger than the one before, at least two.
    grid : int
        Equal parts that each interval is divided into, for the checks between.
    values, plant_values : tuple of (str, tuple of Fraction)
        Values of controller and plant that change, each with a number for every point.
    written : mapping
        The tables ``design`` and ``plant`` as they were written: a transfer function at other values is made from them.
    """

    variable: str
    unit: str
    points: tuple[Fraction, ...]
    grid: int
    values: tuple[tuple[str, tuple[Fraction, ...]], ...]
    plant_values: tuple[tuple[str, tuple[Fraction, ...]], ...]
    written: Mapping[str, Mapping[str, Any]]


class Overrides(NamedTuple):
    """What the command line says in place of the file, as text."""

    rate: str | None = None
    period: str | None = None
    name: str | None = None
    method: str | None = None
    values: Mapping[str, str] = MappingProxyType({})


@dataclass(frozen=True)
class Design:
    """A whole design.

    Attributes
    ----------
    source : str
        Where it was read, for messages; no part of what the design is.
    name : str
        A C identifier of at most 24 characters.
    transfer : TransferFunction
        Exact and in lowest terms; what cancelled stands in it. May be improper.
    transfer_text : str
        The transfer function as the user wrote it, on one line.
    about, revision, requirement, author : str or None
        One printable line each.
    values : tuple of (str, Fraction)
        Named values, in the order they were written.
    period_s, band_rad_s, exact_at_rad_s : Fraction or None
        Sample period, band edge and the frequency of exact prewarping, where they were given.
    rolloff : Rolloff or None
        As asked for; ``None`` for a proper transfer function.
    method : str
        One of :data:`METHODS` or :data:`LOOP_METHODS`, or "auto".
    compensate_delay : bool
        Whether the method frequency-fit is to make up for hold and compute delay.
    plant : PlantTable or None
        What the controller is connected to.
    loop : LoopTable
        What delays the controller; counts where there is a plant.
    input, output : Signal
        What is known of the signals.
    target : Target
        What the code is written for.
    tolerance : tuple of (str, Fraction)
        Tolerances that differ from their defaults, in the order of :data:`TOLERANCE_KEYS` and in its units.
    accept : tuple of Accept
        Agreed deviations.
    schedule : Schedule or None
        Operating points, beside which all of the above is the nominal one.
    """

    source: str = field(compare=False)
    name: str
    transfer: TransferFunction
    transfer_text: str
    about: str | None = None
    revision: str | None = None
    requirement: str | None = None
    author: str | None = None
    values: tuple[tuple[str, Fraction], ...] = ()
    period_s: Fraction | None = None
    band_rad_s: Fraction | None = None
    rolloff: Rolloff | None = None
    method: str = "auto"
    exact_at_rad_s: Fraction | None = None
    compensate_delay: bool = False
    plant: PlantTable | None = None
    loop: LoopTable = DEFAULT_LOOP
    input: Signal = Signal()
    output: Signal = Signal()
    target: Target = DEFAULT_TARGET
    tolerance: tuple[tuple[str, Fraction], ...] = ()
    accept: tuple[Accept, ...] = ()
    schedule: Schedule | None = None

    def resolved(self) -> dict[str, Any]:
        """Return the whole design, defaults filled in, as a document that JSON can hold.

        Notes
        -----
        See :func:`realize.design.record.resolved`; :func:`realize.design.design_from_resolved` reads it back.
        """
        # Here, because the record is written in terms of this module.
        from realize.design.record import resolved

        return resolved(self)
