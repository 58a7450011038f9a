"""Whether calibrations and levellings fit what a schedule reads, seen before RF is on: plane, parts, date, grid."""

from __future__ import annotations

import datetime
from collections import defaultdict
from collections.abc import Iterator, Mapping

import numpy as np

from benchrun.contract.capture import FloatArray
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.errors import CalibrationError
from benchrun.flow.inputs import Inputs
from benchrun.recipe.entries import Correct, HotMatch
from benchrun.schedule import Columns, Schedule


def require_fit(inputs: Inputs, schedule: Schedule, known: Mapping[str, Calibration | Levelling], origin: str) -> None:
    """Raise CalibrationError, as the derive part would after the readings, where what is known does not fit them."""
    ends_utc = (datetime.datetime.now(datetime.UTC) + datetime.timedelta(seconds=schedule.duration_s)).isoformat()
    tones_hz = tuned_hz(schedule)
    try:
        for entry in inputs.recipe.derive:
            match entry.model:
                case Correct(readings=readings, calibration=name):
                    one = _calibration(name, known)
                    parts = inputs.bench.part_hash(one.plane), one.plane, ends_utc, origin
                    one.check_fits(tones_hz[readings], *parts, inputs.bench.part_summaries(one.plane))
                case HotMatch(drive=str(name)):
                    drive = _levelling(name, known)
                    hashed, parts_there = inputs.bench.part_hash(drive.plane), inputs.bench.part_summaries(drive.plane)
                    drive.check_fits(hashed, ends_utc, origin, parts_there)
    except CalibrationError as error:
        raise CalibrationError(f"{error} Nothing was switched on.") from error


def _calibration(name: str, known: Mapping[str, Calibration | Levelling]) -> Calibration:
    one = known[name]
    if isinstance(one, Calibration):
        return one
    raise CalibrationError(f"'{name}' is the levelling of a drive; `correct` needs the calibration of a plane.")


def _levelling(name: str, known: Mapping[str, Calibration | Levelling]) -> Levelling:
    one = known[name]
    if isinstance(one, Levelling):
        return one
    raise CalibrationError(f"'{name}' is the calibration of a plane; the drive of `hot-match` needs a levelling.")


def tuned_hz(schedule: Schedule) -> dict[str, FloatArray]:
    """Return the lowest and the highest frequency (2,) that receivers are tuned to, by the name of the readings."""
    found: dict[str, list[float]] = defaultdict(list)
    for columns in schedule.columns():
        if columns.read is None or not columns.read.waves:
            continue
        for row in _outermost(columns):
            capture = schedule.reading(int(columns.index[row])).action.capture
            if capture is not None:
                grid = capture.frequencies_hz
                tuned = [end + offset for end in (min(grid), max(grid)) for offset in capture.offsets_hz]
                found[columns.read.name] += [min(tuned), max(tuned)]
    return {name: np.array([min(ends), max(ends)]) for name, ends in found.items()}


def _outermost(columns: Columns) -> Iterator[int]:
    """Yield rows in which some tone is at its lowest or its highest; the first row where none moves."""
    signals = [values for name, values in columns.values.items() if name.endswith(".frequency")]
    mirrored = [2.0 * one - other for one in signals for other in signals if one is not other]
    rows = {0}
    for values in (*signals, *mirrored):
        if np.any(np.isfinite(values)):
            rows |= {int(np.nanargmin(values)), int(np.nanargmax(values))}
    yield from sorted(rows)
