"""How uncertain a one-port calibration is, and the reflections that it corrects: linear, complex, for each point.

With x = (a, b, c) of one_port's linear form, Gm = a + b G + c G Gm. Sources: METHODS section 4; JCGM 100, JCGM 102.
"""

from __future__ import annotations

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.least_squares import least_squares
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import refuse_where
from benchrun.derive.uncertainty import Spread, propagate
from benchrun.errors import DataSetError

#: Share of a column's length that the others must leave over; below it the standards do not span.
LEAST_INDEPENDENCE = 1e-4


def terms_spread(
    terms: ErrorTerms,
    ratios: ComplexArray,
    reflections: ComplexArray,
    definitions: Spread,
    readings: Spread | None = None,
    *,
    frequency_hz: FloatArray | None = None,
) -> Spread:
    """Return the spread (3, 3, F) of the errors of (a, b, c) that one_port.solve found from N standards.

    `ratios` and `reflections` (N, F) are what went into it. `definitions` (N, N, F) is the spread of the defined
    reflections, with the connection's repeatability added (Spread.plus); standards that share a cause (one kit, one
    line impedance) may be correlated in it. `readings` (N, N, F) is the spread of the raw ratios: noise, drift.

        A dx = r ,   r_i = (1 - c G_i) dGm_i - (b + c Gm_i) dG_i ,   dx = A^+ r

    with A the system that was solved. Raises DataSetError where shapes do not fit or the standards do not span.

    >>> from benchrun.derive.uncertainty import round_errors
    >>> terms = ErrorTerms(np.array([0j]), np.array([0j]), np.array([1 + 0j]))
    >>> osl = np.array([[1], [-1], [0]], dtype=complex)
    >>> spread = terms_spread(terms, osl, osl, round_errors(np.array([[0.0], [0.0], [0.004]])))
    >>> round(float(reflection_spread(terms, np.array([0j]), spread).standard_uncertainty()[0, 0]), 6)
    0.004
    """
    inverse = _pseudo_inverse(ratios, reflections, frequency_hz)
    for spread in (definitions, *([] if readings is None else [readings])):
        if spread.covariance.shape[:2] != (len(ratios), len(ratios)):
            raise DataSetError(
                f"the uncertainty of {len(spread.covariance)} standards was given for {len(ratios)}: one row and one "
                "column for each is expected."
            )
    _, b, c = _linear(terms)
    found = propagate(definitions, -inverse * (b + c * ratios))
    return found if readings is None else found.plus(propagate(readings, inverse * (1.0 - c * reflections)))


def reflection_spread(
    terms: ErrorTerms, ratio: ComplexArray, term_spread: Spread, reading: Spread | None = None
) -> Spread:
    """Return the spread (1, 1, ..., F) of the reflection corrected from the raw `ratio` (..., F).

        dG = [(1 - c G) dGm - u . dx] / (b + c Gm) ,   u = (1, G, G Gm)

    `term_spread` (3, 3, F) comes from terms_spread; `reading` (1, 1, ..., F) is the spread of this raw ratio. Raises
    DataSetError as one_port's apply does.
    """
    ratio = np.asarray(ratio, np.complex128)
    reflection = terms.apply(ratio)
    _, b, c = _linear(terms)
    slope = b + c * ratio
    u = np.stack([np.ones_like(ratio), reflection, reflection * ratio]) / slope
    (s, p), v = term_spread, np.zeros(ratio.shape)
    pseudo = np.zeros(ratio.shape, np.complex128)
    for i in range(3):
        v += np.abs(u[i]) ** 2 * s[i, i].real
        pseudo += u[i] ** 2 * p[i, i]
        for k in range(i):
            v += 2.0 * (u[i] * s[i, k] * np.conj(u[k])).real
            pseudo += 2.0 * u[i] * u[k] * p[i, k]
    found = Spread(v[None, None].astype(np.complex128), pseudo[None, None])
    return found if reading is None else found.plus(propagate(reading, ((1.0 - c * reflection) / slope)[None, None]))


def sensitivity(
    terms: ErrorTerms, ratios: ComplexArray, reflections: ComplexArray, device: ComplexArray
) -> ComplexArray:
    """Return dG/dG_i (N, ..., F): what an error of the i-th definition does to the reflection `device` (..., F).

    For a budget: the share of each standard is its magnitude times that standard's uncertainty. With open, short and
    match it is -[dL (1 - G^2) + dO G (G + 1) / 2 + dS G (G - 1) / 2] (METHODS section 2).
    """
    _, b, c = _linear(terms)
    raw = terms.raw(device)
    u = np.stack([np.ones_like(raw), device, device * raw]) / (b + c * raw)
    inverse = _pseudo_inverse(ratios, reflections, None)
    by_standard = inverse * (b + c * ratios)
    return np.asarray(
        np.stack([np.sum([u[k] * by_standard[k, n] for k in range(3)], axis=0) for n in range(len(ratios))])
    )


def _linear(terms: ErrorTerms) -> tuple[ComplexArray, ComplexArray, ComplexArray]:
    return terms.e00, np.asarray(terms.e10e01 - terms.e00 * terms.e11), terms.e11


def _pseudo_inverse(ratios: ComplexArray, reflections: ComplexArray, frequency_hz: FloatArray | None) -> ComplexArray:
    """Return A^+ (3, N, F) for the rows (1, G_i, G_i Gm_i)."""
    ratios, reflections = np.asarray(ratios, np.complex128), np.asarray(reflections, np.complex128)
    if ratios.ndim != 2 or ratios.shape != reflections.shape or len(ratios) < 3:
        raise DataSetError(
            f"raw ratios {ratios.shape} and definitions {reflections.shape} must both be (standards, frequencies), "
            "with three standards or more."
        )
    columns = np.stack([np.ones_like(ratios), reflections, reflections * ratios])
    solutions = []
    for unit in np.eye(len(ratios)):
        solution = least_squares(columns, np.broadcast_to(unit[:, None], ratios.shape).astype(np.complex128))
        solutions.append(solution.x)
    refuse_where(
        ~(solution.independence > LEAST_INDEPENDENCE),
        frequency_hz,
        "the standards are too alike at {at} to say how uncertain the calibration is: take three different ones.",
    )
    return np.stack(solutions, axis=1)
