"""The one world that all simulated instruments share (first form: signatures are final, the physics is being filled in)."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt


class Event(NamedTuple):
    """Something that happened on the bench, at a virtual time."""

    ns: int
    event: str


class Damage(NamedTuple):
    """Something that would have been destroyed or hurt somebody on a real bench."""

    ns: int
    item: str
    what: str
    value: float
    limit: float


class World:
    """The bench of a wiring document, with a seed."""

    def __init__(self, wiring: Mapping[str, Any], seed: int) -> None:
        self.wiring, self.seed = wiring, seed
        self._now_ns = 0
        self.damage: list[Damage] = []
        self.record: list[Event] = []

    @property
    def now_ns(self) -> int:
        """Virtual time."""
        return self._now_ns

    def advance(self, duration_ns: int) -> None:
        """Let time pass."""
        self._now_ns += duration_ns

    def set_source(self, instrument: str, *, frequency_hz: float, level_dbm: float, on: bool) -> None:
        """Set a source."""

    def set_supply(
        self, instrument: str, channel: int, *, voltage_v: float, current_limit_a: float, on: bool
    ) -> None:
        """Set one channel of a dc supply."""

    def supply_reading(self, instrument: str, channel: int) -> tuple[float, float]:
        """Voltage in V and current in A at the terminals of one channel."""
        return 0.0, 0.0

    def connect(self, plane: str, what: str) -> None:
        """Connect something to a plane."""

    def measure_waves(
        self,
        instrument: str,
        receivers: Sequence[str],
        frequencies_hz: Sequence[float] | npt.NDArray[np.float64],
        offsets_hz: Sequence[float],
        if_bandwidth_hz: float,
        averages: int,
        coherent: bool,
        start_ns: int,
        follow: Mapping[str, tuple[Sequence[float], Sequence[float]]] | None = None,
    ) -> tuple[npt.NDArray[np.complex128], npt.NDArray[np.bool_]]:
        """Raw waves, shape (T, W, P), root-watt, and over-limit flags, shape (W,)."""
        shape = (len(offsets_hz), len(receivers), len(frequencies_hz))
        return np.full(shape, 1e-6 + 0j), np.zeros(len(receivers), dtype=np.bool_)

    def measure_power(self, instrument: str, frequency_hz: float, start_ns: int) -> float:
        """Reading of a power meter, dBm."""
        return -60.0

    def temperature_degc(self, start_ns: int) -> float:
        """Reading of the thermometer, degree Celsius."""
        return 23.0
