"""One side of the device: its signal's way to the plane, and the way of everything that comes back.

Levels are worst cases over all phases of reflection. Waves at the plane: `toward` what is connected there, `away` from
it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from benchrun.bench import Bench
from benchrun.bench.chain import part_gain_db
from benchrun.bench.parts import Amplifier, Coupler, Isolator
from benchrun.contract.capture import FloatArray
from benchrun.plan.decibels import magnitude, together_dbm
from benchrun.plan.figure import Figure, Limit


@dataclass(frozen=True, slots=True)
class Tone:
    """One signal at N conditions: frequency (Hz), and its waves (dBm) at a plane, toward what is there and away."""

    name: str
    frequency_hz: FloatArray
    toward_dbm: FloatArray
    away_dbm: FloatArray


class Side:
    """The side of a bench that ends at a plane."""

    def __init__(self, bench: Bench, plane: str, signal: str) -> None:
        self.bench, self.plane, self.signal = bench, plane, signal
        self.path = bench.signals[signal].path
        self.instrument = bench.signals[signal].instrument
        self.match = magnitude(bench.device.input_match if plane == "input" else bench.device.output_match)

    def gain_db(self, part: str, frequency_hz: FloatArray) -> FloatArray:
        """Return a part's forward gain (N,), NaN without a frequency. Raises FileProblemsError outside its table."""
        found = np.full(frequency_hz.shape, np.nan)
        there = np.isfinite(frequency_hz)
        found[there] = part_gain_db(self.bench, part, frequency_hz[there])
        return found

    def outward(self, level_dbm: FloatArray, frequency_hz: FloatArray) -> Iterator[Figure]:
        """Yield the levels on the way from the instrument to the plane."""
        for name in self.path:
            part = self.bench.parts[name]
            yield Figure(f"into {name}", self.signal, level_dbm, Limit.of("damage", part.damage))
            level_dbm = level_dbm + self.gain_db(name, frequency_hz)
            if isinstance(part, Amplifier):
                yield Figure(f"{name} output", self.signal, level_dbm, Limit.of("linear", part.linear))

    def at_plane(self, level_dbm: FloatArray, frequency_hz: FloatArray) -> FloatArray:
        """Return the level (N,) that arrives at the plane."""
        for name in self.path:
            level_dbm = level_dbm + self.gain_db(name, frequency_hz)
        return level_dbm

    def inward(self, tone: Tone) -> Iterator[Figure]:
        """Yield the levels of a tone on the way back from the plane, at every coupler's arms, and at the instrument."""
        toward, away = tone.toward_dbm, tone.away_dbm
        for name in reversed(self.path):
            part = self.bench.parts[name]
            if isinstance(part, Amplifier):
                return
            yield Figure(f"into {name}", tone.name, away, Limit.of("damage", part.damage))
            gain_db = self.gain_db(name, tone.frequency_hz)
            if isinstance(part, Coupler):
                yield from self._arms(name, part, tone, toward - gain_db, away)
            away = away + (-part.isolation if isinstance(part, Isolator) else gain_db)
            toward = toward - gain_db
        port = self.bench.instruments[self.instrument].source_port
        if port is not None:
            yield Figure(f"{self.instrument} port {port.number}", tone.name, away, Limit.of("damage", port.damage))

    def _arms(
        self, name: str, coupler: Coupler, tone: Tone, source_in: FloatArray, away: FloatArray
    ) -> Iterator[Figure]:
        """Yield the levels at the arms: each samples one wave, and the other one through the directivity."""
        sampled = {"incident": (source_in, away), "reflected": (away, source_in)}
        for arm, (wanted, other) in sampled.items():
            level = together_dbm([wanted - coupler.coupling, other - coupler.coupling - coupler.directivity])
            indirect = arm == "incident" and tone.name != self.signal
            note = "through directivity and the bench's own reflection" if indirect else ""
            yield Figure(f"{name}, {arm} arm", tone.name, level)
            for receiver, described in self.bench.receivers.items():
                if (described.coupler, described.arm) == (name, arm):
                    yield from self._receiver(receiver, tone, level, note)

    def _receiver(self, name: str, tone: Tone, level_dbm: FloatArray, note: str) -> Iterator[Figure]:
        described = self.bench.receivers[name]
        for part in described.path:
            yield Figure(f"into {part}", tone.name, level_dbm, Limit.of("damage", self.bench.parts[part].damage))
            level_dbm = level_dbm + self.gain_db(part, tone.frequency_hz)
        own = self.bench.instruments[described.instrument].receiver
        limits = (Limit("linear", own.linear), Limit("damage", own.damage)) if own is not None else (None,)
        for limit in limits:
            yield Figure(f"receiver {name}", tone.name, level_dbm, limit, note, receiver=name)

    def meters(self, connected: Mapping[str, npt.NDArray[np.bool_]], tone: Tone) -> Iterator[Figure]:
        """Yield the levels at power meters: `connected` says where (N,) each is connected to this plane."""
        for name, there in connected.items():
            sensor = self.bench.instruments[name].sensor
            if sensor is not None:
                level = np.where(there, tone.toward_dbm, np.nan)
                for limit in (Limit("linear", sensor.linear), Limit("damage", sensor.damage)):
                    yield Figure(f"{name} at {self.plane}", tone.name, level, limit, receiver=name)
