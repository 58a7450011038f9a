"""One-port error terms: solved from standards, applied to raw ratios and raw waves."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.least_squares import least_squares
from benchrun.errors import DataSetError
from benchrun.quantities import show

#: Two reflections closer than this are one standard: it is ten times the definition uncertainty of a field kit.
ALIKE = 0.02


@dataclass(frozen=True, slots=True)
class ErrorTerms:
    """The three error terms of a one-port, each (F,) complex: directivity, source match, reflection tracking.

    Model, with Gm = m / r the raw ratio (measurement receiver over reference receiver) and G the reflection:

        Gm = e00 + e10e01 G / (1 - e11 G)

    Linear form, one row for each standard:

        Gm = a + b G + c G Gm           a = e00,  c = e11,  b = e10e01 - e00 e11

    hence G = (Gm - a) / (b + c Gm), and for the waves, with e = b + a c and K the scale of the receivers,

        b2 = K (m - a r) / e ,   a2 = K r + c b2

    Source: METHODS section 2; Marks, 50th ARFTG 1997 (mem.).

    >>> terms = ErrorTerms(np.array([0.05 + 0.02j]), np.array([0.1 - 0.03j]), np.array([0.9 + 0j]))
    >>> truth = np.array([[1], [-1], [0], [0.5j]], dtype=complex)
    >>> bool(np.allclose(solve(terms.raw(truth), truth).apply(terms.raw(truth)), truth, rtol=0, atol=1e-14))
    True
    """

    e00: ComplexArray
    e11: ComplexArray
    e10e01: ComplexArray

    def apply(self, ratio: ComplexArray) -> ComplexArray:
        """Return the reflection (..., F) behind the raw `ratio` (..., F).

        Raises DataSetError where there is none, because a raw ratio is no number or lies on the model's pole.
        """
        b = self.e10e01 - self.e00 * self.e11
        with np.errstate(divide="ignore", invalid="ignore"):
            corrected = self.e11 * ratio
            corrected += b
            np.divide(ratio - self.e00, corrected, out=corrected)
            sound = np.isfinite(corrected.sum())
        if not sound:
            raise DataSetError(
                f"no reflection fits the raw ratio at {_first_bad(corrected)}; its raw waves are unusable."
            )
        return corrected

    def raw(self, reflection: ComplexArray) -> ComplexArray:
        """Return the raw ratio (..., F) that a reflection (..., F) would be read as."""
        return np.asarray(self.e00 + self.e10e01 * reflection / (1.0 - self.e11 * reflection))

    def waves(
        self, measured: ComplexArray, reference: ComplexArray, scale: npt.NDArray[np.floating | np.complexfloating]
    ) -> tuple[ComplexArray, ComplexArray]:
        """Return (b2, a2), each (..., F) in root-watt: out of the device, and into it.

        `measured` and `reference` are raw waves (..., F) in root-watt, `scale` is K (F,) or |K|, without unit.
        """
        b2 = scale * (measured - self.e00 * reference) / self.e10e01
        return np.asarray(b2), np.asarray(scale * reference + self.e11 * b2)

    def residuals(self, ratios: ComplexArray, reflections: ComplexArray) -> ComplexArray:
        """Return corrected minus defined reflection (N, F) of N standards read as `ratios` (N, F)."""
        return self.apply(ratios) - reflections


def solve(
    ratios: ComplexArray,
    reflections: ComplexArray,
    *,
    names: Sequence[str] = (),
    frequency_hz: FloatArray | None = None,
    alike: float = ALIKE,
) -> ErrorTerms:
    """Solve the error terms from N >= 3 standards: exactly for three, by least squares of the linear form for more.

    `ratios` (N, F) are the raw ratios, `reflections` (N, F) the definitions; `names` (N) and `frequency_hz` (F,) are
    for the messages. Raises DataSetError where the standards do not span: fewer than three, or at some frequency no
    three of them differ by more than `alike` in reflection, or in their raw ratio by that share of its range.

    Source: METHODS section 2; the bilinear least-squares one-port solution.
    """
    ratios, reflections = _checked(ratios, reflections)
    labels = list(names) or [f"standard {k + 1}" for k in range(len(ratios))]
    _require_span(reflections, np.ones(ratios.shape[1]), labels, frequency_hz, alike, "by their definitions reflect")
    span = np.ptp(ratios.real, axis=0) + np.ptp(ratios.imag, axis=0)
    _require_span(ratios, span / 2.0, labels, frequency_hz, alike, "were read")
    a, b, c = least_squares(np.stack([np.ones_like(ratios), reflections, reflections * ratios]), ratios).x
    return ErrorTerms(a, c, b + a * c)


def _checked(ratios: ComplexArray, reflections: ComplexArray) -> tuple[ComplexArray, ComplexArray]:
    ratios, reflections = np.asarray(ratios, complex), np.asarray(reflections, complex)
    if ratios.shape != reflections.shape or ratios.ndim != 2:
        raise DataSetError(
            f"raw ratios {ratios.shape} and definitions {reflections.shape} must both be (standards, frequencies)."
        )
    if len(ratios) < 3:
        raise DataSetError(f"{len(ratios)} standards do not make a one-port calibration: three or more are needed.")
    if not (np.all(np.isfinite(ratios)) and np.all(np.isfinite(reflections))):
        raise DataSetError("a standard was read as no number: read it again.")
    return ratios, reflections


def _require_span(
    values: ComplexArray,
    size: FloatArray,
    names: Sequence[str],
    frequency_hz: FloatArray | None,
    alike: float,
    how: str,
) -> None:
    """Refuse unless at each frequency some three of `values` (N, F) are all more than alike * size (F,) apart."""
    distance = np.abs(values[:, None, :] - values[None, :, :])
    triples = list(combinations(range(len(values)), 3))
    apart = np.stack([np.min([distance[i, j], distance[j, k], distance[i, k]], axis=0) for i, j, k in triples])
    short = np.max(apart, axis=0) <= alike * size
    if np.any(short):
        at = int(np.argmax(short))
        close = _together(distance[:, :, at], alike * size[at], names)
        where = "" if frequency_hz is None else f" at {show(frequency_hz[at], 'frequency', 7)}"
        raise DataSetError(
            f"{close} {how} alike{where}, and without three different reflections there is no one-port calibration. "
            "Was one standard connected twice? Read them again, or take another standard."
        )


def _together(distance: FloatArray, limit: float, names: Sequence[str]) -> str:
    """Return the names of the standards that have another one within `limit`, joined for a sentence."""
    near = (distance <= limit).sum(axis=0) > 1
    close = [name for name, is_near in zip(names, near, strict=True) if is_near]
    return f"{', '.join(close[:-1])} and {close[-1]}"


def _first_bad(values: ComplexArray) -> str:
    place = np.argwhere(~np.isfinite(values))
    return f"index {tuple(int(k) for k in place[0])}" if len(place) else "some index"
