"""One-path two-port against scikit-rf and open data: CHECKS rows 30 and 32."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pytest
import skrf
from skrf.calibration import TwoPortOnePath

from benchrun.derive.one_path import OnePathTerms, Response, solve_one_path
from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.derive.scattering import Scattering, flush_thru
from tests.derive import two_ports as make

DATA = Path(__file__).parents[1] / "data" / "three_receiver_cal"
NAMES = ["short", "quarter_wave_delay_short", "load", "thru"]


def read(name: str) -> skrf.Network:
    return skrf.Network(str(DATA / f"{name}.s2p"))


def response(network: skrf.Network) -> Response:
    return Response(network.s[:, 0, 0], network.s[:, 1, 0])


def theirs(measured, ideals, **kwargs) -> TwoPortOnePath:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        found = TwoPortOnePath(measured=measured, ideals=ideals, n_thrus=1, source_port=1, **kwargs)
        found.run()
    return found


def assert_equal_terms(ours: OnePathTerms, coefs) -> None:
    pairs = {
        "directivity": ours.port.e00,
        "source match": ours.port.e11,
        "reflection tracking": ours.port.e10e01,
        "load match": ours.load_match,
        "transmission tracking": ours.transmission_tracking,
        "isolation": ours.isolation,
    }
    for name, value in pairs.items():
        np.testing.assert_allclose(value, coefs[f"forward {name}"], rtol=0, atol=1e-12)


@pytest.fixture(scope="module")
def open_data():
    """Short, the same behind a quarter wave of WR-12 waveguide (scikit-rf's, with its loss), load and flush thru."""
    measured = [read(name) for name in NAMES]
    frequency, none = measured[0].frequency, np.zeros(measured[0].frequency.npoints, complex)
    guide = skrf.media.RectangularWaveguide(frequency, a=3.0988e-3)
    quarter_wave = guide.delay_short(90, "deg").s[:, 0, 0]
    flat = [Scattering(g, none, none, g) for g in (none - 1.0, quarter_wave, none)]
    ideals = [make.network(s, frequency) for s in (*flat, flush_thru(frequency.npoints))]
    actual = np.array([ideal.s[:, 0, 0] for ideal in ideals[:3]])
    raw = np.array([m.s[:, 0, 0] for m in measured[:3]])
    port = solve(raw, actual, names=NAMES[:3], frequency_hz=frequency.f)
    ours = solve_one_path(port, response(measured[3]), flush_thru(frequency.npoints), frequency_hz=frequency.f)
    return ours, measured, ideals, frequency


def test_row_30_terms_at_75_ghz(open_data):
    """scikit-rf documentation data (BSD-3), 60 to 90 GHz: directivity, source match and load match."""
    ours, _, _, frequency = open_data
    at = int(np.argmin(np.abs(frequency.f - 75e9)))
    for value, magnitude, phase_deg in (
        (ours.port.e00, 0.01834, 1.60),
        (ours.port.e11, 0.0764, 27.13),
        (ours.load_match, 0.0995, -64.5),
    ):
        assert abs(value[at]) == pytest.approx(magnitude, abs=1e-4)
        assert np.angle(value[at], deg=True) == pytest.approx(phase_deg, abs=0.06)


def test_row_30_pad_both_ways(open_data):
    """The pad, turned round for its second reading: mean S21, and S12 against S21; scikit-rf's answer to 1e-12."""
    ours, measured, ideals, _ = open_data
    both = read("attenuator_(forward)"), read("attenuator_(reverse)")
    found = ours.both_ways(response(both[0]), response(both[1]))
    assert np.mean(20 * np.log10(np.abs(found.s21))) == pytest.approx(-11.313, abs=1e-3)
    assert np.max(np.abs(found.s21 - found.s12)) == pytest.approx(0.0065, abs=1e-4)
    other = theirs(measured, ideals)
    assert_equal_terms(ours, other.coefs)
    make.assert_equal(found, other.apply_cal(both).s)


def test_one_way_on_open_data_against_scikit_rf(open_data):
    """scikit-rf takes the unread raw reflection of port 2 as zero, which puts a known factor on its transmission.

    Its factor is (1 - q (ES - EL)) / (1 - q ES) with q = ED / ER; without it both agree to 1e-12.
    """
    ours, measured, ideals, _ = open_data
    pad, other = read("attenuator_(forward)"), theirs(measured, ideals)
    with pytest.warns(UserWarning, match="single measurement"):
        single = other.apply_cal(pad).s
    found, q, match = ours.response(response(pad)), ours.port.e00 / ours.port.e10e01, ours.port.e11
    factor = (1 - q * (match - ours.load_match)) / (1 - q * match)
    np.testing.assert_allclose(found.reflection, single[:, 0, 0], rtol=0, atol=1e-12)
    np.testing.assert_allclose(found.transmission * factor, single[:, 1, 0], rtol=0, atol=1e-12)


def test_row_32_source_match_corrected_response():
    """Algebra: with EL .1 the response keeps S21 / (1 - EL S22) and S11 + S12 S21 EL / (1 - EL S22)."""
    rng = np.random.default_rng(32)
    port, device = make.port(rng, 64), make.device(rng, 64)
    terms = OnePathTerms(port, np.full(64, 0.1 + 0j), make.disc(rng, 64, 0.8), make.disc(rng, 64, 1e-3))
    tied = device.s21 / (1 - terms.load_match * device.s22)
    raw = Response(
        port.raw(device.s11 + device.s12 * tied * 0.1),
        terms.isolation + terms.transmission_tracking * tied / (1 - port.e11 * (device.s11 + device.s12 * tied * 0.1)),
    )
    found = terms.response(raw)
    np.testing.assert_allclose(found.transmission, device.s21 / (1 - 0.1 * device.s22), rtol=0, atol=1e-12)
    np.testing.assert_allclose(
        found.reflection, device.s11 + device.s12 * device.s21 * 0.1 / (1 - 0.1 * device.s22), rtol=0, atol=1e-12
    )


@pytest.mark.parametrize("seed", range(4))
def test_random_terms_against_scikit_rf(seed):
    """Random ports, a noisy and not flush thru, isolation: terms and answer of scikit-rf's TwoPortOnePath to 1e-12."""
    rng = np.random.default_rng(seed)
    band, points = skrf.Frequency(2.18, 2.4, 45, "GHz"), 45
    whole = np.ones(points)
    truth = OnePathTerms(
        make.port(rng, points),
        make.disc(rng, points, 0.2),
        0.5 + make.disc(rng, points, 0.3),
        make.disc(rng, points, 1e-3),
    )
    thru = Scattering(0.05j * whole, 0.9j * whole, 0.8 * whole, (0.1 + 0.02j) * whole)
    actual = [*make.reflects(points, ((1, 1), (-1, -1), (0, 0), (0.8j, 0.8j))), thru]
    measured = [truth.raw(s) for s in actual]
    measured = [Response(*(v + make.disc(rng, points, 1e-3) for v in m)) for m in measured]
    leak = Response(make.disc(rng, points, 0.1), truth.isolation)

    def net(raw: Response) -> skrf.Network:
        return make.network(Scattering(raw.reflection, raw.transmission, raw.transmission, raw.reflection), band)

    port = solve(np.array([m.reflection for m in measured[:4]]), np.array([s.s11 for s in actual[:4]]))
    ours = solve_one_path(port, measured[4], thru, isolation=leak.transmission)
    other = theirs([net(m) for m in measured], [make.network(s, band) for s in actual], isolation=net(leak))
    assert_equal_terms(ours, other.coefs)
    device = make.device(rng, points)
    readings = truth.raw(device), truth.raw(device.turned())
    make.assert_equal(ours.both_ways(*readings), other.apply_cal(tuple(net(r) for r in readings)).s, 1e-11)


def test_a_big_pad_leaves_only_the_load_match():
    """Common practice, no source: with 20 to 30 dB at port 2 one-path is the way, and the load match is then small."""
    rng = np.random.default_rng(3)
    device = make.device(rng, 30)
    port = ErrorTerms(*(np.full(30, v) for v in (0.02 + 0j, 0.05 + 0j, 0.9 + 0j)))
    behind_pad = OnePathTerms(port, np.full(30, 10 ** (-46 / 20) + 0j), np.full(30, 0.1 + 0j), np.zeros(30, complex))
    error = np.abs(behind_pad.response(behind_pad.raw(device)).transmission / device.s21 - 1)
    assert error.max() < 10 ** (-46 / 20) * 0.65
