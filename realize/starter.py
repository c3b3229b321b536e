"""The commented design file that ``realize new NAME`` writes, to be changed line by line."""

from __future__ import annotations

from realize.design import checked_name

#: Where an editor looks for the schema of the file, from its own directory.
SCHEMA_FILE = "realize-design.schema.json"

_TEXT = f"""\
#:schema ./{SCHEMA_FILE}
# Design of NAME: a starting point with invented data.
# `realize emit` accepts it as it stands; replace the numbers by those of your controller.
#
# Controllers move machines: check on the bench, with the actuator limited, before closing the loop.

[design]
name = "NAME"                     # prefix of everything in the C code
# From the error (reference minus measurement) to the command.
transfer = "kp + ki/s + kd*s/(tau*s + 1)"
about = "invented starting point: gap of two rollers, error in mm to drive command"
revision = "A"
# requirement = "where this is asked for"
# author = "your initials"

[design.values]                   # exact as written; strings are expressions, such as "kp/0.2"
kp = 0.8                          # per mm
ki = 4                            # per mm and s
kd = 0.01                         # s per mm
tau = "1/500"                     # s; the pole that keeps kd*s from amplifying noise without bound

[sampling]
rate = "2 kHz"                    # or: period = "500 us"
band = "20 Hz"                    # up to here the controller must behave as designed

[method]
name = "auto"                     # the recommended one; pin it by writing the name that is reported

[signals.input]
range = [-8.0, 8.0]               # physical
unit = "mm"
per_count = "1/2000"              # physical size of one count of the converter
# offset = 0                      # count at physical zero, such as 2048 of a 12-bit converter
# integers: type = "int16"        # C type of the count, int8 to uint32

[signals.output]
range = [-1.0, 1.0]               # the code clamps the command to it
unit = "of full scale"
per_count = "1/4200"
# offset = 4200                   # such as a timer that counts from 0 to 8400 around standstill
# integers: type = "int16"        # or "uint16", with the offset above

[target]
arithmetic = "float32"            # or "float64"
# integers: arithmetic = "int16"  # or "int32", in place of the line above
# structure = "auto"              # or "direct", "cascade", "delta"
anti_windup = "hold-integral"     # or "back-calculation" with tracking_time = "0.2 s", or "none"
guard_nonfinite = true            # a NaN or infinite input counts as the previous input

# What the controller drives: then the loop is checked, too.
# [plant]
# transfer = "22/(s*(0.05*s + 1))"  # from the command to what is measured; invented
# dead_time = "0.4 ms"

# [loop]
# compute_delay = "1 sample"        # from sampling the input to the actuator

# For a transfer that is improper, such as kp + ki/s + kd*s, whose kd*s has no pole yet:
# improper: [rolloff]
# improper: placement = "derivative"  # or "whole"
# improper: pole = "auto"             # or "170 Hz"

# Gains that follow what is measured while the controller runs, here the gap.
# [schedule]
# variable = "gap"
# unit = "mm"
# points = [2, 5, 12]

# [schedule.values]
# kp = [1, 0.8, 0.7]
# ki = [5, 4, 3.5]

# What the conversion may change; the values here are the defaults.
# [tolerance]
# pole_shift = "2 %"
# phase_in_band = "5 deg"

# A deviation somebody has agreed to; it lapses when the figure passes the limit.
# [[accept]]
# check = "step deviation"
# limit = "2 %"
# because = "why this is good enough"
# by = "initials"
"""


def starter_text(name: str) -> str:
    """Write a commented starter design.

    Parameters
    ----------
    name : str
        Name of the design.

    Returns
    -------
    str
        TOML that is accepted as it is.

    Raises
    ------
    RealizeError
        When the name is no C identifier, too long or kept by C or C++.
    """
    return _TEXT.replace("NAME", checked_name(name, "NAME"))
