"""Readings become points: final attempts, schedule order, swept conditions, and what is not alike."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from benchrun.contract.reading import Reading
from benchrun.derive.points import stack
from benchrun.derive.work import groups
from benchrun.errors import DataSetError


def reading(index, conditions, attempt=1, name="hot", value=1.0, frequencies=(2.3e9,), **more):
    data = np.full((2, 2, len(frequencies)), value, dtype=complex)
    return Reading(
        index, name, attempt, conditions, tuple(frequencies), ("probe", "pump"), (0.0, -7e6), ("incident", "reflected"),
        data, started_utc=f"2026-12-01T20:00:{index:02d}+00:00", **more,
    )  # fmt: skip


def test_the_last_attempt_is_final_in_schedule_order():
    readings = [
        reading(1, {"drive_dbm": 15.0}, value=4.0),
        reading(0, {"drive_dbm": 14.0}, attempt=2, value=3.0),
        reading(0, {"drive_dbm": 14.0}, attempt=1, value=2.0),
        reading(2, {}, name="other"),
    ]
    points = stack(readings, "hot")
    np.testing.assert_array_equal(points.wave("probe", "incident"), [3.0, 4.0])
    np.testing.assert_array_equal(points.number("drive_dbm"), [14.0, 15.0])
    assert (points.started_utc[-8:-6], points.ended_utc[-8:-6]) == ("00", "01")


def test_swept_readings_become_one_point_for_each_frequency():
    readings = [
        reading(0, {"gate.voltage_v": -2.8}, frequencies=(2.2e9, 2.3e9, 2.4e9), scalars={"drain.current_a": 0.35})
    ]
    points = stack(readings, "hot")
    np.testing.assert_array_equal(points.frequency_hz, [2.2e9, 2.3e9, 2.4e9])
    np.testing.assert_array_equal(points.tone_hz("pump"), [2.193e9, 2.293e9, 2.393e9])
    np.testing.assert_array_equal(points.scalars["drain.current_a"], [0.35] * 3)
    assert len(points) == len(points.flags) == 3


def test_scalar_readings_take_their_frequency_from_the_conditions():
    row = Reading(
        0, "levelling", 1, {"frequency_hz": 2.3e9}, (), (), (), (), np.zeros((0, 0, 0), complex), started_utc="x"
    )
    points = stack([row], "levelling")
    assert points.frequency_hz.tolist() == [2.3e9]
    with pytest.raises(DataSetError, match="at no known frequency"):
        stack([replace(row, conditions={})], "levelling")


def test_a_level_that_follows_is_no_sweep_of_its_own():
    readings = [
        reading(k, {"drive_dbm": d, "frequency_hz": f, "pump.level_dbm": d - 30 + f / 1e12}, frequencies=(f,))
        for k, (d, f) in enumerate((d, f) for d in (14.0, 15.0) for f in (2.2e9, 2.3e9))
    ]
    assert stack(readings, "hot").sweep_keys() == ("drive_dbm",)


def test_a_quantity_that_is_swept_itself_is_one():
    readings = [
        reading(k, {"drive_dbm": d, "drain.voltage_v": v})
        for k, (d, v) in enumerate((d, v) for d in (1.0, 2.0) for v in (24.0, 28.0))
    ]
    points = stack(readings, "hot")
    assert points.sweep_keys() == ("drive_dbm", "drain.voltage_v")
    found = [(chosen.nonzero()[0].tolist(), conditions) for chosen, conditions in groups(points)]
    assert found[1] == ([1], {"drive_dbm": 1.0, "drain.voltage_v": 28.0})
    assert len(found) == 4


def test_one_drive_is_still_named():
    assert groups(stack([reading(0, {"drive_dbm": 14.0})], "hot"))[0][1] == {"drive_dbm": 14.0}


def test_where_keeps_the_chosen():
    points = stack(
        [reading(k, {"drive_dbm": float(k), "connected.output": "open"}, flags=(f"f{k}",)) for k in range(3)], "hot"
    )
    kept = points.where(np.array([True, False, True]))
    assert kept.flags == (("f0",), ("f2",))
    assert kept.conditions["drive_dbm"].tolist() == [0.0, 2.0]
    assert kept.data.shape == (2, 2, 2)


def test_what_is_missing_is_named():
    points = stack([reading(0, {"drive_dbm": 1.0}), reading(1, {})], "hot")
    with pytest.raises(DataSetError, match="taken without meter"):
        points.number("meter.power_dbm")
    with pytest.raises(DataSetError, match="no drive_dbm at some points"):
        points.number("drive_dbm")
    with pytest.raises(DataSetError, match="reflected at image is needed"):
        points.wave("image", "reflected")


def test_what_is_not_alike_or_no_number_is_refused():
    with pytest.raises(DataSetError, match="no reading called 'cold'"):
        stack([reading(0, {})], "cold")
    with pytest.raises(DataSetError, match="not all taken with the same tones"):
        stack([reading(0, {}), replace(reading(1, {}), tones=("probe", "image"))], "hot")
    with pytest.raises(DataSetError, match=r"'hot' at 2\.3 GHz: a wave is no number"):
        stack([reading(0, {}, value=float("nan"))], "hot")
