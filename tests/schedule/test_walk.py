"""What a schedule does, in order, action by action."""

from __future__ import annotations

import pytest

from benchrun.contract.actions import AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.schedule import build_schedule

from .made import KNOWN, example_bench, example_recipe, schedule_from


def sets(acquire: str) -> list[dict[str, float]]:
    """Return what is set, action by action."""
    return [dict(p.action.values) for p in schedule_from(acquire).walk() if isinstance(p.action, SetAction)]


def test_the_hot_sweep_of_the_examples() -> None:
    schedule = build_schedule(example_recipe("hot-output-match"), example_bench(), KNOWN)
    walked = list(schedule.walk())
    first = [planned.action for planned in walked[:6]]
    assert isinstance(first[0], ProcedureAction)
    assert first[1] == SetAction((("drain.voltage", 28.0),))
    assert first[2] == SetAction((("probe.level", 8.0),))
    assert first[3] == SetAction((("probe.frequency", 2.2e9), ("pump.frequency", 2.193e9), ("pump.level", -15.6)))
    assert first[4] == SettleAction(0.02, ("pump", "probe"))
    assert isinstance(first[5], ReadAction)
    assert len(schedule) == 17 * 81
    assert [p.reading_index for p in walked if p.reading_index is not None] == list(range(17 * 81))
    assert schedule.axes_text == "17 drives x 81 frequencies"
    assert schedule.prompts == 0


def test_conditions_are_named_with_their_units() -> None:
    schedule = build_schedule(example_recipe("hot-output-match"), example_bench(), KNOWN)
    reading = schedule.reading(81)
    assert reading.conditions == {
        "drain.voltage_v": 28.0, "probe.level_dbm": 8.0, "drive_dbm": 15.0, "frequency_hz": 2.2e9,
        "probe.frequency_hz": 2.2e9, "pump.frequency_hz": 2.193e9, "pump.level_dbm": -14.6,
    }  # fmt: skip
    assert (reading.index, reading.name, reading.position.line) == (81, "hot", 21)


def test_what_is_in_force_already_is_not_set_again() -> None:
    assert sets("""
  - set: {probe.level: 0 dBm, probe.frequency: 2 GHz}
  - set: {probe.level: 0 dBm, probe.frequency: 2.1 GHz}
  - set: {probe.level: 0 dBm}
  - read: {name: a}
""") == [{"probe.level": 0.0, "probe.frequency": 2e9}, {"probe.frequency": 2.1e9}]


def test_the_level_follows_the_drive_from_the_moment_both_are_known() -> None:
    assert sets("""
  - set: {drive: 20 dBm}
  - set: {pump.frequency: 2.2 GHz}
  - read: {name: a, waves: [], tones: [pump]}
  - set: {drive: 21 dBm}
  - read: {name: b, waves: [], tones: [pump]}
""") == [{"pump.frequency": 2.2e9, "pump.level": -9.6}, {"pump.level": -8.6}]


def test_a_level_that_is_set_by_itself_ends_the_drive() -> None:
    acquire = """
  - set: {drive: 20 dBm, pump.frequency: 2.2 GHz}
  - set: {pump.level: -30 dBm}
  - set: {pump.frequency: 2.3 GHz}
  - read: {name: a, waves: [], tones: [pump]}
"""
    assert sets(acquire)[-2:] == [{"pump.level": -30.0}, {"pump.frequency": 2.3e9}]
    assert "drive_dbm" not in schedule_from(acquire).reading(0).conditions


def test_after_a_prompt_bias_is_set_anew_and_sources_are_not() -> None:
    acquire = """
  - set: {probe.level: 0 dBm, probe.frequency: 2 GHz, drain.voltage: 10 V}
  - ask: {text: Look at the fan.}
  - set: {probe.level: 0 dBm, drain.voltage: 10 V}
  - read: {name: a}
"""
    assert sets(acquire)[1:] == [{"drain.voltage": 10.0}]


def test_connections_are_conditions() -> None:
    schedule = build_schedule(example_recipe("calibrate-output-plane"), example_bench(), KNOWN)
    assert schedule.reading(1).conditions == {"probe.level_dbm": 8.0, "standard": "short", "connected.output": "short"}
    assert schedule.reading(5).conditions["connected.output"] == "meter"
    assert schedule.prompts == 7
    walked = [planned.action for planned in schedule.walk()]
    assert [a.connect[1] for a in walked if isinstance(a, AskAction) and a.connect] == [
        "open", "short", "match", "offset-short-1", "offset-short-2", "meter", "device",
    ]  # fmt: skip
    assert isinstance(walked[-1], AskAction)


def test_a_sweep_of_the_receivers_own_has_no_frequency_of_its_own_among_the_conditions() -> None:
    schedule = schedule_from("""
  - set: {probe.level: 0 dBm, probe.frequency: 2 GHz}
  - read: {name: point}
  - read: {name: sweep, over: {frequency: {from: 2 GHz, to: 2.1 GHz, points: 3}}}
""")
    assert "probe.frequency_hz" in schedule.reading(0).conditions
    assert "probe.frequency_hz" not in schedule.reading(1).conditions


def test_settling_has_on_what_the_next_reading_in_the_same_list_has_on() -> None:
    schedule = schedule_from("""
  - set: {probe.level: 0 dBm, pump.level: -20 dBm, probe.frequency: 2 GHz, pump.frequency: 1.9 GHz}
  - settle: 1 s
  - sweep: {x: [1 dBm, 2 dBm]}
    do:
      - settle: 2 s
      - set: {probe.level: "{x}"}
      - settle: 3 s
      - read: {name: a, tones: [probe, pump]}
      - settle: 4 s
""")
    waits = [p.action for p in schedule.walk() if isinstance(p.action, SettleAction)]
    assert waits[0] == SettleAction(1.0, ())
    both = ("pump", "probe")
    assert waits[1:4] == [SettleAction(2.0, both), SettleAction(3.0, both), SettleAction(4.0, ())]


def test_after_the_last_reading_only_the_rest_is_left() -> None:
    schedule = build_schedule(example_recipe("level-the-drive"), example_bench(), KNOWN)
    (last,) = schedule.walk(len(schedule))
    assert isinstance(last.action, AskAction)
    assert last.action.connect == ("input", "device")


@pytest.mark.parametrize("start", [-1, 1378])
def test_a_reading_that_is_not_there_is_refused(start: int) -> None:
    schedule = build_schedule(example_recipe("hot-output-match"), example_bench(), KNOWN)
    with pytest.raises(IndexError, match="the schedule has 1377"):
        schedule.walk(start)
    with pytest.raises(IndexError):
        schedule.reading(1377)
    with pytest.raises(IndexError):
        schedule.start_ns(1378)


def test_standing_at_a_reading_in_the_middle_of_the_hot_sweep() -> None:
    schedule = build_schedule(example_recipe("hot-output-match"), example_bench(), KNOWN)
    actions = [planned.action for planned, _ in zip(schedule.walk(700), range(6), strict=False)]
    assert isinstance(actions[0], ProcedureAction)
    assert actions[1] == SetAction((("drain.voltage", 28.0),))
    assert actions[2] == SetAction((("probe.level", 8.0),))
    together = {name: value for action in actions[3:] if isinstance(action, SetAction) for name, value in action.values}
    assert together == {"probe.frequency": 2.33e9, "pump.frequency": 2.323e9, "pump.level": -7.6}


def test_standing_behind_a_prompt_asks_for_what_is_connected_there_and_no_more() -> None:
    schedule = build_schedule(example_recipe("calibrate-output-plane"), example_bench(), KNOWN)
    before = [planned.action for planned, _ in zip(schedule.walk(40), range(3), strict=False)]
    asked = [action.connect for action in before if isinstance(action, AskAction)]
    assert asked == [("output", "meter")]


def test_a_bring_up_is_done_again_and_one_before_a_prompt_is_not() -> None:
    acquire = """
  - set: {probe.level: 0 dBm, probe.frequency: 2 GHz}
  - bring-up: {gate: -3 V, drain: 10 V}
  - read: {name: biased}
  - ask: {text: Look.}
  - read: {name: cold}
"""
    schedule = schedule_from(acquire)
    kinds = [type(planned.action) for planned in schedule.walk(1)]
    assert kinds == [SetAction, AskAction, ReadAction]
    assert schedule.reading(0).conditions["drain.voltage_v"] == 10.0
    assert "drain.voltage_v" not in schedule.reading(1).conditions


def test_waits_of_the_lists_around_are_waited_again_when_everything_is_set() -> None:
    schedule = schedule_from("""
  - sweep: {drain.voltage: [10 V, 20 V]}
    do:
      - settle: 10 min
      - sweep: {frequency: [2 GHz, 2.1 GHz]}
        do:
          - set: {probe.frequency: "{frequency}", probe.level: 0 dBm}
          - settle: 20 ms
          - read: {name: a}
""")
    kinds = [planned.action for planned, _ in zip(schedule.walk(3), range(9), strict=False)]
    assert kinds[-3:-1] == [SettleAction(600.0, ()), SettleAction(0.02, ("probe",))]
    assert isinstance(kinds[-1], ReadAction)
