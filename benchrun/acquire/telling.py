"""Telling whoever watches how far a run is, and how long it will still take."""

from __future__ import annotations

import time
from typing import Protocol

from benchrun.acquire.progress import Progress
from benchrun.contract.reading import Reading


class Length(Protocol):
    """How long a schedule is."""

    @property
    def duration_s(self) -> float:
        """How long all of it is expected to take."""

    def __len__(self) -> int:
        """Return the number of readings."""


class Teller:
    """Tells of readings. Time that the operator takes is not counted as the run's own."""

    def __init__(self, progress: Progress, schedule: Length) -> None:
        self.flagged = 0
        self._progress = progress
        self._total = len(schedule)
        self._duration_s = schedule.duration_s
        self._started_s = time.monotonic()
        self._phase = ""
        self._done = 0

    def begin(self) -> None:
        """Count from now."""
        self._started_s = time.monotonic()

    def leave_out(self, pause_s: float) -> None:
        """Do not count a time that the run waited for somebody."""
        self._started_s += pause_s

    def committed(self, reading: Reading, start_ns: int) -> None:
        """Tell of a reading that was planned to start `start_ns` after the beginning (0: not known, time is real)."""
        if reading.flags:
            self.flagged += 1
        if reading.name != self._phase:
            self._phase = reading.name
            self._progress.phase(reading.name, "")
        index, total = reading.index, self._total
        self._done += 1
        elapsed_s = time.monotonic() - self._started_s
        left_s = elapsed_s * (total - index - 1) / self._done
        bench_left_s = self._duration_s - start_ns * 1e-9 if start_ns else left_s
        self._progress.reading(index, total, reading.conditions, elapsed_s, left_s, bench_left_s, reading.flags)
