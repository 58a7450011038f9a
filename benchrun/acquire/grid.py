"""Frequencies and levels as they stand: which settings move a signal, the receiver's grid, and lists that follow it."""

from __future__ import annotations

import math
from collections.abc import Mapping

from benchrun.acquire.opened import OpenBench
from benchrun.contract.actions import SetAction
from benchrun.contract.capture import Capture
from benchrun.contract.roles import SignalSource
from benchrun.errors import InstrumentError


class Grid:
    """What was set last. Knows which signals a change moves in frequency, so that they can be blanked for it."""

    def __init__(self, bench: OpenBench, signals: Mapping[str, str]) -> None:
        self._bench = bench
        self._frequency = {f"{name}.frequency": name for name in signals}
        self._stands: dict[str, float] = {}
        self._capture: Capture | None = None
        self._listed: tuple[str, ...] = ()
        self._signals = signals

    def hopping(self, action: SetAction) -> list[str]:
        """Return the signals whose frequency `action` changes."""
        frequency, stands = self._frequency, self._stands
        return [frequency[name] for name, value in action.values if name in frequency and stands.get(name) != value]

    def set(self, action: SetAction) -> None:
        """Set everything, frequencies before the rest. Raises BenchError."""
        for name, value in sorted(action.values, key=lambda one: one[0] not in self._frequency):
            self._bench.set(name, value)
            self._stands[name] = value

    def stands(self, capture: Capture) -> bool:
        """Whether the receiver is set up for this already."""
        return capture == self._capture and self._at(capture)

    def moving(self, capture: Capture) -> list[str]:
        """Return the signals that setting up for `capture` moves."""
        moved = [] if self._at(capture) and len(capture.frequencies_hz) == 1 else self._receivers_own()
        return [*moved, *self._followers(capture), *self._listed]

    def set_up(self, capture: Capture) -> None:
        """Set up the receiver, and the lists of sources that follow it. Raises BenchError."""
        self._capture = None
        self._leave_lists()
        for name in self._followers(capture):
            self._load_list(name, capture)
        self._bench.receiver.configure(capture)
        grid = capture.frequencies_hz
        for name in self._receivers_own():
            self._stands[f"{name}.frequency"] = grid[0] if len(grid) == 1 else math.nan
        self._capture = capture

    def forget(self) -> None:
        """Believe nothing of the receiver's grid: somebody else had the bench."""
        self._capture = None

    def _at(self, capture: Capture) -> bool:
        """Whether the receiver's own signal is at the one point of the grid (a sweep is where it was set up)."""
        grid = capture.frequencies_hz
        return len(grid) > 1 or all(self._stands.get(f"{name}.frequency") == grid[0] for name in self._receivers_own())

    def _receivers_own(self) -> list[str]:
        receiver = self._bench.receiver
        return [name for name in self._signals if self._bench.signal(name) is receiver]

    def _followers(self, capture: Capture) -> list[str]:
        own = self._receivers_own()
        return [name for name in capture.tones if name in self._signals and name not in own] if capture.follow else []

    def _load_list(self, name: str, capture: Capture) -> None:
        source = self._bench.signal(name)
        if not isinstance(source, SignalSource):
            raise InstrumentError(
                f"{name} cannot follow the receiver: its instrument has no list. Step it point by point"
            )
        offset_hz = capture.offsets_hz[capture.tones.index(name)]
        self._listed = (*self._listed, name)
        source.load_list([hz + offset_hz for hz in capture.frequencies_hz], capture.levels_dbm)

    def _leave_lists(self) -> None:
        for name in self._listed:
            source = self._bench.signal(name)
            if isinstance(source, SignalSource):
                source.leave_list()
        self._listed = ()
