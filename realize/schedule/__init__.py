"""Gain schedules: controllers whose coefficients follow a variable, from points between which they are interpolated."""

from realize.schedule.job import Scheduled, scheduled, table_of
from realize.schedule.table import Table

__all__ = ["Scheduled", "Table", "scheduled", "table_of"]
