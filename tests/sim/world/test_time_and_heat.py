"""Temperature, time, and that a reading depends on its key and on nothing else."""

from __future__ import annotations

import numpy as np
import pytest
from benchrun_sim.world.receivers import ambient_k
from benchrun_sim.world.thermal import Stage, Thermal
from hypothesis import given, settings
from hypothesis import strategies as st

from .demo_bench import bias_up

SECOND = 10**9
STAGES = (Stage(20.0, 0.5), Stage(300.0, 0.4))


def expected_rise(power_w, time_s):
    return sum(power_w * s.rise_k_per_w * (1 - np.exp(-time_s / s.time_constant_s)) for s in STAGES)


@pytest.mark.parametrize("time_s", [0.5, 20.0, 47.0, 300.0, 3000.0])
def test_step_of_power_warms_along_two_exponentials(time_s):
    thermal = Thermal(STAGES, lambda rise: 10.0, memory=True)
    assert thermal.rise_k(int(time_s * SECOND)) == pytest.approx(expected_rise(10.0, time_s), rel=1e-9)


def test_cools_after_the_power_is_gone():
    power = {"w": 10.0}
    thermal = Thermal(STAGES, lambda rise: power["w"], memory=True)
    thermal.settle(100 * SECOND)
    power["w"] = 0.0
    left = sum(
        10.0 * s.rise_k_per_w * (1 - np.exp(-100.0 / s.time_constant_s)) * np.exp(-50.0 / s.time_constant_s)
        for s in STAGES
    )
    assert thermal.rise_k(150 * SECOND) == pytest.approx(left, rel=1e-9)


@settings(max_examples=40, deadline=None)
@given(looks=st.lists(st.integers(0, 60 * SECOND), max_size=20), end_s=st.integers(60, 400))
def test_looking_changes_nothing(looks, end_s):
    def heat(rise_k):
        return 10.0 - 0.1 * rise_k

    watched, alone = (Thermal(STAGES, heat, memory=True) for _ in range(2))
    for at in sorted(looks):
        watched.rise_k(at)
    assert watched.rise_k(end_s * SECOND) == alone.rise_k(end_s * SECOND)


def test_without_memory_the_device_stays_cold():
    assert Thermal(STAGES, lambda rise: 100.0, memory=False).rise_k(10**15) == 0.0


def test_biased_device_warms_by_what_it_dissipates(make_world):
    world = make_world()
    bias_up(world)
    world.advance(7200 * SECOND)
    assert world.device_state().rise_k == pytest.approx(28.0 * 0.35 * 0.9, rel=0.01)


def test_gain_falls_while_the_device_warms(make_world):
    world = make_world()
    bias_up(world)
    world.set_source("pump", frequency_hz=2.3e9, level_dbm=-20.0, on=True)
    gains, rises = [], []
    for _ in range(2):
        hot = world.truth.hot(2.3e9, pump_level_dbm=-20.0)
        gains.append(hot.gain_db[0])
        rises.append(hot.rise_k)
        world.advance(600 * SECOND)
    assert rises[0] == 0.0
    assert gains[1] - gains[0] == pytest.approx(-0.02 * rises[1], rel=0.05)


def test_partition_of_time_does_not_matter(make_world):
    readings = []
    for steps in (1, 7, 100):
        world = make_world()
        bias_up(world)
        world.set_source("pump", frequency_hz=2.293e9, level_dbm=0.0, on=True)
        for _ in range(steps):
            world.advance(7 * 100 * SECOND // steps)
            world.supply_reading("supply", 2)
        readings.append(hot_reading(world))
    assert np.array_equal(readings[0], readings[1])
    assert np.array_equal(readings[0], readings[2])


def test_ambient_swings_as_the_reference_world_says(make_world):
    world = make_world(noise=False)
    for time_s in (0.0, 777.0, 5000.0):
        swing = 1.5 * np.sin(2 * np.pi * time_s / 20000) + 0.4 * np.sin(2 * np.pi * time_s / 2100 + 1)
        assert ambient_k(world.constants, int(time_s * SECOND)) == pytest.approx(swing, abs=1e-9)
        assert world.temperature_degc(int(time_s * SECOND)) == pytest.approx(23.0 + swing, abs=1e-9)


def test_time_does_not_run_backwards(make_world):
    with pytest.raises(ValueError, match="backwards"):
        make_world().advance(-1)


def hot_reading(world, start_ns=123_456, **changes):
    """A hot reading of the demo at a given start."""
    how = {"if_bandwidth_hz": 300.0, "averages": 1, "coherent": True, **changes}
    waves, _ = world.measure_waves("analyser", ["R3", "R4"], [2.3e9], [0.0, -7e6, -14e6], start_ns=start_ns, **how)
    return waves


def pumped(world):
    bias_up(world)
    world.set_source("pump", frequency_hz=2.293e9, level_dbm=-3.0, on=True)
    world.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=True)
    return world


def test_same_call_gives_the_same_numbers_whatever_happened_before(make_world):
    straight = pumped(make_world(5, thermal_memory=False))
    winding = pumped(make_world(5, thermal_memory=False))
    for _ in range(3):
        winding.measure_waves("analyser", ["R3"], np.linspace(2.2e9, 2.4e9, 7), [0.0], 1e3, 4, False, winding.now_ns)
        winding.advance(10 * SECOND)
        winding.supply_reading("supply", 2)
        winding.temperature_degc(winding.now_ns)
    winding.set_source("pump", frequency_hz=2.25e9, level_dbm=-30.0, on=True)
    winding.set_source("pump", frequency_hz=2.293e9, level_dbm=-3.0, on=True)
    assert np.array_equal(hot_reading(straight), hot_reading(winding))
    assert np.array_equal(hot_reading(straight), hot_reading(straight))


def test_a_source_that_is_off_leaves_no_trace_of_its_settings(make_world):
    one, other = make_world(2), make_world(2)
    other.set_source("pump", frequency_hz=1.1e9, level_dbm=-12.0, on=False)
    assert np.array_equal(hot_reading(one), hot_reading(other))


@pytest.mark.parametrize(
    "change", [{"start_ns": 123_457}, {"if_bandwidth_hz": 299.0}, {"averages": 2}, {"coherent": False}]
)
def test_every_setting_and_the_start_draw_other_noise(make_world, change):
    world = pumped(make_world())
    base, other = hot_reading(world), hot_reading(world, **change)
    assert np.all(np.abs(base / other - 1) > 1e-9)


def test_seeds_are_different_benches(make_world):
    one, other = (hot_reading(pumped(make_world(seed, noise=False, skirt=False))) for seed in (1, 2))
    assert np.all(np.abs(np.abs(one) / np.abs(other) - 1) > 1e-4)


def test_matings_are_counted_not_remembered(make_world):
    def after(world, *what):
        world.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=True)
        world.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=False)
        for thing in what:
            world.connect("output", thing)
        world.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=True)
        waves, _ = world.measure_waves("analyser", ["R3", "R4"], [2.3e9], [0.0], 1e3, 1, True, 9)
        return waves[0, 1, 0] / waves[0, 0, 0]

    quiet = {"noise": False}
    second = after(make_world(1, **quiet), "short", "open")
    assert after(make_world(1, **quiet), "match", "open") == second
    first = after(make_world(1, **quiet), "open")
    assert 1e-5 < abs(first - second) / abs(second) < 1e-2
    perfect_connections = {**quiet, "repeatability": False}
    assert after(make_world(1, **perfect_connections), "open") == after(
        make_world(1, **perfect_connections), "short", "open"
    )
