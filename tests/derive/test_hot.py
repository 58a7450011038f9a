"""Offset probe and its bounds, for any device and bench; the on-carrier fit."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from benchrun.derive.hot import (
    distance_bound,
    on_carrier,
    one_sideband,
    output_reflection,
    referred_to_pump,
    two_sidebands,
)
from benchrun.errors import DataSetError


def disc(radius):
    return st.builds(lambda r, p: np.array([r * np.exp(1j * p)]), st.floats(0, radius), st.floats(0, 2 * np.pi))


def sidebands(s, t, upper, lower, probe=1e-2):
    """Waves of a device with S, T' between bench reflections `upper` and `lower`, solved as a linear system."""
    m = np.eye(4, dtype=complex)
    # unknowns a+, b+, a-*, b-*
    m[0, 1] = -upper[0]
    m[1, 0], m[1, 2] = -s[0], -t[0]
    m[2, 3] = -np.conj(lower[0])
    m[3, 2], m[3, 0] = -np.conj(s[0]), -np.conj(t[0])
    a, b, a_low, b_low = np.linalg.solve(m, [probe, 0, 0, 0])
    return np.array([a]), np.array([b]), np.array([np.conj(a_low)]), np.array([np.conj(b_low)])


@settings(deadline=None)
@given(disc(0.7), disc(0.25), disc(0.15), disc(0.15))
def test_two_sidebands_take_the_bench_out(s, t, upper, lower):
    found_s, found_t = two_sidebands(*sidebands(s, t, upper, lower))
    assert abs(found_s - s)[0] < 1e-12
    assert abs(found_t - t)[0] < 1e-12


@settings(deadline=None)
@given(disc(0.7), disc(0.25), disc(0.15), disc(0.15))
def test_one_sideband_is_biased_by_at_most_its_bound(s, t, upper, lower):
    a, b, _, _ = sidebands(s, t, upper, lower)
    found, bound = one_sideband(a, b, 0.25, 0.15)
    assert abs(found - s)[0] <= bound[0] * (1 + 1e-9)


def test_the_bias_is_there_to_be_taken_out():
    s, t, bench = np.array([0.4 + 0j]), np.array([0.2 + 0j]), np.array([0.1 + 0j])
    a, b, _, _ = sidebands(s, t, bench, bench)
    found, bound = one_sideband(a, b, 0.2, 0.1)
    assert 0.8 * bound[0] < abs(found - s)[0] <= bound[0]


def test_an_image_as_strong_as_the_probe_is_refused():
    one = np.array([1.0 + 0j])
    with pytest.raises(DataSetError, match="Was the probe on"):
        two_sidebands(one, one, 0.99j * one, one)
    with pytest.raises(DataSetError, match="was the probe on"):
        one_sideband(0 * one, one, 0.2, 0.1)


@settings(deadline=None)
@given(st.floats(0.01, 0.3), disc(1.0), disc(0.2), st.floats(0, 2 * np.pi))
def test_distance_bound_holds_for_any_device(return_gain, s11, source, phase):
    assume(abs(source[0]) > 1e-3)
    s12, s21 = np.array([0.01 + 0j]), np.array([return_gain / 0.01 * np.exp(1j * phase)])
    s22 = np.array([0.3 + 0j])
    distance = abs(output_reflection(s11, s12, s21, s22, source) - s22)[0]
    assert distance <= distance_bound(20 * np.log10(return_gain), 20 * np.log10(abs(source[0]))) * (1 + 1e-9)


def test_an_input_match_that_is_none():
    with pytest.raises(DataSetError, match="a negative number of dB"):
        distance_bound(-17.0, 0.0)


@settings(deadline=None)
@given(disc(0.3), st.floats(0, 2 * np.pi))
def test_reference_to_the_pump_turns_twice(t, phase):
    found = referred_to_pump(t * np.exp(2j * phase), np.array([3.0 * np.exp(1j * phase)]))
    assert abs(found - t)[0] < 1e-13


@settings(deadline=None)
@given(disc(10.0), disc(0.7), disc(0.3), st.floats(0, 2 * np.pi), st.integers(3, 9))
def test_on_carrier_recovers_any_device(s21, s22, t22, phi, count):
    turns = np.exp(2j * np.pi * np.arange(count) / count)[:, None]
    a1, a2 = np.full((count, 1), 1.5 * np.exp(1j * phi)), 0.1 * turns
    found = on_carrier(a1, a2, s21 * a1 + s22 * a2 + t22 * np.exp(2j * phi) * np.conj(a2))
    for value, truth in ((found.s21, s21), (found.s22, s22), (found.t22, t22)):
        assert abs(value - truth)[0] < 1e-11


def test_on_carrier_says_where_the_phases_bunch():
    good, bad = np.exp(2j * np.pi * np.arange(4) / 4), np.exp(1e-2j * np.arange(4))
    a2 = np.stack([good, bad], axis=1)
    with pytest.raises(DataSetError, match=r"bunch at 2\.4 GHz"):
        on_carrier(np.ones((4, 2), complex), a2, a2, frequency_hz=np.array([2.2e9, 2.4e9]))


def test_on_carrier_residual_is_the_noise():
    rng = np.random.default_rng(3)
    count = 400
    a2 = 0.1 * np.exp(2j * np.pi * np.arange(count) / count)[:, None]
    a1 = np.ones((count, 1), complex)
    noise = 1e-3 * (rng.normal(size=(count, 1)) + 1j * rng.normal(size=(count, 1))) / np.sqrt(2)
    found = on_carrier(a1, a2, 3 * a1 + 0.2 * a2 + noise)
    assert found.residual[0] == pytest.approx(1e-3, rel=0.1)
