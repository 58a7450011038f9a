"""Levels at the receivers, straight from the raw waves: what each one saw of each tone, at most, beside its limits."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from benchrun.bench import Bench
from benchrun.contract.capture import FloatArray
from benchrun.contract.reading import Reading
from benchrun.save.report.figures import named

FREQUENCY = "frequency_hz"
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
    """Return, for each wave and tone, the highest level at each value of `key`; [] where no wave was read.

    `key` is a condition, or "frequency_hz", which is the probe's at each point of a reading.
    """
    waved = [r for r in readings if r.data.size]
    if not waved or not _alike(waved):
        return []
    at = np.concatenate([_values(r, key) for r in waved])
    peak_w = np.concatenate([_power_w(r) for r in waved], axis=2)
    x, place = np.unique(at[np.isfinite(at)], return_inverse=True)
    traces = []
    for t, tone in enumerate(waved[0].tones):
        for w, wave in enumerate(waved[0].waves):
            highest = np.zeros(x.size)
            np.maximum.at(highest, place, peak_w[t, w][np.isfinite(at)])
            traces.append(Trace(f"{wave}, {tone}", x, _dbm(highest)))
    return traces if x.size else []


def _values(reading: Reading, key: str) -> FloatArray:
    """Return `key` (P,) at each point of a reading, NaN where it has none."""
    if key == FREQUENCY:
        return np.array(reading.frequencies_hz, dtype=np.float64)
    value = reading.conditions.get(key)
    return np.full(len(reading.frequencies_hz), value if isinstance(value, float | int) else np.nan)


def limits(bench: Bench | None, wave: str) -> tuple[float | None, float | None]:
    """Return up to where a wave's receiver is linear and from where it is damaged, in dBm."""
    receiver = bench.receivers.get(wave) if bench is not None else None
    own = bench.instruments[receiver.instrument].receiver if bench is not None and receiver is not None else None
    return (None, None) if own is None else (own.linear, own.damage)


def _rows(readings: Sequence[Reading], bench: Bench | None) -> Iterator[ReceiverLevel]:
    waved = [r for r in readings if r.data.size]
    if not waved or not _alike(waved):
        return
    power = np.concatenate([_power_w(r) for r in waved], axis=2)
    whose = np.repeat(np.arange(len(waved)), [len(r.frequencies_hz) for r in waved])
    for w, wave in enumerate(waved[0].waves):
        tones = dict(zip(waved[0].tones, power[:, w], strict=True))
        if len(tones) > 1:
            tones[TOGETHER] = power[:, w].sum(axis=0)
        linear, damage = limits(bench, wave)
        for tone, power_w in tones.items():
            worst = int(np.argmax(power_w))
            reading, highest, lowest = waved[whose[worst]], _dbm(power_w.max()), _dbm(power_w.min())
            point = worst - int(np.searchsorted(whose, whose[worst]))
            place = where(reading, reading.frequencies_hz[point])
            yield ReceiverLevel(reading.name, wave, tone, float(highest), float(lowest), linear, damage, place)


def where(reading: Reading, frequency_hz: float | None = None) -> str:
    """Return at which conditions a reading was taken: those that recipes sweep, and one frequency of its grid."""
    told = {key: value for key, value in reading.conditions.items() if "." not in key}
    if frequency_hz is not None:
        told[FREQUENCY] = frequency_hz
    return ", ".join(named(key, value) for key, value in told.items()) or f"reading {reading.index}"


def _alike(readings: Sequence[Reading]) -> bool:
    return len({(r.tones, r.waves) for r in readings}) == 1


def _power_w(reading: Reading) -> FloatArray:
    return np.asarray(np.abs(reading.data) ** 2)


def _dbm(power_w: npt.ArrayLike) -> FloatArray:
    """Return power in dBm; what is nothing at all stands at -270 dBm."""
    return np.asarray(10.0 * np.log10(np.maximum(power_w, FLOOR_W) / 1e-3))
