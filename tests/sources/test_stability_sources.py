"""Stability against published examples and scikit-rf: CHECKS rows 1 and 2."""

from __future__ import annotations

import numpy as np
import pytest
import skrf

from benchrun.derive.scattering import Scattering
from benchrun.derive.stability import cold_stability, margin
from tests.derive import two_ports as make


def polar(magnitude: float, phase_deg: float) -> np.ndarray:
    return np.array([magnitude * np.exp(1j * np.deg2rad(phase_deg))])


FET = Scattering(polar(0.894, -60.6), polar(0.020, 62.4), polar(3.122, 123.6), polar(0.781, -27.6))


def test_row_1_rollett():
    """Pozar, Microwave Engineering, FET stability example: |Delta| .6964, K .6071."""
    found = cold_stability(FET)
    assert found.determinant[0] == pytest.approx(0.6964, abs=1e-4)
    assert found.k[0] == pytest.approx(0.6071, abs=1e-4)


def test_row_2_mu():
    """Edwards, Sinsky, IEEE T-MTT 40(12) 1992: mu .8628, mu' .9330 for the same device."""
    found = cold_stability(FET)
    assert found.mu[0] == pytest.approx(0.8628, abs=1e-4)
    assert found.mu_source[0] == pytest.approx(0.9330, abs=1e-4)


def test_k_of_random_devices_against_scikit_rf():
    """scikit-rf's Network.stability (Rollett) on random two-ports, to 1e-12 of it."""
    device = make.device(np.random.default_rng(1), 101)
    network = make.network(device, skrf.Frequency(1, 2, 101, "GHz"))
    np.testing.assert_allclose(cold_stability(device).k, network.stability, rtol=1e-11)


def test_row_26_margin():
    """|S| + |T|: .5, .2 stable; .6, .45 not."""
    np.testing.assert_allclose(margin(np.array([0.5, 0.6]) + 0j, np.array([0.2j, -0.45])), [0.3, -0.05], atol=1e-12)
