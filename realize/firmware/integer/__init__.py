"""C text, test vectors and the record of integer firmware."""

from realize.firmware.integer.emission import IntegerEmission
from realize.firmware.integer.render import render_integer_firmware

__all__ = ["IntegerEmission", "render_integer_firmware"]
