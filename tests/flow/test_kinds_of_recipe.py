"""Other ways to read the same device: one sideband, a pump that follows the receiver's sweep, no pump at all."""

from __future__ import annotations

import csv
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import skrf

from benchrun.archive import open_archive
from benchrun.errors import FileProblemsError
from benchrun.flow import RunResult, check_files
from benchrun.flow.inputs import load_inputs
from benchrun.flow.known import made_in
from benchrun.flow.planning import plan
from tests.faults.flow.worlds import Worlds, complaints
from tests.flow.conftest import Way
from tests.flow.stage import CALIBRATE, COLD, HOT, LEVEL, change

SWEPT = """\
      - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 9}}
        do:
          - set: {probe.frequency: "{frequency}", pump.frequency: "{frequency} - 7 MHz"}
          - settle: 20 ms
          - read: {name: hot, tones: [probe, pump, image], also: [drain.voltage, drain.current, ambient.temperature]}
"""
FOLLOWED = """\
      - set: {probe.frequency: 2.3 GHz, pump.frequency: 2.293 GHz}
      - settle: 20 ms
      - read:
          name: hot
          tones: [probe, pump, image]
          over: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 9}}
          follow: pump
          also: [drain.voltage, drain.current, ambient.temperature]
"""


def table(run: Path) -> list[dict[str, str]]:
    with (run / "summary.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def column(rows: list[dict[str, str]], name: str) -> np.ndarray:
    return np.array([float(row[name]) for row in rows])


def reflections(run: Path) -> np.ndarray:
    return np.array([skrf.Network(str(path)).s[:, 0, 0] for path in sorted(run.glob("touchstone/*_S22.s1p"))])


@pytest.fixture
def one_sideband(small: Way, rehearse: Callable[..., RunResult]) -> Path:
    change(small.recipes, "tones: [probe, pump, image]", "tones: [probe, pump]")
    return rehearse(HOT).folder


def test_one_sideband_gives_the_reflection_alone_marked_with_its_bias(one_sideband: Path) -> None:
    files = sorted(path.name for path in (one_sideband / "touchstone").iterdir())
    assert files == [f"0042_p{drive}.0dBm_S22.s1p" for drive in (14, 22, 30)]
    rows = table(one_sideband)
    assert not [name for name in rows[0] if "t22" in name or "optimum" in name]
    comments = skrf.Network(str(one_sideband / "touchstone" / files[0])).comments
    assert "bias of the one sideband that was read included" in comments
    by_hand = 10 ** (-17 / 20) * 10 ** (-22 / 20) / (1 - 10 ** (-22 / 20))  # as with two sidebands, and
    match = 10 ** (
        -22 / 20
    )  # |T22|^2 |Gs| / (1 - |Gs| |S22|), conversion 0.2 and output-match -22 dB of the bench file
    bias = 0.2**2 * match / (1 - match * column(rows, "output_reflection_magnitude_ratio"))
    np.testing.assert_allclose(column(rows, "output_reflection_bound_ratio"), by_hand + bias, rtol=1e-6)


def test_one_sideband_differs_from_two_by_no_more_than_the_bias_that_it_states(small: Way, one_sideband: Path) -> None:
    bounds = column(table(one_sideband), "output_reflection_bound_ratio")
    stated = bounds - column(table(small.hot), "output_reflection_bound_ratio")
    apart = np.abs(reflections(one_sideband) - reflections(small.hot)).ravel()
    assert np.all(apart <= stated + 0.0005)  # noise of two readings
    assert np.max(apart) > 0.0005  # at full drive the bias is there


def test_a_pump_that_follows_gives_what_stepping_gives(
    small: Way, rehearse: Callable[..., RunResult], worlds: Worlds
) -> None:
    change(small.recipes, SWEPT, FOLLOWED)
    run = rehearse(HOT).folder
    assert complaints(worlds.last) == []
    with open_archive(run) as archive:
        readings = list(archive.readings("hot"))
    assert [len(reading.frequencies_hz) for reading in readings] == [9, 9, 9]
    assert not any(reading.flags for reading in readings)
    levelled = {made.name: made.known for made in made_in(small.levelling)}
    schedule = plan(load_inputs(small.recipes / HOT), levelled)
    assert {reading.started_ns - schedule.start_ns(reading.index) for reading in readings} == {5_000_000_000}
    stepped, followed = table(small.hot), table(run)
    for name in ("drive_dbm", "frequency_hz", "pump_frequency_hz"):
        assert np.array_equal(column(stepped, name), column(followed, name))
    np.testing.assert_allclose(reflections(run), reflections(small.hot), atol=0.003)
    for name, within in (("output_power_dbm", 0.02), ("gain_db", 0.02), ("t22_magnitude_ratio", 0.003)):
        np.testing.assert_allclose(column(followed, name), column(stepped, name), atol=within, err_msg=name)


NO_LISTS = "benchrun: 1\ntitle: A source without lists\nentries:\n  list-frequencies: {set: null, ask: null}\n"


def test_a_source_without_lists_cannot_follow_and_check_says_so(
    small: Way, rehearse: Callable[..., RunResult], worlds: Worlds
) -> None:
    (small.recipes / "plain.dialect.yaml").write_text(NO_LISTS)
    change(small.recipes, "    driver: signal-source\n", "    driver: signal-source\n    dialect: plain.dialect.yaml\n")
    assert check_files([small.recipes / HOT]) == []
    change(small.recipes, SWEPT, FOLLOWED)
    (problem,) = check_files([small.recipes / HOT])
    assert problem.line == 1 + (small.recipes / HOT).read_text().split("- read:")[0].count("\n")
    assert "pump has no list-frequencies in its dialect" in problem.message
    with pytest.raises(FileProblemsError, match="list-frequencies"):
        rehearse(HOT)
    assert worlds.opened == []


def test_a_receiver_without_trigger_pulses_cannot_lead(small: Way) -> None:
    dialect = small.recipes / "simulated-wave-receiver.dialect.yaml"
    dialect.write_text(dialect.read_text() + "  point-pulse: {set: null, ask: null}\n")
    change(small.recipes, SWEPT, FOLLOWED)
    (problem,) = check_files([small.recipes / HOT])
    assert "analyser has no point-pulse" in problem.message


@pytest.fixture
def cold(small: Way, rehearse: Callable[..., RunResult], worlds: Worlds) -> Path:
    return rehearse(COLD).folder


def test_a_cold_device_is_measured_without_bias_and_without_pump(cold: Path, worlds: Worlds) -> None:
    assert complaints(worlds.last) == []
    happened = {
        event.event.split(" ")[0:2][-1] for event in worlds.last.rack.world.record if event.event.startswith("rf-on")
    }
    assert happened == {"analyser"}
    assert not worlds.last.rack.world.supplies.bias("drain").on
    (file,) = (cold / "touchstone").iterdir()
    assert file.name == "0042_S22.s1p"
    rows = table(cold)
    assert list(rows[0]) == [
        "frequency_hz",
        "output_reflection_magnitude_ratio",
        "output_reflection_phase_deg",
        "flags",
    ]


def test_a_cold_device_is_measured_right(cold: Path, worlds: Worlds) -> None:
    """Within what five standards with R1's definition errors leave: 0.0045, as for the hot device."""
    (file,) = (cold / "touchstone").iterdir()
    network = skrf.Network(str(file))
    assert np.array_equal(network.f, np.linspace(2.2e9, 2.4e9, 9))
    true = worlds.last.rack.world.truth.cold(network.f)
    assert np.max(np.abs(network.s[:, 0, 0] - true)) < 0.0045
    assert "with this bench at its other port" in network.comments


def test_a_retuned_receiver_gives_the_magnitude_of_t22_and_says_why(
    small: Way, rehearse: Callable[..., RunResult]
) -> None:
    change(small.recipes, "tones: coherent", "tones: retuned")
    run = rehearse(HOT).folder
    rows = table(run)
    assert "t22_magnitude_ratio" in rows[0]
    assert not [name for name in rows[0] if "phase_from_twice" in name or "optimum" in name]
    conversions = [skrf.Network(str(path)) for path in sorted(run.glob("touchstone/*_T22.s1p"))]
    assert len(conversions) == 3
    for network in conversions:
        assert np.all(network.s.imag == 0.0)
        assert np.all(network.s.real >= 0.0)
        assert (
            "|T22| with this bench at port 1, magnitude only: the tones were not captured coherently"
            in network.comments
        )
    np.testing.assert_allclose(
        column(rows, "t22_magnitude_ratio"), column(table(small.hot), "t22_magnitude_ratio"), atol=0.005
    )


def test_a_power_meter_has_the_name_that_the_bench_file_gives_it(small: Way, rehearse: Callable[..., RunResult]):
    for old, new in (("  meter:", "  watt-meter:"), ("what: meter", "what: watt-meter"), (" meter.", " watt-meter.")):
        change(small.recipes, old, new)
    change(small.recipes, "[meter.power", "[watt-meter.power")
    runs = small.recipes / "runs"
    calibration = rehearse(CALIBRATE, to=runs).folder
    levelling = rehearse(LEVEL, to=runs).folder
    (made,), (levelled,) = made_in(calibration), made_in(levelling)
    assert made.known.circumstances.power_meter == levelled.known.circumstances.power_meter != ""
    assert 25.0 < levelled.known.power_dbm.max() < 36.0


@pytest.mark.parametrize("distance", ["0 Hz", "200 Hz", "2.9 kHz"])
def test_a_pump_that_the_if_filter_cannot_tell_from_the_probe_is_refused_before_rf(small: Way, distance: str):
    change(small.recipes, "- 7 MHz", f"- {distance}")
    (problem,) = check_files([small.recipes / HOT])
    assert f"probe and pump are {'2900 Hz' if 'k' in distance else distance} apart" in problem.message
    assert "IF bandwidth is 300 Hz" in problem.message


def test_reflections_refer_to_the_impedance_of_the_kit_that_calibrated(small: Way, rehearse: Callable[..., RunResult]):
    """Not to that of the recipe that measures: it names no kit."""
    change(small.recipes, "impedance: 50 ohm", "impedance: 75 ohm")
    run = rehearse(COLD, to=small.recipes / "runs").folder
    (file,) = run.glob("touchstone/*.s1p")
    assert skrf.Network(str(file)).z0[0, 0] == 75.0
