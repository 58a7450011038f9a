"""What would hurt the bench or its user is recorded, loudly; what is done right is not."""

from __future__ import annotations

import logging

import pytest
from benchrun_sim.world import World

from .demo_bench import bias_up, demo_wiring

MS = 10**6


def damaged(world):
    return {(entry.item, entry.what) for entry in world.damage}


def gate(world, voltage_v, on=True):
    world.set_supply("supply", 1, voltage_v=voltage_v, current_limit_a=0.05, on=on)


def drain(world, voltage_v, on=True):
    world.set_supply("supply", 2, voltage_v=voltage_v, current_limit_a=3.0, on=on)


def pump(world, level_dbm, on=True, frequency_hz=2.293e9):
    world.set_source("pump", frequency_hz=frequency_hz, level_dbm=level_dbm, on=on)


@pytest.fixture
def world(make_world):
    return make_world()


def test_a_run_in_the_right_order_hurts_nothing(world):
    gate(world, -5.0)
    drain(world, 28.0)
    gate(world, world.truth.quiescent_gate_v())
    world.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=True)
    for level_dbm in (-16.0, -8.0, 0.0):
        pump(world, level_dbm)
        world.advance(100 * MS)
        _, over = world.measure_waves(
            "analyser", ["R3", "R4"], [2.3e9], [0.0, -7e6, -14e6], 300.0, 1, True, world.now_ns
        )
        assert not over.any()
    pump(world, 0.0, on=False)
    world.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=False)
    gate(world, -5.0)
    drain(world, 28.0, on=False)
    while world.supply_reading("supply", 2)[0] > 1.0:
        world.advance(10 * MS)
    gate(world, -5.0, on=False)
    world.connect("output", "short")
    assert world.damage == []
    assert [entry.event for entry in world.record] == [
        "gate on -5.000 V",
        "drain on 28.000 V",
        f"gate set {world.truth.quiescent_gate_v():.3f} V",
        "rf-on analyser 8.00 dBm",
        "rf-on pump -16.00 dBm",
        "level pump -8.00 dBm",
        "level pump 0.00 dBm",
        "rf-off pump",
        "rf-off analyser",
        "gate set -5.000 V",
        "drain off",
        "gate off",
        "connect output short",
    ]


def test_gate_released_before_the_drain_is_down(world, caplog):
    bias_up(world)
    drain(world, 28.0, on=False)
    world.advance(10 * MS)
    with caplog.at_level(logging.CRITICAL, logger="benchrun_sim.world"):
        gate(world, -5.0, on=False)
    assert damaged(world) == {("device", "gate released under drain voltage")}
    assert world.damage[0].ns == 10 * MS
    assert "DAMAGE" in caplog.text


def test_drain_takes_its_time(world):
    bias_up(world)
    drain(world, 28.0, on=False)
    volts = []
    for _ in range(40):
        volts.append(world.supply_reading("supply", 2)[0])
        world.advance(10 * MS)
    assert volts == sorted(volts, reverse=True)
    assert volts[5] == pytest.approx(28.0 / 2.71828, rel=0.01)
    assert volts[-1] < 0.1


def test_drain_before_gate(world):
    drain(world, 28.0)
    assert ("device", "gate released under drain voltage") in damaged(world)


def test_too_much_drain_voltage(world):
    gate(world, -5.0)
    drain(world, 36.0)
    assert damaged(world) == {("device", "drain voltage")}
    assert world.damage[0].value == pytest.approx(36.0)


@pytest.mark.parametrize("voltage_v", [-9.0, 1.0])
def test_gate_voltage_out_of_what_the_device_bears(world, voltage_v):
    gate(world, voltage_v)
    assert damaged(world) == {("device", "gate voltage")}


def test_current_limit_protects(world):
    gate(world, -1.0)
    drain(world, 28.0)
    volts, amperes = world.supply_reading("supply", 2)
    assert amperes == pytest.approx(3.0, rel=0.01)
    assert volts < 20.0
    assert world.damage == []
    world.set_supply("supply", 2, voltage_v=28.0, current_limit_a=9.0, on=True)
    assert damaged(world) == {("device", "drain current")}


def test_device_driven_too_hard(world):
    bias_up(world)
    pump(world, 8.0)
    assert ("device", "input level") in damaged(world)


def test_booster_driven_too_hard(world):
    pump(world, 16.0)
    assert ("booster", "input level") in damaged(world)


def test_receiver_without_its_pads(make_world):
    wiring = demo_wiring()
    wiring["receivers"]["reflected"]["path"] = []
    world = World(wiring, 1)
    bias_up(world)
    pump(world, 0.0)
    assert damaged(world) == {("analyser receiver R4", "input level")}


def test_receiver_over_its_limit_says_so_and_lives(make_world):
    wiring = demo_wiring()
    wiring["receivers"]["reflected"]["path"] = ["P3"]
    world = World(wiring, 1)
    bias_up(world)
    pump(world, 0.0)
    _, over = world.measure_waves("analyser", ["R3", "R4"], [2.3e9], [0.0], 300.0, 1, True, 0)
    assert over.tolist() == [False, True]
    assert world.damage == []


def test_pad_and_port_without_protection():
    wiring = demo_wiring()
    wiring["parts"]["P2"]["damage_dbm"] = 40.0
    wiring["parts"]["port-isolator"]["isolation_db"] = 0.4
    world = World(wiring, 1)
    bias_up(world)
    pump(world, 0.0)
    assert damaged(world) == {("P2", "level from the device"), ("analyser", "level into the source port")}


def test_meter_driven_too_hard(world):
    world.connect("input", "meter")
    pump(world, 7.5)
    assert ("meter", "input level") in damaged(world)
    assert world.measure_power("meter", 2.293e9, 0) == pytest.approx(36.5, abs=1.5)


@pytest.mark.parametrize("plane", ["input", "output"])
def test_hands_off_while_it_is_live(make_world, plane):
    under_rf = make_world()
    pump(under_rf, -10.0)
    under_rf.connect(plane, "nothing")
    assert ("operator", f"connector at {plane} handled under RF") in damaged(under_rf)
    under_drain = make_world()
    bias_up(under_drain)
    under_drain.connect(plane, "nothing")
    assert damaged(under_drain) == {("operator", f"connector at {plane} handled under drain voltage")}


def test_driven_into_nothing(world):
    world.connect("output", "nothing")
    bias_up(world)
    pump(world, -5.0)
    assert ("device", "driven into an open output") in damaged(world)


def test_the_same_damage_is_recorded_again_only_when_it_gets_worse(world):
    for level_dbm in (16.0, 16.1, 17.0):
        pump(world, level_dbm)
    levels = [entry.value for entry in world.damage if (entry.item, entry.what) == ("booster", "input level")]
    assert len(levels) == 2
    assert levels[1] == pytest.approx(levels[0] + 1.0, abs=0.01)


def test_supply_shows_the_drive(world):
    bias_up(world)
    assert world.supply_reading("supply", 2)[1] == pytest.approx(0.35, rel=0.01)
    assert world.supply_reading("supply", 2)[0] == pytest.approx(28.0, rel=2e-3)
    assert abs(world.supply_reading("supply", 1)[1]) < 2e-3
    currents = []
    for level_dbm in (-15.0, -5.0, 0.0):
        pump(world, level_dbm)
        currents.append(world.supply_reading("supply", 2)[1])
    assert currents == sorted(currents)
    assert 0.9 < currents[-1] < 1.6
    # Common practice, no source: a stage of this kind turns 40 to 60 per cent of its dc power into RF when driven hard.
    output_w = 10 ** ((world.truth.hot(2.3e9, pump_level_dbm=0.0).output_dbm[0] - 30) / 10)
    assert 0.35 < output_w / (28.0 * currents[-1]) < 0.65


def test_unknown_things_are_refused(world):
    with pytest.raises(ValueError, match="plane"):
        world.connect("sideways", "open")
    with pytest.raises(ValueError, match="banana"):
        world.connect("output", "banana")
    assert world.record == []
