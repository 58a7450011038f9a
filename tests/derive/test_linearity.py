"""The inverse of compression: exact wherever the curve rises, marked where it has none."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.derive.linearity import (
    Linearity,
    distort_pair,
    image_bound,
    linearity_from,
    restore_pair,
    restore_weak,
)
from benchrun.errors import DataSetError

RECEIVER = linearity_from(0.1, np.deg2rad(-0.39), -3.0)
phases = st.floats(0, 2 * np.pi)
receivers = st.builds(linearity_from, st.floats(0.001, 1.0), st.floats(-0.3, 0.3), st.floats(-20, 10))


def wave(level_dbm, phase):
    return np.array([np.sqrt(1e-3 * 10 ** (level_dbm / 10)) * np.exp(1j * phase)])


@settings(deadline=None)
@given(receivers, st.floats(-80, 3), phases)
def test_restore_undoes_distort(receiver, above_db, phase):
    """Up to |kappa x^2| = 0.12: any figure's curve still rises there."""
    power_dbm = 10 * np.log10(0.12 / abs(receiver.kappa) / 1e-3) + above_db - 3
    x = wave(power_dbm, phase)
    found, beyond = receiver.restore(receiver.distort(x))
    assert not beyond[0]
    assert abs(found[0] / x[0] - 1) < 1e-12


def test_close_to_the_top_it_still_converges():
    receiver = Linearity(1.0 + 0j)
    x = np.array([np.sqrt(1 / 3) * (1 - 1e-6) + 0j])
    found, beyond = receiver.restore(receiver.distort(x))
    assert not beyond[0]
    assert abs(found[0] - x[0]) < 1e-8


def test_beyond_the_top_the_reading_is_kept_and_marked():
    receiver = Linearity(1.0 + 0j)
    y = np.array([0.3 + 0j, 0.5j])
    found, beyond = receiver.restore(y)
    np.testing.assert_array_equal(beyond, [False, True])
    assert found[1] == y[1]
    assert receiver.distort(found[:1])[0] == pytest.approx(y[0], abs=1e-14)


@pytest.mark.parametrize("kappa", [0j, -2.0 + 0j, 0.5 + 2j])
def test_a_curve_without_a_top_is_undone_everywhere(kappa):
    receiver = Linearity(kappa)
    x = np.linspace(0, 2, 101) * np.exp(0.5j)
    found, beyond = receiver.restore(receiver.distort(x))
    assert not np.any(beyond)
    np.testing.assert_allclose(found, x, rtol=0, atol=1e-12)


def test_over_limit_marks_levels_above_the_figure():
    np.testing.assert_array_equal(RECEIVER.over_limit(np.concatenate([wave(-3.1, 0), wave(-2.9, 1)])), [False, True])


@settings(deadline=None)
@given(receivers, st.floats(-60, 0), phases, phases, st.floats(-60, -20), st.floats(-60, -20))
def test_pair_round_trip(receiver, level_db, p1, p2, upper_db, lower_db):
    strong = wave(10 * np.log10(0.1 / abs(receiver.kappa) / 1e-3) + level_db, 0.4)
    upper, lower = strong * 10 ** (upper_db / 20) * np.exp(1j * p1), strong * 10 ** (lower_db / 20) * np.exp(1j * p2)
    found = restore_pair(receiver.kappa, strong, *distort_pair(receiver.kappa, strong, upper, lower))
    np.testing.assert_allclose(found, [upper, lower], rtol=1e-11, atol=1e-11 * abs(strong[0]) * 10**-3)


@settings(deadline=None)
@given(st.floats(-30, -3), phases, phases)
def test_without_coherence_the_bound_holds(level_dbm, p1, p2):
    strong, upper, lower = wave(level_dbm, 0.0), wave(-50, p1), wave(-56, p2)
    read, _ = distort_pair(RECEIVER.kappa, strong, upper, lower)
    left = restore_weak(RECEIVER.kappa, strong, read) - upper
    assert abs(left[0]) <= image_bound(RECEIVER.kappa, strong)[0] * abs(lower[0]) * (1 + 1e-9)


def test_a_figure_that_is_no_number():
    with pytest.raises(DataSetError, match="three numbers"):
        linearity_from(float("nan"), 0.0, -3.0)
