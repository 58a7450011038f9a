"""Cubics on a grid: exact on it, below 1e-6 for what a bench's electrical length makes, on any grid."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.derive.interpolation import interpolate, outside

GRID_HZ = np.linspace(2.18e9, 2.4e9, 89)


def turning(f, tau=5e-9):
    return np.exp(-2j * np.pi * f * tau)


def test_grid_points_come_back_exactly():
    values = turning(GRID_HZ)
    np.testing.assert_array_equal(interpolate(GRID_HZ, values, GRID_HZ), values)


def test_error_stays_below_the_stated_bound():
    at = np.linspace(GRID_HZ[0], GRID_HZ[-1], 2001)
    error = np.abs(interpolate(GRID_HZ, turning(GRID_HZ), at) - turning(at))
    bound = 3 / 128 * (2 * np.pi * 2.5e6 * 5e-9) ** 4
    inner = (at > GRID_HZ[1]) & (at < GRID_HZ[-2])
    assert error[inner].max() < 1.05 * bound < 1e-6
    assert error.max() < 3e-6


@settings(deadline=None)
@given(st.lists(st.floats(-3, 3), min_size=4, max_size=4), st.integers(4, 30), st.floats(0, 1))
def test_cubics_are_reproduced(coefficients, count, share):
    grid = np.linspace(-1.0, 2.0, count)
    at = np.array([-1.0 + 3.0 * share])
    values = np.polyval(coefficients, grid)
    assert interpolate(grid, values, at)[0] == pytest.approx(np.polyval(coefficients, at[0]), abs=1e-9)


@pytest.mark.parametrize("count", [1, 2, 3])
def test_short_grids_use_what_they_have(count):
    grid = np.arange(float(count))
    assert interpolate(grid, 2.0 * grid + 1.0, [0.0])[0] == 1.0


def test_leading_axes_are_kept():
    values = np.stack([turning(GRID_HZ), 2 * turning(GRID_HZ)])
    assert interpolate(GRID_HZ, values, [2.2e9, 2.3e9, 2.31e9]).shape == (2, 3)


def test_outside_allows_a_rounding_error_only():
    np.testing.assert_array_equal(
        outside(GRID_HZ, [2.18e9 - 0.5, 2.18e9 - 2, 2.3e9, 2.4e9 + 2]), [False, True, False, True]
    )
