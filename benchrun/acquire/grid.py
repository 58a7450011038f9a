"""Frequencies and levels as they stand: which settings move a signal, the receiver's grid, and lists that follow it."""

from __future__ import annotations

import math
from collections.abc import Mapping
from functools import cached_property

from benchrun.acquire.opened import OpenBench
from benchrun.contract.actions import SetAction
from benchrun.contract.capture import Capture
from benchrun.contract.roles import SignalSource, WaveReceiver
from benchrun.errors import InstrumentError


class Grid:
    """What was set last. Knows which signals a change moves in frequency, so that they can be blanked for it."""

    def __init__(self, bench: OpenBench, signals: Mapping[str, str]) -> None:
        self.sources = {name: bench.signal(name) for name in signals}
        self._bench = bench
        #: The signal that the receiver makes itself, one or none, and the name of its frequency.
        self._own = tuple(name for name, source in self.sources.items() if isinstance(source, WaveReceiver))[:1]
        self._own_frequency = "".join(f"{name}.frequency" for name in self._own)
        self._frequency = {f"{name}.frequency": name for name in signals}
        self._stands: dict[str, float] = {}
        self._capture: Capture | None = None
        self._listed: tuple[str, ...] = ()

    @cached_property
    def receiver(self) -> WaveReceiver:
        """The wave receiver, looked up once. Raises BenchError where the bench has none."""
        return self._bench.receiver

    def hopping(self, action: SetAction) -> tuple[str, ...]:
        """Return the signals whose frequency `action` changes."""
        frequency, stands = self._frequency, self._stands
        moving = [frequency[name] for name, value in action.values if name in frequency and stands.get(name) != value]
        return tuple(moving)

    def set(self, action: SetAction) -> None:
        """Set everything, frequencies before the rest. Raises BenchError."""
        frequency, later = self._frequency, []
        for one in action.values:
            if one[0] in frequency:
                self._set(*one)
                if one[0] == self._own_frequency:
                    self._capture = None
            else:
                later.append(one)
        for one in later:
            self._set(*one)

    def _set(self, name: str, value: float) -> None:
        self._bench.set(name, value)
        self._stands[name] = value

    def stands(self, capture: Capture) -> bool:
        """Whether the receiver is set up for this already."""
        return capture is self._capture or capture == self._capture

    def moving(self, capture: Capture) -> tuple[str, ...]:
        """Return the signals that setting up for `capture` moves."""
        grid, stands = capture.frequencies_hz, self._stands
        moved = () if len(grid) == 1 and stands.get(self._own_frequency) == grid[0] else self._own
        return moved + self._followers(capture) + self._listed if capture.follow or self._listed else moved

    def set_up(self, capture: Capture) -> None:
        """Set up the receiver, and the lists of sources that follow it. Raises BenchError."""
        self._capture = None
        if self._listed:
            self._leave_lists()
        if capture.follow:
            for name in self._followers(capture):
                self._load_list(name, capture)
        self.receiver.configure(capture)
        grid = capture.frequencies_hz
        self._stands[self._own_frequency] = grid[0] if len(grid) == 1 else math.nan
        self._capture = capture

    def forget(self) -> None:
        """Believe nothing of the receiver's grid: somebody else had the bench."""
        self._capture = None

    def _followers(self, capture: Capture) -> tuple[str, ...]:
        """Return the signals that follow the receiver's sweep."""
        tones = capture.tones if capture.follow else ()
        return tuple(name for name in tones if name in self.sources and name not in self._own)

    def _load_list(self, name: str, capture: Capture) -> None:
        source = self.sources[name]
        if not isinstance(source, SignalSource):
            raise InstrumentError(
                f"{name} cannot follow the receiver: its instrument has no list. Step it point by point"
            )
        offset_hz = capture.offsets_hz[capture.tones.index(name)]
        self._listed = (*self._listed, name)
        source.load_list([hz + offset_hz for hz in capture.frequencies_hz], capture.levels_dbm)

    def _leave_lists(self) -> None:
        for name in self._listed:
            source = self.sources[name]
            if isinstance(source, SignalSource):
                source.leave_list()
        self._listed = ()
