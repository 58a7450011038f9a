"""The levelled drive: read backwards exactly at its points, monotone between them, refused where nothing was read."""

from __future__ import annotations

import json

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.derive.levelling import Levelling
from benchrun.errors import CalibrationError, DataSetError
from tests.derive.test_calibration import CIRCUMSTANCES
from tests.derive.virtual_bench import LEVELLING_GRID_HZ, LEVELS_DBM, VirtualBench

CHAIN = VirtualBench.power_at_input


def levelled(levels=LEVELS_DBM, grid=LEVELLING_GRID_HZ, power=CHAIN) -> Levelling:
    table = np.array([power(level, grid) for level in levels])
    return Levelling("drive", "pump", "input", np.asarray(levels, float), grid, table, CIRCUMSTANCES)


def test_at_its_points_it_is_exact():
    made = levelled()
    found = made.pump_level_dbm(made.power_dbm, made.frequency_hz)
    np.testing.assert_allclose(found, np.repeat(LEVELS_DBM[:, None], 22, axis=1), rtol=0, atol=1e-12)


def test_between_its_points_the_drive_is_right_to_a_hundredth_of_a_decibel():
    drive, f = np.meshgrid(np.arange(14.0, 31.0), np.linspace(2.193e9, 2.393e9, 81), indexing="ij")
    level = levelled().pump_level_dbm(drive, f)
    assert level.shape == (17, 81)
    assert np.abs(CHAIN(level, f) - drive).max() < 0.01


@settings(deadline=None)
@given(st.lists(st.floats(0.05, 3.0), min_size=2, max_size=6), st.integers(0, 100))
def test_the_level_rises_with_the_drive_on_any_rising_chain(steps, seed):
    powers = 10 + np.cumsum([0.0, *steps])
    made = levelled(4.0 * np.arange(powers.size), np.array([2.2e9]), lambda level, f: powers[int(level // 4)] + 0 * f)
    drive = np.sort(np.random.default_rng(seed).uniform(powers[0] - 2, powers[-1], 50))
    level = made.pump_level_dbm(drive, 2.2e9)
    assert np.all(np.diff(level) >= -1e-12)
    assert np.all(level <= made.level_dbm[-1] + 1e-12)


def test_below_the_lowest_reading_the_gain_is_carried_on():
    made = levelled()
    low = made.power_dbm[0, 0]
    assert made.pump_level_dbm(low - 2.5, made.frequency_hz[0]) == pytest.approx(LEVELS_DBM[0] - 2.5, abs=1e-12)


@pytest.mark.parametrize("drive_dbm", [5.0, 34.0, float("nan")])
def test_a_drive_that_no_reading_supports_is_refused(drive_dbm):
    with pytest.raises(CalibrationError, match=r"levelling 'drive' reaches .* dBm is wanted"):
        levelled().pump_level_dbm([20.0, drive_dbm], 2.3e9)


def test_a_frequency_outside_is_refused():
    with pytest.raises(CalibrationError, match=r"covers 2\.19 GHz to 2\.4 GHz; 2\.186 GHz is wanted"):
        levelled().pump_level_dbm(20.0, 2.186e9)


def test_a_chain_that_does_not_rise_is_refused():
    with pytest.raises(DataSetError, match=r"at 2\.19 GHz the power does not rise with the pump's level"):
        levelled(power=lambda level, f: np.minimum(level + 30.0, 25.0) + 0 * f)
    with pytest.raises(DataSetError, match="two levels or more"):
        levelled(levels=[0.0])


def test_document_round_trip_and_what_it_refuses():
    made = levelled()
    back = Levelling.from_document(json.loads(json.dumps(made.to_document(), allow_nan=False)))
    np.testing.assert_array_equal(back.power_dbm, made.power_dbm)
    assert (back.name, back.signal, back.plane, back.circumstances) == ("drive", "pump", "input", CIRCUMSTANCES)
    document = made.to_document()
    del document["power_dbm"]
    with pytest.raises(CalibrationError, match="damaged"):
        Levelling.from_document(document)
    with pytest.raises(CalibrationError, match="a levelling is expected"):
        Levelling.from_document({"kind": "calibration"})


def test_what_does_not_fit_is_named():
    made = levelled()
    made.check_fits("abc", "2026-12-02T00:00:00Z", "simulated, seed 1")
    with pytest.raises(CalibrationError, match="levelling 'drive' was made with other parts"):
        made.check_fits("xyz", "2026-12-02T00:00:00Z", "simulated, seed 1")
    with pytest.raises(CalibrationError, match="levelling 'drive' expired"):
        made.check_fits("abc", "2027-12-02T00:00:00Z", "simulated, seed 1")
    with pytest.raises(CalibrationError, match="nothing simulated ever corrects a real run"):
        made.check_fits("abc", "2026-12-02T00:00:00Z", "real")
