"""Eight terms: waves and ratios agree, whatever sources are on; what does not span is refused by its frequency."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.one_port import solve
from benchrun.derive.power import scale_from_incident
from benchrun.derive.scattering import Scattering, Waves, flush_thru
from benchrun.derive.switch_terms import from_excitations
from benchrun.derive.two_port import TwoPortTerms
from benchrun.derive.two_port_solve import solve_standards, solve_thru, solve_unknown_thru
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2.18e9, 2.4e9, 5)


def raw_waves(terms: TwoPortTerms, waves: Waves, scale) -> Waves:
    """What the receivers read, by each port's model written from waves to readings."""
    out = []
    for port, k, a, b in (
        (terms.port_1, scale, waves.a1, waves.b1),
        (terms.port_2, scale / terms.k, waves.a2, waves.b2),
    ):
        reference = (a - port.e11 * b) / k
        out += [reference, port.e00 * reference + port.e10e01 * b / k]
    return Waves(*out)


@given(st.integers(0, 10**6))
def test_waves_come_back_with_pump_and_probe_on(seed):
    """Any four waves at all: no source, termination or device is assumed, so it holds for a hot reading."""
    rng = np.random.default_rng(seed)
    terms, scale = make.terms(rng, 5, F), 10.0 + make.disc(rng, 5, 5.0)
    waves = Waves(*(make.disc(rng, (4, 3, 5), size) for size in (1.0, 0.3, 0.1, 4.0)))
    found = terms.at_scale(scale).apply(raw_waves(terms, waves, scale))
    np.testing.assert_allclose(found, waves, rtol=0, atol=1e-12)


def test_waves_are_written_where_asked_and_repeatably():
    rng = np.random.default_rng(4)
    terms = make.terms(rng, 5)
    raw = Waves(*(make.disc(rng, (2, 5), 1.0) for _ in range(4)))
    out = Waves(*(np.full((2, 5), np.nan, complex) for _ in range(4)))
    correction = terms.at_scale(2.0)
    assert correction.apply(raw, out) is out
    np.testing.assert_array_equal(out, correction.apply(raw))


def test_ratios_and_waves_agree():
    """S from corrected waves of two excitations is S from corrected ratios; the scale and its phase fall out."""
    rng = np.random.default_rng(6)
    terms, device = make.terms(rng, 5), make.device(rng, 5)
    one, two = (make.excite(terms.raw(device), a, b) for a, b in ((1.0, 0.2j), (0.1, 1.0)))
    one, two = (Waves(*(np.broadcast_to(v, (5,)).astype(complex) for v in w)) for w in (one, two))
    correction = terms.at_scale(3.0 * np.exp(1.1j))
    make.assert_equal(from_excitations(correction.apply(one), correction.apply(two)), device.matrices())
    make.assert_equal(terms.apply(from_excitations(one, two)), device.matrices())


@given(st.integers(0, 10**6))
def test_reading_then_correcting_gives_the_device_back(seed):
    rng = np.random.default_rng(seed)
    terms, device = make.terms(rng, 5), make.device(rng, (3, 2, 5))
    make.assert_equal(terms.apply(terms.raw(device)), device.matrices(), 1e-10)


def test_power_meter_at_port_2_sets_the_scale_of_both_ports():
    """A matched meter at port 2 reads |a2|^2: absolute waves at port 1 follow through |k|."""
    rng = np.random.default_rng(7)
    terms, scale = make.terms(rng, 5), 4.0 + rng.random(5)
    none, a2 = np.zeros(5, complex), 0.1 * np.ones(5, complex)
    raw = raw_waves(terms, Waves(none, none, a2, none), scale)
    scale_2 = scale_from_incident(terms.port_2, raw.b2, raw.a2, np.full(5, 0.01))
    np.testing.assert_allclose(terms.scale_at_port_1(scale_2), scale, rtol=1e-12)


def test_least_squares_of_the_thru_averages_noise():
    """Four equations for k: its error is below that of the reading, and none without noise."""
    rng = np.random.default_rng(8)
    terms = make.terms(rng, 400)
    thru = Scattering(*(np.full(400, v) for v in (0.1j, 0.7, 0.8j, 0.2 + 0j)))
    np.testing.assert_allclose(
        solve_thru(terms.port_1, terms.port_2, terms.raw(thru), thru).k, terms.k, rtol=0, atol=1e-12
    )
    noisy = solve_thru(terms.port_1, terms.port_2, make.noisy(terms.raw(thru), rng, 1e-3), thru)
    assert np.sqrt(np.mean(np.abs(noisy.k / terms.k - 1) ** 2)) < 2.5e-3


def test_least_squares_needs_no_flush_thru_or_equal_standards():
    rng = np.random.default_rng(9)
    terms = make.terms(rng, 5)
    line = Scattering(*(np.full(5, v) for v in (0.1, 0.3 - 0.7j, 0.3 - 0.7j, -0.2j)))
    actual = [*make.reflects(5, ((0, 1), (1, -1), (-1, 0.5j))), line]
    found = solve_standards([terms.raw(s) for s in actual], actual)
    np.testing.assert_allclose(found.k, terms.k, rtol=0, atol=1e-11)
    np.testing.assert_allclose(found.port_2.e10e01, terms.port_2.e10e01, rtol=0, atol=1e-11)


def at_third(values: Scattering, other: Scattering) -> Scattering:
    """`values`, with the third frequency of `other`."""
    return Scattering(*(np.where(np.arange(5) == 2, b, a) for a, b in zip(values, other, strict=True)))


def test_a_known_thru_saves_two_reflects_that_are_alike():
    """Short twice, match and thru: eight equations for seven, so nothing is refused and nothing is lost."""
    rng = np.random.default_rng(10)
    terms, actual = make.terms(rng, 5), make.standards(5)
    actual[0] = actual[1]
    found = solve_standards([terms.raw(s) for s in actual], actual)
    np.testing.assert_allclose(found.port_1.e11, terms.port_1.e11, rtol=0, atol=1e-11)


@pytest.mark.parametrize("apart", [0.0, 1e-4])
def test_standards_alike_at_one_frequency_are_refused(apart):
    """At 2.29 GHz all reflects are alike, within their uncertainty: with the thru that is six equations for seven."""
    rng = np.random.default_rng(10)
    terms, actual = make.terms(rng, 5), make.standards(5)
    for k, reflection in enumerate((-1.0, -1.0 + apart, -1.0 - apart)):
        g = np.full(5, reflection + 0j)
        actual[k] = at_third(actual[k], Scattering(g, 0 * g, 0 * g, g))
    with pytest.raises(DataSetError, match=r"do not make a two-port calibration at 2\.29 GHz"):
        solve_standards([terms.raw(s) for s in actual], actual, frequency_hz=F)


def test_without_a_thru_nothing_ties_the_ports():
    rng = np.random.default_rng(11)
    terms, actual = make.terms(rng, 5), make.reflects(5, ((1, 1), (-1, -1), (0, 0), (1j, 1j)))
    with pytest.raises(DataSetError, match=r"do not make a two-port calibration at 2\.18 GHz"):
        solve_standards([terms.raw(s) for s in actual], actual, frequency_hz=F)
    with pytest.raises(DataSetError, match="1 readings and 1 definitions"):
        solve_standards(actual[:1], actual[:1])
    open_ended = terms.raw(actual[0])
    for call in (
        lambda: solve_thru(terms.port_1, terms.port_2, open_ended, flush_thru(5), frequency_hz=F),
        lambda: solve_unknown_thru(terms.port_1, terms.port_2, open_ended, 0.0, frequency_hz=F),
    ):
        with pytest.raises(DataSetError, match=r"nothing came through at 2\.18 GHz"):
            call()


def test_a_rough_phase_90_degrees_off_decides_nothing():
    rng = np.random.default_rng(12)
    terms = make.terms(rng, 5)
    rough = np.array([0.0, 1.0, 0.0, np.pi / 2, 0.0])
    with pytest.raises(DataSetError, match=r"90 degrees off at 2\.345 GHz"):
        solve_unknown_thru(terms.port_1, terms.port_2, terms.raw(flush_thru(5)), rough, frequency_hz=F)


def test_no_numbers_are_refused_wherever_they_enter():
    rng = np.random.default_rng(13)
    terms, nan = make.terms(rng, 5, F), np.where(np.arange(5) == 1, np.nan, 1.0 + 0j)
    ratios = terms.raw(flush_thru(5))
    raw = Waves(*(np.ones(5, complex) for _ in range(4)))
    calls = [
        lambda: terms.apply(ratios._replace(s12=nan)),
        lambda: terms.at_scale(nan),
        lambda: TwoPortTerms(terms.port_1, terms.port_2, nan, F).at_scale(1.0),
        lambda: solve_thru(terms.port_1, terms.port_2, ratios._replace(s21=nan), flush_thru(5), frequency_hz=F),
        lambda: solve_unknown_thru(terms.port_1, terms.port_2, ratios, nan.real, frequency_hz=F),
        lambda: solve_standards([ratios] * 4, [*make.reflects(5), ratios._replace(s11=nan)], frequency_hz=F),
        *(lambda name=name: terms.at_scale(1.0).apply(raw._replace(**{name: nan})) for name in Waves._fields),
        lambda: terms.at_scale(1.0).apply(raw._replace(b2=np.where(np.isnan(nan), np.inf, 1.0 + 0j))),
    ]
    for call in calls:
        with pytest.raises(DataSetError, match=r"2\.235 GHz"):
            call()
    for scale in (0.0, np.inf):
        with pytest.raises(DataSetError, match="scale of the receivers"):
            terms.at_scale(scale)


def test_ratios_that_no_device_gives_are_refused():
    """At the model's pole the waves into the device vanish: M = b/a of a shorted reference."""
    rng = np.random.default_rng(14)
    terms = make.terms(rng, 1)
    pole = [p.e00 - p.e10e01 / p.e11 for p in (terms.port_1, terms.port_2)]
    none = np.zeros(1, complex)
    with pytest.raises(DataSetError, match="no device fits"):
        terms.apply(Scattering(pole[0], none, none, pole[1]))


def test_two_ports_calibrated_apart_make_one_calibration():
    """The whole way: one-port standards at each port, a thru, and a device that is not reciprocal."""
    rng = np.random.default_rng(15)
    terms, actual = make.terms(rng, 5), make.standards(5)
    measured = [terms.raw(s) for s in actual]
    one = solve(np.array([m.s11 for m in measured[:3]]), np.array([s.s11 for s in actual[:3]]))
    two = solve(np.array([m.s22 for m in measured[:3]]), np.array([s.s22 for s in actual[:3]]))
    device = make.device(rng, (7, 5))
    for found in (solve_thru(one, two, measured[3], actual[3]), solve_unknown_thru(one, two, measured[3], 0.4)):
        make.assert_equal(found.apply(terms.raw(device)), device.matrices(), 1e-11)


def test_matrices_and_planar_form_are_one():
    rng = np.random.default_rng(16)
    device = make.device(rng, (2, 5))
    np.testing.assert_array_equal(Scattering.of(device.matrices()), device)
    np.testing.assert_allclose(np.linalg.det(device.matrices()), device.determinant(), rtol=0, atol=1e-14)
    assert device.turned().turned() == device
