"""The device against closed forms, its own derivatives, and the numbers that the reference world promises."""

from __future__ import annotations

import numpy as np
import pytest
from benchrun_sim.world import reference_world
from benchrun_sim.world.device import Coefficients, Device
from benchrun_sim.world.imperfections import Imperfections
from benchrun_sim.world.operating import _wirtinger
from hypothesis import given, settings
from hypothesis import strategies as st

from .demo_bench import PERFECT

R1 = reference_world()
CENTRE = R1["centre_hz"]


def rapp(gain=1.0, saturation=1.0):
    """An amplifier and nothing else."""
    return Coefficients(gain, saturation, 0.0, 0j, 0j, 0j, 0j, 0j, 0j, 0j, (0j, 0j, 0j), 1.0)


def device(seed=1, **on):
    return Device(R1, seed, Imperfections(**{**PERFECT, **on}))


def active(seed=1, rise_k=0.0, frequency_hz=CENTRE, **on):
    some = device(seed, **on)
    return some.coefficients(frequency_hz, some.bias(28.0, some.nominal_gate_v), rise_k)


def hot_gain(coefficients, magnitude):
    """g, S = g + A g'/2 and T = A g'/2 of the forward path."""
    f2 = coefficients.outputs(magnitude, 0j)[1]
    slopes = coefficients.partials(magnitude, 0j)[1]
    s, t, _, _ = _wirtinger(1.0 + 0j, magnitude, 0j, f2, slopes)
    return f2 / magnitude, s, t


def test_rapp_amplifier_at_its_limit():
    # CHECKS row 21: p = 2 at A = Asat, unit gain: g 0.84090, S 0.63067, T -0.21022 (closed form).
    g, s, t = hot_gain(rapp(), 1.0)
    assert [complex(v).real for v in (g, s, t)] == pytest.approx([0.84090, 0.63067, -0.21022], abs=1e-5)


def test_hard_limit_suppresses_the_weak_signal_by_six_decibels():
    # Jones, IEEE T-IT 9(1) 1963: beside a strong signal in a hard limiter S = g/2 (and T = -g/2).
    g, s, t = hot_gain(rapp(), 100.0)
    assert 20 * np.log10(abs(s / g)) == pytest.approx(-6.02, abs=0.01)
    assert complex(t / g).real == pytest.approx(-0.5, abs=1e-4)


@settings(max_examples=60, deadline=None)
@given(
    magnitude=st.floats(0.01, 2.0),
    x=st.complex_numbers(max_magnitude=1.0, allow_nan=False, allow_infinity=False),
    seed=st.integers(0, 50),
)
def test_derivatives_are_those_of_the_function(magnitude, x, seed):
    coefficients = active(seed, second_order=True)
    step = 1e-6
    for port in (0, 1):
        slope_a, slope_x, slope_mirrored = coefficients.partials(magnitude, x)[port]

        def f(a, b, port=port):
            return coefficients.outputs(a, b)[port]

        along_a = (f(magnitude + step, x) - f(magnitude - step, x)) / (2 * step)
        real = (f(magnitude, x + step) - f(magnitude, x - step)) / (2 * step)
        imaginary = (f(magnitude, x + 1j * step) - f(magnitude, x - 1j * step)) / (2 * step)
        assert along_a == pytest.approx(slope_a, abs=1e-6 * (1 + abs(slope_a)))
        assert 0.5 * (real - 1j * imaginary) == pytest.approx(slope_x, abs=1e-7)
        assert 0.5 * (real + 1j * imaginary) == pytest.approx(slope_mirrored, abs=1e-7)


def test_arrays_and_numbers_agree():
    frequencies = np.linspace(2.2e9, 2.4e9, 5)
    some = device()
    bias = some.bias(28.0, some.nominal_gate_v)
    together = some.coefficients(frequencies, bias, 3.0).outputs(np.full(5, 0.7), np.full(5, 0.1 - 0.2j))
    for index, frequency_hz in enumerate(frequencies):
        alone = some.coefficients(float(frequency_hz), bias, 3.0).outputs(0.7, 0.1 - 0.2j)
        assert alone == pytest.approx(tuple(values[index] for values in together), rel=1e-13)


@pytest.mark.parametrize("seed", range(1, 9))
def test_numbers_of_the_reference_world(seed):
    coefficients = active(seed)
    small, large = 1e-4, 1.0  # 1 root-watt is 30 dBm, the largest drive of the demo
    growth = coefficients.growth_at(large)
    assert 20 * np.log10(abs(coefficients.gain)) == pytest.approx(14.0, abs=0.7)
    assert abs(coefficients.s22) == pytest.approx(0.28, abs=1e-6)
    assert abs(coefficients.s22_move) * growth == pytest.approx(0.22, abs=0.015)
    assert abs(coefficients.t22) * growth == pytest.approx(0.16, abs=0.02)
    loop = coefficients.s12 * coefficients.gain
    assert 20 * np.log10(abs(loop)) == pytest.approx(-18.0, abs=0.7)
    assert 20 * np.log10(abs(coefficients.outputs(100.0, 0j)[1])) + 30 == pytest.approx(43.0, abs=0.7)
    assert abs(coefficients.outputs(small, 0j)[1] / small) == pytest.approx(abs(coefficients.gain), rel=1e-5)


def test_gain_falls_with_temperature():
    cold, warm = (active(rise_k=rise).outputs(1e-4, 0j)[1] for rise in (0.0, 10.0))
    assert 20 * np.log10(abs(warm / cold)) == pytest.approx(-0.2, abs=1e-3)


@pytest.mark.parametrize("seed", range(6))
def test_cold_device_is_passive_and_reciprocal(seed):
    some = device(seed)
    cold = some.coefficients(CENTRE, some.bias(0.0, 0.0), 0.0)
    matrix = np.array([[cold.s11, cold.s12], [cold.gain, cold.s22]])
    assert cold.gain == pytest.approx(cold.s12)
    assert np.linalg.norm(matrix, 2) < 1.0
    assert cold.growth_at(1.0) < 1e-6


def test_every_specimen_draws_its_quiescent_current_near_the_usual_gate_voltage():
    gates = []
    for seed in range(200):
        some = device(seed)
        gates.append(some.nominal_gate_v)
        assert some.bias(28.0, some.nominal_gate_v).quiescent_a == pytest.approx(0.35, rel=1e-6)
    assert min(gates) >= -2.95
    assert max(gates) <= -2.65
    assert np.ptp(gates) > 0.25


def test_gate_pinches_off():
    some = device()
    currents = [some.bias(28.0, gate_v).quiescent_a for gate_v in (-5.0, -3.4, -3.0, -2.8, -2.4, 0.0)]
    assert currents == sorted(currents)
    assert currents[0] < 1e-9
    assert currents[-1] > 5.0
    assert some.bias(28.0, -5.0).activity < 1e-6


def test_bias_resonance():
    some = device(bias_resonance=True)
    offsets = np.linspace(1e6, 20e6, 191)
    response = some.baseband(offsets)
    assert offsets[np.argmax(np.abs(response))] == pytest.approx(8e6, abs=0.11e6)
    assert some.baseband(-offsets) == pytest.approx(np.conj(response))
    assert abs(some.baseband(np.array([0.0]))[0]) == 0.0
