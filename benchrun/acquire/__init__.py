"""Acquisition: a schedule on an open bench becomes committed readings, and the bench is safe again on every way out."""

from benchrun.acquire.clock import RealClock
from benchrun.acquire.outcome import Outcome, outcome_of
from benchrun.acquire.progress import Progress, Silent
from benchrun.acquire.prompts import (
    Answer,
    Prompt,
    Prompter,
    RefusingPrompter,
    RehearsalPrompter,
    TerminalPrompter,
    require_somebody,
)
from benchrun.acquire.runner import acquire
from benchrun.acquire.safe_state import SafeReport
from benchrun.acquire.stop import StopRequest

__all__ = [
    "Answer",
    "Outcome",
    "Progress",
    "Prompt",
    "Prompter",
    "RealClock",
    "RefusingPrompter",
    "RehearsalPrompter",
    "SafeReport",
    "Silent",
    "StopRequest",
    "TerminalPrompter",
    "acquire",
    "outcome_of",
    "require_somebody",
]
