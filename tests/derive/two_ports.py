"""Two-port terms, devices and readings for derive's tests, made up and known exactly."""

from __future__ import annotations

import numpy as np
import skrf

from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import Scattering, Waves, flush_thru
from benchrun.derive.two_port import TwoPortTerms


def disc(rng: np.random.Generator, shape, size: float) -> np.ndarray:
    return size * np.sqrt(rng.random(shape)) * np.exp(2j * np.pi * rng.random(shape))


def port(rng: np.random.Generator, points: int) -> ErrorTerms:
    tracking = (0.4 + 0.6 * rng.random(points)) * np.exp(2j * np.pi * rng.random(points))
    return ErrorTerms(disc(rng, points, 0.1), disc(rng, points, 0.15), tracking)


def terms(rng: np.random.Generator, points: int, frequency_hz: np.ndarray | None = None) -> TwoPortTerms:
    k = (0.5 + rng.random(points)) * np.exp(2j * np.pi * rng.random(points))
    return TwoPortTerms(port(rng, points), port(rng, points), k, frequency_hz)


def device(rng: np.random.Generator, shape) -> Scattering:
    return Scattering(*(disc(rng, shape, size) for size in (0.5, 0.1, 4.0, 0.6)))


def reflects(points: int, values=((1, 1), (-1, -1), (0, 0))) -> list[Scattering]:
    whole, none = np.ones(points, complex), np.zeros(points, complex)
    return [Scattering(g1 * whole, none, none, g2 * whole) for g1, g2 in values]


def standards(points: int) -> list[Scattering]:
    """Open, short and load at both ports, and a flush thru."""
    return [*reflects(points), flush_thru(points)]


def excite(m: Scattering, a1, a2) -> Waves:
    """The four waves of b = M a for given waves into M."""
    return Waves(a1, m.s11 * a1 + m.s12 * a2, a2, m.s21 * a1 + m.s22 * a2)


def network(m: Scattering, frequency: skrf.Frequency) -> skrf.Network:
    return skrf.Network(frequency=frequency, s=m.matrices())


def noisy(m: Scattering, rng: np.random.Generator, size: float) -> Scattering:
    return Scattering(*(v + disc(rng, v.shape, size) for v in m))


def assert_equal(ours: Scattering, theirs, atol: float = 1e-12) -> None:
    np.testing.assert_allclose(ours.matrices(), theirs, rtol=0, atol=atol)
