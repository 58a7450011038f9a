"""Definitions of standards: limits of the formula, data-based ones, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
import skrf
from hypothesis import given, settings
from hypothesis import strategies as st

from benchrun.derive.standards import MeasuredStandard, Standard, define, read_standard, refer
from benchrun.errors import DataSetError

F = np.linspace(2.1e9, 2.5e9, 81)


@pytest.mark.parametrize(("kind", "expected"), [("open", 1.0), ("short", -1.0), ("match", 0.0)])
def test_without_parameters_a_standard_is_ideal(kind, expected):
    np.testing.assert_allclose(Standard(kind).reflection(F), expected, rtol=0, atol=1e-15)


@settings(deadline=None)
@given(st.floats(0, 200e-12), st.floats(0, 50e9), st.floats(25, 100), st.sampled_from(["open", "short", "match"]))
def test_every_standard_is_passive(delay_s, loss, z0, kind):
    standard = Standard(kind, delay_s=delay_s, loss_ohm_per_s=loss, line_impedance_ohm=z0)
    assert np.all(np.abs(standard.reflection(F)) <= 1 + 1e-12)


def test_a_line_of_another_impedance_against_its_impedance():
    """A lossless 75 ohm line of a quarter wave turns 50 ohm into 112.5 ohm."""
    match = Standard("match", delay_s=1 / (4 * 2.3e9), line_impedance_ohm=75.0)
    assert match.reflection([2.3e9])[0] == pytest.approx((112.5 - 50) / (112.5 + 50), abs=1e-12)


def test_reference_impedance_moves_the_reflection_not_the_impedance():
    standard = Standard("match", resistance_ohm=60.0, inductance=(10e-12,))
    in_75 = standard.reflection(F, reference_ohm=75.0)
    np.testing.assert_allclose(refer(standard.reflection(F), 50.0, 75.0), in_75, rtol=0, atol=1e-14)


@pytest.mark.parametrize("f", [0.0, -1e9, float("nan")])
def test_no_reflection_at_or_below_zero(f):
    with pytest.raises(DataSetError, match="above 0 Hz"):
        Standard("open").reflection([2e9, f])


def test_measured_standard_is_interpolated_and_never_extrapolated():
    line = Standard("short", delay_s=97e-12)
    data = MeasuredStandard(F, line.reflection(F), source="short.s1p")
    at = np.linspace(F[0], F[-1], 1001)
    np.testing.assert_allclose(data.reflection(at), line.reflection(at), rtol=0, atol=1e-8)
    with pytest.raises(DataSetError, match=r"short\.s1p.*2\.1 GHz to 2\.5 GHz.*2\.6 GHz"):
        data.reflection([2.2e9, 2.6e9])


def touchstone(s, z0=50.0):
    network = skrf.Network(f=F, s=s, z0=z0, f_unit="Hz")
    return network.write_touchstone("standard", return_string=True, r_ref=z0)


def test_touchstone_file_as_definition():
    """Written by scikit-rf against 75 ohm, read back against 50 ohm."""
    s = 0.3 * np.exp(1j * F / 1e9)
    found = define({"kind": "data", "file": "match.s1p"}, {"match.s1p": touchstone(s, 75.0)}).reflection(F)
    np.testing.assert_allclose(found, refer(s, 75.0, 50.0), rtol=0, atol=1e-12)


def test_files_that_are_no_definition():
    with pytest.raises(DataSetError, match=r"absent\.s1p is not there"):
        define({"kind": "data", "file": "absent.s1p"})
    with pytest.raises(DataSetError, match=r"text\.s1p: cannot be read as Touchstone"):
        read_standard("text.s1p", "this is no Touchstone file\n")
    with pytest.raises(DataSetError, match="2 ports"):
        read_standard("two.s2p", touchstone(np.zeros((F.size, 2, 2))))
    falling = "# Hz S RI R 50\n2e9 0.1 0\n1e9 0.1 0\n"
    with pytest.raises(DataSetError, match="must rise"):
        read_standard("falling.s1p", falling)


def test_descriptions_of_a_kit():
    plain = {"kind": "open", "delay_s": 3e-11, "capacitance": [5e-14, 0.0], "resistance_ohm": None, "note": "worn"}
    assert define(plain) == Standard("open", delay_s=3e-11, capacitance=(5e-14, 0.0))
    with pytest.raises(DataSetError, match="'thru' is no kind of standard"):
        define({"kind": "thru"})
