"""Levels at the receivers, straight from the raw waves: what each one saw of each tone, at most, beside its limits."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from benchrun.bench import Bench
from benchrun.contract.capture import FloatArray
from benchrun.contract.reading import Reading
from benchrun.save.report.figures import named

TOGETHER = "all together"
FLOOR_W = 1e-30


@dataclass(frozen=True, slots=True)
class ReceiverLevel:
    """The highest level of a tone at a receiver's input, as the receiver read it, over all readings of one name.

    Levels in dBm, None where the bench file names no limit; `where` says at which condition the highest was.
    """

    reading: str
    wave: str
    tone: str
    highest_dbm: float
    lowest_dbm: float
    linear_dbm: float | None
    damage_dbm: float | None
    where: str

    @property
    def margin_db(self) -> float | None:
        """How far the highest level stays below the linear limit; negative above it."""
        return None if self.linear_dbm is None else self.linear_dbm - self.highest_dbm


@dataclass(frozen=True, slots=True)
class Trace:
    """The highest level (K,) in dBm of a tone at a receiver over the readings at each of the values `x` (K,)."""

    name: str
    x: FloatArray
    level_dbm: FloatArray


def receiver_levels(readings: Mapping[str, Sequence[Reading]], bench: Bench | None) -> list[ReceiverLevel]:
    """Return a row for each name of readings, wave and tone, and for the tones together where there are several."""
    return [row for own in readings.values() for row in _rows(own, bench)]


def against(readings: Sequence[Reading], key: str) -> list[Trace]:
    """Return, for each wave and tone, the highest level at each value of the condition `key`; [] where it is absent."""
    waved = [r for r in readings if r.data.size and isinstance(r.conditions.get(key), float | int)]
    if not waved or not _alike(waved):
        return []
    at = np.array([r.conditions[key] for r in waved], dtype=np.float64)
    x, place = np.unique(at, return_inverse=True)
    peak_w = np.array([np.max(_power_w(r), axis=2) for r in waved])
    traces = []
    for t, tone in enumerate(waved[0].tones):
        for w, wave in enumerate(waved[0].waves):
            highest = np.zeros(x.size)
            np.maximum.at(highest, place, peak_w[:, t, w])
            traces.append(Trace(f"{wave}, {tone}", x, _dbm(highest)))
    return traces


def limits(bench: Bench | None, wave: str) -> tuple[float | None, float | None]:
    """Return up to where a wave's receiver is linear and from where it is damaged, in dBm."""
    receiver = bench.receivers.get(wave) if bench is not None else None
    own = bench.instruments[receiver.instrument].receiver if bench is not None and receiver is not None else None
    return (None, None) if own is None else (own.linear, own.damage)


def _rows(readings: Sequence[Reading], bench: Bench | None) -> Iterator[ReceiverLevel]:
    waved = [r for r in readings if r.data.size]
    if not waved or not _alike(waved):
        return
    power = [_power_w(r) for r in waved]
    highest = np.array([p.max(axis=2) for p in power])
    lowest = np.array([p.min(axis=2) for p in power])
    total = np.array([p.sum(axis=0).max(axis=1) for p in power])
    quiet = np.array([p.sum(axis=0).min(axis=1) for p in power])
    for w, wave in enumerate(waved[0].waves):
        for t, tone in enumerate(waved[0].tones):
            yield _row(waved, wave, tone, highest[:, t, w], lowest[:, t, w], bench)
        if len(waved[0].tones) > 1:
            yield _row(waved, wave, TOGETHER, total[:, w], quiet[:, w], bench)


def _row(
    readings: Sequence[Reading], wave: str, tone: str, most_w: FloatArray, least_w: FloatArray, bench: Bench | None
) -> ReceiverLevel:
    worst = int(np.argmax(most_w))
    linear, damage = limits(bench, wave)
    highest, lowest = float(_dbm(most_w[worst : worst + 1])[0]), float(_dbm(np.array([least_w.min()]))[0])
    return ReceiverLevel(readings[worst].name, wave, tone, highest, lowest, linear, damage, where(readings[worst]))


def where(reading: Reading) -> str:
    """Return at which conditions a reading was taken: those that recipes sweep, else what was set."""
    told = {key: value for key, value in reading.conditions.items() if "." not in key} or dict(reading.conditions)
    return ", ".join(named(key, value) for key, value in told.items()) or f"reading {reading.index}"


def _alike(readings: Sequence[Reading]) -> bool:
    return len({(r.tones, r.waves) for r in readings}) == 1


def _power_w(reading: Reading) -> FloatArray:
    return np.asarray(np.abs(reading.data) ** 2)


def _dbm(power_w: FloatArray) -> FloatArray:
    """Return power in dBm; what is nothing at all stands at -270 dBm."""
    return np.asarray(10.0 * np.log10(np.maximum(power_w, FLOOR_W) / 1e-3))
