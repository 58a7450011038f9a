"""Readings of one name as a long table of points: whatever the sweep's shape, and also where a run stopped half-way."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, replace

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.contract.reading import Reading
from benchrun.errors import DataSetError
from benchrun.quantities import show

FREQUENCY = "frequency_hz"
#: What a power meter read is kept under its own name and this.
POWER = ".power_dbm"
Values = npt.NDArray[np.float64] | npt.NDArray[np.str_]


@dataclass(frozen=True, slots=True)
class Points:
    """N points of the readings called `name`, in the order of the schedule.

    `frequency_hz` (N,) is the probe's, `offsets_hz` (T, N) each tone's distance from it, `data` (T, W, N) the raw
    waves in root-watt. `conditions` and `scalars` hold one value (N,) for each point under their keys; `flags` (N)
    its words.
    """

    name: str
    frequency_hz: FloatArray
    tones: tuple[str, ...]
    offsets_hz: FloatArray
    waves: tuple[str, ...]
    data: ComplexArray
    coherent: bool
    conditions: Mapping[str, Values]
    scalars: Mapping[str, FloatArray]
    flags: tuple[tuple[str, ...], ...]
    started_utc: str
    ended_utc: str

    def __len__(self) -> int:
        return self.frequency_hz.size

    def wave(self, tone: str, wave: str) -> ComplexArray:
        """Return the raw `wave` at `tone` (N,) in root-watt. Raises DataSetError where it was not read."""
        if tone not in self.tones or wave not in self.waves:
            raise DataSetError(
                f"readings '{self.name}' hold {', '.join(self.waves) or 'no waves'} at "
                f"{', '.join(self.tones) or 'no tone'}; {wave} at {tone} is needed. Read it in the recipe."
            )
        return np.asarray(self.data[self.tones.index(tone), self.waves.index(wave)])

    def tone_hz(self, tone: str) -> FloatArray:
        """Return the frequency (N,) of `tone` at each point."""
        return np.asarray(self.frequency_hz + self.offsets_hz[self.tones.index(tone)])

    def number(self, key: str) -> FloatArray:
        """Return the condition or scalar `key` (N,) as numbers. Raises DataSetError where it is absent or no number."""
        values = self.conditions.get(key, self.scalars.get(key))
        if values is None:
            raise DataSetError(f"readings '{self.name}' were taken without {key}, which is needed here.")
        numbers = np.asarray(values, dtype=np.float64)
        if np.any(np.isnan(numbers)):
            raise DataSetError(f"readings '{self.name}' have no {key} at some points, and it is needed at all of them.")
        return numbers

    def meters(self) -> tuple[str, ...]:
        """Return the names of the power meters that were read."""
        return tuple(key.removesuffix(POWER) for key in self.scalars if key.endswith(POWER))

    def power_dbm(self) -> FloatArray:
        """Return what the power meter read (N,) in dBm. Raises DataSetError for none, several, or a gap."""
        meters = self.meters()
        if len(meters) != 1:
            read = f"hold the power of {' and '.join(meters)}" if meters else "were taken without a power meter"
            raise DataSetError(f"readings '{self.name}' {read}; that of one is needed here: also: [METER.power].")
        return self.number(f"{meters[0]}{POWER}")

    def place(self, index: int) -> str:
        """Return where point `index` was taken, for a message: "readings 'hot' at 2.3 GHz, drive_dbm = 14"."""
        keys = condition_keys(self)
        told = [show(self.frequency_hz[index], "frequency", 7), *(f"{k} = {self.conditions[k][index]}" for k in keys)]
        return f"readings '{self.name}' at {', '.join(told)}"

    def where(self, chosen: npt.NDArray[np.bool_]) -> Points:
        """Return the points at which `chosen` (N,) is true."""
        return replace(
            self,
            frequency_hz=self.frequency_hz[chosen],
            offsets_hz=self.offsets_hz[:, chosen],
            data=self.data[..., chosen],
            conditions={k: v[chosen] for k, v in self.conditions.items()},
            scalars={k: v[chosen] for k, v in self.scalars.items()},
            flags=tuple(words for words, keep in zip(self.flags, chosen, strict=True) if keep),
        )

    def sweep_keys(self) -> tuple[str, ...]:
        """Return the conditions, other than frequency, that tell points of one frequency apart, drive first.

        A sweep's variable counts where it takes several values. A quantity of the bench ("pump.level_dbm") counts
        only where it is not settled by frequency and those variables: a level that follows the drive is no sweep of
        its own.
        """
        varying = [k for k, v in self.conditions.items() if k != FREQUENCY and np.unique(v).size > 1]
        keys = sorted((k for k in varying if "." not in k), key=lambda k: (k != "drive_dbm", k))
        for key in sorted(k for k in varying if "." in k):
            if not self._settled(key, keys):
                keys.append(key)
        return tuple(keys)

    def _settled(self, key: str, by: list[str]) -> bool:
        places = list(zip(self.frequency_hz, *(self.conditions[k] for k in by), strict=True))
        return len(set(places)) == len(set(zip(places, self.conditions[key], strict=True)))


def condition_keys(points: Points) -> list[str]:
    """Return what was swept beside frequency, the drive first even where it has one value only."""
    keys = list(points.sweep_keys())
    if "drive_dbm" in points.conditions and "drive_dbm" not in keys:
        keys.insert(0, "drive_dbm")
    return keys


def stack(readings: Iterable[Reading], name: str) -> Points:
    """Return the final attempts of the readings called `name` as points, in the order of the schedule.

    Raises DataSetError where there are none, where they were not all taken alike, or where a wave is no number.
    """
    final = {r.index: r for r in sorted(readings, key=lambda r: r.attempt) if r.name == name}
    chosen = [final[k] for k in sorted(final)]
    _require_alike(chosen, name)
    counts = [max(len(r.frequencies_hz), 1) for r in chosen]
    points = Points(
        name=name,
        frequency_hz=_frequencies(chosen),
        tones=chosen[0].tones,
        offsets_hz=np.repeat(np.array([r.offsets_hz for r in chosen], dtype=np.float64).T, counts, axis=1),
        waves=chosen[0].waves,
        data=np.ascontiguousarray(np.concatenate([_padded(r) for r in chosen], axis=-1)),
        coherent=all(r.coherent for r in chosen),
        conditions=_columns([r.conditions for r in chosen], counts),
        scalars=_numbers([r.scalars for r in chosen], counts),
        flags=tuple(r.flags for r, count in zip(chosen, counts, strict=True) for _ in range(count)),
        started_utc=min(r.started_utc for r in chosen),
        ended_utc=max(r.started_utc for r in chosen),
    )
    unsound = ~np.all(np.isfinite(points.data), axis=(0, 1))
    if np.any(unsound):
        raise DataSetError(f"{points.place(int(np.argmax(unsound)))}: a wave is no number. Read that point again.")
    return points


def _require_alike(readings: list[Reading], name: str) -> None:
    if not readings:
        raise DataSetError(f"no reading called '{name}' was committed: there is nothing to derive from.")
    if len({(r.tones, r.waves) for r in readings}) > 1:
        raise DataSetError(
            f"readings '{name}' were not all taken with the same tones and waves: give them different names."
        )


def _frequencies(readings: list[Reading]) -> FloatArray:
    """Return the probe's frequency at each point: the waves' grid, or the condition where only scalars were read."""
    grids = [r.frequencies_hz or (_frequency_of(r),) for r in readings]
    return np.concatenate([np.asarray(g, dtype=np.float64) for g in grids])


def _frequency_of(reading: Reading) -> float:
    keys = [FREQUENCY, *sorted(k for k in reading.conditions if k.endswith(".frequency_hz"))]
    value = next((reading.conditions[k] for k in keys if k in reading.conditions), None)
    if not isinstance(value, float | int):
        raise DataSetError(f"reading {reading.index} '{reading.name}' was taken at no known frequency.")
    return float(value)


def _padded(reading: Reading) -> ComplexArray:
    """Return the data (T, W, P), with P = 1 where only scalars were read."""
    data = np.asarray(reading.data, dtype=np.complex128)
    if data.size:
        return data
    return np.zeros((len(reading.tones), len(reading.waves), max(len(reading.frequencies_hz), 1)), dtype=np.complex128)


def _columns(rows: list[Mapping[str, float | str]], counts: list[int]) -> dict[str, Values]:
    """Return one array (N,) for each key: floats, NaN where absent, or texts, "" where absent."""
    keys = dict.fromkeys(k for row in rows for k in row)
    texts = [k for k in keys if any(isinstance(row.get(k), str) for row in rows)]
    columns: dict[str, Values] = {}
    for k in keys:
        column: Values
        if k in texts:
            column = np.array([str(row.get(k, "")) for row in rows], dtype=np.str_)
        else:
            column = np.array([row.get(k, np.nan) for row in rows], dtype=np.float64)
        columns[k] = column[np.repeat(np.arange(len(rows)), counts)]
    return columns


def _numbers(rows: list[Mapping[str, float]], counts: list[int]) -> dict[str, FloatArray]:
    """Return one array (N,) of floats for each key, NaN where absent."""
    keys = dict.fromkeys(k for row in rows for k in row)
    return {k: np.repeat(np.array([row.get(k, np.nan) for row in rows], dtype=np.float64), counts) for k in keys}
