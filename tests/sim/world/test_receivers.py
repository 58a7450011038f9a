"""Receivers of the simulated world: compression, mixing products, filters, noise, drift, phase."""

from __future__ import annotations

import numpy as np
import pytest
from benchrun_sim.world import reference_world
from benchrun_sim.world.imperfections import Imperfections
from benchrun_sim.world.levels import dbm, root_watts
from benchrun_sim.world.receivers import IMAGE, PROBE, PUMP, Filter, Incoming, Receivers, intermodulate, kappa_per_w

from .demo_bench import PERFECT

R1 = reference_world()
LABELS = ("R3", "R4")
F0, DELTA = 2.3e9, 7e6


def receivers(constants=R1, seed=1, **on):
    switches = {**PERFECT, **on}
    return Receivers("analyser", LABELS, constants, seed, Imperfections(**switches))


def incoming(image=0.0, pump=0.0, probe=0.0, points=1, skirt=0.0):
    """The same three tones at both receivers, root-watt."""
    waves = np.zeros((3, 2, points), dtype=np.complex128)
    waves[IMAGE], waves[PUMP], waves[PROBE] = image, pump, probe
    frequencies = np.array([F0 - DELTA, F0, F0 + DELTA])[:, None] * np.ones(points)
    return Incoming(waves, frequencies, np.full((2, points), skirt, dtype=np.complex128))


def read(
    some, what, tuned=(F0 + DELTA, F0, F0 - DELTA), if_bandwidth=1e3, averages=1, coherent=True, change=0.0, key=0
):
    points = what.waves.shape[2]
    tunings = np.array(tuned)[:, None] * np.ones(points)
    how = Filter(if_bandwidth, averages)
    return some.read(LABELS, what, tunings, how, coherent=coherent, change_k=change, key=(key,))


@pytest.mark.parametrize(("level_dbm", "loss_db"), [(-3.0, 0.1), (-13.0, 0.00995)])
def test_compression_is_a_tenth_at_the_limit_and_a_tenth_of_that_ten_decibels_below(level_dbm, loss_db):
    # CHECKS row 18: third order, 10 dB below the 0.1 dB point: 0.00995 dB to 1 %.
    kappa = kappa_per_w(R1)
    x = root_watts(level_dbm)
    assert -20 * np.log10(abs(1 - kappa * x**2)) == pytest.approx(loss_db, rel=0.01)
    assert kappa.imag / kappa.real == pytest.approx(0.6)


def test_reading_loses_what_kappa_says():
    strong, weak = (read(receivers(compression=True), incoming(pump=root_watts(p)))[1, 0, 0] for p in (-3.0, -60.0))
    assert 20 * np.log10(abs(strong / weak)) == pytest.approx(57.0 - 0.1, abs=1e-6)


def test_small_tones_beside_a_strong_one_closed_form():
    # CHECKS row 20: y = 10 x - x |x|^2 at A = 1 has g 9, S 8, T -1; here y/10 = x (1 - 0.1 |x|^2).
    small = 1e-7
    result = 10.0 * intermodulate(np.array([[0j], [1 + 0j], [small + 0j]]), 0.1)
    assert result[PUMP, 0] == pytest.approx(9.0, abs=1e-6)
    assert result[PROBE, 0] / small == pytest.approx(8.0, abs=1e-6)
    assert result[IMAGE, 0] / small == pytest.approx(-1.0, abs=1e-6)


def test_products_of_three_tones_are_those_of_the_sum_in_time():
    # Outside check: y = x (1 - kappa |x|^2) sampled over one beat, and its discrete Fourier transform (numpy.fft).
    generator = np.random.default_rng(3)
    tones = generator.normal(size=3) + 1j * generator.normal(size=3)
    kappa = 0.03 + 0.02j
    beat = np.exp(2j * np.pi * np.arange(16) / 16)
    x = tones[IMAGE] / beat + tones[PUMP] + tones[PROBE] * beat
    spectrum = np.fft.fft(x * (1 - kappa * np.abs(x) ** 2)) / 16
    expected = np.array([spectrum[-1], spectrum[0], spectrum[1]])
    assert intermodulate(tones[:, None], kappa)[:, 0] == pytest.approx(expected, abs=1e-12)


def test_skirt_power():
    # CHECKS row 16: 43 dBm with -120 dBc/Hz in 1 kHz is -47 dBm (definition of L(f), IEEE Std 1139).
    flat = {**R1, "source": {**R1["source"], "skirt_dbc_per_hz": [-120.0] * 7}}
    points = 40_000
    carrier = root_watts(43.0)
    what = incoming(pump=0.0, points=points, skirt=carrier)
    readings = read(receivers(flat, skirt=True), what, tuned=(F0 + DELTA,))[0] / receivers(flat).gain("R3")
    assert dbm(float(np.mean(np.abs(readings[0]) ** 2))) == pytest.approx(-47.0, abs=0.05)
    assert readings[1] / readings[0] == pytest.approx(
        np.full(points, receivers(flat).gain("R4") / receivers(flat).gain("R3"))
    )


def test_skirt_is_log_interpolated():
    ratio = receivers().skirt_ratio(np.array([1e6, 7e6, 1e7, 1e9]), 1.0)
    assert 20 * np.log10(ratio) == pytest.approx([-135.0, -135.0 - 15.0 * np.log10(7.0), -150.0, -155.0])


@pytest.mark.parametrize(
    ("bandwidth_hz", "averages", "expected_dbm"), [(1e3, 1, -110.0), (1e2, 1, -120.0), (1e3, 10, -120.0)]
)
def test_noise_floor(bandwidth_hz, averages, expected_dbm):
    readings = read(receivers(noise=True), incoming(points=20_000), if_bandwidth=bandwidth_hz, averages=averages)
    assert 10 * np.log10(np.mean(np.abs(readings) ** 2)) + 30 == pytest.approx(expected_dbm, abs=0.05)


def test_signal_to_noise_ratio_of_forty_decibels():
    # CHECKS row 17: 0.061 dB and 0.405 degree, one sigma (additive noise, closed form).
    what = incoming(probe=root_watts(-70.0), points=40_000)
    readings = read(receivers(noise=True), what)[0, 0]
    readings = readings / np.mean(readings)
    assert np.std(20 * np.log10(np.abs(readings))) == pytest.approx(0.0614, rel=0.02)
    assert np.std(np.angle(readings, deg=True)) == pytest.approx(0.405, rel=0.02)


def test_multiplicative_noise_goes_with_the_root_of_the_bandwidth():
    for bandwidth_hz, size in ((1e3, 1.15e-4), (1e2, 1.15e-4 / 10**0.5)):
        what = incoming(probe=root_watts(0.0), points=20_000)
        readings = read(receivers(noise=True), what, if_bandwidth=bandwidth_hz)[0, 0]
        assert np.std(readings / np.mean(readings)) == pytest.approx(size, rel=0.03)


@pytest.mark.parametrize(("distance_in_bandwidths", "rejection_db"), [(10.0, 80.0), (20.0, 104.08), (1000.0, 120.0)])
def test_rest_of_a_tone_beside_the_tuning(distance_in_bandwidths, rejection_db):
    bandwidth_hz = DELTA / distance_in_bandwidths
    flat = {**R1, "source": {**R1["source"], "skirt_dbc_per_hz": [-400.0] * 7}}
    some = receivers(flat, skirt=True)
    readings = read(some, incoming(pump=1.0, points=100), if_bandwidth=bandwidth_hz)[:, 0] / some.gain("R3")
    assert 20 * np.log10(np.abs(readings[0])) == pytest.approx(-rejection_db, abs=0.01)
    assert np.abs(readings[1]) == pytest.approx(1.0)
    assert len(np.unique(np.round(np.angle(readings[0]), 6))) > 90


def test_crosstalk():
    what = incoming()
    what.waves[PUMP, 0] = 1.0
    readings = read(receivers(crosstalk=True), what)[1, :, 0]
    ratio = abs(readings[1] / receivers().gain("R4")) / abs(readings[0] / receivers().gain("R3"))
    assert 20 * np.log10(ratio) == pytest.approx(-90.0, abs=1e-6)


def test_drift_common_and_between():
    what = incoming(probe=1.0)
    before, after = (read(receivers(drift=True), what, change=k)[0, :, 0] for k in (0.0, 1.0))
    change = after / before
    assert np.mean(20 * np.log10(np.abs(change))) == pytest.approx(0.010, rel=1e-6)
    assert np.mean(np.angle(change, deg=True)) == pytest.approx(0.10, rel=1e-6)
    between = change[0] / change[1]
    assert abs(20 * np.log10(abs(between))) == pytest.approx(0.0015, rel=1e-6)
    assert abs(np.angle(between, deg=True)) == pytest.approx(0.03, rel=1e-6)
    assert read(receivers(), what, change=1.0) == pytest.approx(read(receivers(), what))


def test_retuned_receivers_lose_the_phase_between_tones_and_keep_it_between_waves():
    what = incoming(image=0.1, pump=1.0, probe=0.5j, points=50)
    together, apart = (read(receivers(), what, coherent=c) for c in (True, False))
    assert apart[:, 0] / apart[:, 1] == pytest.approx(together[:, 0] / together[:, 1])
    assert np.abs(apart) == pytest.approx(np.abs(together))
    relation = np.angle(apart[0, 0] * apart[2, 0] / apart[1, 0] ** 2)
    assert np.std(relation) > 1.0
    assert np.std(np.angle(together[0, 0] * together[2, 0] / together[1, 0] ** 2)) < 1e-9


def test_limit_is_about_the_sum_of_all_tones_at_an_input():
    what = incoming(pump=root_watts(-5.0), probe=root_watts(-5.0))
    assert receivers().over_limit(LABELS, what, -3.0).tolist() == [True, True]
    assert receivers().over_limit(LABELS, what, -1.9).tolist() == [False, False]
