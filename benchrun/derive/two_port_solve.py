"""The eight terms of a two-port from short, open, load and thru: known thru, unknown thru, or all standards at once.

The raw ratios b = M a come from switch_terms. Source: METHODS section 2.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.least_squares import least_squares
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import Scattering, refuse_where, require_numbers
from benchrun.derive.two_port import TwoPortTerms
from benchrun.errors import DataSetError

#: Share of a column's length that the other columns must leave over for standards to span.
LEAST_INDEPENDENCE = 1e-3
#: Share of the reflection tracking below which a raw transmission is called none.
LEAST_TRANSMISSION = 1e-6
#: A rough phase of the thru that is this near to 90 degrees off decides nothing.
UNDECIDED_DEG = 0.5


def solve_thru(
    port_1: ErrorTerms,
    port_2: ErrorTerms,
    ratios: Scattering,
    thru: Scattering,
    *,
    frequency_hz: FloatArray | None = None,
) -> TwoPortTerms:
    """Return the terms from both ports' own standards and one known `thru` (F,), read as `ratios` b = M a (F,).

    The short-open-load-thru way: the ports by one_port.solve, k by least squares of the thru's four equations. With
    n1, n2 and d1, d2 the rows of the raw b and a that the ports' terms predict for the thru:

        k M12 d2 = n1 - M11 d1 ,     k (n2 - M22 d2) = M21 d1

    Raises DataSetError where nothing came through. Source: METHODS section 2.
    """
    require_numbers("the thru", frequency_hz, *ratios, *thru)
    require_numbers("an error term", frequency_hz, *_three(port_1), *_three(port_2))
    _require_transmission(port_1, port_2, ratios, frequency_hz)
    n, d = TwoPortTerms(port_1, port_2, np.ones_like(port_1.e00)).predicted(thru)
    left = [ratios.s12 * d.s21, ratios.s12 * d.s22, n.s21 - ratios.s22 * d.s21, n.s22 - ratios.s22 * d.s22]
    right = [n.s11 - ratios.s11 * d.s11, n.s12 - ratios.s11 * d.s12, ratios.s21 * d.s11, ratios.s21 * d.s12]
    size = sum(np.abs(v) ** 2 for v in left)
    k = sum(np.conj(u) * v for u, v in zip(left, right, strict=True)) / size
    return TwoPortTerms(port_1, port_2, np.asarray(k), frequency_hz)


def solve_unknown_thru(
    port_1: ErrorTerms,
    port_2: ErrorTerms,
    ratios: Scattering,
    rough_phase_rad: npt.ArrayLike,
    *,
    frequency_hz: FloatArray | None = None,
) -> TwoPortTerms:
    """Return the terms from both ports' own standards and any reciprocal two-port, read as `ratios` b = M a (F,).

        k^2 = M21 e10e01_1 / (M12 e10e01_2)

    The sign, at each frequency by itself, is the one whose S21 lies within 90 degrees of `rough_phase_rad` (F,) or
    one number. Raises DataSetError where nothing came through, and where the rough phase is 90 degrees off and so
    decides nothing. Source: Ferrero, Pisani, IEEE MGWL 2(12) 1992, doi 10.1109/75.173410.
    """
    require_numbers("the thru", frequency_hz, *ratios)
    require_numbers("an error term", frequency_hz, *_three(port_1), *_three(port_2))
    _require_transmission(port_1, port_2, ratios, frequency_hz)
    k = np.sqrt(ratios.s21 * port_1.e10e01 / (ratios.s12 * port_2.e10e01))
    found = TwoPortTerms(port_1, port_2, k, frequency_hz).apply(ratios)
    off = np.cos(np.angle(found.s21) - np.asarray(rough_phase_rad, np.float64))
    refuse_where(
        ~(np.abs(off) > np.sin(np.deg2rad(UNDECIDED_DEG))),
        frequency_hz,
        "the rough phase of the thru is 90 degrees off at {at} and does not decide the sign: give a better one, from "
        "the thru's length or delay.",
    )
    return TwoPortTerms(port_1, port_2, np.where(off > 0.0, k, -k), frequency_hz)


def solve_standards(
    ratios: Sequence[Scattering], actual: Sequence[Scattering], *, frequency_hz: FloatArray | None = None
) -> TwoPortTerms:
    """Return the terms from N known two-ports by joint least squares of the linear form, seven unknowns.

    `ratios` are the raw b = M a (F,), `actual` the definitions (F,); a reflect standard at both ports has no s12 and
    s21. Short, open and load at both ports and a thru span; less may do. Each standard gives the four entries of

        M (T3 S + T4) = T1 S + T2
        T1 = diag(through_i k_i) , T2 = diag(e00_i k_i) , T3 = diag(-e11_i k_i) , T4 = diag(k_i)

    with k_1 = 1, k_2 = k and through = e10e01 - e00 e11. Raises DataSetError where the standards do not span: less
    than LEAST_INDEPENDENCE of some column's length is its own. Source: METHODS section 2; Eul, Schiek, IEEE T-MTT
    39(4) 1991 (mem.).
    """
    if len(ratios) != len(actual) or len(ratios) < 2:
        raise DataSetError(
            f"{len(ratios)} readings and {len(actual)} definitions do not make a two-port calibration: at least two "
            "standards are needed, usually short, open and load at both ports and a thru."
        )
    for m, s in zip(ratios, actual, strict=True):
        require_numbers("a standard", frequency_hz, *m, *s)
    system = _equations(ratios, actual)
    solution = least_squares(system[:7], system[7])
    refuse_where(~(solution.independence > LEAST_INDEPENDENCE), frequency_hz, _NOT_SPANNING)
    e00, e11, through, k_e00, k_e11, k_through, k = solution.x
    second = k_e00 / k, k_e11 / k, k_through / k
    port_1 = ErrorTerms(e00, e11, np.asarray(through + e00 * e11))
    port_2 = ErrorTerms(second[0], second[1], np.asarray(second[2] + second[0] * second[1]))
    return TwoPortTerms(port_1, port_2, k, frequency_hz)


def _equations(ratios: Sequence[Scattering], actual: Sequence[Scattering]) -> ComplexArray:
    """Return [A | y] (8, 4 N, F) over (e00, e11, through, k e00_2, k e11_2, k through_2, k | y), four rows a standard.

    Row by row of M (T3 S + T4) = T1 S + T2; what is not set is zero.
    """
    system = np.zeros((8, 4, len(ratios), *np.shape(ratios[0].s11)), np.complex128)
    for n, (m, s) in enumerate(zip(ratios, actual, strict=True)):
        one, two = system[:, :2, n], system[:, 2:, n]
        s1, s2 = (s.s11, s.s12), (s.s21, s.s22)
        for j in (0, 1):
            one[1, j], one[2, j], one[4, j] = s1[j] * m.s11, s1[j], s2[j] * m.s12
            two[1, j], two[4, j], two[5, j] = s1[j] * m.s21, s2[j] * m.s22, s2[j]
        one[0, 0], one[6, 1], one[7, 0] = 1.0, -m.s12, m.s11
        two[3, 1], two[6, 1], two[7, 0] = 1.0, -m.s22, m.s21
    return system.reshape(8, 4 * len(ratios), *system.shape[3:])


_NOT_SPANNING = (
    "the standards do not make a two-port calibration at {at}: too few, or two of them alike there. Short, open and "
    "load at both ports and a thru do. Was one connected twice?"
)


def _three(port: ErrorTerms) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    return port.e00, port.e11, port.e10e01


def _require_transmission(
    port_1: ErrorTerms, port_2: ErrorTerms, ratios: Scattering, frequency_hz: FloatArray | None
) -> None:
    forward = np.abs(ratios.s21) > LEAST_TRANSMISSION * np.abs(port_2.e10e01)
    reverse = np.abs(ratios.s12) > LEAST_TRANSMISSION * np.abs(port_1.e10e01)
    refuse_where(
        ~(forward & reverse), frequency_hz, "nothing came through at {at}: was the thru connected, and both ways read?"
    )
