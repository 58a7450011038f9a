"""From a schedule's columns to the conditions that levels depend on: each different one once, and where it was met."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from benchrun.bench import Bench
from benchrun.contract.capture import FloatArray
from benchrun.plan.waves import Conditions, Setting
from benchrun.quantities import show
from benchrun.schedule import Columns, Schedule
from benchrun.schedule.columns import ON
from benchrun.schedule.drive import DRIVE
from benchrun.schedule.state import CONNECTED

Rows = npt.NDArray[np.intp]
#: Most numbers in one array, where a reading sweeps over many frequencies of its own.
MOST_AT_ONCE = 1 << 16
#: The signal that is the receiver's own source.
PROBE = "probe"


@dataclass(frozen=True, slots=True)
class Where:
    """Describes conditions of columns: row k of a figure is that of row rows[k] of the columns."""

    schedule: Schedule
    columns: Columns
    rows: Rows

    def __call__(self, n: int) -> str:
        """Return what is swept there, and the reading."""
        row = int(self.rows[n])
        numbers, words = self.columns.row(row)
        swept = [self._told(name, numbers, words) for name in self.columns.swept]
        index = int(self.columns.index[row])
        reading = f"reading {index}" if self.columns.read is not None else f"on the way to reading {index}"
        return f"{', '.join(swept)} ({reading})" if swept else reading

    def _told(self, name: str, numbers: Mapping[str, float], words: Mapping[str, str]) -> str:
        if name not in numbers:
            return f"{name} {words.get(name, '')}".strip()
        kind, value = self.schedule.kinds[name], numbers[name]
        return f"{name} {value:+.1f} dBm" if kind == "level" else f"{name} {show(value, kind, 6)}"


def conditions_of(bench: Bench, schedule: Schedule, columns: Columns) -> Iterator[tuple[Conditions, Rows]]:
    """Yield what levels depend on, and which row of the columns each is of. A receiver's own sweep is written out."""
    grid = np.array(columns.read.grid_hz if columns.read is not None else ())
    different = _different(_looked_at(bench, columns), len(columns.index))
    at_once = max(1, MOST_AT_ONCE // max(len(grid), 1))
    for start in range(0, len(different), at_once):
        rows = np.repeat(different[start : start + at_once], max(len(grid), 1))
        if grid.size:
            yield _swept(bench, schedule, columns, rows, grid), rows
        else:
            yield _conditions(bench, columns, rows), rows


def _looked_at(bench: Bench, columns: Columns) -> list[npt.NDArray[np.int64]]:
    """Return the bits of every column that levels depend on."""
    names = [DRIVE, *(f"{name}.{quantity}" for name in bench.signals for quantity in ("level", "frequency"))]
    words = [name for name in columns.words if name == ON or name.startswith(CONNECTED)]
    numbers = [columns.values[name] for name in names if name in columns.values]
    return [column.view(np.int64) for column in numbers] + [columns.words[name].astype(np.int64) for name in words]


def _different(columns: Sequence[npt.NDArray[np.int64]], count: int) -> Rows:
    """Return one row of each different combination: by a hash that is then checked; every row if it is wrong."""
    mixed = np.zeros(count, dtype=np.uint64)
    for column in columns:
        mixed = (mixed ^ column.view(np.uint64)) * _ODD
        mixed ^= mixed >> _HALF
    _, first, which = np.unique(mixed, return_index=True, return_inverse=True)
    if all(np.array_equal(column, column[first][which]) for column in columns):
        return np.sort(first)
    return np.arange(count)


#: For mixing bits: the odd number next to 2^64 over the golden ratio (Knuth, The Art of Computer Programming 3, 6.4;
#: mem.).
_ODD, _HALF = np.uint64(0x9E3779B97F4A7C15), np.uint64(29)


def _conditions(bench: Bench, columns: Columns, rows: Rows) -> Conditions:
    settings = {
        name: Setting(
            _column(columns, f"{name}.level", rows),
            _column(columns, f"{name}.frequency", rows),
            columns.signal_on(name)[rows],
        )
        for name in bench.signals
    }
    return Conditions(settings, _column(columns, DRIVE, rows), _connected(bench, columns, rows))


def _column(columns: Columns, name: str, rows: Rows) -> FloatArray:
    return columns.values[name][rows] if name in columns.values else np.full(len(rows), np.nan)


def _swept(bench: Bench, schedule: Schedule, columns: Columns, rows: Rows, grid_hz: FloatArray) -> Conditions:
    """Return the conditions of a receiver's own sweeps: each of the rows stands once for every point of the grid."""
    standing = _conditions(bench, columns, rows)
    swept = np.tile(grid_hz, len(rows) // grid_hz.size)
    settings, drive_dbm = {}, np.full(len(rows), np.nan)
    for name, setting in standing.settings.items():
        if name == PROBE:
            settings[name] = Setting(setting.level_dbm, swept, setting.on)
            continue
        offset_hz = setting.frequency_hz - standing.settings[PROBE].frequency_hz
        level_dbm = setting.level_dbm
        if np.any(setting.on):  # it follows: the step refuses a signal that would stand still
            level_dbm = _listed_dbm(schedule, columns, rows[:: grid_hz.size])
            drive_dbm = standing.drive_dbm
        settings[name] = Setting(level_dbm, swept + offset_hz, setting.on)
    return Conditions(settings, drive_dbm, standing.connected)


def _listed_dbm(schedule: Schedule, columns: Columns, rows: Rows) -> FloatArray:
    """Return the levels that the source which follows is given, reading by reading, (readings * points,)."""
    captures = [schedule.reading(int(index)).action.capture for index in columns.index[rows]]
    return np.concatenate([capture.levels_dbm for capture in captures if capture is not None])


def _connected(bench: Bench, columns: Columns, rows: Rows) -> dict[str, dict[str, npt.NDArray[np.bool_]]]:
    """Return for each plane where each thing is connected; the device, where nobody was asked to connect anything."""
    planes: set[str] = {signal.plane for signal in bench.signals.values()}
    found: dict[str, dict[str, npt.NDArray[np.bool_]]] = {}
    for plane in sorted(planes):
        codes = columns.words.get(f"{CONNECTED}{plane}")
        codes = np.full(len(rows), -1) if codes is None else codes[rows]
        found[plane] = {what: codes == code for code, what in enumerate(columns.vocabulary) if np.any(codes == code)}
        device = found[plane].get("device", np.zeros(len(rows), dtype=np.bool_))
        found[plane]["device"] = device | (codes < 0)
    return found
