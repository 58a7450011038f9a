"""The timetable against sums by hand, of the times that `Timing` documents."""

from __future__ import annotations

import itertools

import pytest

from benchrun.schedule import Timing, build_schedule

from .made import KNOWN, changed_bench, example_bench, example_recipe, schedule_from

MS = 1_000_000
POINTS = """
  - set: {probe.level: -10 dBm, probe.frequency: 2.1 GHz}
  - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 5}}
    do:
      - set: {probe.frequency: "{frequency}"}
      - settle: 20 ms
      - read: {name: a, also: [drain.current, meter.power, ambient.temperature]}
"""
#: A reading by hand: 1.2 / 300 Hz + 0.2 ms, two messages; supply 6 ms, meter 21 ms, thermometer 11 ms.
READING_MS = 4.2 + 2.0 + 6.0 + 21.0 + 11.0
#: From one reading's end to the next one's start: off, frequency and 2 ms, on; settling; reference; 1 ms to spare.
BETWEEN_MS = 1.0 + 3.0 + 1.0 + 20.0 + 1.0 + 1.0


def test_from_reading_to_reading_by_hand() -> None:
    schedule = schedule_from(POINTS)
    starts = [schedule.start_ns(index) for index in range(5)]
    steps = [after - before for before, after in itertools.pairwise(starts)]
    assert steps == [pytest.approx((READING_MS + BETWEEN_MS) * MS)] * 4
    assert schedule.start_ns(5) == pytest.approx(starts[-1] + READING_MS * MS)
    assert schedule.duration_s == schedule.start_ns(5) / 1e9


def test_up_to_the_first_reading_by_hand() -> None:
    """Level asked for and set, two frequencies, settling and RF on, receiver set up, reference, spare."""
    assert schedule_from(POINTS).start_ns(0) == pytest.approx((1.0 + 3.0 + 3.0 + 3.0 + 21.0 + 1.0 + 1.0 + 1.0) * MS)


def test_retuned_receivers_take_each_tone_by_itself() -> None:
    acquire = """
  - set: {probe.level: -10 dBm, probe.frequency: 2.1 GHz, pump.level: -20 dBm, pump.frequency: 2 GHz}
  - read: {name: a, tones: [probe, pump, image]}
  - read: {name: b, tones: [probe, pump, image]}
"""
    one, three = (
        schedule_from(acquire, bench)
        for bench in (example_bench(), changed_bench(("tones: coherent", "tones: retuned")))
    )
    assert (three.start_ns(1) - three.start_ns(0)) - (one.start_ns(1) - one.start_ns(0)) == pytest.approx(2 * 4.2 * MS)


def test_a_level_rises_by_the_ramp() -> None:
    """From -20 to 0 dBm in steps of 3 dB: seven steps of 3 ms where one would do."""
    acquire = "  - set: {pump.level: -20 dBm, pump.frequency: 2 GHz}\n  - read: {name: a, waves: [], tones: [pump]}\n"
    up = acquire + "  - set: {pump.level: 0 dBm}\n  - read: {name: b, waves: [], tones: [pump]}\n"
    down = up.replace("0 dBm}\n  - read: {name: b", "-40 dBm}\n  - read: {name: b").replace("-2-40", "-20")
    rises, falls = schedule_from(up), schedule_from(down)
    assert rises.start_ns(1) - falls.start_ns(1) == pytest.approx(6 * 3 * MS)


def test_operators_take_their_time() -> None:
    schedule = build_schedule(example_recipe("calibrate-output-plane"), example_bench(), KNOWN)
    assert 7 * 60.5 < schedule.duration_s < 7 * 60.5 + 20.0
    hurried = build_schedule(
        example_recipe("calibrate-output-plane"), example_bench(), KNOWN, timing=Timing(operator_s=10.0)
    )
    assert schedule.duration_s - hurried.duration_s == pytest.approx(7 * 50.0)


def test_what_is_set_once_counts_once() -> None:
    """A level set inside of a sweep takes time in the first round only."""
    inside = POINTS.replace('probe.frequency: "{frequency}"', 'probe.frequency: "{frequency}", pump.level: -20 dBm')
    assert schedule_from(inside).duration_s - schedule_from(POINTS).duration_s == pytest.approx(0.004)


def test_rounds_that_begin_anew_are_counted_as_such() -> None:
    """A sweep in a sweep: the inner one's first point is another frequency than the last one's, each time."""
    nested = """
  - set: {probe.level: -10 dBm}
  - sweep: {drain.voltage: [10 V, 11 V, 12 V]}
    do:
      - sweep: {frequency: [2.2 GHz, 2.3 GHz]}
        do:
          - set: {probe.frequency: "{frequency}"}
          - settle: 20 ms
          - read: {name: a}
"""
    schedule = schedule_from(nested)
    starts = [schedule.start_ns(index) for index in range(6)]
    within, across = starts[3] - starts[2], starts[4] - starts[3]
    assert starts[5] - starts[4] == within
    assert starts[2] - starts[1] == across
    assert across - within == 2 * MS
