"""Closed forms of single contributions: shapes, limits and refusals (their values are in tests/sources)."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.contributions import mismatch_limits, mismatch_uncertainty, reading_limits_db, residual_error
from benchrun.errors import DataSetError


def test_over_arrays_and_complex_reflections():
    load = np.array([0.1j, -0.2, 0.0])
    limits = mismatch_limits(0.5, load)
    np.testing.assert_allclose(limits.high, [1.05**2, 1.1**2, 1.0])
    np.testing.assert_allclose(limits.low, [0.95**2, 0.9**2, 1.0])
    np.testing.assert_allclose(residual_error(load, 0.01, 0.02, 0.03), [0.0123, 0.0152, 0.01])


def test_an_error_beyond_the_reflection_leaves_no_upper_limit():
    limits = reading_limits_db([20.0, 20.0], [0.2, 0.05])
    assert np.isposinf(limits.high[0])
    assert limits.high[1] == pytest.approx(26.02, abs=0.01)


def test_reflections_that_reach_one_are_refused():
    for call in (mismatch_limits, mismatch_uncertainty):
        with pytest.raises(DataSetError, match="product reaches 1"):
            call([0.5, 1.0], [0.5, 1.0])
