"""Sums in phase, mismatch, and the smooth limiter."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.plan.decibels import loop_db, magnitude, saturated_dbm, together_dbm

LEVELS = st.floats(-150.0, 60.0)


def test_two_equal_waves_in_phase_are_six_db_more() -> None:
    assert together_dbm([np.array([10.0]), np.array([10.0])])[0] == pytest.approx(10.0 + 20.0 * np.log10(2.0))


@given(LEVELS, LEVELS)
def test_together_is_above_each_and_below_both_doubled(one: float, other: float) -> None:
    found = together_dbm([np.array([one]), np.array([other])])[0]
    assert max(one, other) - 1e-9 <= found <= max(one, other) + 6.0206


def test_what_is_not_there_adds_nothing_and_nothing_is_not_zero_dbm() -> None:
    nothing = np.array([np.nan])
    assert together_dbm([np.array([3.0]), nothing])[0] == pytest.approx(3.0)
    assert np.isnan(together_dbm([nothing, nothing])[0])


def test_a_mismatch_is_bounded_even_where_both_reflect_everything() -> None:
    assert loop_db(1.0, 1.0) == pytest.approx(40.0)
    assert loop_db(0.0, 1.0) == 0.0


@given(LEVELS)
def test_magnitude_is_the_inverse_of_db(level: float) -> None:
    assert 20.0 * np.log10(magnitude(level)) == pytest.approx(level, abs=1e-9)


def test_saturation_is_linear_far_below_three_db_down_at_it_and_never_above() -> None:
    """Rapp, p = 2: at the corner the output is 10 log10(2) / 2 = 1.505 dB below the linear one."""
    levels = np.array([-60.0, 28.5, 60.0])
    found = saturated_dbm(levels, 14.5, 43.0)
    assert found[0] == pytest.approx(-45.5, abs=1e-9)
    assert found[1] == pytest.approx(43.0 - 5.0 * np.log10(2.0))
    assert found[2] == pytest.approx(43.0, abs=1e-3)
    rising = saturated_dbm(np.linspace(-60.0, 80.0, 500), 14.5, 43.0)
    assert np.all(np.diff(rising) > 0.0)
    assert np.all(rising < 43.0)
