"""Single contributions to an uncertainty in closed form: noise of a ratio, mismatch, residual error terms.

Sources: METHODS sections 4 and 5; Harris, Warner, IEE Proc. H 128(1) 1981, doi 10.1049/ip-h-1.1981.0007 (mismatch);
EURAMET cg-12 (residual terms, mem.).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import FloatArray
from benchrun.errors import DataSetError


class Limits(NamedTuple):
    """The lowest and the highest value, in the unit that the function says."""

    low: FloatArray
    high: FloatArray


def noise_of_ratio(snr_db: npt.ArrayLike) -> tuple[FloatArray, FloatArray]:
    """Return the standard uncertainty (dB, rad) of a reading with a signal-to-noise ratio of `snr_db`.

    20 log10(1 + 10^(-SNR/20) / sqrt 2) dB and 10^(-SNR/20) / sqrt 2 rad. Source: additive noise, METHODS section 5.

    >>> size_db, phase_rad = noise_of_ratio(40.0)
    >>> round(float(size_db), 3), round(float(np.rad2deg(phase_rad)), 3)
    (0.061, 0.405)
    """
    share = 10.0 ** (-np.asarray(snr_db, np.float64) / 20.0) / np.sqrt(2.0)
    return np.asarray(20.0 * np.log10(1.0 + share)), np.asarray(share)


def mismatch_limits(generator: npt.ArrayLike, load: npt.ArrayLike) -> Limits:
    """Return (1 -/+ |Gg| |Gl|)^2: the power between two reflections of unknown phase, over that into a match.

    `generator` and `load` are reflections or their magnitudes, of any shape. Raises DataSetError where the product
    reaches 1.

    >>> limits = mismatch_limits(0.2, 1 / 11)
    >>> round(100 * float(limits.high - 1), 3), round(100 * float(limits.low - 1), 3)
    (3.669, -3.603)
    """
    product = _product(generator, load)
    return Limits(np.asarray((1.0 - product) ** 2), np.asarray((1.0 + product) ** 2))


def mismatch_uncertainty(generator: npt.ArrayLike, load: npt.ArrayLike) -> FloatArray:
    """Return the relative standard uncertainty of power sqrt 2 |Gg| |Gl|: the phase is unknown, the shape a U.

    Source: Harris, Warner 1981.
    """
    return np.asarray(np.sqrt(2.0) * _product(generator, load))


def residual_error(
    reflection: npt.ArrayLike, directivity: npt.ArrayLike, tracking: npt.ArrayLike, source_match: npt.ArrayLike
) -> FloatArray:
    """Return the largest |dG| of dG = D + T G + M G^2 for the magnitudes of the residual terms, for hand checks."""
    size = np.abs(np.asarray(reflection))
    return np.asarray(np.abs(directivity) + np.abs(tracking) * size + np.abs(source_match) * size**2)


def reading_limits_db(return_loss_db: npt.ArrayLike, error: npt.ArrayLike) -> Limits:
    """Return between which return losses, in dB, a true `return_loss_db` is read with an `error` |dG| of any phase.

    -20 log10(|G| +/- |dG|). Where the error reaches |G| the upper limit is infinite: the reading may be anything.
    """
    size = 10.0 ** (-np.asarray(return_loss_db, np.float64) / 20.0)
    off = np.abs(np.asarray(error))
    with np.errstate(divide="ignore"):
        low, high = -20.0 * np.log10(size + off), -20.0 * np.log10(np.maximum(size - off, 0.0))
    return Limits(np.asarray(low), np.asarray(high))


def _product(generator: npt.ArrayLike, load: npt.ArrayLike) -> FloatArray:
    product = np.abs(np.asarray(generator)) * np.abs(np.asarray(load))
    if not np.all(product < 1.0):
        raise DataSetError("two reflections whose product reaches 1 have no mismatch limits: magnitudes are expected.")
    return np.asarray(product)
