"""What two-port work hands around: four waves, four scattering parameters, and where on the grid something failed."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.errors import DataSetError
from benchrun.quantities import show


class Waves(NamedTuple):
    """The waves at both ports, each (..., F) complex in root-watt: a towards the device, b away from it.

    As raw readings, a is what the reference receiver says and b what the measurement receiver says.
    """

    a1: ComplexArray
    b1: ComplexArray
    a2: ComplexArray
    b2: ComplexArray


class Scattering(NamedTuple):
    """The four parameters of a two-port, each (..., F) complex, without unit: b = S a, port 2 the device's output."""

    s11: ComplexArray
    s12: ComplexArray
    s21: ComplexArray
    s22: ComplexArray

    @classmethod
    def of(cls, matrices: npt.ArrayLike) -> Scattering:
        """Return the planar form of `matrices` (..., F, 2, 2), as scikit-rf's Network.s has them."""
        s = np.asarray(matrices, np.complex128)
        return cls(*(np.ascontiguousarray(s[..., i, j]) for i in (0, 1) for j in (0, 1)))

    def matrices(self) -> ComplexArray:
        """Return the parameters as matrices (..., F, 2, 2)."""
        s11, s12, s21, s22 = np.broadcast_arrays(*self)
        return np.stack([np.stack([s11, s12], axis=-1), np.stack([s21, s22], axis=-1)], axis=-2)

    def turned(self) -> Scattering:
        """Return the parameters of the same device with its ports changed over."""
        return Scattering(self.s22, self.s21, self.s12, self.s11)

    def determinant(self) -> ComplexArray:
        """Return S11 S22 - S12 S21 (..., F)."""
        return np.asarray(self.s11 * self.s22 - self.s12 * self.s21)


def flush_thru(points: int) -> Scattering:
    """Return the definition of a thru of no length and no loss at `points` frequencies."""
    none, whole = np.zeros(points, complex), np.ones(points, complex)
    return Scattering(none, whole, whole, none)


def place(bad: npt.NDArray[np.bool_], frequency_hz: FloatArray | None) -> str:
    """Return where the first mark of `bad` (..., F) stands: the frequency if known, else its index."""
    at = int(np.argmax(np.atleast_1d(bad).reshape(-1, np.atleast_1d(bad).shape[-1]).any(axis=0)))
    return f"frequency index {at}" if frequency_hz is None else show(float(frequency_hz[at]), "frequency", 7)


def refuse_where(bad: npt.NDArray[np.bool_], frequency_hz: FloatArray | None, message: str) -> None:
    """Raise DataSetError where any of `bad` (..., F) is set: `message`, in which {at} becomes the first such place."""
    if np.any(bad):
        raise DataSetError(message.format(at=place(bad, frequency_hz)))


def require_numbers(what: str, frequency_hz: FloatArray | None, *arrays: ComplexArray) -> None:
    """Raise DataSetError where one of `arrays` (..., F) holds no number, saying of `what` and where."""
    for array in arrays:
        refuse_where(~np.isfinite(array), frequency_hz, what + " is no number at {at}: read it again.")
