"""Single figures as a person says them."""

from __future__ import annotations

import pytest

from benchrun.cli.figures import (
    clock_text,
    condition_text,
    count_text,
    duration_text,
    level_text,
    named_figure,
    ratio_text,
)


@pytest.mark.parametrize(
    ("key", "value", "text"),
    [
        ("drive_dbm", 24.0, "drive +24.0 dBm"),
        ("pump.level_dbm", -3.25, "pump.level -3.2 dBm"),
        ("frequency_hz", 2.3175e9, "frequency 2.3175 GHz"),
        ("gate.voltage_v", -2.8, "gate.voltage -2.8 V"),
        ("ambient.temperature_degc", 23.0, "ambient.temperature 23 degC"),
        ("standard", "open", "standard open"),
        ("connected.output", "open", "at output open"),
        ("turn", 3.0, "turn 3"),
    ],
)
def test_conditions_carry_their_units(key, value, text):
    assert condition_text(key, value) == text


@pytest.mark.parametrize(
    ("duration_s", "text"),
    [
        (0, "0 s"),
        (0.4, "under 1 s"),
        (89.4, "89 s"),
        (90, "2 min"),
        (1320, "22 min"),
        (5399, "1 h 30 min"),
        (7200, "2 h"),
        (12000, "3 h 20 min"),
    ],
)
def test_durations(duration_s, text):
    assert duration_text(duration_s) == text


@pytest.mark.parametrize(("duration_s", "text"), [(8, "0:08"), (59.7, "1:00"), (12000, "3:20:00")])
def test_time_left(duration_s, text):
    assert clock_text(duration_s) == text


def test_what_is_not_there_is_a_hyphen():
    assert (level_text(None), ratio_text(None)) == ("-", "-")
    assert (level_text(30.61), ratio_text(2.39)) == ("+30.6 dBm", "2.4 dB")


def test_counts():
    assert [count_text(n, "condition") for n in (0, 1, 1377)] == ["no condition", "1 condition", "1377 conditions"]


def test_a_time_that_is_not_there_has_the_heading_of_one_that_is():
    assert named_figure("ended_utc", "") == ("ended (UTC)", "-")
    assert named_figure("ended_utc", "2026-12-01T13:46:36.658+00:00") == ("ended (UTC)", "2026-12-01 13:46:36")
