"""A source that follows the receiver's sweep: its levels are the drive's at each point, and all of them are checked."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from benchrun.errors import FileProblemsError
from benchrun.plan.levels import check_levels
from tests.schedule.made import example_bench, schedule_from

FOLLOW = """\
  - set: {probe.level: 0 dBm, probe.frequency: 2.3 GHz, pump.frequency: 2.293 GHz}
  - sweep: {drive: [14 dBm, 20 dBm]}
    do:
      - read: {name: a, tones: [probe, pump], follow: pump, over: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 3}}}
"""


class Slope:
    """A levelling of a chain that loses 10 dB for each GHz above 2.193 GHz."""

    def pump_level_dbm(self, drive_dbm: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> npt.NDArray[np.float64]:
        drive, frequency = np.broadcast_arrays(np.asarray(drive_dbm, float), np.asarray(frequency_hz, float))
        return np.asarray(drive - 30.0 + 1e-8 * (frequency - 2.193e9))

    def to_document(self) -> dict[str, Any]:
        return {"slope": 10.0}


def test_the_levels_are_those_of_the_drive_at_each_point() -> None:
    schedule = schedule_from(FOLLOW, drive_gain=Slope())
    captures = [schedule.reading(index).action.capture for index in range(2)]
    assert [capture.levels_dbm for capture in captures if capture] == [(-16.0, -15.0, -14.0), (-10.0, -9.0, -8.0)]


def test_without_a_drive_the_level_in_force_holds_at_every_point() -> None:
    schedule = schedule_from(
        FOLLOW.replace("sweep: {drive: [14 dBm, 20 dBm]}", "sweep: {pump.level: [-9 dBm, -3 dBm]}")
    )
    captures = [schedule.reading(index).action.capture for index in range(2)]
    assert [capture.levels_dbm for capture in captures if capture] == [(-9.0,) * 3, (-3.0,) * 3]


def test_the_level_check_sees_every_point_of_the_list() -> None:
    table = check_levels(schedule_from(FOLLOW, drive_gain=Slope()), example_bench())
    levels = {(row.plane, row.tone): row.level_dbm for row in table.rows}
    assert levels["pump output", "pump"] == pytest.approx(-8.0)
    by_drive = check_levels(schedule_from(FOLLOW), example_bench())
    assert levels["device input", "pump"] == pytest.approx(
        {(row.plane, row.tone): row.level_dbm for row in by_drive.rows}["device input", "pump"]
    )


def test_a_point_that_the_source_must_not_give_is_a_mistake() -> None:
    steep = FOLLOW.replace("20 dBm", "34 dBm")
    with pytest.raises(FileProblemsError, match=r"pump.level would be \+?6 dBm"):
        schedule_from(steep, drive_gain=Slope())
