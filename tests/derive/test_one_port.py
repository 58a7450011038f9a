"""Error terms: round trips for any terms and devices, and standards that do not span."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.errors import DataSetError

F = np.linspace(2.18e9, 2.4e9, 5)
NAMES = ["open", "short", "match"]
OSL = np.repeat(np.array([[1], [-1], [0]], dtype=complex), F.size, axis=1)


def disc(radius):
    return st.builds(lambda r, p: r * np.exp(1j * p), st.floats(0, radius), st.floats(0, 2 * np.pi))


def terms_strategy():
    tracking = st.builds(lambda r, p: r * np.exp(1j * p), st.floats(0.05, 2.0), st.floats(0, 2 * np.pi))
    return st.builds(
        lambda d, s, t: ErrorTerms(np.array([d]), np.array([s]), np.array([t])), disc(0.3), disc(0.4), tracking
    )


@settings(deadline=None)
@given(terms_strategy(), st.lists(disc(1.0), min_size=1, max_size=5))
def test_solve_then_apply_gives_the_device_back(terms, devices):
    standards = np.array([[1], [-1], [0], [0.8j]], dtype=complex)
    found = solve(terms.raw(standards), standards)
    device = np.array(devices)[:, None]
    np.testing.assert_allclose(found.apply(terms.raw(device)), device, rtol=0, atol=1e-11)


@settings(deadline=None)
@given(terms_strategy(), disc(1.0), disc(1.0), st.floats(0.1, 100.0))
def test_waves_are_the_inverse_of_reading_them(terms, b, a, scale):
    """a2 = K r + c b2 and b2 = K (m - a r) / e, read the other way round."""
    incident = (a - terms.e11 * b) / scale
    reflected = terms.e10e01 * b / scale + terms.e00 * incident
    found_b, found_a = terms.waves(reflected, incident, np.array([scale]))
    np.testing.assert_allclose([found_b[0], found_a[0]], [b, a], rtol=0, atol=1e-11)


def test_waves_and_ratio_agree():
    terms = ErrorTerms(np.array([0.05j]), np.array([0.1 + 0j]), np.array([0.7 - 0.2j]))
    m, r = np.array([0.3 + 0.1j]), np.array([0.9 - 0.4j])
    b, a = terms.waves(m, r, np.array([3.0]))
    assert abs(b / a - terms.apply(m / r))[0] < 1e-15


def test_least_squares_averages_the_errors_of_standards():
    rng = np.random.default_rng(5)
    standards = np.exp(2j * np.pi * (np.arange(24)[:, None] + rng.random((24, F.size))) / 24)
    terms = ErrorTerms(*(np.full(F.size, v) for v in (0.02 + 0j, 0.05j, 0.9 + 0j)))
    raw = terms.raw(standards) + 1e-3 * (rng.normal(size=standards.shape) + 1j * rng.normal(size=standards.shape))
    error = solve(raw, standards).apply(terms.raw(np.zeros((1, F.size), complex)))
    assert np.abs(error).max() < 1e-3


@pytest.mark.parametrize("double", [1.0, 1.0 + 0.005j])
def test_two_standards_alike_are_refused_by_name_and_frequency(double):
    standards = OSL.copy()
    standards[1, 2] = double
    raw = 0.1 + 0.8 * OSL
    with pytest.raises(DataSetError, match=r"open and short .* reflect alike at 2\.29 GHz"):
        solve(raw, standards, names=NAMES, frequency_hz=F)


def test_one_standard_connected_twice_is_noticed_in_the_readings():
    raw = 0.1 + 0.8 * OSL
    raw[1] = raw[0] + 0.003
    with pytest.raises(DataSetError, match=r"open and short were read alike at 2\.18 GHz.*connected twice"):
        solve(raw, OSL, names=NAMES, frequency_hz=F)


def test_a_fourth_standard_saves_two_that_are_alike():
    standards = np.concatenate([OSL, OSL[:1]])
    terms = ErrorTerms(*(np.full(F.size, v) for v in (0.02 + 0j, 0.05j, 0.9 + 0j)))
    assert np.allclose(solve(terms.raw(standards), standards).e00, 0.02, rtol=0, atol=1e-13)


def test_three_alike_are_all_named():
    with pytest.raises(DataSetError, match="standard 1, standard 2 and standard 3"):
        solve(0.5 * OSL, np.zeros_like(OSL))


def test_too_few_wrong_shapes_and_no_numbers():
    with pytest.raises(DataSetError, match="2 standards do not make"):
        solve(OSL[:2], OSL[:2])
    with pytest.raises(DataSetError, match="must both be"):
        solve(OSL, OSL[:, :2])
    bad = OSL.copy()
    bad[0, 0] = np.nan
    with pytest.raises(DataSetError, match="no number"):
        solve(bad, OSL)


@pytest.mark.parametrize("value", [np.nan, np.inf, -2.0])
def test_apply_refuses_what_no_reflection_fits(value):
    """No numbers, and Gm = -b/c = -2, the model's pole."""
    terms = ErrorTerms(np.array([0j, 0j]), np.array([0.5 + 0j] * 2), np.array([1.0 + 0j] * 2))
    with pytest.raises(DataSetError, match=r"index \(1,\)"):
        terms.apply(np.array([0.3 + 0j, value]))
