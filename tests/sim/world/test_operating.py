"""Operating point and sidebands: against the equations, against brute force, and against the two-sideband solution."""

from __future__ import annotations

import numpy as np
import pytest
from benchrun_sim.world import World
from benchrun_sim.world.bench_state import Tone
from benchrun_sim.world.operating import solve_carrier
from hypothesis import given, settings
from hypothesis import strategies as st

from .demo_bench import PERFECT, bias_up, demo_wiring

PROBE = 2.3e9
LABELS = ["R3", "R4"]


def hot_world(make_world, seed=1, level_dbm=0.0, offset_hz=-7e6, **on):
    """The demo bench, imperfections off but those named, biased, pumped and probed."""
    world = make_world(seed, **{**PERFECT, **on})
    bias_up(world)
    world.set_source("pump", frequency_hz=PROBE + offset_hz, level_dbm=level_dbm, on=True)
    world.set_source("analyser", frequency_hz=PROBE, level_dbm=8.0, on=True)
    return world


def measured(world, offset_hz=-7e6):
    """a2 and b2 at probe, pump and image, by the true error terms."""
    offsets = [0.0, offset_hz, 2 * offset_hz]
    waves, _ = world.measure_waves("analyser", LABELS, [PROBE], offsets, 300.0, 1, True, 5)
    terms = world.truth.error_terms(PROBE + np.array(offsets))
    r, m = waves[:, 0, 0], waves[:, 1, 0]
    b = terms.k * (m - terms.e00 * r) / terms.e10e01
    return terms.k * r + terms.e11 * b, b


reflections = st.complex_numbers(max_magnitude=0.3, allow_nan=False, allow_infinity=False)


@settings(max_examples=60, deadline=None)
@given(g1=reflections, g2=reflections, drive=st.floats(0.0, 1.5), seed=st.integers(0, 20))
def test_carrier_meets_the_bench_and_the_device(make_world_cached, g1, g2, drive, seed):
    coefficients = make_world_cached(seed)
    source1, source2 = drive * (0.6 + 0.8j), 0.02j
    carrier = solve_carrier(coefficients, source1, g1, source2, g2)
    assert carrier.a1 == pytest.approx(source1 + g1 * carrier.b1, abs=1e-12)
    assert carrier.a2 == pytest.approx(source2 + g2 * carrier.b2, abs=1e-12)
    if abs(carrier.a1) > 1e-6:
        frame = carrier.frame
        f1, f2 = coefficients.outputs(abs(carrier.a1), carrier.a2 / frame)
        assert (carrier.b1, carrier.b2) == (pytest.approx(frame * f1, abs=1e-12), pytest.approx(frame * f2, abs=1e-12))


@pytest.fixture(scope="module")
def make_world_cached():
    known = {}

    def build(seed):
        if seed not in known:
            device = World(demo_wiring(), seed).bench.device
            known[seed] = device.coefficients(PROBE, device.bias(28.0, device.nominal_gate_v), 0.0)
        return known[seed]

    return build


@pytest.mark.parametrize("level_dbm", [-15.0, -5.0, 0.0])
@pytest.mark.parametrize("seed", [1, 2, 3])
def test_hot_coefficients_are_the_carriers_own_change(make_world, seed, level_dbm):
    # Brute force: without memory, a probe beside the carrier sees what a small step of a2 on the carrier sees, port 1
    # closed by the bench (its reflection taken at one frequency: offset 0). Steps in two phases give S and T'.
    world = hot_world(make_world, seed, level_dbm, offset_hz=-1e-3, second_order=True)
    truth = world.truth.hot(PROBE, pump_level_dbm=level_dbm, offset_hz=-1e-3)
    state = world.truth.bias_state()
    pump = Tone(np.array([PROBE]), np.array([level_dbm]), True)
    here = world.bench.carrier(pump, state)
    source1 = (world.bench.network("input", pump.frequency_hz).transfer * world.bench.source_wave("input", pump))[0]
    reflection1 = complex(world.bench.network("input", pump.frequency_hz).reflection[0])
    step = 1e-5

    def change(direction):
        up, down = (
            solve_carrier(here.coefficients, source1, reflection1, here.a2 + side * step * direction, 0.0).b2
            for side in (1, -1)
        )
        return (up - down) / (2 * step)

    along, across = change(1.0), change(1j)
    s, t = 0.5 * (along - 1j * across), 0.5 * (along + 1j * across)
    assert truth.reflection[0] == pytest.approx(s, abs=2e-8)
    assert truth.conversion[0] == pytest.approx(t / here.frame**2, abs=2e-8)
    assert truth.conversion_to_b2[0] == pytest.approx(t / (here.b2 / abs(here.b2)) ** 2, abs=2e-8)


@pytest.mark.parametrize("offset_hz", [-7e6, 7e6])
@pytest.mark.parametrize("level_dbm", [-15.0, -3.0, 0.4])
def test_both_sidebands_give_the_truth_back(make_world, level_dbm, offset_hz):
    # METHODS section 1, offset probe. Exact but for what the bench at port 1 does differently at the two sidebands.
    world = hot_world(make_world, 2, level_dbm, offset_hz, second_order=True)
    a, b = measured(world, offset_hz)
    det = abs(a[0]) ** 2 - abs(a[2]) ** 2
    s = (b[0] * np.conj(a[0]) - b[2] * np.conj(a[2])) / det
    t = (a[0] * b[2] - a[2] * b[0]) / det
    truth = world.truth.reading(5)
    assert s == pytest.approx(truth.reflection[0], abs=1e-5)
    assert abs(t) == pytest.approx(abs(truth.conversion[0]), abs=1e-4)
    carrier = b[1] / abs(b[1])
    assert abs(t / carrier**2 - truth.conversion_to_b2[0]) < 3e-4


def test_one_sideband_alone_is_biased_within_the_bound(make_world):
    # METHODS section 1: |T22|^2 |Gs| / |1 - Gs S22|.
    world = hot_world(make_world, 2, 0.4)
    a, b = measured(world)
    truth = world.truth.reading(5)
    load = world.truth.bench_reflection("output", [PROBE - 14e6])[0]
    bound = abs(truth.conversion[0]) ** 2 * abs(load) / abs(1 - load * truth.reflection[0])
    off = abs(b[0] / a[0] - truth.reflection[0])
    assert 0.2 * bound < off < 1.2 * bound


def test_bench_at_port_one_shifts_the_reflection_by_about_what_methods_say(make_world):
    # METHODS section 1: |S12 S21 Gs1| / |1 - S11 Gs1|, 0.012 for -18 dB and 0.1.
    world = hot_world(make_world, 1, -40.0)
    truth = world.truth.reading(measured(world) and 5)
    match = world.truth.bench_reflection("input", [PROBE])[0]
    shift = abs(truth.reflection[0] - truth.s22[0])
    assert shift == pytest.approx(10 ** (-18 / 20) * abs(match), rel=0.15)


def test_small_drive_converts_nothing(make_world):
    truth = hot_world(make_world, 1, -60.0).truth.hot(PROBE, pump_level_dbm=-60.0)
    assert abs(truth.conversion[0]) < 1e-4
    assert truth.gain_db[0] == pytest.approx(14.0, abs=1.0)


def test_bias_resonance_acts_on_both_sidebands(make_world):
    offsets = [-1e6, -8e6, -20e6, 8e6]
    plain, resonant = (
        [hot_world(make_world, 1, bias_resonance=on).truth.hot(PROBE, pump_level_dbm=0.0, offset_hz=o) for o in offsets]
        for on in (False, True)
    )
    shift = [abs(r.s22[0] - p.s22[0]) for r, p in zip(resonant, plain, strict=True)]
    assert max(shift) == max(shift[1], shift[3])
    assert shift[1] == pytest.approx(0.03, rel=0.15)
    assert shift[0] < 0.3 * shift[1]


def test_pump_that_is_off_leaves_the_small_signal_device(make_world):
    world = hot_world(make_world)
    world.set_source("pump", frequency_hz=2.1e9, level_dbm=0.0, on=False)
    waves, _ = world.measure_waves("analyser", LABELS, [PROBE], [0.0], 300.0, 1, True, 5)
    terms = world.truth.error_terms([PROBE])
    raw = waves[0, 1, 0] / waves[0, 0, 0]
    corrected = (raw - terms.e00[0]) / (terms.e10e01[0] + terms.e11[0] * (raw - terms.e00[0]))
    assert corrected == pytest.approx(world.truth.reading(5).reflection[0], abs=1e-10)
    assert abs(world.truth.reading(5).s22[0]) == pytest.approx(0.28, abs=1e-6)


def test_cold_device_shows_its_passive_reflection(perfect):
    perfect.set_source("analyser", frequency_hz=PROBE, level_dbm=-10.0, on=True)
    grid = np.linspace(2.2e9, 2.4e9, 11)
    waves, _ = perfect.measure_waves("analyser", LABELS, grid, [0.0], 300.0, 1, True, 5)
    terms, raw = perfect.truth.error_terms(grid), waves[0, 1] / waves[0, 0]
    corrected = (raw - terms.e00) / (terms.e10e01 + terms.e11 * (raw - terms.e00))
    assert corrected == pytest.approx(perfect.truth.cold(grid), abs=1e-10)
    assert np.abs(perfect.truth.cold(grid)) == pytest.approx(np.full(11, 0.86), abs=0.01)


def test_coupler_at_the_input_sees_the_input_side():
    wiring = demo_wiring(**PERFECT)
    wiring["parts"]["input-coupler"] = {"kind": "coupler", "coupling_db": 30.0, "directivity_db": 35.0, "loss_db": 0.3}
    wiring["signals"]["pump"]["path"].append("input-coupler")
    for name, label, arm in (("input-incident", "R1", "incident"), ("input-reflected", "R2", "reflected")):
        wiring["receivers"][name] = {
            "instrument": "analyser",
            "receiver": label,
            "coupler": "input-coupler",
            "arm": arm,
            "path": ["P1"],
        }
    world = World(wiring, 1)
    bias_up(world)
    world.set_source("pump", frequency_hz=PROBE - 7e6, level_dbm=-3.0, on=True)
    world.set_source("analyser", frequency_hz=PROBE, level_dbm=8.0, on=True)
    offsets = np.array([0.0, -7e6, -14e6])
    waves, _ = world.measure_waves("analyser", ["R1", "R2", "R3", "R4"], [PROBE], offsets, 300.0, 1, True, 5)
    terms = world.truth.error_terms(PROBE + offsets, "input", "input-incident", "input-reflected")
    r, m = waves[:, 0, 0], waves[:, 1, 0]
    b1 = terms.k * (m - terms.e00 * r) / terms.e10e01
    a1 = terms.k * r + terms.e11 * b1
    truth = world.truth.reading(5)
    assert 20 * np.log10(abs(a1[1])) + 30 == pytest.approx(truth.input_dbm[0], abs=1e-9)
    # The sidebands reach port 1 through the device alone: there a1 is what the bench reflects.
    match = world.truth.bench_reflection("input", PROBE + offsets)
    assert a1[[0, 2]] == pytest.approx((match * b1)[[0, 2]], rel=1e-9)


def test_probe_on_the_carrier_acts_on_the_carrier(make_world):
    world = hot_world(make_world, 1, -5.0)
    _, alone = measured(world)
    world.set_source("pump", frequency_hz=PROBE, level_dbm=-5.0, on=True)
    waves, _ = world.measure_waves("analyser", LABELS, [PROBE], [0.0], 300.0, 1, True, 6)
    terms = world.truth.error_terms([PROBE])
    r, m = waves[0, :, 0]
    b = abs(terms.k[0] * (m - terms.e00[0] * r) / terms.e10e01[0])
    assert b == pytest.approx(abs(alone[1]), rel=0.1)
    assert abs(b - abs(alone[1])) > 1e-3


def test_demo_bench_is_a_believable_amplifier(make_world):
    for seed in range(1, 6):
        world = make_world(seed)
        bias_up(world)
        drives = np.arange(0.0, 33.0, 1.0)
        hot = [world.truth.hot(PROBE, drive_dbm=drive) for drive in drives]
        gain, output = (np.array([getattr(h, n)[0] for h in hot]) for n in ("gain_db", "output_dbm"))
        reflection, conversion = (np.array([getattr(h, n)[0] for h in hot]) for n in ("reflection", "conversion"))
        assert np.all(np.diff(output) > 0)
        assert np.all(np.diff(gain) < 0.02)
        assert gain[0] == pytest.approx(14.0, abs=1.2)
        assert output[30] == pytest.approx(42.0, abs=0.6)
        assert np.all(np.diff(np.abs(conversion)) > 0)
        assert np.abs(conversion[30]) == pytest.approx(0.16, abs=0.035)
        assert np.abs(reflection[30] - reflection[0]) == pytest.approx(0.22, abs=0.05)
        assert np.all(np.abs(reflection) < 0.6)
        assert np.all(np.abs(conversion[:31]) < 0.2)
        assert np.all(np.abs(reflection) + np.abs(conversion) < 1.0)
        assert [h.drive_dbm[0] for h in hot] == pytest.approx(drives, abs=1e-9)
