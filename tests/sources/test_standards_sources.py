"""Standards against published values (CHECKS rows 34 to 36), scikit-rf's own line, and the trade on an open."""

from __future__ import annotations

import numpy as np
import pytest
import skrf

from benchrun.derive.standards import Standard

LABELLED_OPEN = Standard(
    "open",
    delay_s=40.856e-12,
    loss_ohm_per_s=0.93e9,
    capacitance=(89.939e-15, 2536.8e-27, -264.99e-36, 13.4e-45),
)


@pytest.mark.parametrize(
    ("f_ghz", "magnitude", "phase_deg"),
    [(1, 0.99995, -32.738), (3, 0.99938, -98.574), (6, 0.99774, 162.333), (9, 0.99702, 63.184)],
)
def test_row_34_open_with_offset_and_loss(f_ghz, magnitude, phase_deg):
    """Coefficients from the scikit-rf documentation (calibration with a labelled coaxial kit)."""
    reflection = LABELLED_OPEN.reflection([f_ghz * 1e9])[0]
    assert abs(reflection) == pytest.approx(magnitude, abs=1e-4)
    assert np.angle(reflection, deg=True) == pytest.approx(phase_deg, abs=0.01)


@pytest.mark.parametrize(("f_ghz", "phase_deg"), [(1, -1.800), (6, -10.768)])
def test_row_35_flush_open(f_ghz, phase_deg):
    """-2 atan(w C Z0), closed form."""
    reflection = Standard("open", capacitance=(50e-15,)).reflection([f_ghz * 1e9])[0]
    assert np.angle(reflection, deg=True) == pytest.approx(phase_deg, abs=0.001)
    assert abs(reflection) == pytest.approx(1.0, abs=1e-12)


def test_row_36_ideal_offset_short():
    """180 - 720 f tau, closed form."""
    reflection = Standard("short", delay_s=50e-12).reflection([1e9])[0]
    assert np.angle(reflection, deg=True) == pytest.approx(144.0, abs=1e-6)


@pytest.mark.parametrize("kind", ["open", "short"])
def test_lossless_offset_against_scikit_rf_line(kind):
    """scikit-rf's lossless 50 ohm medium, terminated by its own capacitor or inductor, at 1 to 6 GHz."""
    frequency = skrf.Frequency(1, 6, 51, "GHz")
    medium = skrf.media.DefinedGammaZ0(frequency, z0=50, gamma=1j * 2 * np.pi * frequency.f / 299792458.0)
    delay_s, farad, henry = 37e-12, 60e-15, 9e-12
    if kind == "open":
        ending = medium.shunt_capacitor(farad) ** medium.open()
        ours = Standard("open", delay_s=delay_s, capacitance=(farad,))
    else:
        ending = medium.inductor(henry) ** medium.short()
        ours = Standard("short", delay_s=delay_s, inductance=(henry,))
    theirs = (medium.line(delay_s * 299792458.0, "m") ** ending).s[:, 0, 0]
    np.testing.assert_allclose(ours.reflection(frequency.f), theirs, rtol=0, atol=1e-9)


def test_offset_open_turns_clockwise_to_its_end():
    """Common practice, no source: an offset open of about 50 ps turns clockwise and ends near -115 degrees at 3 GHz."""
    f = np.linspace(1e7, 3e9, 300)
    phase_deg = np.unwrap(np.angle(Standard("open", delay_s=50e-12, capacitance=(50e-15,)).reflection(f))) * 180 / np.pi
    assert np.all(np.diff(phase_deg) < 0)
    assert phase_deg[-1] == pytest.approx(-115.0, abs=3.0)


def test_the_shorter_labelled_open_ends_where_its_definition_says():
    """Common practice, no source, on row 34's open: clockwise, at -98.6 degrees at 3 GHz, without winding round."""
    f = np.linspace(1e7, 3e9, 300)
    phase_deg = np.unwrap(np.angle(LABELLED_OPEN.reflection(f))) * 180 / np.pi
    assert np.all(np.diff(phase_deg) < 0)
    assert phase_deg[-1] == pytest.approx(-98.6, abs=0.05)


def test_match_of_another_resistance():
    """(R - Z0) / (R + Z0), definition of the reflection coefficient: 75 ohm in a 50 ohm system is 0.2."""
    assert Standard("match", resistance_ohm=75.0).reflection([1e9])[0] == pytest.approx(0.2, abs=1e-15)
