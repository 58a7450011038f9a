"""Drive, the power at the device-input plane: which level its signal needs for it."""

from __future__ import annotations

from typing import Any, Protocol

import numpy as np
import numpy.typing as npt

from benchrun.bench import Bench
from benchrun.bench.chain import path_gain_db
from benchrun.contract.capture import FloatArray
from benchrun.errors import InputError
from benchrun.quantities import show

DRIVE = "drive"
#: Levels that follow from a drive are rounded to 0.1 mdB, far below any instrument's resolution, so that they are the
#: same number however they were computed: alone, or thousands at once.
LEVEL_DIGITS = 4
#: Levels remembered at most.
MOST_KNOWN = 1 << 14


class DriveGain(Protocol):
    """What a levelling knows: the level for a drive. Vectorised; raises InputError where nothing supports an answer."""

    def pump_level_dbm(self, drive_dbm: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> FloatArray:
        """Return the level (dBm) for a drive (dBm) at a frequency (Hz), which broadcast to one shape."""

    def to_document(self) -> dict[str, Any]:
        """Return all of it as JSON-ready values, for the schedule's hash."""


class PartsGain:
    """The drive by the bench's parts alone: the small-signal gain of the signal's path."""

    def __init__(self, bench: Bench, signal: str) -> None:
        self._bench, self._signal = bench, signal

    def pump_level_dbm(self, drive_dbm: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> FloatArray:
        """Return drive minus gain (dBm). Raises FileProblemsError where a part's table does not reach a frequency."""
        return np.asarray(np.asarray(drive_dbm, float) - path_gain_db(self._bench, self._signal, frequency_hz))

    def to_document(self) -> dict[str, Any]:
        """Return nothing: the bench says it."""
        return {}


class Driver:
    """Turns drives into levels of `signal`, and remembers them."""

    def __init__(self, signal: str, gain: DriveGain, lowest_dbm: float | None = None) -> None:
        self.frequency, self.level = f"{signal}.frequency", f"{signal}.level"
        self._gain, self._lowest_dbm = gain, lowest_dbm
        self._known: dict[tuple[float, float], float] = {}

    def levels_dbm(self, drive_dbm: FloatArray, frequency_hz: FloatArray) -> FloatArray:
        """Return the levels for drives at frequencies, both of shape (N,). Raises InputError.

        That is so below the source's lowest level, too; what is above its highest the level check tells.
        """
        levels = np.asarray(np.round(self._gain.pump_level_dbm(drive_dbm, frequency_hz), LEVEL_DIGITS))
        if self._lowest_dbm is not None and np.any(levels < self._lowest_dbm):
            n = int(np.argmin(levels))
            raise InputError(
                f"a drive of {drive_dbm[n]:g} dBm at {show(float(frequency_hz[n]), 'frequency', 6)} needs {self.level} "
                f"at {levels[n]:.2f} dBm; the bench file allows {self._lowest_dbm:g} dBm and more. Drive more."
            )
        return levels

    def level_dbm(self, drive_dbm: float, frequency_hz: float) -> float:
        """Return one level. Raises InputError."""
        key = drive_dbm, frequency_hz
        if key not in self._known:
            self.learn(np.array([drive_dbm]), np.array([frequency_hz]))
        return self._known[key]

    def knows(self, drive_dbm: float, frequency_hz: float) -> bool:
        """Whether level_dbm() need not compute."""
        return (drive_dbm, frequency_hz) in self._known

    def learn(self, drive_dbm: FloatArray, frequency_hz: FloatArray) -> None:
        """Compute and remember many levels at once, shape (N,). Raises InputError."""
        if len(self._known) > MOST_KNOWN:
            self._known.clear()
        levels = self.levels_dbm(drive_dbm, frequency_hz)
        pairs = zip(drive_dbm.tolist(), frequency_hz.tolist(), strict=True)
        self._known.update(zip(pairs, levels.tolist(), strict=True))
