"""The clock of a real bench."""

from __future__ import annotations

import time


class RealClock:
    """Bench time is the time on the wall, monotonic (contract.clock.Clock)."""

    virtual = False

    def now_ns(self) -> int:
        """Return nanoseconds since an arbitrary origin."""
        return time.monotonic_ns()

    def sleep(self, duration_s: float) -> None:
        """Wait."""
        time.sleep(duration_s)

    def align(self, start_ns: int) -> None:
        """Do nothing: real time cannot be moved."""
