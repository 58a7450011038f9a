"""Hot reflection against closed forms and a device in the time domain: CHECKS rows 3 and 20 to 23."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.hot import distance_bound, memoryless, on_carrier, output_reflection, two_sidebands
from benchrun.errors import DataSetError


def polar(magnitude: float, phase_deg: float) -> np.ndarray:
    return np.array([magnitude * np.exp(1j * np.deg2rad(phase_deg))])


def cubic(x):
    """Row 20: y = 10 x - x |x|^2, at A = 1."""
    return 10 * x - x * np.abs(x) ** 2


def rapp(x):
    """Row 21: Rapp amplifier p = 2, unit gain and unit saturation, at A = 1 (C. Rapp, 1991, mem.)."""
    return x * (1 + np.abs(x) ** 4) ** -0.25


def limiter(x):
    """Hard limiter: T = -g/2, the classical 6 dB weak-signal suppression (Jones, IEEE T-IT 9(1) 1963)."""
    return x / np.abs(x)


def offset_probe(device, drive: complex, probe: complex, image: complex = 0.0):
    """Put drive, probe and image through `device` in the time domain; return the sidebands of input and output."""
    t = np.arange(64) / 64
    x = drive + probe * np.exp(2j * np.pi * t) + image * np.exp(-2j * np.pi * t)
    spectrum = np.fft.fft(device(x)) / 64
    return np.array([probe]), spectrum[[1]], np.array([image]), spectrum[[-1]]


CASES = [
    (cubic, 9.0, -2.0, 8.0, -1.0, 1e-6),
    (rapp, 0.84090, -0.42045, 0.63067, -0.21022, 1e-5),
    (limiter, 1.0, -1.0, 0.5, -0.5, 1e-6),
]


@pytest.mark.parametrize(("device", "gain", "slope", "s", "t", "tolerance"), CASES)
def test_rows_20_and_21_by_closed_form(device, gain, slope, s, t, tolerance):
    """S = g + A g'/2, T = A g'/2 at A = 1."""
    found = memoryless(gain, slope, 1.0)
    assert complex(found[0]) == pytest.approx(s, abs=tolerance)
    assert complex(found[1]) == pytest.approx(t, abs=tolerance)
    step = 1e-5
    assert abs(device(1 + step)) / (1 + step) - abs(device(1 - step)) / (1 - step) == pytest.approx(
        2 * step * slope, abs=1e-9
    )


@pytest.mark.parametrize("image", [0.0, 3e-5j])
@pytest.mark.parametrize(("device", "gain", "slope", "s", "t", "tolerance"), CASES)
def test_rows_20_and_21_by_an_offset_probe_in_the_time_domain(device, gain, slope, s, t, tolerance, image):
    """Extraction from the sidebands alone, with and without an image that the bench reflects."""
    phase = 0.6
    waves = offset_probe(device, np.exp(1j * phase), 1e-4 * np.exp(-0.4j), image)
    found_s, found_t = two_sidebands(*waves)
    assert found_s[0] == pytest.approx(s, abs=max(tolerance, 1e-6))
    assert (found_t * np.exp(-2j * phase))[0] == pytest.approx(t, abs=max(tolerance, 1e-6))


def test_row_22_three_phases_are_exact_and_orthogonal():
    """Three phases 120 degrees apart at equal |a2|: exact to 1e-12, condition 1 after column scaling."""
    a1 = np.full((3, 1), 2.0 * np.exp(0.3j))
    a2 = 0.05 * np.exp(1j * (0.2 + 2 * np.pi / 3 * np.arange(3)))[:, None]
    s21, s22, t22 = 5 - 1j, 0.3 + 0.2j, -0.1 + 0.05j
    b2 = s21 * a1 + s22 * a2 + t22 * np.exp(2j * 0.3) * np.conj(a2)
    found = on_carrier(a1, a2, b2)
    assert abs(found.s21[0] - s21) < 1e-12
    assert abs(found.s22[0] - s22) < 1e-12
    assert abs(found.t22[0] - t22) < 1e-12
    assert found.condition[0] == pytest.approx(1.0, abs=1e-12)
    assert found.residual[0] < 1e-14


@pytest.mark.parametrize("phases", [[0.0, 2.0], [1.0, 1.0, 1.0], [0.0, 0.02, 0.04]])
def test_row_23_too_few_or_bunched_phases_are_refused(phases):
    """Linear algebra: two phases, or three equal ones, have rank 2 at most; the last case is bunched."""
    a2 = 0.05 * np.exp(1j * np.array(phases))[:, None]
    a1 = np.full_like(a2, 1.0)
    with pytest.raises(DataSetError, match="phases"):
        on_carrier(a1, a2, 3 * a1 + 0.1 * a2, frequency_hz=np.array([2.3e9]))


S11, S12, S21, S22 = polar(0.38, -158), polar(0.11, 54), polar(3.50, 80), polar(0.40, -43)


def test_row_3_reflection_with_a_source_at_port_1():
    """Pozar, Microwave Engineering, gain-definitions example (mem.): Zs 25 ohm, ZL 40 ohm."""
    out = output_reflection(S11, S12, S21, S22, np.array([(25 - 50) / (25 + 50)]))[0]
    assert abs(out) == pytest.approx(0.5452, abs=1e-3)
    assert np.angle(out, deg=True) == pytest.approx(-42.98, abs=0.06)
    into = output_reflection(S22, S21, S12, S11, np.array([(40 - 50) / (40 + 50)]))[0]
    assert abs(into) == pytest.approx(0.3653, abs=1e-3)
    assert np.angle(into, deg=True) == pytest.approx(-152.04, abs=0.06)


def test_row_3_lies_within_the_distance_bound():
    """The bound of METHODS section 1 on the same device, |Gs1| = 1/3: true distance 0.145."""
    distance = abs(output_reflection(S11, S12, S21, S22, np.array([-1 / 3])) - S22)[0]
    bound = distance_bound(20 * np.log10(abs(S12 * S21)[0]), 20 * np.log10(1 / 3))
    assert 0.7 * bound < distance < bound
