"""dB arithmetic against the definitions, and against rows of tables that everybody has."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.quantities import (
    db_to_ratio,
    db_to_voltage_ratio,
    dbm_to_volts,
    dbm_to_watts,
    ratio_to_db,
    volts_to_dbm,
    watts_to_dbm,
)

LEVELS = st.floats(-200.0, 100.0)


@pytest.mark.parametrize(("level_dbm", "volts"), [(0, 0.2236), (13, 0.9988), (20, 2.236), (30, 7.071), (46.99, 50.0)])
def test_level_to_rms_voltage_across_50_ohm(level_dbm: float, volts: float) -> None:
    # Closed form by definition of the dBm, V = sqrt(P Z); recomputed, to four figures.
    assert dbm_to_volts(level_dbm) == pytest.approx(volts, rel=1e-4)


@pytest.mark.parametrize(("level_dbm", "watts"), [(0, 1e-3), (30, 1.0), (43.0103, 20.0), (-174, 3.981e-21)])
def test_level_to_power(level_dbm: float, watts: float) -> None:
    # Definition of the dBm: 10 log10(P / 1 mW).
    assert dbm_to_watts(level_dbm) == pytest.approx(watts, rel=1e-4)


def test_3_db_is_nearly_twice_and_6_db_nearly_twice_the_voltage() -> None:
    # Definition: 10^(3/10) = 1.99526, 10^(6/20) = 1.99526.
    assert db_to_ratio(3.0) == pytest.approx(1.99526, rel=1e-5)
    assert db_to_voltage_ratio(6.0) == pytest.approx(1.99526, rel=1e-5)


@given(LEVELS)
def test_there_and_back(level: float) -> None:
    assert watts_to_dbm(dbm_to_watts(level)) == pytest.approx(level, abs=1e-9)
    assert volts_to_dbm(dbm_to_volts(level, 75.0), 75.0) == pytest.approx(level, abs=1e-9)
    assert ratio_to_db(db_to_ratio(level)) == pytest.approx(level, abs=1e-9)
    assert db_to_voltage_ratio(level) ** 2 == pytest.approx(db_to_ratio(level), rel=1e-9)


def test_nothing_is_minus_infinity_and_less_is_refused() -> None:
    assert watts_to_dbm(0.0) == ratio_to_db(0.0) == volts_to_dbm(0.0) == -math.inf
    for wrong in (-1.0, math.nan):
        with pytest.raises(ValueError, match="is no power"):
            watts_to_dbm(wrong)
        with pytest.raises(ValueError, match="is no power ratio"):
            ratio_to_db(wrong)
