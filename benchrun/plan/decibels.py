"""Levels in dBm as arrays, NaN for "not there": sums and mismatches at their worst phase."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import FloatArray


def together_dbm(levels_dbm: Sequence[FloatArray]) -> FloatArray:
    """Return the level (N,) of waves that add up in phase, by the sum of magnitudes; NaN where none is there."""
    total = sum(np.where(np.isnan(level), 0.0, 10.0 ** (level / 20.0)) for level in levels_dbm)
    with np.errstate(divide="ignore"):
        found = 20.0 * np.log10(np.asarray(total))
    return np.where(np.isfinite(found), found, np.nan)


def loop_db(one: npt.ArrayLike, other: npt.ArrayLike) -> FloatArray:
    """Return by how much two facing reflections (magnitudes) can raise a wave: -20 log10(1 - |one||other|).

    The upper limit of the mismatch of generator and load (textbook; METHODS section 5 gives it for power).
    """
    product = np.minimum(np.asarray(one, float) * np.asarray(other, float), 0.99)
    return np.asarray(-20.0 * np.log10(1.0 - product))


def magnitude(ratio_db: float) -> float:
    """Return the magnitude of a reflection that is given in dB."""
    return float(10.0 ** (ratio_db / 20.0))


def saturated_dbm(level_dbm: FloatArray, gain_db: float, saturation_dbm: float) -> FloatArray:
    """Return an amplifier's output (N,): linear at first, never above saturation.

    Rapp's smooth limiter with p = 2 (Rapp, 2nd European Conference on Satellite Communications, 1991; mem.).
    """
    over_db = np.maximum(level_dbm + gain_db - saturation_dbm, -200.0)
    return np.asarray(level_dbm + gain_db - 5.0 * np.log10(1.0 + 10.0 ** (over_db / 5.0)))
