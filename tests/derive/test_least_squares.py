"""Planar least squares against numpy's, and how it says that columns depend on each other."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.least_squares import least_squares


@given(st.integers(0, 10**6), st.integers(1, 6), st.integers(0, 9))
def test_equals_numpy_one_system_at_a_time(seed, unknowns, more):
    rng = np.random.default_rng(seed)
    shape = (unknowns, unknowns + more, 2, 3)
    columns = rng.normal(size=shape) + 1j * rng.normal(size=shape) * 10.0 ** rng.uniform(-3, 3, (unknowns, 1, 1, 1))
    right = rng.normal(size=shape[1:]) + 1j * rng.normal(size=shape[1:])
    found = least_squares(columns, right)
    for place in np.ndindex(2, 3):
        a = columns[(slice(None), slice(None), *place)].T
        expected = np.linalg.lstsq(a, right[(slice(None), *place)], rcond=None)[0]
        scale = np.linalg.cond(a) * np.linalg.norm(expected)
        np.testing.assert_allclose(found.x[(slice(None), *place)], expected, rtol=0, atol=1e-13 * scale)


def test_dependent_columns_show_in_the_independence_of_their_frequency():
    rng = np.random.default_rng(1)
    columns = rng.normal(size=(3, 5, 4)) + 0j
    columns[2, :, 1] = columns[0, :, 1] - 2j * columns[1, :, 1]
    columns[1, :, 3] = 0.0
    found = least_squares(columns, columns[0])
    assert found.independence[1] < 1e-14
    assert found.independence[3] == 0.0
    assert found.independence[[0, 2]].min() > 0.05
    np.testing.assert_allclose(found.x[:, [0, 2]], [[1, 1], [0, 0], [0, 0]], rtol=0, atol=1e-13)


def test_independence_is_a_sine():
    """Two columns at an angle: what the first leaves over of the second is the sine of it."""
    angle = np.array([0.3, 1e-4, np.pi / 2])
    columns = np.stack([np.stack([np.ones(3), np.zeros(3)]), np.stack([np.cos(angle), np.sin(angle)])]) + 0j
    np.testing.assert_allclose(least_squares(columns, columns[0]).independence, np.sin(angle), rtol=1e-9)


def test_many_frequencies_are_solved_in_pieces_and_none_is_lost():
    """4000 systems of 5 by 9, over drives and frequencies: more than fit into one piece; and none at all."""
    rng = np.random.default_rng(4)
    columns = rng.normal(size=(5, 9, 2, 2000)) + 1j * rng.normal(size=(5, 9, 2, 2000))
    x = rng.normal(size=(5, 2, 2000)) + 1j * rng.normal(size=(5, 2, 2000))
    found = least_squares(columns, np.sum(columns * x[:, None], axis=0))
    np.testing.assert_allclose(found.x, x, rtol=0, atol=1e-11)
    assert least_squares(columns[..., :0], columns[0, ..., :0]).x.shape == (5, 2, 0)
