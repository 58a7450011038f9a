"""Hot stability: the margin near the carrier, the sideband determinant against a load, and K and mu of a cold device.

Sources: METHODS section 1; Rollett, IRE Trans. CT-9(1) 1962 (mem.); Edwards, Sinsky, IEEE T-MTT 40(12) 1992,
doi 10.1109/22.179894. Passing a margin here says that a linearised device does not oscillate with this load where it
was measured: it is no licence to switch on. Limit the drain current and keep a load on the output.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.scattering import Scattering, place, refuse_where, require_numbers
from benchrun.errors import DataSetError

#: |T| above which K and mu of the S parameters alone mean nothing.
NEGLIGIBLE = 0.02
#: Largest turn between neighbouring points of a Nyquist plot for its encirclements to be counted.
LARGEST_TURN_DEG = 90.0


def margin(s22: ComplexArray, t22: ComplexArray) -> FloatArray:
    """Return 1 - |S22| - |T22| (..., F): above 0, the device is stable near the carrier with any passive load.

    >>> round(float(margin(np.array([0.5j]), np.array([-0.2 + 0j]))[0]), 12)
    0.3
    """
    return np.asarray(1.0 - np.abs(s22) - np.abs(t22))


class Sidebands(NamedTuple):
    """A quantity at f0 + Delta and at f0 - Delta, each (..., F), where F runs over Delta or over f0."""

    upper: ComplexArray
    lower: ComplexArray


def sideband_determinant(s22: Sidebands, t22: Sidebands, load: Sidebands) -> ComplexArray:
    """Return det(I - M diag(GL(+), GL(-)*)) (..., F) of the device against a load that differs at the sidebands.

        M = [[S(+), T(+) e^{2j phi}], [T(-)* e^{-2j phi}, S(-)*]]
        det = (1 - S(+) GL(+)) (1 - S(-)* GL(-)*) - T(+) T(-)* GL(+) GL(-)*

    The pump's phase falls out, so T22 may be referred to it or not. Source: METHODS section 1.
    """
    require_numbers("a coefficient or the load", None, *s22, *t22, *load)
    below = np.conj(load.lower)
    direct = (1.0 - s22.upper * load.upper) * (1.0 - np.conj(s22.lower) * below)
    return np.asarray(direct - t22.upper * np.conj(t22.lower) * load.upper * below)


def encirclements(determinant: ComplexArray, offset_hz: npt.ArrayLike) -> int:
    """Return how often the Nyquist plot of `determinant` (F,) over Delta (F,) encircles the origin: 0 when stable.

    `offset_hz` rises from near the carrier to where the device no longer answers. At -Delta the determinant is the
    conjugate, so the plot closes by itself; counted anticlockwise. Raises DataSetError where neighbouring points turn
    by more than LARGEST_TURN_DEG as seen from the origin, because then nobody can say which way round they went, and
    where the determinant vanishes: that load makes it oscillate.
    """
    d, offsets = np.asarray(determinant, np.complex128), np.asarray(offset_hz, np.float64)
    if d.ndim != 1 or d.shape != offsets.shape or d.size < 2 or np.any(np.diff(offsets) <= 0.0) or offsets[0] <= 0.0:
        raise DataSetError("a Nyquist plot needs one determinant for each of two or more rising offsets above 0 Hz.")
    require_numbers("the determinant", offsets, d)
    refuse_where(d == 0.0, offsets, "the determinant vanishes at an offset of {at}: with this load it oscillates.")
    loop = np.concatenate([np.conj(d[::-1]), d, np.conj(d[-1:])])
    turns = np.angle(loop[1:] / loop[:-1])
    _require_small_turns(turns, offsets)
    return round(float(np.sum(turns) / (2.0 * np.pi)))


def _require_small_turns(turns: FloatArray, offsets: FloatArray) -> None:
    """Refuse where the loop conj(d reversed), d, closed, turns too far from one point to the next."""
    count = offsets.size
    wide = np.abs(turns) > np.deg2rad(LARGEST_TURN_DEG)
    if wide[count - 1] or wide[-1]:
        raise DataSetError(
            "the Nyquist plot does not close: measure nearer to the carrier, and further out, until the determinant is "
            "nearly real."
        )
    between = wide[count : 2 * count - 1]
    if np.any(between):
        raise DataSetError(
            f"the determinant turns by more than {LARGEST_TURN_DEG:g} degrees from an offset of "
            f"{place(between, offsets)} to the next: measure at more offsets there."
        )


class ColdStability(NamedTuple):
    """K, |Delta|, mu and mu', each (..., F).

    The device is stable with any passive load and source where mu > 1, or where K > 1 and |Delta| < 1.
    """

    k: FloatArray
    determinant: FloatArray
    mu: FloatArray
    mu_source: FloatArray


def cold_stability(
    s: Scattering, largest_conversion: npt.ArrayLike = 0.0, *, frequency_hz: FloatArray | None = None
) -> ColdStability:
    """Return Rollett's K and Edwards and Sinsky's mu (load) and mu' (source) of the S parameters (..., F).

        Delta = S11 S22 - S12 S21          K = (1 - |S11|^2 - |S22|^2 + |Delta|^2) / (2 |S12 S21|)
        mu  = (1 - |S11|^2) / (|S22 - Delta S11*| + |S12 S21|)    mu' with 1 and 2 changed over

    Where nothing comes back (S12 S21 = 0) K is infinite and mu is 1 / |S22|. `largest_conversion` is the largest |T|
    of the device (..., F). Raises DataSetError where it is above NEGLIGIBLE, because then S alone does not decide; use
    margin or sideband_determinant.
    """
    require_numbers("an S parameter", frequency_hz, *s)
    conversion = np.broadcast_to(np.abs(np.asarray(largest_conversion)), np.shape(s.s11))
    refuse_where(
        ~(conversion <= NEGLIGIBLE),
        frequency_hz,
        f"K and mu say nothing at {{at}}: |T| is above {NEGLIGIBLE:g}, the device is driven. Take the margin "
        "|S22| + |T22| < 1 or the sideband determinant.",
    )
    delta, loop = s.determinant(), np.abs(s.s12 * s.s21)
    one, two = np.abs(s.s11) ** 2, np.abs(s.s22) ** 2
    top = 1.0 - one - two + np.abs(delta) ** 2
    with np.errstate(divide="ignore", invalid="ignore"):
        k = np.where(loop == 0.0, np.copysign(np.inf, top), top / (2.0 * loop))
        mu, mu_source = (
            np.where(loop == 0.0, 1.0 / np.abs(far), (1.0 - near_power) / (np.abs(far - delta * np.conj(near)) + loop))
            for near, near_power, far in ((s.s11, one, s.s22), (s.s22, two, s.s11))
        )
    return ColdStability(k, np.abs(delta), mu, mu_source)
