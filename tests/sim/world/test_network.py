"""The linear bench: one-port model, reflections, levels, and that nothing passive makes power."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from benchrun_sim.world import World, reference_world
from benchrun_sim.world.parts import Amplifier
from benchrun_sim.world.side import Coupler, Side
from hypothesis import given, settings
from hypothesis import strategies as st

from .demo_bench import PERFECT, demo_wiring

R1 = reference_world()
GRID = np.linspace(2.2e9, 2.4e9, 21)
THINGS = ("open", "short", "match", "offset-short-1", "offset-short-2", "nothing", "meter")


def ratio(world: World, what: str) -> np.ndarray:
    """Raw reading reflected/incident with something connected to the output plane."""
    world.connect("output", what)
    waves, _ = world.measure_waves("analyser", ["R3", "R4"], GRID, [0.0], 1e3, 1, True, world.now_ns)
    return waves[0, 1] / waves[0, 0]


@pytest.fixture
def probed(perfect):
    perfect.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=True)
    return perfect


@pytest.mark.parametrize("three", list(itertools.combinations(THINGS[:6], 3)))
def test_any_three_standards_give_the_error_terms(probed, three):
    # CHECKS row 27's method: Gm = a + b G + c G Gm, solved from three standards, holds for everything else.
    truths = [probed.truth.standard(what, GRID) for what in three]
    readings = [ratio(probed, what) for what in three]
    rows = np.stack([np.stack([np.ones_like(g), g, g * m], -1) for g, m in zip(truths, readings, strict=True)], 1)
    a, b, c = np.linalg.solve(rows, np.stack(readings, -1)[..., None])[..., 0].T
    terms = probed.truth.error_terms(GRID)
    condition = np.linalg.cond(rows).max()
    assert np.abs(a - terms.e00).max() < 1e-14 * condition
    assert np.abs(c - terms.e11).max() < 1e-14 * condition
    assert np.abs(b + a * c - terms.e10e01).max() < 1e-14 * condition
    for what in THINGS:
        reading, true = ratio(probed, what), probed.truth.standard(what, GRID)
        assert np.abs((reading - a) / (b + c * reading) - true).max() < 1e-13 * condition


def test_error_terms_are_of_the_size_of_their_parts(probed):
    terms = probed.truth.error_terms(GRID)
    directivity = np.abs(terms.e00 / terms.e10e01)
    raw, adapter = 10 ** (-37 / 20), 10 ** (-36 / 20)
    assert np.all(directivity < 1.15 * (raw + adapter))
    assert np.all(np.abs(terms.e11) < 0.05)
    # Both arms: 20 dB; pads: 10 dB against 27 dB, each 0.3 dB off.
    assert 20 * np.log10(np.abs(terms.e10e01)) == pytest.approx(-17.0 - 0.6, abs=2.5)


def test_waves_follow_from_the_error_terms_and_one_scale(probed):
    # METHODS section 2: b = K (m - e00 r)/e10e01, a = K r + e11 b.
    probed.connect("output", "offset-short-1")
    waves, _ = probed.measure_waves("analyser", ["R3", "R4"], GRID, [0.0], 1e3, 1, True, 5)
    terms, (r, m) = probed.truth.error_terms(GRID), waves[0]
    b = terms.k * (m - terms.e00 * r) / terms.e10e01
    a = terms.k * r + terms.e11 * b
    assert b / a == pytest.approx(probed.truth.standard("offset-short-1", GRID), abs=1e-12)


def test_meter_and_receivers_agree_on_the_power(probed):
    probed.connect("output", "meter")
    for frequency_hz in (2.2e9, 2.31e9):
        probed.set_source("analyser", frequency_hz=frequency_hz, level_dbm=8.0, on=True)
        waves, _ = probed.measure_waves("analyser", ["R3", "R4"], [frequency_hz], [0.0], 1e3, 1, True, 5)
        terms, (r, m) = probed.truth.error_terms([frequency_hz]), waves[0, :, 0]
        b = terms.k[0] * (m - terms.e00[0] * r) / terms.e10e01[0]
        incident_dbm = 20 * np.log10(abs(terms.k[0] * r + terms.e11[0] * b)) + 30
        assert probed.measure_power("meter", frequency_hz, 5) == pytest.approx(incident_dbm, abs=1e-4)
        # 8 dBm less the isolator, the pad and the coupler: a fraction of a decibel from the nominal.
        assert incident_dbm == pytest.approx(8.0 - 0.4 - 10.0 - 0.3, abs=1.2)


def test_bench_reflects_what_the_reference_world_says(perfect):
    two_pi_f = 2 * np.pi * GRID
    output = 10 ** (-26 / 20) * np.exp(-1j * two_pi_f * 1.7e-9) + 10 ** (-32 / 20) * np.exp(-1j * two_pi_f * 0.6e-9)
    assert perfect.truth.bench_reflection("output", GRID) == pytest.approx(output, abs=1e-14)
    assert 20 * np.log10(np.abs(perfect.truth.bench_reflection("input", GRID))) == pytest.approx(np.full(21, -22.0))


def test_what_is_connected_loads_the_source(probed):
    # The incident wave moves with the load by the bench's own reflection.
    incident = []
    for what in ("open", "short"):
        probed.connect("output", what)
        waves, _ = probed.measure_waves("analyser", ["R3"], GRID, [0.0], 1e3, 1, True, 5)
        incident.append(np.abs(waves[0, 0]))
    assert np.max(np.abs(incident[0] / incident[1] - 1)) > 0.05


@pytest.mark.parametrize("seed", range(12))
@settings(max_examples=10, deadline=None)
@given(
    a=st.complex_numbers(min_magnitude=0.01, max_magnitude=1.0, allow_nan=False, allow_infinity=False),
    b=st.complex_numbers(max_magnitude=1.0, allow_nan=False, allow_infinity=False),
)
def test_coupler_makes_no_power(seed, a, b):
    wiring = demo_wiring()
    inside = Coupler("coupler", wiring["parts"]["coupler"], R1, seed).combinations(GRID)
    power = {name: np.abs(p * a + q * b) ** 2 for name, (p, q) in inside.items()}
    into = power["source in"] + abs(b) ** 2
    out = power["source out"] + power["incident"] + power["reflected"] + abs(a) ** 2
    assert np.all(out <= into * (1 + 1e-12))


def test_adapter_is_lossless():
    near, through, far = Coupler("coupler", demo_wiring()["parts"]["coupler"], R1, 4)._adapter(GRID)
    matrix = np.moveaxis(np.array([[near, through], [through, far]]), 2, 0)
    assert matrix.conj().transpose(0, 2, 1) @ matrix == pytest.approx(np.broadcast_to(np.eye(2), (21, 2, 2)), abs=1e-14)


def test_joint_is_lossless_and_of_the_promised_size():
    side = Side("output", demo_wiring(), R1, 1)
    joints = np.array([side.joint(np.array([2.3e9]), mating)[0] for mating in range(4000)])
    assert np.sqrt(np.mean(np.abs(joints) ** 2)) == pytest.approx(1e-3, rel=0.05)
    plain = side.ideal_network(GRID)
    assert plain.behind(np.zeros(21)).reflection == pytest.approx(plain.reflection)
    # A full reflection stays one behind a lossless joint.
    full = plain.__class__(np.exp(1j * GRID / 1e9), plain.transfer, {}, {})
    assert np.abs(full.behind(side.joint(GRID, 3)).reflection) == pytest.approx(np.ones(21))


def test_joint_keeps_the_receivers_right():
    # The same waves, seen from both sides of the joint, make the same reading.
    side = Side("output", demo_wiring(), R1, 2)
    joint, source = side.joint(GRID, 9) * 50, 1.0
    inner, outer = side.ideal_network(GRID), side.ideal_network(GRID).behind(joint)
    load = 0.4 - 0.2j
    a = outer.transfer * source / (1 - outer.reflection * load)
    seen = joint + (1 - np.abs(joint) ** 2) * load / (1 + np.conj(joint) * load)
    inner_a = inner.transfer * source / (1 - inner.reflection * seen)
    for name in ("incident", "reflected"):
        direct = inner.toward[name] * inner_a + inner.away[name] * inner_a * seen
        assert outer.toward[name] * a + outer.away[name] * a * load == pytest.approx(direct, rel=1e-12)


def test_receiver_pads_are_three_tenths_of_a_decibel_off():
    side = Side("output", demo_wiring(), R1, 5)
    for arm in side.arms.values():
        for part in arm.parts:
            mean_db = -20 * np.log10(np.abs(part.transmission(np.linspace(1e9, 4e9, 9001)))).mean()
            assert abs(mean_db - part.spec["loss_db"]) == pytest.approx(0.3, abs=0.02)


def test_loss_may_be_a_table():
    wiring = demo_wiring(**PERFECT)
    plain = Side("output", wiring, R1, 1).ideal_network(GRID)
    wiring["parts"]["P1"]["loss_db"] = {"frequency_hz": [2.2e9, 2.4e9], "loss_db": [10.0, 12.0]}
    sloped = Side("output", wiring, R1, 1).ideal_network(GRID)
    more_db = -20 * np.log10(np.abs(sloped.toward["incident"] / plain.toward["incident"]))
    assert more_db == pytest.approx(np.linspace(0.0, 2.0, 21), abs=1e-9)
    assert sloped.toward["reflected"] == pytest.approx(plain.toward["reflected"])


def test_booster_compresses_a_tenth_at_its_linear_limit():
    booster = Amplifier("booster", demo_wiring()["parts"]["booster"], R1, 1)
    gain = booster.transmission(np.array([2.3e9]))[0]
    output = 10 ** ((36.0 - 30.0) / 20)
    low, high = 0.0, 10.0
    for _ in range(80):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if abs(booster.carry(middle + 0j, gain)) < output else (low, middle)
    assert 20 * np.log10(abs(low * gain) / output) == pytest.approx(0.1, abs=1e-6)


def test_coupler_takes_from_the_main_line_at_least_what_it_couples():
    # CHECKS row 14: an ideal 20 dB coupler loses 0.04365 dB in its main line (conservation of power).
    assert -10 * np.log10(1 - 10 ** (-20 / 10)) == pytest.approx(0.04365, abs=1e-4)
    assert R1["coupler"]["loss_db"] > 0.04365


def test_reading_follows_a_list_as_it_follows_steps(perfect):
    from .demo_bench import bias_up

    bias_up(perfect)
    perfect.set_source("analyser", frequency_hz=2.3e9, level_dbm=8.0, on=True)
    perfect.set_source("pump", frequency_hz=2.3e9, level_dbm=-20.0, on=True)
    levels = np.linspace(-15.0, 0.0, len(GRID))
    swept, _ = perfect.measure_waves(
        "analyser", ["R3", "R4"], GRID, [0.0, -7e6], 1e3, 1, True, 5, follow={"pump": (GRID - 7e6, levels)}
    )
    for index, (frequency_hz, level_dbm) in enumerate(zip(GRID, levels, strict=True)):
        perfect.set_source("pump", frequency_hz=frequency_hz - 7e6, level_dbm=level_dbm, on=True)
        alone, _ = perfect.measure_waves("analyser", ["R3", "R4"], [frequency_hz], [0.0, -7e6], 1e3, 1, True, 5)
        assert alone[:, 1, 0] / alone[:, 0, 0] == pytest.approx(swept[:, 1, index] / swept[:, 0, index], rel=1e-9)
        assert np.abs(alone[..., 0]) == pytest.approx(np.abs(swept[..., index]), rel=1e-9)
