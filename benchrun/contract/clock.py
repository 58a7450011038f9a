"""The clock that the runner and the drivers wait on: real on a bench, virtual in a rehearsal."""

from __future__ import annotations

from typing import Protocol


class Clock(Protocol):
    """Bench time. In a rehearsal it is virtual: it advances only by modelled durations and by sleep()."""

    @property
    def virtual(self) -> bool:
        """Whether this time is simulated."""

    def now_ns(self) -> int:
        """Return the bench time in integer nanoseconds since the run's start (virtual) or any origin (real)."""

    def sleep(self, duration_s: float) -> None:
        """Let `duration_s` seconds of bench time pass."""

    def align(self, start_ns: int) -> None:
        """On a virtual clock that is earlier than `start_ns`, jump to it; on a real clock do nothing."""
