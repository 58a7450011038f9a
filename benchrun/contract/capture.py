"""What a wave receiver is asked for, and what it gives back."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

ComplexArray = npt.NDArray[np.complex128]
FloatArray = npt.NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Capture:
    """One acquisition of raw waves: at each grid frequency f, every wave is read at every f + offset.

    `waves` are names of the bench's receivers ("incident", "reflected"). `tones` names the offsets ("probe",
    "pump", "image"); the probe's offset is 0 Hz. `frequencies_hz` is the probe's grid: one point for a reading that
    the recipe steps, several for a sweep that the receiver makes itself. When `follow` is true the grid is swept by
    the receiver and another source follows it over trigger lines, with `levels_dbm` at its points (else empty).
    """

    waves: tuple[str, ...]
    tones: tuple[str, ...]
    offsets_hz: tuple[float, ...]
    frequencies_hz: tuple[float, ...]
    if_bandwidth_hz: float
    averages: int = 1
    follow: bool = False
    levels_dbm: tuple[float, ...] = ()

    @property
    def shape(self) -> tuple[int, int, int]:
        """Shape of the data: (tones, waves, points)."""
        return len(self.tones), len(self.waves), len(self.frequencies_hz)


@dataclass(frozen=True, slots=True)
class WaveData:
    """Raw waves as the receiver reports them, rms-normalised (root-watt), shape (tones, waves, points).

    `over_limit` has one flag for each wave: the receiver says its input was above what it measures linearly.
    `coherent` says whether all tones of one point were captured at one instant with a common phase reference.
    """

    data: ComplexArray
    over_limit: tuple[bool, ...]
    coherent: bool
