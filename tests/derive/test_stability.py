"""Stability: the determinant against a matrix, encirclements of known loops, and refusals."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.scattering import Scattering
from benchrun.derive.stability import Sidebands, cold_stability, encirclements, margin, sideband_determinant
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2.2e9, 2.4e9, 5)
OFFSETS = np.geomspace(1e3, 1e9, 400)


@given(st.integers(0, 10**6))
def test_determinant_is_the_matrix_s_whatever_the_pump_s_phase(seed):
    rng = np.random.default_rng(seed)
    (sp, sm, tp, tm, gp, gm), phi = make.disc(rng, (6, 4), 0.9), rng.uniform(0, 7)
    m = np.moveaxis(
        np.array([[sp, tp * np.exp(2j * phi)], [np.conj(tm) * np.exp(-2j * phi), np.conj(sm)]]), (0, 1), (-2, -1)
    )
    load = np.zeros((4, 2, 2), complex)
    load[:, 0, 0], load[:, 1, 1] = gp, np.conj(gm)
    found = sideband_determinant(Sidebands(sp, sm), Sidebands(tp, tm), Sidebands(gp, gm))
    np.testing.assert_allclose(found, np.linalg.det(np.eye(2) - m @ load), rtol=0, atol=1e-12)


@given(st.integers(0, 10**6))
def test_a_positive_margin_keeps_the_determinant_from_vanishing(seed):
    """|S| + |T| < 1 and passive loads alike at the sidebands: det is real and above 0 (Gershgorin)."""
    rng = np.random.default_rng(seed)
    share = rng.random(50)
    s, t = (m * np.exp(2j * np.pi * rng.random(50)) for m in (0.98 * share, 0.98 * (1 - share)))
    g = make.disc(rng, 50, 1.0)
    det = sideband_determinant(Sidebands(s, s), Sidebands(t, t), Sidebands(g, g))
    assert margin(s, t).min() > 0.01
    assert det.real.min() > 0
    assert np.abs(det.imag).max() < 1e-12


def resonant(gain):
    """A device that answers modulation over 10 MHz, S22 = -gain / (1 + j Delta / 10 MHz) at the upper sideband."""
    lag = 1 / (1 + 1j * OFFSETS / 10e6)
    return Sidebands(-gain * lag, -gain * np.conj(lag))


@pytest.mark.parametrize(("gain", "count"), [(0.5, 0), (0.99, 0), (1.05, 1), (3.0, 1)])
def test_a_load_that_makes_it_oscillate_is_encircled(gain, count):
    """1 - S G with G = -0.995: poles of the closed loop in the right half plane as soon as gain * 0.995 > 1.

    Both sidebands answer alike, so the plot goes round once for each: |encirclements| is 2.
    """
    none, g = Sidebands(*(np.zeros(400, complex),) * 2), np.full(400, -0.995 + 0j)
    det = sideband_determinant(resonant(gain), none, Sidebands(g, g))
    assert abs(encirclements(det, OFFSETS)) == 2 * count


def test_conversion_alone_can_make_it_oscillate():
    """S = 0, T above 1 against a total reflection: one pole (parametric), where S alone says nothing."""
    lag = 1 / (1 + 1j * OFFSETS / 10e6)
    none, g = Sidebands(*(np.zeros(400, complex),) * 2), np.ones(400, complex)
    for size, count in ((0.9, 0), (1.2, 1)):
        t = Sidebands(size * lag, size * np.conj(lag))
        assert abs(encirclements(sideband_determinant(none, t, Sidebands(g, g)), OFFSETS)) == count


def test_a_plot_that_cannot_be_counted_is_refused():
    wild = np.exp(1j * np.array([0.1, 0.2, 2.5, 0.1]))
    with pytest.raises(DataSetError, match=r"turns by more than 90 degrees from an offset of 2 MHz"):
        encirclements(wild, np.array([1e6, 2e6, 3e6, 4e6]))
    for ends in ((1.5, 0.1), (0.1, 1.5)):
        with pytest.raises(DataSetError, match="does not close"):
            encirclements(np.exp(1j * np.linspace(*ends, 4)), np.array([1e6, 2e6, 3e6, 4e6]))
    with pytest.raises(DataSetError, match=r"vanishes at an offset of 2 MHz"):
        encirclements(np.array([1, 0, 1], complex), np.array([1e6, 2e6, 3e6]))
    for offsets in ([1e6], [2e6, 1e6], [0.0, 1e6]):
        with pytest.raises(DataSetError, match="rising offsets"):
            encirclements(np.ones(len(offsets), complex), np.array(offsets))


def test_k_and_mu_are_refused_where_the_device_is_driven():
    device = make.device(np.random.default_rng(1), 5)
    with pytest.raises(DataSetError, match=r"K and mu say nothing at 2\.3 GHz"):
        cold_stability(device, np.array([0, 0, 0.2j, 0, 0]), frequency_hz=F)
    cold_stability(device, 0.01)
    with pytest.raises(DataSetError, match=r"no number at 2\.25 GHz"):
        cold_stability(device._replace(s12=np.where(np.arange(5) == 1, np.nan, 0j)), frequency_hz=F)


@given(st.integers(0, 10**6))
def test_mu_is_the_distance_to_the_nearest_bad_load(seed):
    """Edwards, Sinsky 1992: no load with |G| < mu makes |Gamma_in| reach 1, and one with |G| = mu does.

    Only where |mu S22| is below 0.9: nearer to the pole the peak is too narrow for 720 phases.
    """
    device = make.device(np.random.default_rng(seed), 20)
    mu = cold_stability(device).mu
    phases = np.exp(2j * np.pi * np.arange(720) / 720)[:, None]

    def worst(radius):
        g = radius * phases
        return np.max(np.abs(device.s11 + device.s12 * device.s21 * g / (1 - device.s22 * g)), axis=0)

    inside = (mu > 0) & (mu * np.abs(device.s22) < 0.9)
    assert np.all(worst(0.999 * mu)[inside] < 1.0)
    assert np.all(worst(mu)[inside] > 0.99)


def test_an_isolated_two_port_has_no_limit_of_k():
    none = np.zeros(2, complex)
    found = cold_stability(
        Scattering(np.array([0.5, 1.0]) + 0j, none, np.array([3, 3]) + 0j, np.array([0.4, -1.0]) + 0j)
    )
    assert np.all(np.isposinf(found.k))
    np.testing.assert_allclose(found.mu, [2.5, 1.0])
    np.testing.assert_allclose(found.mu_source, [2.0, 1.0])
