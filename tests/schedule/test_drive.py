"""The drive: by the bench's parts, or levelled; one by one and many at once the same."""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
import pytest

from benchrun.contract.actions import SetAction
from benchrun.errors import CalibrationError, FileProblemsError
from benchrun.plan.levels import check_levels

from .made import changed_bench, example_bench, schedule_from

SWEEP = """
  - sweep: {drive: {from: 10 dBm, to: 20 dBm, points: 4}}
    do:
      - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: POINTS}}
        do:
          - set: {pump.frequency: "{frequency}"}
          - read: {name: a, waves: [], tones: [pump]}
"""


class Bent:
    """A chain that compresses and slopes, and counts how often it is asked."""

    def __init__(self, highest_dbm: float = 99.0) -> None:
        self.asked: list[int] = []
        self._highest_dbm = highest_dbm

    def pump_level_dbm(self, drive_dbm: npt.ArrayLike, frequency_hz: npt.ArrayLike) -> npt.NDArray[np.float64]:
        drive, frequency = np.broadcast_arrays(np.asarray(drive_dbm, float), np.asarray(frequency_hz, float))
        self.asked.append(drive.size)
        if np.any(drive > self._highest_dbm):
            raise CalibrationError("the levelling ends there")
        return np.asarray(drive - 29.6 + 0.01 * np.exp(drive / 10.0) + (frequency - 2.3e9) / 1e9)

    def to_document(self) -> dict[str, Any]:
        return {}


def levels(gain: Any, points: int = 5) -> list[float]:
    schedule = schedule_from(SWEEP.replace("POINTS", str(points)), drive_gain=gain)
    return [schedule.reading(index).conditions["pump.level_dbm"] for index in range(len(schedule))]  # type: ignore[misc]


def test_the_levelled_drive_is_used_where_there_is_one() -> None:
    expected = Bent().pump_level_dbm(np.repeat(np.linspace(10, 20, 4), 5), np.tile(np.linspace(2.2e9, 2.4e9, 5), 4))
    np.testing.assert_allclose(levels(Bent()), expected, atol=1e-4)


def test_a_table_of_a_part_is_followed() -> None:
    bench = changed_bench(("gain: 30 dB, linear", "gain: [[2.2 GHz, 30 dB], [2.4 GHz, 32 dB]], linear"))
    schedule = schedule_from(SWEEP.replace("POINTS", "3"), bench)
    found = [schedule.reading(index).conditions["pump.level_dbm"] for index in range(3)]
    assert found == [10.0 - 29.6, 10.0 - 30.6, 10.0 - 31.6]


def test_levels_are_the_same_in_a_walk_from_the_beginning_from_the_middle_and_in_columns() -> None:
    schedule = schedule_from(SWEEP.replace("POINTS", "7"), drive_gain=Bent())
    walked = {p.reading_index: p.conditions["pump.level_dbm"] for p in schedule.walk() if p.reading_index is not None}
    for index in range(len(schedule)):
        other = schedule_from(SWEEP.replace("POINTS", "7"), drive_gain=Bent())
        assert other.reading(index).conditions["pump.level_dbm"] == walked[index]
    for columns in schedule.columns():
        for n, index in enumerate(columns.index.tolist()):
            assert columns.values["pump.level"][n] == walked[index]


def test_a_walk_asks_for_many_levels_at_once() -> None:
    gain = Bent()
    schedule = schedule_from(SWEEP.replace("POINTS", "81"), drive_gain=gain)
    gain.asked.clear()
    assert len(list(schedule.walk())) > 4 * 81
    assert len(gain.asked) < 20
    assert max(gain.asked) == 81


def test_levels_have_no_more_digits_than_mean_anything() -> None:
    assert all(level == round(level, 4) for level in levels(Bent()))


def test_a_drive_that_the_levelling_does_not_reach_is_told_with_its_place() -> None:
    with pytest.raises(FileProblemsError, match="the levelling ends there"):
        levels(Bent(highest_dbm=19.0))


def test_a_drive_out_of_reach_between_the_ends_is_found_by_the_level_check() -> None:
    acquire = SWEEP.replace("{from: 10 dBm, to: 20 dBm, points: 4}", "[10 dBm, 12 dBm, 25 dBm, 11 dBm]").replace(
        "POINTS", "3"
    )
    schedule = schedule_from(acquire, drive_gain=Bent(highest_dbm=20.0))
    with pytest.raises(CalibrationError, match="ends there"):
        check_levels(schedule, example_bench())


def test_the_drive_itself_is_never_sent_to_an_instrument() -> None:
    schedule = schedule_from(SWEEP.replace("POINTS", "2"))
    names = {name for p in schedule.walk() if isinstance(p.action, SetAction) for name, _ in p.action.values}
    assert names == {"pump.frequency", "pump.level"}
