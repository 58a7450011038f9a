"""How uncertain hot S22 and T22 are: error terms and readings through the waves and the two sidebands, linearly.

From one_port's (a, b, c) and the raw waves m, r of the two sidebands, with e = b + a c; the scale K is common to both
sidebands, falls out of S22 and |T22|, and is left out:

    w_b = (m - a r) / e ,   w_a = r + c w_b
    dS  = (q(+) a(+)* - q(-) a(-)*) / det ,   dT' = (a(+) q(-) - a(-) q(+)) / det
    q(+) = db(+) - S da(+) - T' da(-)* ,      q(-) = db(-) - S da(-) - T' da(+)*

Source: METHODS sections 1, 2 and 4; JCGM 102.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from benchrun.contract.capture import ComplexArray
from benchrun.derive.hot import two_sidebands
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.uncertainty import Spread, propagate


class HotReflection(NamedTuple):
    """S22 and T22' (..., F), and the spread (2, 2, ..., F) of their errors, in this order."""

    s22: ComplexArray
    t22: ComplexArray
    spread: Spread


class RawSidebands(NamedTuple):
    """The raw waves of one probe, each (..., F) in root-watt: measurement and reference receiver, upper and lower."""

    measured_upper: ComplexArray
    reference_upper: ComplexArray
    measured_lower: ComplexArray
    reference_lower: ComplexArray


def hot_reflection(
    terms: ErrorTerms, raw: RawSidebands, term_spread: Spread, readings: Spread | None = None
) -> HotReflection:
    """Return S22 and T22' of raw waves (..., F) and how uncertain both are.

    `terms` (F,) serve both sidebands, and so do their errors, `term_spread` (3, 3, F) of (a, b, c) from
    one_port_uncertainty.terms_spread: Delta is small against what the terms change over. `readings` (4, 4, ..., F) is
    the spread of the four raw waves in RawSidebands' order, in watt: noise floor and skirt, receiver linearity,
    crosstalk. The phase of T22' means something only where the tones were captured coherently; its magnitude does
    always. Raises DataSetError where the image is as strong as the probe.
    """
    shape = np.broadcast_shapes(*(np.shape(wave) for wave in raw))
    waves = [np.broadcast_to(wave, shape) for wave in raw]
    found = HotReflection(np.empty(shape, np.complex128), np.empty(shape, np.complex128), _empty(2, shape))
    noise = None if readings is None else Spread(*(np.broadcast_to(part, (4, 4, *shape)) for part in readings))
    for at in np.ndindex(shape[:-1]):  # drive by drive, because one drive fits in a cache
        here = RawSidebands(*(wave[at] for wave in waves))
        own = None if noise is None else Spread(*(part[(slice(None), slice(None), *at)] for part in noise))
        found.s22[at], found.t22[at], spread = _one_drive(terms, here, term_spread, own)
        for whole, part in zip(found.spread, spread, strict=True):
            whole[(slice(None), slice(None), *at)] = part
    return found


def _empty(n: int, shape: tuple[int, ...]) -> Spread:
    return Spread(*(np.empty((n, n, *shape), np.complex128) for _ in range(2)))


def _one_drive(terms: ErrorTerms, raw: RawSidebands, term_spread: Spread, readings: Spread | None) -> HotReflection:
    """Return what hot_reflection does for waves (F,)."""
    upper = _wave(terms, raw.measured_upper, raw.reference_upper, 3)
    lower = _wave(terms, raw.measured_lower, raw.reference_lower, 5)
    s22, t22 = two_sidebands(upper.a, upper.b, lower.a, lower.b)
    det = np.abs(upper.a) ** 2 - np.abs(lower.a) ** 2
    weights = np.array([[np.conj(upper.a), -np.conj(lower.a)], [-lower.a, upper.a]]) / det
    jacobian, conjugate = (
        np.einsum("ik...,kj...->ij...", weights, parts) for parts in _left_over(s22, t22, upper, lower)
    )
    spread = propagate(term_spread, jacobian[:, :3], conjugate[:, :3])
    if readings is not None:
        spread = spread.plus(propagate(readings, jacobian[:, 3:], conjugate[:, 3:]))
    return HotReflection(s22, t22, spread)


class _Wave(NamedTuple):
    """One sideband's waves (..., F) without the scale, and what (a, b, c, m+, r+, m-, r-) do to them: (7, ..., F)."""

    b: ComplexArray
    a: ComplexArray
    b_by: ComplexArray
    a_by: ComplexArray


def _wave(terms: ErrorTerms, m: ComplexArray, r: ComplexArray, place: int) -> _Wave:
    """Return a sideband whose readings are at `place` and after it among the seven."""
    a, c, e = terms.e00, terms.e11, terms.e10e01
    b_wave = np.asarray((m - a * r) / e)
    b_by = np.zeros((7, *b_wave.shape), np.complex128)
    b_by[0], b_by[1], b_by[2] = -(r + c * b_wave) / e, -b_wave / e, -a * b_wave / e
    b_by[place], b_by[place + 1] = 1.0 / e, -a / e
    a_by = c * b_by
    a_by[2] += b_wave
    a_by[place + 1] += 1.0
    return _Wave(b_wave, np.asarray(r + c * b_wave), b_by, a_by)


def _left_over(s: ComplexArray, t: ComplexArray, upper: _Wave, lower: _Wave) -> tuple[ComplexArray, ComplexArray]:
    """Return what the seven, and what their conjugates, do to q(+) and q(-): (2, 7, ..., F) each."""
    direct = np.stack([upper.b_by - s * upper.a_by, lower.b_by - s * lower.a_by])
    return direct, np.stack([-t * np.conj(lower.a_by), -t * np.conj(upper.a_by)])
