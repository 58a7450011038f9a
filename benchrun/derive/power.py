"""The absolute scale |K| of the receivers, from a power meter at the calibrated plane."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.one_port import ErrorTerms
from benchrun.errors import DataSetError


def scale_from_incident(
    terms: ErrorTerms, measured: ComplexArray, reference: ComplexArray, power_w: npt.ArrayLike
) -> FloatArray:
    """Return |K| (F,) from power readings that are incident power (the sensor's calibration factor is applied).

    `measured` and `reference` are the raw waves (F,) in root-watt with the sensor connected, `power_w` (F,) what the
    meter says. Incident power is |a2|^2, so

        |e01|^2 = |e10e01 r + e11 (m - e00 r)|^2 / P ,   |K| = |e10e01| / |e01|

    Raises DataSetError where a power is not above zero. Source: METHODS section 2.
    """
    power = np.asarray(power_w, dtype=np.float64)
    if not np.all(np.isfinite(power) & (power > 0.0)):
        raise DataSetError("the power meter read no power at some frequency: is it connected, and was the probe on?")
    incident = np.abs(terms.e10e01 * reference + terms.e11 * (measured - terms.e00 * reference))
    if np.any(incident == 0.0):
        raise DataSetError("the reference receiver read nothing while the power meter was connected.")
    e01 = incident / np.sqrt(power)
    return np.asarray(np.abs(terms.e10e01) / e01)


def scale_from_absorbed(
    terms: ErrorTerms,
    measured: ComplexArray,
    reference: ComplexArray,
    power_w: npt.ArrayLike,
    sensor_reflection: npt.ArrayLike | None = None,
) -> FloatArray:
    """Return |K| (F,) from power readings that are absorbed power (no calibration factor): P = |a2|^2 (1 - |Gs|^2).

    `sensor_reflection` is Gs or |Gs|, (F,) or one number; None takes what the calibrated bridge itself reads of the
    sensor. Otherwise as scale_from_incident. Raises DataSetError where |Gs| is not below 1.
    """
    seen = terms.apply(measured / reference) if sensor_reflection is None else np.asarray(sensor_reflection)
    taken = 1.0 - np.abs(seen) ** 2
    if np.any(taken <= 0.0):
        raise DataSetError("the power sensor reflects everything: it is not connected, or its reflection is wrong.")
    return scale_from_incident(terms, measured, reference, np.asarray(power_w, dtype=np.float64) / taken)
