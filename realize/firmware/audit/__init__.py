"""Whether what was written is still what its design calls for: everything computed anew, and a second opinion."""

from realize.firmware.audit.recompute import Audit, Finding, audit
from realize.firmware.audit.second_opinion import Opinion

__all__ = ["Audit", "Finding", "Opinion", "audit"]
