"""C text, test vectors and the record: everything that is written for the firmware build."""

from realize.firmware.emission import Emission
from realize.firmware.files import write_all
from realize.firmware.render import render_firmware

__all__ = ["Emission", "render_firmware", "write_all"]
