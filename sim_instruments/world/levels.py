"""Levels and ratios. Waves are rms-normalised: the squared magnitude is power in watts."""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt

ComplexArray = npt.NDArray[np.complex128]
FloatArray = npt.NDArray[np.float64]
BoolArray = npt.NDArray[np.bool_]

LOWEST_DBM = -400.0


def root_watts(level_dbm: float) -> float:
    """Magnitude of a wave, in root-watt."""
    return float(10.0 ** ((level_dbm - 30.0) / 20.0))


def dbm(power_w: float) -> float:
    """Level of a power; LOWEST_DBM for none."""
    return 10.0 * math.log10(power_w) + 30.0 if power_w > 1e-43 else LOWEST_DBM


def wave_ratio(ratio_db: float) -> float:
    """Ratio of two waves from its decibels."""
    return float(10.0 ** (ratio_db / 20.0))


def power_ratio(ratio_db: float) -> float:
    """Ratio of two powers from its decibels."""
    return float(10.0 ** (ratio_db / 10.0))


def delayed(frequency_hz: FloatArray, delay_s: float) -> ComplexArray:
    """Phase factor of a delay, exp(-j 2 pi f tau)."""
    factor: ComplexArray = np.exp(-2j * np.pi * frequency_hz * delay_s)
    return factor
