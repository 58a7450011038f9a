"""Hot reflection: S22 and T22 of a device that is driven hard while a small probe enters its output.

    b2 = B + S22 a2 + T22' a2*          B = S21(|a1|) a1 ,   T22' = T22 exp(j 2 phi) ,   phi = arg(a1)

All waves are complex arrays (...) in root-watt at the output plane; "upper" is the probe's side of the pump at f0 +
Delta, "lower" its image at f0 - Delta. Sources: METHODS section 1; Verspecht, Barataud, Teyssier, Nebus, 66th ARFTG
2005 (mem.); Verspecht, Williams, Schreurs, Remley, McKinley, IEEE T-MTT 53(4) 2005, doi 10.1109/TMTT.2005.845771.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.errors import DataSetError
from benchrun.quantities import show

#: Condition number of the column-scaled system above which probe phases are called bunched.
LARGEST_CONDITION = 30.0
#: Share of the probe's power that |a+|^2 - |a-|^2 must keep for the two sidebands to be told apart.
LEAST_DIFFERENCE = 0.05


def two_sidebands(
    a_upper: ComplexArray, b_upper: ComplexArray, a_lower: ComplexArray, b_lower: ComplexArray
) -> tuple[ComplexArray, ComplexArray]:
    """Return (S22, T22') from a probe and the image that the bench reflects back, free of that reflection's bias.

        b(+) = S22 a(+) + T22' a(-)* ,   b(-) = S22 a(-) + T22' a(+)*
        det = |a(+)|^2 - |a(-)|^2
        S22 = (b(+) a(+)* - b(-) a(-)*) / det ,   T22' = (a(+) b(-) - a(-) b(+)) / det

    Waves (...) as in the module's head. The phase of T22' means something only where the tones were captured
    coherently. Raises DataSetError where the image is about as strong as the probe.

    >>> a, image = np.array([1e-2 + 0j]), np.array([1e-4j])
    >>> s, t = two_sidebands(a, 0.3 * a + 0.1j * np.conj(image), image, 0.3 * image + 0.1j * np.conj(a))
    >>> complex(np.round(s, 12)[0]), complex(np.round(t, 12)[0])
    ((0.3+0j), 0.1j)
    """
    det = np.abs(a_upper) ** 2 - np.abs(a_lower) ** 2
    if not np.all(told_apart(a_upper, a_lower)):
        raise DataSetError(
            "the image is as strong as the probe, so the two sidebands cannot be told apart. Was the probe on, and is "
            "the device's output loaded by the bench?"
        )
    s22 = (b_upper * np.conj(a_upper) - b_lower * np.conj(a_lower)) / det
    return np.asarray(s22), np.asarray((a_upper * b_lower - a_lower * b_upper) / det)


def told_apart(a_upper: ComplexArray, a_lower: ComplexArray) -> npt.NDArray[np.bool_]:
    """Return where (...) probe and image differ enough in power for two_sidebands (LEAST_DIFFERENCE)."""
    probe, image = np.abs(a_upper) ** 2, np.abs(a_lower) ** 2
    return np.asarray(np.abs(probe - image) > LEAST_DIFFERENCE * np.maximum(probe, image))


def one_sideband(
    a_upper: ComplexArray, b_upper: ComplexArray, largest_conversion: float, largest_match: float
) -> tuple[ComplexArray, FloatArray]:
    """Return (S22, bound) from the probe's tone alone: S22 = b(+)/a(+), biased by at most `bound` (...).

        bias <= |T22|^2 |Gs| / |1 - Gs S22| <= |T22|^2 |Gs| / (1 - |Gs| |S22|)

    `largest_conversion` is the largest |T22| expected, `largest_match` the largest |Gs|, what the bench reflects at the
    image. Raises DataSetError where the probe was not there.
    """
    if np.any(a_upper == 0.0):
        raise DataSetError("there is no probe wave into the device's output: was the probe on?")
    s22 = np.asarray(b_upper / a_upper)
    room = np.maximum(1.0 - largest_match * np.abs(s22), 1e-3)
    return s22, np.asarray(largest_conversion**2 * largest_match / room)


def referred_to_pump(t_prime: ComplexArray, b2_pump: ComplexArray) -> ComplexArray:
    """Return T22' exp(-j 2 arg b2), (...): T22 with its phase referred to the pump's own wave out of the device.

    phi = arg(a1) is not read on a bench without couplers at port 1; b2 at the pump is, coherently with the probe. The
    two references differ by twice the phase of b2/a1, so the magnitude is the same and the phase carries its
    reference's name.
    """
    return np.asarray(t_prime * np.exp(-2j * np.angle(b2_pump)))


def distance_bound(return_gain_db: float, input_match_db: float) -> float:
    """Return the largest distance between the output reflection with this bench at port 1 and S22 (and so for T22).

        |S12 S21 Gs1| / |1 - S11 Gs1| <= |S12 S21| |Gs1| / (1 - |Gs1|)        for |S11| <= 1

    `return_gain_db` is the largest expected |S12 S21|, at small signal, and `input_match_db` the largest |Gs1|, both
    as 20 log10 of a magnitude. The like term through T21 at the image is inside the bound for a compressing device
    with |T12| <= |S12|: for y = g(|x|) x the sum |S21| + |T21| is g, and g is largest at small signal. Source:
    METHODS section 1.

    >>> round(distance_bound(-18.0, -20.0), 4)
    0.014
    """
    return_gain, match = 10.0 ** (return_gain_db / 20.0), 10.0 ** (input_match_db / 20.0)
    if match >= 1.0:
        raise DataSetError(f"an input match of {input_match_db} dB is none: a negative number of dB is expected.")
    return float(return_gain * match / (1.0 - match))


def output_reflection(
    s11: ComplexArray, s12: ComplexArray, s21: ComplexArray, s22: ComplexArray, source: ComplexArray
) -> ComplexArray:
    """Return the reflection (...) seen at the output of a device with `source` at port 1, where T is negligible.

        Gamma_out = S22 + S12 S21 Gs1 / (1 - S11 Gs1)

    Source: Pozar, Microwave Engineering, two-port power gains; METHODS section 1.
    """
    return np.asarray(s22 + s12 * s21 * source / (1.0 - s11 * source))


def memoryless(
    gain: npt.ArrayLike, slope: npt.ArrayLike, amplitude: npt.ArrayLike
) -> tuple[ComplexArray, ComplexArray]:
    """Return (S, T) of an envelope gain y = g(|x|) x at |x| = A: S = g + A g'/2, T = A g'/2, in the frame of arg x = 0.

    `gain` is g(A), `slope` is dg/d|x| at A. Source: METHODS section 1.
    """
    half = np.asarray(amplitude) * np.asarray(slope, complex) / 2.0
    return np.asarray(np.asarray(gain, complex) + half), half


class OnCarrier(NamedTuple):
    """What a probe on the carrier gives, each (F,): S21, S22, T22 (phase of a1 taken out), condition and residual."""

    s21: ComplexArray
    s22: ComplexArray
    t22: ComplexArray
    condition: FloatArray
    residual: FloatArray


def on_carrier(
    a1: ComplexArray, a2: ComplexArray, b2: ComplexArray, *, frequency_hz: FloatArray | None = None
) -> OnCarrier:
    """Fit S21, S22 and T22 to N probe phases on the pump's own frequency, waves (N, F) in root-watt, by least squares:

        [p b2] = [p a1 | p a2 | (p a2)*] [S21; S22; T22] ,   p = exp(-j arg a1)

    Three phases 120 degrees apart at equal |a2| make the columns orthogonal (condition 1 after scaling them).
    `residual` is the rms of what the fit leaves of b2, in root-watt. Raises DataSetError for fewer than three probe
    states, and where the condition number says that the phases bunch. Source: METHODS section 1.
    """
    p = np.exp(-1j * np.angle(a1))
    columns = np.stack([p * a1, p * a2, np.conj(p * a2)], axis=-1).swapaxes(0, 1)
    size = np.linalg.norm(columns, axis=1)
    if len(a1) < 3 or np.any(size == 0.0):
        raise DataSetError(
            f"{len(a1)} probe states do not separate S21, S22 and T22: three phases 120 degrees apart do."
        )
    scaled = columns / size[:, None, :]
    condition = np.linalg.cond(scaled)
    _require_spread(condition, frequency_hz)
    q, r = np.linalg.qr(scaled)
    right = np.swapaxes(p * b2, 0, 1)[..., None]
    solution = np.linalg.solve(r, np.conj(np.swapaxes(q, 1, 2)) @ right)
    left = np.sqrt(np.mean(np.abs(right - scaled @ solution) ** 2, axis=(1, 2)))
    s21, s22, t22 = (solution[..., 0] / size).T
    return OnCarrier(s21, s22, t22, condition, left)


def _require_spread(condition: FloatArray, frequency_hz: FloatArray | None) -> None:
    bunched = ~(condition <= LARGEST_CONDITION)
    if np.any(bunched):
        at = int(np.argmax(bunched))
        where = f"index {at}" if frequency_hz is None else show(frequency_hz[at], "frequency", 7)
        raise DataSetError(
            f"the probe phases bunch at {where} (condition number {condition[at]:.3g}): S22 and T22 cannot be "
            "separated. Spread them evenly, best 120 degrees apart."
        )
