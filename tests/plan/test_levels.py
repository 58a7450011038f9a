"""The level check against budgets worked by hand, and its refusals."""

from __future__ import annotations

import json

import pytest

from benchrun.errors import FileProblemsError, InputError, LevelError
from benchrun.plan.levels import LevelTable, check_levels
from benchrun.schedule import build_schedule
from tests.schedule.made import KNOWN, changed_bench, example_bench, example_recipe, schedule_from

from . import budget

HOT = """
  - set: {probe.level: 8 dBm}
  - sweep: {drive: [14 dBm, DRIVE dBm]}
    do:
      - sweep: {frequency: [2.2 GHz, 2.4 GHz]}
        do:
          - set: {probe.frequency: "{frequency}", pump.frequency: "{frequency} - 7 MHz"}
          - settle: 20 ms
          - read: {name: hot, tones: [probe, pump, image]}
"""


def example(name: str) -> LevelTable:
    return check_levels(build_schedule(example_recipe(name), example_bench(), KNOWN), example_bench())


def checked(acquire: str, *changes: tuple[str, str]) -> LevelTable:
    bench = changed_bench(*changes) if changes else example_bench()
    return check_levels(schedule_from(acquire, bench), bench)


def level(table: LevelTable, plane: str, tone: str) -> float:
    (row,) = (row for row in table.rows if (row.plane, row.tone) == (plane, tone))
    return row.level_dbm


def refused(table: LevelTable) -> list[tuple[str, str, str | None]]:
    return [(row.plane, row.tone, row.limit_kind) for row in table.rows if row.refused]


@pytest.mark.parametrize(
    ("plane", "tone", "expected"),
    [
        ("pump output", "pump", 30.0 - 30.0 + 0.4),
        ("into booster", "pump", 0.4),
        ("booster output", "pump", 30.4),
        ("device input", "pump", budget.DEVICE_INPUT),
        ("into input-isolator", "pump", budget.DEVICE_INPUT),
        ("device output", "pump", budget.DEVICE_OUTPUT),
        ("into coupler", "pump", budget.DEVICE_OUTPUT),
        ("coupler, reflected arm", "pump", budget.REFLECTED_ARM),
        ("into P4", "pump", budget.REFLECTED_ARM),
        ("into P3", "pump", budget.REFLECTED_ARM - 17.0),
        ("into P2", "pump", budget.DEVICE_OUTPUT - 0.3),
        ("into port-isolator", "pump", budget.DEVICE_OUTPUT - 10.3),
        ("analyser port 2", "pump", budget.PORT),
        ("probe output", "probe", 8.0),
        ("into port-isolator", "probe", 8.0),
    ],
)
def test_the_hot_sweep_of_the_examples_by_hand(plane: str, tone: str, expected: float) -> None:
    assert level(example("hot-output-match"), plane, tone) == pytest.approx(expected, abs=1e-9)


def test_receivers_of_the_hot_sweep_by_hand() -> None:
    """The directivity adds the sampled wave's partner in each arm: 37 dB down."""
    table = example("hot-output-match")
    assert level(table, "receiver reflected", "pump") == pytest.approx(budget.REFLECTED_RECEIVER, abs=1e-9)
    assert level(table, "receiver incident", "pump") == pytest.approx(budget.INCIDENT_RECEIVER, abs=1e-9)
    probe = budget.PROBE_ARRIVES
    returned = probe + budget.db(budget.HOT_REFLECTION)
    at_incident = budget.together(probe + 0.3, returned - 37.0) - 20.0 - 10.0
    assert level(table, "receiver incident", "probe") == pytest.approx(at_incident, abs=1e-9)
    both = budget.together(level(table, "receiver incident", "pump"), at_incident)
    assert level(table, "receiver incident", "together") == pytest.approx(both, abs=1e-9)


def test_compression_of_a_receiver_is_told_in_proportion_to_power() -> None:
    """0.1 dB at -3 dBm: at -4.1 dBm 0.078 dB."""
    (row,) = (r for r in example("hot-output-match").rows if (r.plane, r.tone) == ("receiver reflected", "pump"))
    expected = 0.1 * 10.0 ** ((row.level_dbm + 3.0) / 10.0)
    assert row.note == f"{expected:.2f} dB compressed, corrected"
    assert row.note.startswith("0.08 dB")


@pytest.mark.parametrize(
    "name", ["hot-output-match", "calibrate-output-plane", "level-the-drive", "cold-output-reflection"]
)
def test_the_examples_pass(name: str) -> None:
    table = example(name)
    table.require()
    assert not table.refused
    assert all(row.margin_db is None or row.margin_db > 0.0 for row in table.rows)


def test_a_meter_at_a_plane_takes_the_devices_place() -> None:
    """Levelling, pump at 1 dBm: 30 dB of gain, 0.4 dB of loss, the bench's -22 dB against the sensor's 0.02."""
    table = example("level-the-drive")
    top = max(row.level_dbm for row in table.rows if row.plane == "pump output")
    expected = top + 29.6 - budget.db(1.0 - budget.MATCH * 0.02)
    assert level(table, "meter at input", "pump") == pytest.approx(expected, abs=1e-9)
    assert not [row for row in table.rows if row.plane.startswith("device")]


def test_a_standard_reflects_everything_and_the_device_is_not_there() -> None:
    table = example("calibrate-output-plane")
    arrives = 8.0 - 10.7 - budget.db(1.0 - budget.MATCH)
    expected = budget.together(arrives, arrives + 0.3 - 37.0) - 20.0 - 27.0
    assert level(table, "receiver reflected", "probe") == pytest.approx(expected, abs=1e-9)
    assert not [row for row in table.rows if row.plane.startswith("device")]


def test_the_ports_level_after_a_power_up_is_followed_to_device_and_receivers() -> None:
    table = example("cold-output-reflection")
    arrives = -10.0 - 10.7 - budget.db(1.0 - budget.MATCH * budget.HOT_REFLECTION)
    assert level(table, "device output", "power-up") == pytest.approx(arrives, abs=1e-9)
    strong = checked(HOT.replace("DRIVE", "20"), ("power-up: -10 dBm", "power-up: 60 dBm"))
    assert ("device output", "power-up", "maximum") in refused(strong)


# Refusals


def test_a_receiver_over_its_linear_limit_is_refused_with_condition_and_remedy() -> None:
    table = checked(HOT.replace("DRIVE", "30"), ("P4: {kind: pad, loss: 17 dB", "P4: {kind: pad, loss: 15 dB"))
    assert refused(table) == [("receiver reflected", "pump", "linear")]
    assert table.rows[0].refused
    with pytest.raises(LevelError) as caught:
        table.require()
    assert caught.value.exit_code == 3
    told = str(caught.value)
    assert told.startswith("1 level is over the limit at the worst phase of reflections. Nothing was switched on.\n")
    assert "receiver reflected: pump -2.1 dBm, 0.9 dB over the linear limit of -3.0 dBm" in told
    assert "at drive +30.0 dBm, frequency 2.2 GHz (reading 2). It would compress" in told
    assert "or put a larger pad before it." in told


def test_the_worst_comes_first() -> None:
    table = checked(
        HOT.replace("DRIVE", "33"),
        ("maximum: {input: 33 dBm, output: 45 dBm}", "maximum: {input: 20 dBm, output: 43 dBm}"),
        ("P2: {kind: pad, loss: 10 dB, damage: 44 dBm}", "P2: {kind: pad, loss: 10 dB, damage: 42 dBm}"),
    )
    found = refused(table)
    margins = [row.margin_db for row in table.rows if row.refused]
    assert found[0] == ("device input", "pump", "maximum")
    assert {"device output", "into P2"} <= {plane for plane, _, _ in found}
    assert margins == sorted(margins)  # type: ignore[type-var]
    assert [row.refused for row in table.rows] == sorted((row.refused for row in table.rows), reverse=True)


def test_a_receiver_that_nobody_reads_may_be_beyond_linear_and_not_beyond_damage() -> None:
    scalars_only = HOT.replace("DRIVE", "30").replace("tones: [probe, pump, image]", "tones: [probe, pump], waves: []")
    assert not checked(scalars_only, ("linear: -3 dBm", "linear: -20 dBm"), ("at: -3 dBm", "at: -20 dBm")).refused
    broken = checked(scalars_only, ("damage: 15 dBm\n", "damage: -10 dBm\n"))
    assert ("receiver reflected", "pump", "damage") in refused(broken)


def test_an_amplifier_over_its_linear_limit_is_told_and_not_refused() -> None:
    table = checked(HOT.replace("DRIVE", "30"), ("linear: 36 dBm", "linear: 30 dBm"))
    (row,) = (row for row in table.rows if row.plane == "booster output")
    assert not row.refused
    assert row.margin_db == pytest.approx(-0.4)
    assert "it compresses" in row.note


def test_a_level_that_follows_from_a_drive_may_not_pass_the_ceiling() -> None:
    table = checked(HOT.replace("DRIVE", "30"), ("ceiling: 5 dBm", "ceiling: 0 dBm"))
    assert refused(table)[0] == ("pump output", "pump", "maximum")
    assert level(table, "pump output", "pump") == pytest.approx(0.4)


def test_two_signals_together_may_be_over_a_limit_that_neither_is_over() -> None:
    """Pump and probe both 5 dB below the linear limit are 1 dB above it together."""
    acquire = """
  - set: {probe.level: 8 dBm, probe.frequency: 2.3 GHz, pump.frequency: 2.293 GHz, drive: 20 dBm}
  - read: {name: a, tones: [probe, pump]}
"""
    bare = [(f"{pad}: {{kind: pad, loss: 10 dB", f"{pad}: {{kind: pad, loss: 0 dB") for pad in ("P1", "P2")]
    pump, probe = (level(checked(acquire, *bare), "receiver incident", tone) for tone in ("pump", "probe"))
    limit = max(pump, probe) + 0.5
    lower = [(f"{key}: -3 dBm", f"{key}: {limit:.4f} dBm") for key in ("linear", "at")]
    table = checked(acquire, *bare, *lower)
    assert ("receiver incident", "together", "linear") in refused(table)
    assert ("receiver incident", "pump", "linear") not in refused(table)


def test_exactly_at_the_limit_is_inside_of_it() -> None:
    acquire = "  - set: {probe.level: 8 dBm, probe.frequency: 2.3 GHz}\n  - read: {name: a}\n"
    table = checked(acquire, ("ceiling: 10 dBm", "ceiling: 8 dBm"))
    (row,) = (row for row in table.rows if row.plane == "probe output")
    assert row.margin_db == 0.0
    assert not row.refused


def test_moments_between_readings_count() -> None:
    """Never read together, and yet for a moment the full drive is on while the probe is up."""
    acquire = """
  - set: {probe.level: 8 dBm, probe.frequency: 2.3 GHz, pump.frequency: 2.293 GHz, drive: 14 dBm}
  - read: {name: a, tones: [probe, pump]}
  - set: {drive: 34 dBm}
  - set: {drive: 14 dBm}
  - read: {name: b, tones: [probe, pump]}
"""
    table = checked(acquire)
    assert refused(table)[0] == ("device input", "pump", "maximum")
    assert "on the way to reading 1" in table.rows[0].note


def test_a_signal_that_is_off_is_nowhere() -> None:
    acquire = """
  - set: {probe.level: 8 dBm, probe.frequency: 2.3 GHz, pump.frequency: 2.293 GHz, drive: 34 dBm}
  - read: {name: a, tones: [probe]}
"""
    table = checked(acquire)
    assert not table.refused
    assert not [row for row in table.rows if row.tone == "pump" and row.plane != "pump output"]


def test_a_receivers_own_sweep_is_looked_at_at_every_point() -> None:
    """A pad whose table falls to 0 dB at one frequency of the sweep."""
    acquire = """
  - set: {probe.level: 0 dBm}
  - read: {name: a, over: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 201}}}
"""
    dip = "loss: [[2 GHz, 10 dB], [2.3 GHz, 0 dB], [2.5 GHz, 10 dB]]"
    table = checked(acquire, ("P2: {kind: pad, loss: 10 dB", f"P2: {{kind: pad, {dip}"))
    assert level(table, "into coupler", "probe") == pytest.approx(-0.4)
    short = "loss: [[2.25 GHz, 10 dB], [2.5 GHz, 10 dB]]"
    with pytest.raises(FileProblemsError, match="part 'P2': the table runs from"):
        checked(acquire, ("P2: {kind: pad, loss: 10 dB", f"P2: {{kind: pad, {short}"))


def test_a_drive_that_needs_less_than_the_source_can_give_is_refused() -> None:
    with pytest.raises(
        FileProblemsError, match=r":12:13: a drive of -40 dBm at 2\.393 GHz needs pump\.level at -69\.60 dBm"
    ):
        checked(HOT.replace("DRIVE", "-40"))
    between = HOT.replace("[14 dBm, DRIVE dBm]", "[14 dBm, -40 dBm, 20 dBm]")
    with pytest.raises(InputError, match="a drive of -40 dBm"):
        checked(between)


def test_the_table_as_plain_data() -> None:
    table = example("hot-output-match")
    plain = json.loads(json.dumps(table.to_dict(), allow_nan=False))
    assert plain["conditions"] == 1377
    assert plain["refused"] is False
    keys = {"plane", "tone", "level_dbm", "limit_dbm", "limit_kind", "margin_db", "note", "worst", "refused"}
    assert all(set(row) == keys for row in plain["rows"])


def test_notes_tell_what_the_probe_stands_above() -> None:
    floor, skirt = example("hot-output-match").notes
    assert floor.startswith("Where the probe is weakest, at receiver reflected, it is 64 dB above the floor in 300 Hz")
    assert skirt.startswith("At receiver reflected the pump is up to 47 dB above the probe")


def test_impossible_figures_of_the_bench_are_noted() -> None:
    loss = ("directivity: 37 dB, loss: 0.3 dB", "directivity: 37 dB, loss: 0.01 dB")
    notes = checked(HOT.replace("DRIVE", "20"), loss, ("floor: -110 dBm", "floor: -150 dBm")).notes
    assert any(note.startswith("Coupler coupler couples out 20 dB and so loses 0.044 dB at least") for note in notes)
    assert any("below thermal noise, -144.0 dBm" in note for note in notes)
