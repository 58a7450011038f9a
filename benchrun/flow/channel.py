"""A bench that is served elsewhere may go away at any moment: told as a broken link, never as a defect."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import Any

from benchrun.contract.clock import Clock
from benchrun.contract.rehearsal import Rehearsal
from benchrun.errors import LinkError


class ServedElsewhere:
    """A simulated bench behind its rehearsal channel (contract.rehearsal.Rehearsal)."""

    def __init__(self, world: Rehearsal, channel: str) -> None:
        self._world, self._channel = world, channel
        self.clock: Clock = ServedTime(world.clock, channel)
        self.seed = world.seed
        self.visa_library: Any = world.visa_library
        self.addresses: Mapping[str, str] = world.addresses

    def connect(self, plane: str, what: str) -> None:
        """Connect `what` to `plane`. Raises LinkError where the bench is gone."""
        with told(self._channel):
            self._world.connect(plane, what)

    def close(self) -> None:
        """End the world's part in this run."""
        self._world.close()


class ServedTime:
    """That bench's time. Where it is gone time stands still; whoever waits is told."""

    virtual = True

    def __init__(self, clock: Clock, channel: str) -> None:
        self._clock, self._channel = clock, channel
        self._last_ns = 0

    def now_ns(self) -> int:
        """Return the bench's time, the last one known where it is gone: the way to the safe state needs one."""
        try:
            self._last_ns = self._clock.now_ns()
        except OSError:
            return self._last_ns
        return self._last_ns

    def sleep(self, duration_s: float) -> None:
        """Let time pass. Raises LinkError where the bench is gone."""
        with told(self._channel):
            self._clock.sleep(duration_s)

    def align(self, start_ns: int) -> None:
        """Jump to `start_ns` where that lies ahead. Raises LinkError where the bench is gone."""
        with told(self._channel):
            self._clock.align(start_ns)


@contextmanager
def told(channel: str) -> Iterator[None]:
    """Raise LinkError for a channel that breaks within this."""
    try:
        yield
    except OSError as error:
        raise LinkError(
            f"rehearsal channel {channel}: the simulated bench has gone away ({error}). "
            "Start `benchrun simulate` again."
        ) from error
