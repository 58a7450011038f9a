"""The demo as it is shipped, from recipe to Touchstone files: what a new user gets, and whether it can be believed."""

from __future__ import annotations

import csv
import math
import re

import numpy as np
import pytest
import skrf

from benchrun.archive import open_archive
from tests.faults.flow.worlds import complaints
from tests.flow.conftest import Way
from tests.flow.stage import BENCH, DIALECT, HOT

DRIVES_DBM = [float(drive) for drive in range(14, 31)]
GRID_HZ = np.linspace(2.2e9, 2.4e9, 81)
QUANTITIES = ("S22", "T22")
COLUMNS = [
    "drive_dbm", "frequency_hz", "pump_frequency_hz", "output_power_dbm", "delivered_power_dbm", "gain_db",
    "compression_db",
    "output_reflection_magnitude_ratio", "output_reflection_phase_deg", "output_reflection_bound_ratio",
    "t22_magnitude_ratio", "t22_phase_from_twice_b2_pump_deg", "t22_bound_ratio",
    "optimum_load_extrapolated_magnitude_ratio", "optimum_load_extrapolated_phase_deg",
    "optimum_load_extrapolated_power_dbm",
    "drain.voltage_v", "drain.current_a", "ambient.temperature_degc", "flags",
]  # fmt: skip
UNITS = ("_dbm", "_db", "_hz", "_ratio", "_deg", "_v", "_a", "_degc")


def name(drive_dbm: float, quantity: str) -> str:
    return f"0042_p{drive_dbm:04.1f}dBm_{quantity}.s1p"


def comments(demo: Way, drive_dbm: float, quantity: str) -> list[str]:
    text = (demo.hot / "touchstone" / name(drive_dbm, quantity)).read_text("iso-8859-1")
    return [line[1:] for line in text.splitlines() if line.startswith("!")]


@pytest.fixture(scope="module")
def rows(demo: Way) -> list[dict[str, str]]:
    with (demo.hot / "summary.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


@pytest.fixture(scope="module")
def table(rows: list[dict[str, str]]) -> dict[str, np.ndarray]:
    """Every numeric column of the summary as (drives, frequencies)."""
    return {key: np.array([float(row[key]) for row in rows]).reshape(17, 81) for key in COLUMNS if key != "flags"}


def test_it_ends_complete_with_a_row_for_each_drive(demo: Way) -> None:
    assert (demo.result.state, demo.result.exit_code) == ("complete", 0)
    assert [row["drive"] for row in demo.result.table] == [f"{drive:+.1f} dBm" for drive in DRIVES_DBM]


def test_what_it_needs_is_rehearsed_first(demo: Way) -> None:
    assert sorted(path.name.partition("_")[2] for path in demo.runs.iterdir()) == [
        "0042_hot-output-match", "bench_calibrate-output-plane", "bench_level-the-drive",
    ]  # fmt: skip
    assert [text.split(" is absent")[0] for text in demo.messages if "absent" in text] == [
        "Calibration 'output-plane'", "Calibration 'drive'",
    ]  # fmt: skip


def test_nothing_is_damaged_and_everything_is_off_in_every_world(demo: Way) -> None:
    assert len(demo.worlds.opened) == 3
    assert [complaints(world) for world in demo.worlds.opened] == [[], [], []]


def test_the_run_folder_holds_the_archive_the_files_as_run_and_the_results(demo: Way) -> None:
    there = {path.name for path in demo.hot.iterdir()}
    assert there == {"archive.sqlite", HOT, BENCH, DIALECT, "summary.csv", "notes.txt", "touchstone"}
    for file in (HOT, BENCH, DIALECT):
        assert (demo.hot / file).read_bytes() == (demo.recipes / file).read_bytes()


def test_the_archive_is_sound_and_holds_every_reading_once(demo: Way) -> None:
    with open_archive(demo.hot) as archive:
        assert archive.check() == []
        assert (archive.meta.state, archive.meta.origin, archive.meta.seed) == ("complete", "simulated, seed 1", 1)
        assert archive.count == archive.count_all == archive.meta.readings_planned == 1377
        places = [(r.conditions["drive_dbm"], r.conditions["frequency_hz"], r.flags) for r in archive.readings("hot")]
        assert places == [(drive, hz, ()) for drive in DRIVES_DBM for hz in GRID_HZ.tolist()]
        assert "confirmed" in archive.log("safe-state")[-1].text


def test_one_touchstone_file_for_each_drive_and_quantity(demo: Way) -> None:
    there = sorted(path.name for path in (demo.hot / "touchstone").iterdir())
    assert there == sorted(name(drive, quantity) for drive in DRIVES_DBM for quantity in QUANTITIES)


@pytest.mark.parametrize("quantity", QUANTITIES)
@pytest.mark.parametrize("drive_dbm", DRIVES_DBM)
def test_scikit_rf_reads_every_file_back(
    demo: Way, table: dict[str, np.ndarray], drive_dbm: float, quantity: str
) -> None:
    network = skrf.Network(str(demo.hot / "touchstone" / name(drive_dbm, quantity)))
    assert network.nports == 1
    assert np.array_equal(network.f, GRID_HZ)
    assert np.all(network.z0 == 50.0)
    column = {"S22": "output_reflection", "T22": "t22"}[quantity]
    phase = {"S22": "output_reflection_phase_deg", "T22": "t22_phase_from_twice_b2_pump_deg"}[quantity]
    row = DRIVES_DBM.index(drive_dbm)
    told = table[f"{column}_magnitude_ratio"][row] * np.exp(1j * np.radians(table[phase][row]))
    np.testing.assert_allclose(network.s[:, 0, 0], told, rtol=1e-8)


@pytest.mark.parametrize("quantity", QUANTITIES)
@pytest.mark.parametrize("drive_dbm", [14.0, 22.0, 30.0])
def test_the_comments_say_what_it_is(demo: Way, drive_dbm: float, quantity: str) -> None:
    told = comments(demo, drive_dbm, quantity)
    assert told[0] == "SIMULATED, seed 1: nothing real was measured"
    assert any(line == "Device: HD-31, serial 0042" for line in told)
    (conditions,) = (line for line in told if line.startswith("Conditions: "))
    assert f"drive_dbm = {drive_dbm:g};" in conditions
    assert "drain.voltage_v = 28;" in conditions
    assert any("pump at -7 MHz from it" in line and "power at the device-input plane" in line for line in told)
    (calibration,) = (line for line in told if line.startswith("Calibration: "))
    assert re.search(r"output-plane, output plane, made 20\d\d-.*valid until 20\d\d-.*kit 'Field kit", calibration)
    with open_archive(demo.calibration) as archive:
        assert archive.digest() in calibration
    with open_archive(demo.hot) as archive:
        assert f"Readings: {archive.digest()}; schedule: {archive.meta.schedule_hash}" in told


def test_the_s11_column_is_named_for_what_it_is_with_its_bound(demo: Way, table: dict[str, np.ndarray]) -> None:
    reflection, conversion = comments(demo, 30.0, "S22"), comments(demo, 30.0, "T22")
    (what,) = (line for line in reflection if line.startswith("S11 column"))
    assert "output reflection of the device with this bench at its port 1" in what
    assert f"within {table['output_reflection_bound_ratio'][-1].max():.4f} of S22" in what
    (what,) = (line for line in conversion if line.startswith("S11 column"))
    assert "T22 with this bench at port 1, complex; phase reference: twice the phase of b2 at the pump" in what


def test_the_bound_is_the_bench_files_worst_case(table: dict[str, np.ndarray]) -> None:
    """|S12 S21| |Gs1| / (1 - |Gs1|), by hand from return-gain -17 dB and input-match -22 dB of the bench file."""
    by_hand = 10 ** (-17 / 20) * 10 ** (-22 / 20) / (1 - 10 ** (-22 / 20))
    np.testing.assert_allclose(table["output_reflection_bound_ratio"], by_hand, rtol=1e-6)
    np.testing.assert_allclose(table["t22_bound_ratio"], by_hand, rtol=1e-6)


def test_the_summary_has_its_columns_each_with_its_unit(rows: list[dict[str, str]]) -> None:
    assert list(rows[0]) == COLUMNS
    assert all(column.endswith(UNITS) for column in COLUMNS if column != "flags")
    assert len(rows) == 1377


def test_no_field_of_the_summary_is_empty_or_no_number(rows: list[dict[str, str]]) -> None:
    numbers = [float(value) for row in rows for key, value in row.items() if key != "flags"]
    assert all(math.isfinite(number) for number in numbers)
    assert {row["flags"] for row in rows} == {""}


def test_conditions_stand_as_the_recipe_asked(table: dict[str, np.ndarray]) -> None:
    assert np.array_equal(table["drive_dbm"], np.repeat(DRIVES_DBM, 81).reshape(17, 81))
    assert np.array_equal(table["frequency_hz"], np.tile(GRID_HZ, (17, 1)))
    assert np.array_equal(table["pump_frequency_hz"], table["frequency_hz"] - 7e6)
    np.testing.assert_allclose(table["drain.voltage_v"], 28.0, atol=0.05)


def test_gain_and_compression_are_those_of_the_device_at_the_drive(table: dict[str, np.ndarray]) -> None:
    """R1: gain about 14 dB, saturation about 43 dBm with smooth compression; the power meter is good to 0.065 dB."""
    np.testing.assert_allclose(table["gain_db"], table["output_power_dbm"] - table["drive_dbm"], atol=1e-7)
    assert np.all(np.abs(table["gain_db"][0] - 14.0) < 1.0)
    assert np.all(table["compression_db"][0] == 0.0)
    assert np.all(np.diff(table["compression_db"], axis=0) > -0.03)
    assert np.all((table["compression_db"][-1] > 1.0) & (table["compression_db"][-1] < 4.0))
    assert np.all(np.diff(table["output_power_dbm"], axis=0) > 0.2)
    assert np.all(table["output_power_dbm"] < 43.0)


def test_delivered_power_is_what_the_load_keeps(table: dict[str, np.ndarray]) -> None:
    """The bench reflects less than -22 dB (bench file): at most 0.63 % of the power comes back."""
    lost_db = table["output_power_dbm"] - table["delivered_power_dbm"]
    assert np.all((lost_db > 0.0) & (lost_db < -10 * np.log10(1 - 10 ** (-22 / 10)) + 0.002))


def test_reflection_and_conversion_grow_with_drive_as_a_compressing_device_does(table: dict[str, np.ndarray]) -> None:
    """R1: S22 .28 moving by .22 and T22 up to .16 with drive."""
    reflection, conversion = table["output_reflection_magnitude_ratio"], table["t22_magnitude_ratio"]
    assert np.all((reflection > 0.2) & (reflection < 0.55))
    assert np.all((conversion[0] < 0.03) & (conversion[-1] > 0.12) & (conversion[-1] < 0.2))
    assert np.all(np.diff(conversion, axis=0) > -0.004)


def test_the_optimum_load_is_near_the_conjugate_at_small_signal(table: dict[str, np.ndarray]) -> None:
    """With T22 0 the optimum is S22* (METHODS section 1); here T22 is .01, and the optimum within twice that."""
    reflection, load = (
        table[f"{key}_magnitude_ratio"][0] * np.exp(1j * np.radians(table[f"{key}_phase_deg"][0]))
        for key in ("output_reflection", "optimum_load_extrapolated")
    )
    assert np.all(np.abs(load - np.conj(reflection)) < 2.0 * table["t22_magnitude_ratio"][0])
    assert np.all(table["optimum_load_extrapolated_power_dbm"] >= table["delivered_power_dbm"] - 1e-6)


def test_the_notes_say_what_must_be_known(demo: Way) -> None:
    notes = (demo.hot / "notes.txt").read_text("utf-8")
    assert "levelled by 'drive'" in notes
    assert "with this bench at port 1: within 0.0122 of S22, to first order" in notes
    assert "sideband" not in notes
    assert "magnitude" not in notes
    assert list(demo.result.notes) == notes.splitlines()


def test_the_calibration_recipes_leave_their_documents_and_no_touchstone(demo: Way) -> None:
    for run, kind, product in (
        (demo.calibration, "calibration", "output-plane"),
        (demo.levelling, "levelling", "drive"),
    ):
        with open_archive(run) as archive:
            assert [(p.kind, p.name) for p in archive.products()] == [(kind, product)]
        assert not (run / "touchstone").exists()
        assert (run / "summary.csv").is_file()


def test_the_calibration_finds_the_bench_that_it_calibrates(demo: Way) -> None:
    """R1's coupler has a raw directivity of 37 dB behind adapters of -36 dB; the residuals say that standards agree."""
    with (demo.calibration / "summary.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    assert np.array_equal([float(row["frequency_hz"]) for row in rows], np.linspace(2.18e9, 2.4e9, 89))
    assert -45.0 < np.mean([float(row["raw_directivity_db"]) for row in rows]) < -27.0
    for standard in ("open", "short", "match", "offset_short_1", "offset_short_2"):
        assert max(float(row[f"residual_{standard}_ratio"]) for row in rows) < 0.01


def test_the_levelling_covers_every_drive_that_is_asked_for(demo: Way) -> None:
    with (demo.levelling / "summary.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    by_level: dict[float, list[float]] = {}
    for row in rows:
        by_level.setdefault(float(row["pump_level_dbm"]), []).append(float(row["power_dbm"]))
    assert max(by_level[min(by_level)]) < 14.0
    assert min(by_level[max(by_level)]) > 30.0


def test_a_calibration_that_is_made_on_the_way_shows_its_residuals(shared: Way) -> None:
    told = "\n".join(shared.messages)
    for standard in ("open", "short", "match", "offset-short-1", "offset-short-2"):
        assert re.search(rf"residuals.*\b{standard} 0\.00\d\d", told), told
    assert re.search(r"levelling 'drive': .* dBm at the input plane", told), told
