"""A million readings: no memory, no time; decoded where they are asked for."""

from __future__ import annotations

import tracemalloc

import pytest

from .made import schedule_from

MILLION = """
  - set: {probe.level: 0 dBm}
  - sweep: {drain.voltage: {from: 10 V, to: 28 V, points: 100}}
    do:
      - sweep: {drive: {from: 0 dBm, to: 20 dBm, points: 100}}
        do:
          - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 100}}
            do:
              - set: {probe.frequency: "{frequency}", pump.frequency: "{frequency} - 7 MHz"}
              - settle: 20 ms
              - read: {name: hot, tones: [probe, pump, image]}
"""


def test_a_million_readings_take_no_memory() -> None:
    schedule_from(MILLION.replace("points: 100", "points: 2"))
    tracemalloc.start()
    schedule = schedule_from(MILLION)
    assert len(schedule) == 1_000_000
    schedule.reading(999_999)
    schedule.start_ns(777_777)
    _, most = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert most < 3_000_000


def test_the_way_to_any_reading_is_short() -> None:
    """As many actions as one way through the nest has, wherever it begins."""
    schedule = schedule_from(MILLION)
    for index in (0, 1, 123_456, 500_000, 999_999):
        walked = 0
        for planned in schedule.walk(index):
            walked += 1
            if planned.reading_index == index:
                break
        assert walked <= 8


@pytest.mark.parametrize("index", [0, 99, 100, 9_999, 10_000, 543_210, 999_999])
def test_an_index_is_three_digits_to_the_base_of_a_hundred(index: int) -> None:
    conditions = schedule_from(MILLION).reading(index).conditions
    drain, rest = divmod(index, 10_000)
    drive, frequency = divmod(rest, 100)
    assert conditions["drain.voltage_v"] == pytest.approx(10.0 + 18.0 * drain / 99.0)
    assert conditions["drive_dbm"] == pytest.approx(20.0 * drive / 99.0)
    assert conditions["pump.frequency_hz"] == pytest.approx(2.2e9 + 2e8 * frequency / 99.0 - 7e6)


def test_columns_of_a_million_readings_come_in_pieces() -> None:
    schedule = schedule_from(MILLION)
    tracemalloc.start()
    count = sum(len(columns.index) for columns in schedule.columns(chunk=10_000))
    _, most = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert count == 1_000_000
    assert most < 20_000_000
