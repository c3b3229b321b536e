"""Gain schedules: controllers whose coefficients follow a variable, from points between which they are interpolated."""

from realize.schedule.job import Scheduled, scheduled

__all__ = ["Scheduled", "scheduled"]
