"""The levelled drive: which level the pump must be set to for a wanted power at the device-input plane."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import asdict, dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import FloatArray
from benchrun.derive.calibration import DOCUMENT_VERSION, Circumstances, require_kind
from benchrun.derive.interpolation import interpolate, outside
from benchrun.errors import CalibrationError, DataSetError
from benchrun.quantities import show

#: How far below the lowest levelled power a drive may lie, in dB: a chain is linear there, its gain is carried on.
REACH_DOWN_DB = 3.0

_NAMES = ("name", "signal", "plane")
_ARRAYS = ("level_dbm", "frequency_hz", "power_dbm")


@dataclass(frozen=True, slots=True)
class Levelling:
    """Power `power_dbm` (L, F) at `plane` for levels `level_dbm` (L,) of `signal` on the grid `frequency_hz` (F,)."""

    name: str
    signal: str
    plane: str
    level_dbm: FloatArray
    frequency_hz: FloatArray
    power_dbm: FloatArray
    circumstances: Circumstances

    def __post_init__(self) -> None:
        """Refuse a table that cannot be read backwards: DataSetError where power does not rise with level."""
        if self.level_dbm.size < 2 or self.power_dbm.shape != (self.level_dbm.size, self.frequency_hz.size):
            raise DataSetError(
                f"levelling '{self.name}' needs two levels or more, and one power at each level and frequency."
            )
        flat = ~np.all(np.diff(self.power_dbm, axis=0) > 0.0, axis=0)
        if np.any(flat):
            raise DataSetError(
                f"levelling '{self.name}': at {show(self.frequency_hz[flat][0], 'frequency', 7)} the power does not "
                f"rise with the {self.signal}'s level. Is the meter connected, the booster on and not saturated?"
            )

    def power_at(self, frequency_hz: npt.ArrayLike) -> FloatArray:
        """Return the power (N, L) in dBm at `frequency_hz` (N,). Raises CalibrationError outside the grid."""
        wanted = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        if np.any(beyond := outside(self.frequency_hz, wanted)):
            raise CalibrationError(
                f"levelling '{self.name}' covers {show(self.frequency_hz[0], 'frequency', 7)} to "
                f"{show(self.frequency_hz[-1], 'frequency', 7)}; {show(wanted[beyond][0], 'frequency', 7)} is wanted. "
                "Level over that range."
            )
        return np.ascontiguousarray(interpolate(self.frequency_hz, self.power_dbm, wanted).T)

    def pump_level_dbm(self, drive_dbm: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> FloatArray:
        """Return the level in dBm to set for `drive_dbm` at `frequency_hz`, which broadcast to one shape (...).

        Level against power is interpolated by monotone cubics (never overshooting between readings); up to
        REACH_DOWN_DB below the lowest reading the lowest gain is carried on. Raises CalibrationError for a drive
        outside that, which no reading supports: above the highest reading nothing is ever extrapolated.
        """
        drive, frequency = np.broadcast_arrays(np.asarray(drive_dbm, float), np.asarray(frequency_hz, float))
        power = self.power_at(frequency.ravel())
        wanted = drive.ravel()
        self._require_reach(wanted, power, frequency.ravel())
        below = np.minimum(wanted - power[:, 0], 0.0)
        levels = _monotone(power, self.level_dbm, np.clip(wanted, power[:, 0], power[:, -1]))
        return np.asarray((levels + below).reshape(drive.shape))

    def below_db(self, drive_dbm: FloatArray, frequency_hz: FloatArray) -> float:
        """Return how far the drives (N,) at these frequencies (N,) go below what was levelled, at least 0."""
        return float(np.max(self.power_at(frequency_hz)[:, 0] - drive_dbm, initial=0.0))

    def _require_reach(self, wanted: FloatArray, power: FloatArray, frequency: FloatArray) -> None:
        low, high = power[:, 0] - REACH_DOWN_DB, power[:, -1]
        unreached = ~((wanted >= low) & (wanted <= high))
        if np.any(unreached):
            at = int(np.argmax(unreached))
            raise CalibrationError(
                f"levelling '{self.name}' reaches {power[at, 0]:.2f} to {high[at]:.2f} dBm at "
                f"{show(frequency[at], 'frequency', 7)}; a drive of {wanted[at]:.2f} dBm is wanted. "
                f"Level over more of the {self.signal}'s range."
            )

    def check_fits(self, part_hash: str, date_utc: str, origin: str, parts: Mapping[str, str] | None = None) -> None:
        """Raise CalibrationError, saying which, where parts, date or origin (simulated for a real run) do not fit."""
        self.circumstances.require(f"levelling '{self.name}'", part_hash, date_utc, origin, parts)

    def to_document(self) -> dict[str, Any]:
        """Return everything as JSON-ready values."""
        arrays = {k: getattr(self, k).tolist() for k in _ARRAYS}
        names = {k: getattr(self, k) for k in _NAMES}
        return (
            {"kind": "levelling", "document": DOCUMENT_VERSION}
            | names
            | arrays
            | {"circumstances": asdict(self.circumstances)}
        )

    @classmethod
    def from_document(cls, document: Mapping[str, Any]) -> Levelling:
        """Return the levelling that to_document wrote. Raises CalibrationError for another text."""
        require_kind(document, "levelling")
        try:
            return cls(
                str(document["name"]),
                str(document["signal"]),
                str(document["plane"]),
                np.asarray(document["level_dbm"], dtype=np.float64),
                np.asarray(document["frequency_hz"], dtype=np.float64),
                np.asarray(document["power_dbm"], dtype=np.float64),
                Circumstances(**document["circumstances"]),
            )
        except (KeyError, TypeError, ValueError) as error:
            raise CalibrationError(
                f"this levelling document is damaged ({error!r}). Derive it again from its run."
            ) from error


def _monotone(x: FloatArray, y: FloatArray, at: FloatArray) -> FloatArray:
    """Interpolate y (L,) over rising x (N, L) at the points `at` (N,), monotone between the knots.

    Cubic Hermite pieces; at the inner knots the harmonic mean of neighbouring slopes, at the ends a parabola's slope.
    Source: Fritsch, Butland, SIAM J. Sci. Stat. Comput. 5(2) 1984 (mem.).
    """
    step, slope = np.diff(x, axis=1), np.diff(y) / np.diff(x, axis=1)
    knots = _knot_slopes(step, slope)
    rows = np.arange(len(x))
    k = np.clip(np.sum(x <= at[:, None], axis=1) - 1, 0, x.shape[1] - 2)
    h = step[rows, k]
    s = (at - x[rows, k]) / h
    return np.asarray(
        y[k] * (1 + 2 * s) * (1 - s) ** 2
        + knots[rows, k] * h * s * (1 - s) ** 2
        + y[k + 1] * s * s * (3 - 2 * s)
        + knots[rows, k + 1] * h * s * s * (s - 1)
    )


def _knot_slopes(step: FloatArray, slope: FloatArray) -> FloatArray:
    """Return the slopes (N, L) at the knots from the steps and slopes (N, L-1) between them, all above zero."""
    if slope.shape[1] == 1:
        return np.repeat(slope, 2, axis=1)
    left, right = step[:, :-1], step[:, 1:]
    w_left, w_right = left + 2.0 * right, 2.0 * left + right
    inner = (w_left + w_right) / (w_left / slope[:, :-1] + w_right / slope[:, 1:])
    first = _end_slope(step[:, 0], step[:, 1], slope[:, 0], slope[:, 1])
    last = _end_slope(step[:, -1], step[:, -2], slope[:, -1], slope[:, -2])
    return np.concatenate([first[:, None], inner, last[:, None]], axis=1)


def _end_slope(near: FloatArray, far: FloatArray, slope: FloatArray, next_slope: FloatArray) -> FloatArray:
    """Return the slope (N,) at an end of the parabola through three knots, kept where the piece stays monotone."""
    parabola = ((2.0 * near + far) * slope - near * next_slope) / (near + far)
    return np.clip(parabola, 0.0, 3.0 * slope)
