"""Raw waves of a two-port become ratios that do not depend on what terminates the port without the source.

Two ways: two independent excitations, [b][a]^-1, which need no model of the switch; or, where only the ratios were
kept, the switch terms. Sources: METHODS section 2; R. B. Marks, Formulations of the basic vector network analyzer
error model including switch terms, 50th ARFTG 1997.
"""

from __future__ import annotations

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.scattering import Scattering, Waves, refuse_where, require_numbers

#: Share of |a1||a2| that the determinant of two excitations must keep for them to be called independent.
LEAST_INDEPENDENCE = 1e-3


def from_excitations(first: Waves, second: Waves, *, frequency_hz: FloatArray | None = None) -> Scattering:
    """Return the ratios M (..., F) of b = M a from two excitations, whatever the sources and the switch did.

        M = [b1' b1"; b2' b2"] [a1' a1"; a2' a2"]^-1

    ' is the `first` and " the `second` excitation, usually the source at port 1 and at port 2. Holds for raw and for
    corrected waves. Raises DataSetError where the two excitations are alike, so that nothing can be told apart.

    >>> one = Waves(*(np.array([v]) for v in (1 + 0j, 0.2j, 0.1 + 0j, 0.9 + 0j)))
    >>> two = Waves(*(np.array([v]) for v in (0.1j, 0.9 + 0j, 1 + 0j, 0.1 + 0j)))
    >>> m = from_excitations(one, two)
    >>> bool(np.allclose(m.s21 * two.a1 + m.s22 * two.a2, two.b2, rtol=0, atol=1e-15))
    True
    """
    require_numbers("a raw wave", frequency_hz, *first, *second)
    det = first.a1 * second.a2 - second.a1 * first.a2
    size = np.hypot(np.abs(first.a1), np.abs(first.a2)) * np.hypot(np.abs(second.a1), np.abs(second.a2))
    refuse_where(
        np.abs(det) <= LEAST_INDEPENDENCE * size,
        frequency_hz,
        "the two excitations are alike at {at}, so the four parameters cannot be told apart. Was the source at port 1 "
        "for one of them and at port 2 for the other?",
    )
    return Scattering(
        np.asarray((first.b1 * second.a2 - second.b1 * first.a2) / det),
        np.asarray((second.b1 * first.a1 - first.b1 * second.a1) / det),
        np.asarray((first.b2 * second.a2 - second.b2 * first.a2) / det),
        np.asarray((second.b2 * first.a1 - first.b2 * second.a1) / det),
    )


def read_switch_terms(
    forward: Waves, reverse: Waves, *, frequency_hz: FloatArray | None = None
) -> tuple[ComplexArray, ComplexArray]:
    """Return (GF, GR), each (..., F), of raw waves with a thru connected: GF = a2m / b2m, GR = a1m / b1m.

    `forward` has the source at port 1, `reverse` at port 2. Raises DataSetError where no wave came through.
    """
    require_numbers("a raw wave", frequency_hz, *forward, *reverse)
    refuse_where(
        (forward.b2 == 0.0) | (reverse.b1 == 0.0),
        frequency_hz,
        "no wave came through at {at}, so there are no switch terms: read them with a thru connected.",
    )
    return np.asarray(forward.a2 / forward.b2), np.asarray(reverse.a1 / reverse.b1)


def remove_switch_terms(
    ratios: Scattering, forward: ComplexArray, reverse: ComplexArray, *, frequency_hz: FloatArray | None = None
) -> Scattering:
    """Return the ratios of b = M a from those read with one source on at a time (b1/a1, b2/a1, b1/a2, b2/a2).

        d   = 1 - m12 m21 GF GR
        M11 = (m11 - m12 m21 GF) / d     M12 = (m12 - m11 m12 GR) / d
        M21 = (m21 - m22 m21 GF) / d     M22 = (m22 - m12 m21 GR) / d

    `forward` is GF and `reverse` GR (..., F). Raises DataSetError where d vanishes. Source: Marks 1997.
    """
    require_numbers("a raw ratio or switch term", frequency_hz, *ratios, forward, reverse)
    m11, m12, m21, m22 = ratios
    d = 1.0 - m12 * m21 * forward * reverse
    refuse_where(
        np.abs(d) < 1e-9,
        frequency_hz,
        "the raw ratios and the switch terms contradict each other at {at} (m12 m21 GF GR is 1): read both again.",
    )
    return Scattering(
        np.asarray((m11 - m12 * m21 * forward) / d),
        np.asarray((m12 - m11 * m12 * reverse) / d),
        np.asarray((m21 - m22 * m21 * forward) / d),
        np.asarray((m22 - m12 * m21 * reverse) / d),
    )


def add_switch_terms(ratios: Scattering, forward: ComplexArray, reverse: ComplexArray) -> Scattering:
    """Return what is read of b = M a with one source on at a time: the inverse of remove_switch_terms.

    m11 = M11 + M12 M21 GF / (1 - M22 GF) ,  m21 = M21 / (1 - M22 GF) , and the same turned round. Source: Marks 1997.
    """
    m11, m12, m21, m22 = ratios
    behind_2, behind_1 = 1.0 - m22 * forward, 1.0 - m11 * reverse
    return Scattering(
        np.asarray(m11 + m12 * m21 * forward / behind_2),
        np.asarray(m12 / behind_1),
        np.asarray(m21 / behind_2),
        np.asarray(m22 + m12 * m21 * reverse / behind_1),
    )
