"""Optimum load against a numerical search and conjugate match: CHECKS rows 24 to 26."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.optimize import minimize

from benchrun.derive.optimum_load import delivered_w, has_optimum, optimum_load
from benchrun.errors import DataSetError

B = np.array([10 + 0j])
S = np.array([0.5 * np.exp(1j * np.deg2rad(120))])
T = np.array([0.2 * np.exp(1j * np.deg2rad(-30))])


def fixed_point_power(load: complex, b: complex, s: complex, t: complex) -> float:
    """Delivered power, by solving b2 = B + S a2 + T' a2*, a2 = G b2 as real equations."""
    m = np.array(
        [
            [1 - (s * load + t * np.conj(load)).real, (s * load - t * np.conj(load)).imag],
            [-(s * load + t * np.conj(load)).imag, 1 - (s * load - t * np.conj(load)).real],
        ]
    )
    x, y = np.linalg.solve(m, [b.real, b.imag])
    return float((x * x + y * y) * (1 - abs(load) ** 2))


def search(b: complex, s: complex, t: complex) -> tuple[complex, float]:
    def loss(v):
        load = complex(*v)
        return -fixed_point_power(load, b, s, t) if abs(load) < 1 else 1e9

    found = minimize(loss, [0.0, 0.0], method="Nelder-Mead", options={"xatol": 1e-10, "fatol": 1e-10})
    return complex(*found.x), -found.fun


def test_row_24_closed_form_against_search():
    """B 10, S .5 at 120, T' .2 at -30 degrees."""
    load, power_w = optimum_load(B, S, T)
    assert abs(load[0]) == pytest.approx(0.62801, abs=1e-4)
    assert np.angle(load[0], deg=True) == pytest.approx(-104.238, abs=1e-3)
    assert power_w[0] == pytest.approx(152.9843, abs=1e-4)
    assert delivered_w(load, B, S, T)[0] == pytest.approx(power_w[0], abs=1e-9)
    assert delivered_w(np.array([0j]), B, S, T)[0] == pytest.approx(100.0, abs=1e-9)
    assert delivered_w(np.conj(S), B, S, T)[0] == pytest.approx(140.6605, abs=1e-4)
    searched, most_w = search(B[0], S[0], T[0])
    assert abs(searched - load[0]) < 1e-4
    assert most_w == pytest.approx(power_w[0], rel=1e-8)


@pytest.mark.parametrize("seed", range(6))
def test_other_devices_against_search(seed):
    """The same search on random devices with an optimum."""
    rng = np.random.default_rng(seed)
    total = rng.uniform(0.1, 0.9)
    share = rng.random()
    b, s, t = (np.array([m * np.exp(2j * np.pi * rng.random())]) for m in (7.0, total * share, total * (1 - share)))
    load, power_w = optimum_load(b, s, t)
    searched, most_w = search(b[0], s[0], t[0])
    assert abs(searched - load[0]) < 1e-3
    assert most_w == pytest.approx(power_w[0], rel=1e-7)
    assert delivered_w(searched, b, s, t)[0] == pytest.approx(fixed_point_power(searched, b[0], s[0], t[0]), rel=1e-12)


def test_row_25_conjugate_match():
    """T 0: the load is S*, and .7572 dB more than into a match."""
    load, power_w = optimum_load(B, np.array([0.4 + 0j]), np.array([0j]))
    assert load[0] == pytest.approx(0.4, abs=1e-12)
    assert 10 * np.log10(power_w[0] / 100) == pytest.approx(0.75721, abs=1e-5)


def test_row_26_existence():
    """|S| + |T| below 1: there is one; above: refused."""
    assert has_optimum(np.array([0.5 + 0j]), np.array([0.2 + 0j]))[0]
    assert not has_optimum(np.array([0.6 + 0j]), np.array([0.45 + 0j]))[0]
    with pytest.raises(DataSetError, match="no optimum load"):
        optimum_load(B, np.array([0.6 + 0j]), np.array([0.45 + 0j]))
