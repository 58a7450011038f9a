"""Receiver linearity against closed forms (CHECKS row 18) and a time-domain receiver that knows nothing of tones."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.linearity import distort_pair, linearity_from, restore_pair

WATT_AT_LIMIT = 1e-3 * 10**-0.3


def test_row_18_compression_ten_db_below():
    """Third order: compression in dB is proportional to power; 0.1 dB at P0 is 0.00995 dB at P0 - 10 dB."""
    receiver = linearity_from(0.1, 0.0, -3.0)
    x = np.array([np.sqrt(WATT_AT_LIMIT / 10)], dtype=complex)
    assert -20 * np.log10(np.abs(receiver.distort(x) / x))[0] == pytest.approx(0.00995, rel=0.01)


def test_bench_figure_is_met_at_its_level():
    """The figure itself: 0.1 dB and -0.39 degree at -3 dBm (common practice, no source: -3 dBm at a receiver input)."""
    receiver = linearity_from(0.1, np.deg2rad(-0.39), -3.0)
    x = np.array([np.sqrt(WATT_AT_LIMIT)], dtype=complex)
    ratio = (receiver.distort(x) / x)[0]
    assert 20 * np.log10(abs(ratio)) == pytest.approx(-0.1, abs=1e-12)
    assert np.angle(ratio, deg=True) == pytest.approx(-0.39, abs=1e-12)


def test_weak_pair_against_a_receiver_in_the_time_domain():
    """y = x (1 - kappa |x|^2) on the envelope, then a Fourier transform: the 2x2 holds up to second-order terms."""
    kappa = linearity_from(0.1, np.deg2rad(-0.39), -3.0).kappa
    t = np.arange(64) / 64
    strong, upper, lower = 0.02 * np.exp(0.7j), 2e-6 * np.exp(-1.1j), 7e-7 * np.exp(2.0j)
    x = strong + upper * np.exp(2j * np.pi * t) + lower * np.exp(-2j * np.pi * t)
    spectrum = np.fft.fft(x * (1 - kappa * np.abs(x) ** 2)) / 64
    model = distort_pair(kappa, np.array([strong]), np.array([upper]), np.array([lower]))
    assert abs(model[0][0] - spectrum[1]) < 1e-11 * abs(strong)
    assert abs(model[1][0] - spectrum[-1]) < 1e-11 * abs(strong)
    assert abs(spectrum[-1] - lower) > 1e-3 * abs(lower), "the false image must be there to be taken out"
    back = restore_pair(kappa, np.array([strong]), spectrum[[1]], spectrum[[-1]])
    assert abs(back[0][0] / upper - 1) < 1e-6
    assert abs(back[1][0] / lower - 1) < 1e-6
