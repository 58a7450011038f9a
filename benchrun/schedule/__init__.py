"""The schedule: what will happen, in order, from a recipe and a bench. Pure, hashed, decoded by index."""

from benchrun.schedule.build import build_schedule
from benchrun.schedule.columns import Columns
from benchrun.schedule.drive import DriveGain
from benchrun.schedule.schedule import PlannedReading, Schedule
from benchrun.schedule.timing import Timing
from benchrun.schedule.walk import PlannedAction

__all__ = ["Columns", "DriveGain", "PlannedAction", "PlannedReading", "Schedule", "Timing", "build_schedule"]
