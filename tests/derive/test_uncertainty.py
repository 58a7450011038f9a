"""Spreads: linear propagation against draws, ellipses that hold what they promise, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.optimum_load import optimum_load
from benchrun.derive.uncertainty import (
    Spread,
    coverage_factor,
    derivatives,
    ellipse,
    inside,
    monte_carlo,
    polar,
    propagate,
    real_errors,
    round_errors,
    together,
)
from benchrun.errors import DataSetError


def some_spread(rng, n, points, size=1.0) -> Spread:
    j, q = (size * (rng.standard_normal((n, n, points)) + 1j * rng.standard_normal((n, n, points))) for _ in range(2))
    return propagate(round_errors(np.ones((n, points))), j, q)


@given(st.integers(0, 10**6), st.integers(1, 4))
def test_planes_are_covariances(seed, n):
    """Symmetric, not negative, C Hermitian, P symmetric, whatever is propagated."""
    rng = np.random.default_rng(seed)
    spread = some_spread(rng, n, 3)
    np.testing.assert_allclose(spread.covariance, np.conj(spread.covariance.swapaxes(0, 1)), rtol=0, atol=1e-12)
    np.testing.assert_allclose(spread.pseudo, spread.pseudo.swapaxes(0, 1), rtol=0, atol=1e-12)
    for k in range(n):
        assert np.linalg.eigvalsh(spread.plane(k)).min() > -1e-10
        np.testing.assert_array_equal(spread.only(k).plane(), spread.plane(k))


@given(st.integers(0, 10**6))
def test_propagating_twice_is_propagating_the_product(seed):
    """d -> J d + Q d*, then again: (J2 J + Q2 Q*) d + (J2 Q + Q2 J*) d*."""
    rng = np.random.default_rng(seed)
    spread = some_spread(rng, 2, 1)
    j1, q1, j2, q2 = rng.standard_normal((4, 2, 2, 1)) + 1j * rng.standard_normal((4, 2, 2, 1))

    def times(a, b):
        return np.einsum("ij...,jk...->ik...", a, b)

    twice = propagate(propagate(spread, j1, q1), j2, q2)
    once = propagate(spread, times(j2, j1) + times(q2, np.conj(q1)), times(j2, q1) + times(q2, np.conj(j1)))
    for a, b in zip(twice, once, strict=True):
        np.testing.assert_allclose(a, b, rtol=1e-9, atol=1e-9)


def test_monte_carlo_draws_what_the_spread_says():
    """Identity: the draws' covariance and pseudo-covariance are the ones put in."""
    spread = some_spread(np.random.default_rng(2), 3, 2)
    mean, drawn = monte_carlo(lambda *z: z, np.zeros((3, 2)), spread, 60_000, 4)
    scale = np.abs(spread.covariance).max()
    assert np.abs(mean).max() < 0.03 * np.sqrt(scale)
    for ours, theirs in zip(drawn, spread, strict=True):
        np.testing.assert_allclose(ours, theirs, rtol=0, atol=0.03 * scale)


@pytest.mark.parametrize("probability", [0.5, 0.95, 0.99])
def test_the_ellipse_holds_what_it_promises(probability):
    spread = some_spread(np.random.default_rng(3), 1, 1)
    errors = []
    monte_carlo(lambda z: errors.append(z) or z, [[0.0]], spread, 100_000, 5)
    held = inside(errors[0], spread, probability)
    assert np.mean(held) == pytest.approx(probability, abs=4 * np.sqrt(probability * (1 - probability) / 1e5))
    axes = ellipse(spread, probability)
    edge = np.exp(1j * axes.angle_rad) * axes.longer, 1j * np.exp(1j * axes.angle_rad) * axes.shorter
    for tip in edge:
        assert inside(0.999 * tip, spread, probability)[0]
        assert not inside(1.001 * tip, spread, probability)[0]


def test_derivatives_of_functions_of_z_and_its_conjugate():
    """z^2 w*: d/dz = 2 z w*, d/dw* = z^2, the others zero; an array and several results alike."""
    z, w = np.array([1 + 2j, -0.3j]), np.array([0.5 - 1j, 2.0 + 0j])
    j, q = derivatives(lambda z, w: (z**2 * np.conj(w), z + 0 * w), [z, w])
    np.testing.assert_allclose(j, [[2 * z * np.conj(w), 0 * z], [1 + 0 * z, 0 * z]], rtol=0, atol=1e-9)
    np.testing.assert_allclose(q, [[0 * z, z**2], [0 * z, 0 * z]], rtol=0, atol=1e-9)


def test_optimum_load_carries_the_device_s_uncertainty():
    """B, S and T' through Gamma_opt and P_max: linear against draws of the same model."""
    values = [np.array([10 + 0j]), np.array([0.5 * np.exp(2j)]), np.array([0.2j])]
    spread = together(round_errors([[0.02]]), some_spread(np.random.default_rng(7), 2, 1, 5e-4))
    linear = propagate(spread, *derivatives(optimum_load, values))
    mean, drawn = monte_carlo(optimum_load, values, spread, 60_000, 8)
    assert abs(mean[0, 0] - optimum_load(*values).reflection[0]) < 1e-4
    for k in (0, 1):
        np.testing.assert_allclose(linear.plane(k), drawn.plane(k), rtol=0.05, atol=0.02 * drawn.plane(k).max())
    assert linear.plane(1)[0, 1, 1] < 1e-12, "power is real"


def test_independent_spreads_stand_side_by_side():
    both = together(round_errors([[1.0, 2.0]]), real_errors(np.array([[[4.0]]])))
    np.testing.assert_allclose(both.covariance[0, 0], [2, 8])
    np.testing.assert_allclose(both.pseudo[1, 1], [4, 4])
    assert not np.any(both.covariance[0, 1])
    np.testing.assert_allclose(both.plus(both).covariance, 2 * both.covariance)


def test_polar_is_along_and_across():
    """An error along the value moves the magnitude alone, one across it the phase alone."""
    z = 0.5 * np.exp(0.7j)
    along = propagate(real_errors([[[1e-6]]]), np.exp([[[0.7j]]]))
    found = polar([z], along)
    assert found.magnitude_uncertainty[0] == pytest.approx(1e-3)
    assert found.phase_uncertainty_rad[0] == pytest.approx(0.0, abs=1e-9)


def test_refusals():
    for wrong in (-1.0, np.nan, np.inf):
        with pytest.raises(DataSetError, match="standard uncertainty"):
            round_errors([[wrong]])
    for probability in (0.0, 1.0, 95.0):
        with pytest.raises(DataSetError, match="coverage probability"):
            coverage_factor(probability)
    with pytest.raises(DataSetError, match="1 trials"):
        monte_carlo(np.abs, [[0.0]], round_errors([[1.0]]), 1, 1)
