"""Third-order compression of a receiver, and its exact inverse for one strong tone and a weak pair beside it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.errors import DataSetError

BoolArray = npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Linearity:
    """A receiver that reads y = x (1 - kappa |x|^2), x and y in root-watt at its input, kappa complex in 1/W.

    `limit_dbm` is the level up to which it is called linear: readings above it are flagged, never clipped.
    Source: METHODS section 3.
    """

    kappa: complex
    limit_dbm: float = np.inf

    def distort(self, x: ComplexArray) -> ComplexArray:
        """Return the reading (...) of a single tone x (...), both in root-watt."""
        return np.asarray(x * (1.0 - self.kappa * np.abs(x) ** 2))

    def restore(self, y: ComplexArray) -> tuple[ComplexArray, BoolArray]:
        """Return the single tone x (...) behind the reading y (...), and which readings have none.

        |y|^2 = u |1 - kappa u|^2 is solved for the smallest u = |x|^2 by Newton's method to machine precision. Beyond
        the curve's top no x reads as y: there y comes back as it is, and its mark is set.
        """
        y = np.asarray(y, dtype=np.complex128)
        read_w = np.abs(y) ** 2
        top_w, most_w = self._top()
        beyond = read_w > most_w
        u = self._power(np.where(beyond, 0.0, read_w), top_w)
        return np.asarray(np.where(beyond, y, y / (1.0 - self.kappa * u))), np.asarray(beyond)

    def over_limit(self, x: ComplexArray) -> BoolArray:
        """Return which tones x (...) stand above `limit_dbm`."""
        return np.asarray(np.abs(x) ** 2 > 1e-3 * 10.0 ** (self.limit_dbm / 10.0))

    def _read_power(self, u: FloatArray) -> FloatArray:
        return np.asarray(u * np.abs(1.0 - self.kappa * u) ** 2)

    def _top(self) -> tuple[float, float]:
        """Return (u, |y|^2) at the first maximum of u |1 - kappa u|^2, both infinite where it only rises."""
        k2, re = abs(self.kappa) ** 2, self.kappa.real
        discriminant = 4.0 * re * re - 3.0 * k2
        if re <= 0.0 or discriminant <= 0.0:
            return np.inf, np.inf
        u = (2.0 * re - np.sqrt(discriminant)) / (3.0 * k2)
        return float(u), float(u * abs(1.0 - self.kappa * u) ** 2)

    def _power(self, read_w: FloatArray, top_w: float) -> FloatArray:
        """Return the smallest u with u |1 - kappa u|^2 = read_w, all below the top, by Newton's method."""
        k2, re = abs(self.kappa) ** 2, self.kappa.real
        u = np.array(read_w)
        for _ in range(60):
            slope = 1.0 - 4.0 * re * u + 3.0 * k2 * u * u
            step = (self._read_power(u) - read_w) / np.where(np.abs(slope) > 1e-9, slope, 1e-9)
            following = np.clip(u - step, 0.0, top_w)
            done = np.all(np.abs(following - u) <= 4e-16 * np.abs(following))
            u = following
            if done:
                break
        return u


def linearity_from(loss_db: float, phase_rad: float, at_dbm: float, limit_dbm: float | None = None) -> Linearity:
    """Return the linearity whose gain falls by `loss_db` and turns by `phase_rad` at an input of `at_dbm`.

    kappa = (1 - 10^(-loss/20) exp(j phase)) / P. Raises DataSetError for a loss that is no number.
    Source: METHODS section 3.

    >>> receiver = linearity_from(0.1, 0.0, -3.0)
    >>> x = np.array([np.sqrt(1e-3 * 10 ** (-13 / 10)) + 0j])
    >>> round(float(-20 * np.log10(np.abs(receiver.distort(x) / x))[0]), 5)
    0.00995
    """
    if not np.all(np.isfinite([loss_db, phase_rad, at_dbm])):
        raise DataSetError("the receiver's compression in the bench file must be given by three numbers.")
    power_w = 1e-3 * 10.0 ** (at_dbm / 10.0)
    kappa = (1.0 - 10.0 ** (-loss_db / 20.0) * np.exp(1j * phase_rad)) / power_w
    return Linearity(complex(kappa), at_dbm if limit_dbm is None else limit_dbm)


def distort_pair(
    kappa: complex, strong: ComplexArray, upper: ComplexArray, lower: ComplexArray
) -> tuple[ComplexArray, ComplexArray]:
    """Return the readings (y+, y-) of a weak pair beside a strong tone X in the same receiver, all (...) in root-watt.

        y(+) = x(+) (1 - 2 kappa |X|^2) - kappa X^2 x(-)*      and the same with + and - changed over

    Source: METHODS section 3.
    """
    direct = 1.0 - 2.0 * kappa * np.abs(strong) ** 2
    mixed = kappa * strong**2
    return np.asarray(upper * direct - mixed * np.conj(lower)), np.asarray(lower * direct - mixed * np.conj(upper))


def restore_pair(
    kappa: complex, strong: ComplexArray, upper: ComplexArray, lower: ComplexArray
) -> tuple[ComplexArray, ComplexArray]:
    """Return the weak pair (x+, x-) behind its readings (y+, y-) beside the strong tone X (restored), all (...).

    The exact inverse of distort_pair, as the 2x2 system in (x+, x-*). Needs the three tones captured coherently: the
    false image turns with the phase of X. Where they were not, restore_weak leaves it in and image_bound says how
    much it is.
    """
    direct = 1.0 - 2.0 * kappa * np.abs(strong) ** 2
    mixed = kappa * strong**2
    det = np.abs(direct) ** 2 - np.abs(mixed) ** 2
    x_upper = (np.conj(direct) * upper + mixed * np.conj(lower)) / det
    x_lower = (np.conj(direct) * lower + mixed * np.conj(upper)) / det
    return np.asarray(x_upper), np.asarray(x_lower)


def restore_weak(kappa: complex, strong: ComplexArray, weak: ComplexArray) -> ComplexArray:
    """Return a weak tone (...) beside a strong one, set right for compression alone: x = y / (1 - 2 kappa |X|^2)."""
    return np.asarray(weak / (1.0 - 2.0 * kappa * np.abs(strong) ** 2))


def image_bound(kappa: complex, strong: ComplexArray) -> FloatArray:
    """Return |kappa X^2 / (1 - 2 kappa |X|^2)| (...): how much of one sideband may stand in the other, at most."""
    power = np.abs(strong) ** 2
    return np.asarray(np.abs(kappa) * power / np.abs(1.0 - 2.0 * kappa * power))
