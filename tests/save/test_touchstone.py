"""Touchstone files: equal when scikit-rf reads them back, named so that they sort and stay where they belong."""

from __future__ import annotations

import numpy as np
import pytest
import skrf
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from benchrun.derive.results import OnePortData
from benchrun.errors import DataSetError
from benchrun.save.touchstone import drive_text, file_name, touchstone_text, write_touchstone

F = np.linspace(2.2e9, 2.4e9, 81)
COMMENTS = ("SIMULATED, seed 1: nothing real was measured", "S11 column: output reflection, at most 0.0122 from S22")


def data(serial="0042", conditions=None, values=None, comments=COMMENTS, **more) -> OnePortData:
    values = 0.3 * np.exp(1j * F / 1e9) if values is None else values
    conditions = {"drive_dbm": 14.0} if conditions is None else conditions
    return OnePortData("S22", serial, conditions, F[: len(values)], values, comments, **more)


def test_scikit_rf_reads_it_back_equal(tmp_path):
    written = data()
    path = write_touchstone(tmp_path, written)
    assert path == tmp_path / "touchstone" / "0042_p14.0dBm_S22.s1p"
    network = skrf.Network(str(path))
    np.testing.assert_array_equal(network.s[:, 0, 0], written.values)
    np.testing.assert_array_equal(network.f, written.frequency_hz)
    assert network.z0[0, 0] == 50.0
    for comment in COMMENTS:
        assert comment in network.comments


def test_another_reference_impedance_is_kept(tmp_path):
    network = skrf.Network(str(write_touchstone(tmp_path, data(reference_ohm=75.0))))
    np.testing.assert_array_equal(network.s[:, 0, 0], data().values)
    assert np.all(network.z0 == 75.0)


values = st.complex_numbers(max_magnitude=1e6, allow_nan=False, allow_infinity=False)


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(values, min_size=1, max_size=5), st.text(max_size=40))
def test_any_values_and_any_comment_come_back(tmp_path, some, comment):
    written = data(values=np.array(some), comments=(comment, "the last line"))
    network = skrf.Network(str(write_touchstone(tmp_path, written)))
    np.testing.assert_array_equal(network.s[:, 0, 0], written.values)
    assert "the last line" in network.comments


@pytest.mark.parametrize("comment", ["first\nsecond", "# Hz S RI R 75", "a\r1 2 3", "Ω and µ"])
def test_no_comment_can_become_data(comment):
    lines = touchstone_text(data(comments=(comment,))).splitlines()
    first = next(k for k, line in enumerate(lines) if not line.startswith("!"))
    assert lines[first].split()[1:] == ["Hz", "S", "RI", "R", "50.0"] or lines[first].startswith("# Hz S RI R 50")
    assert len([line for line in lines if line and line[0] not in "!#"]) == F.size


@pytest.mark.parametrize(
    ("drive_dbm", "text"),
    [
        (14.0, "p14.0dBm"),
        (-3.0, "m03.0dBm"),
        (0.0, "p00.0dBm"),
        (9.96, "p09.960dBm"),
        (30.25, "p30.250dBm"),
        (-10.5, "m10.5dBm"),
    ],
)
def test_drives_in_names(drive_dbm, text):
    assert drive_text(drive_dbm) == text


def test_names_sort_by_drive():
    names = [file_name(data(conditions={"drive_dbm": float(d)})) for d in (0, 5, 9.5, 10, 14, 30)]
    assert names == sorted(names)


@pytest.mark.parametrize("serial", ["../../etc/passwd", "..", "a/b\\c", "", "C:\\x", "x\x00y", ".hidden", "-rf", "ö"])
def test_a_serial_never_leads_out_of_the_folder(tmp_path, serial):
    path = write_touchstone(tmp_path, data(serial=serial))
    assert path.resolve().parent == (tmp_path / "touchstone").resolve()
    assert not path.name.startswith((".", "-"))
    assert set(path.name) <= set("abcdefghijklmnopqrstuvwxyzABCDEFGHIJKLMNOPQRSTUVWXYZ0123456789._-")


def test_other_conditions_stand_in_the_name():
    swept = {"drive_dbm": 14.0, "drain.voltage_v": 28.0, "gate.voltage_v": -2.8, "position": "a/b"}
    assert (
        file_name(data(conditions=swept)) == "0042_p14.0dBm_drain.voltage-28-v_gate.voltage-m2.8-v_position-a-b_S22.s1p"
    )
    assert file_name(data(conditions={})) == "0042_S22.s1p"


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_what_is_no_number_is_never_written(tmp_path, bad):
    with pytest.raises(DataSetError, match=r"0042_p14\.0dBm_S22\.s1p: values must be numbers"):
        write_touchstone(tmp_path, data(values=np.array([0.1, bad, 0.2])))
    assert not (tmp_path / "touchstone").exists()
