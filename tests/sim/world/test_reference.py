"""The reference world's constants, the standards, and that nothing is shared with the product."""

from __future__ import annotations

import ast
import hashlib
from pathlib import Path

import benchrun_sim.world
import numpy as np
import pytest
from benchrun_sim.world import World, reference_sha256, reference_world
from benchrun_sim.world.standards import Standards

from .demo_bench import PERFECT, demo_wiring

ROOM = Path(benchrun_sim.world.__file__).parent
R1 = reference_world()


def standards(seed=1, *, errors=True, **more):
    wiring = demo_wiring()
    wiring["standards"] = {**wiring["standards"], **more}
    return Standards(wiring, R1, seed, definition_errors=errors)


def test_nothing_of_the_product_is_imported():
    files = sorted(ROOM.glob("*.py"))
    assert len(files) > 10
    for file in files:
        for node in ast.walk(ast.parse(file.read_text())):
            names = [alias.name for alias in node.names] if isinstance(node, ast.Import) else []
            names += [node.module or ""] if isinstance(node, ast.ImportFrom) else []
            assert not [name for name in names if name.split(".")[0] in ("benchrun", "benchrun_plugins")], file


def test_hash_is_that_of_the_one_file():
    assert reference_sha256() == hashlib.sha256((ROOM / "r1.json").read_bytes().replace(b"\r\n", b"\n")).hexdigest()
    with pytest.raises(ValueError, match="R1"):
        reference_sha256("R9")


def test_constants_are_those_of_the_design():
    assert R1["coupler"]["adapter_reflection_db"] == -36.0
    assert R1["receiver"]["compression_at_dbm"] == -3.0
    assert R1["source"]["skirt_dbc_per_hz"] == [-80.0, -98.0, -108.0, -115.0, -135.0, -150.0, -155.0]
    assert R1["definition_error"]["match"] == {"resistance_ohm": 0.20, "inductance_h": 8e-12}
    assert [stage["time_constant_s"] for stage in R1["device"]["thermal"]] == [20.0, 300.0]


def test_rehearsal_may_change_numbers_and_only_numbers_that_exist():
    world = World(demo_wiring(device={"gain_db": 20.0}, **PERFECT), 1)
    assert abs(world.truth.hot(2.3e9, drive_dbm=-30.0).gain_db[0]) == pytest.approx(20.0, abs=1.2)
    assert R1["device"]["gain_db"] == 14.0
    with pytest.raises(ValueError, match="gane_db"):
        World(demo_wiring(device={"gane_db": 20.0}), 1)
    with pytest.raises(ValueError, match="no_noise"):
        World(demo_wiring(no_noise=True), 1)


@pytest.mark.parametrize(
    ("frequency_hz", "magnitude", "angle_deg"),
    [(1e9, 0.99995, -32.738), (3e9, 0.99938, -98.574), (6e9, 0.99774, 162.333), (9e9, 0.99702, 63.184)],
)
def test_open_with_offset_loss(frequency_hz, magnitude, angle_deg):
    # CHECKS row 34: coefficients in the scikit-rf documentation; 40.856 ps, 0.93 Gohm/s.
    spec = {
        "kind": "open",
        "delay_s": 40.856e-12,
        "loss_ohm_per_s": 0.93e9,
        "capacitance": [89.939e-15, 2536.8e-27, -264.99e-36, 13.4e-45],
    }
    reflection = standards(errors=False, special=spec).reflection("special", np.array([frequency_hz]))[0]
    assert abs(reflection) == pytest.approx(magnitude, abs=1e-4)
    assert np.angle(reflection, deg=True) == pytest.approx(angle_deg, abs=0.01)


@pytest.mark.parametrize(("frequency_hz", "angle_deg"), [(1e9, -1.800), (6e9, -10.768)])
def test_flush_open(frequency_hz, angle_deg):
    # CHECKS row 35: 50 fF, -2 atan(w C Z0).
    flush = standards(errors=False, flush={"kind": "open", "capacitance": [50e-15]})
    assert np.angle(flush.reflection("flush", np.array([frequency_hz]))[0], deg=True) == pytest.approx(
        angle_deg, abs=1e-3
    )


def test_ideal_offset_short():
    # CHECKS row 36: 50 ps at 1 GHz, 144.0 degree.
    short = standards(errors=False, special={"kind": "short", "delay_s": 50e-12})
    assert np.angle(short.reflection("special", np.array([1e9]))[0], deg=True) == pytest.approx(144.0, abs=1e-6)


def test_tabulated_standard():
    table = {"kind": "data", "frequency_hz": [2e9, 3e9], "reflection": [[0.0, 0.0], [0.2, -0.4]]}
    assert standards(special=table).reflection("special", np.array([2.5e9]))[0] == pytest.approx(0.1 - 0.2j)


@pytest.mark.parametrize(
    ("what", "sigma"),
    [
        # One sigma of the reflection at 2.3 GHz from the design's sigmas, first order, at Z0 = 50 ohm.
        ("open", 2 * 2 * np.pi * 2.3e9 * np.hypot(np.hypot(1e-15, 0.1e-15 * 2.3**2) * 50, 0.06e-12)),
        ("short", 2 * 2 * np.pi * 2.3e9 * np.hypot(2e-12 / 50, 0.06e-12)),
        ("match", np.hypot(0.20 / 100, 2 * np.pi * 2.3e9 * 8e-12 / 100)),
        ("offset-short-1", 2 * 2 * np.pi * 2.3e9 * 0.06e-12),
        ("offset-short-2", 2 * 2 * np.pi * 2.3e9 * 0.06e-12),
    ],
)
def test_definition_errors_have_their_spread(what, sigma):
    at = np.array([2.3e9])
    nominal = standards(errors=False).reflection(what, at)[0]
    errors = np.array([standards(seed).reflection(what, at)[0] - nominal for seed in range(1500)])
    assert np.sqrt(np.mean(np.abs(errors) ** 2)) == pytest.approx(sigma, rel=0.06)
    assert abs(np.mean(errors)) < 0.1 * sigma


def test_one_error_of_the_power_meter_for_each_bench():
    def error_db(seed):
        readings = []
        for on in (True, False):
            world = World(demo_wiring(**{**PERFECT, "meter_error": on}), seed)
            world.connect("input", "meter")
            world.set_source("pump", frequency_hz=2.3e9, level_dbm=-10.0, on=True)
            readings += [world.measure_power("meter", 2.3e9, start) for start in (0, 10**9)]
        assert readings[0] == readings[1]
        return readings[0] - readings[2]

    assert np.std([error_db(seed) for seed in range(150)]) == pytest.approx(0.065, rel=0.15)


def test_meter_at_the_input_reads_the_drive():
    world = World(demo_wiring(**PERFECT), 3)
    drive_dbm = world.truth.hot(2.3e9, pump_level_dbm=-4.0, offset_hz=0.0).drive_dbm[0]
    world.connect("input", "meter")
    world.set_source("pump", frequency_hz=2.3e9, level_dbm=-4.0, on=True)
    # The sensor's reflection of 0.02 and the bench's of -22 dB leave 0.014 dB at most.
    assert world.measure_power("meter", 2.3e9, 0) == pytest.approx(drive_dbm, abs=0.014)
    world.set_source("pump", frequency_hz=2.3e9, level_dbm=-4.0, on=False)
    assert world.measure_power("meter", 2.3e9, 0) == pytest.approx(-55.0, abs=0.1)
