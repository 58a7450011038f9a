"""What a bench says: names, roles, ways, the wiring document, and what a calibration depends on."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from benchrun.bench import Bench, load_bench, load_kit
from benchrun.bench.chain import part_gain_db, path_gain_db, receiver_gain_db
from benchrun.errors import FileProblemsError

Make = Callable[..., Bench]
THRU = "# GHz S MA R 50\n2.0 0 0 0.316227766 0 0.1 0 0 0\n2.5 0 0 0.1 90 0.5 0 0 0\n"


def test_the_example_is_right(recipes: Path) -> None:
    bench, problems = load_bench(recipes / "balloon-driver.bench.yaml")
    assert problems == []
    assert bench is not None
    assert bench.instruments["analyser"].limits.frequency == (10e6, 8e9)
    assert bench.coherent
    assert bench.drive_signal == "pump"
    assert bench.role("ambient") == "thermometer"
    assert bench.dialect_path("analyser") == recipes / "simulated-wave-receiver.dialect.yaml"
    assert bench.dialect_path("pump") is None
    assert bench.text == (recipes / "balloon-driver.bench.yaml").read_text("utf-8")


def test_what_can_be_set_and_read(bench: Make) -> None:
    settables = bench().settables()
    assert list(settables) == [
        "pump.frequency", "pump.level", "probe.frequency", "probe.level", "gate.voltage", "gate.current-limit",
        "drain.voltage", "drain.current-limit", "meter.frequency", "drive",
    ]  # fmt: skip
    # The lower of the instrument's own limit and the ceiling holds.
    assert (settables["probe.level"].low, settables["probe.level"].high) == (-60.0, 8.0)
    assert (settables["pump.level"].low, settables["pump.level"].high) == (None, 5.0)
    assert (settables["gate.voltage"].low, settables["gate.voltage"].high) == (-6.0, 0.0)
    assert settables["drive"].kind == "level"
    assert list(bench().readables()) == [
        "gate.voltage", "gate.current", "drain.voltage", "drain.current", "meter.power", "ambient.temperature",
    ]  # fmt: skip


def test_without_a_signal_at_the_input_there_is_no_drive(bench: Make) -> None:
    one = bench("  pump: {instrument: pump, path: [booster], plane: input}\n", "")
    assert one.drive_signal is None
    assert "drive" not in one.settables()


def test_gain_along_a_path_is_the_sum_of_its_parts(bench: Make) -> None:
    frequency_hz = np.array([[2.2e9, 2.3e9], [2.4e9, 2.5e9]])
    assert np.array_equal(path_gain_db(bench(), "pump", frequency_hz), np.full((2, 2), 30.0))
    assert path_gain_db(bench(), "probe", 2.3e9) == pytest.approx(-10.3)
    assert receiver_gain_db(bench(), "reflected", [2.3e9]) == pytest.approx([-40.0])


def test_a_table_is_interpolated_and_never_extrapolated(bench: Make) -> None:
    one = bench("kind: pad, loss: 20 dB", "kind: pad, loss: [[2 GHz, 20 dB], [2.5 GHz, 21 dB]]")
    assert part_gain_db(one, "P3", [2.0e9, 2.25e9, 2.5e9]) == pytest.approx([-20.0, -20.5, -21.0])
    with pytest.raises(FileProblemsError) as told:
        receiver_gain_db(one, "reflected", [2.3e9, 2.6e9])
    assert str(told.value) == (
        "b.bench.yaml: part 'P3': the table runs from 2 GHz to 2.5 GHz, and 2.6 GHz lies outside; "
        "a table is never extrapolated."
    )


def test_a_touchstone_file_gives_the_loss_from_its_s21(bench: Make, tmp_path: Path) -> None:
    # 20 log10 of 0.316227766 and of 0.1 by hand: -10 dB and -20 dB. S12 (0.1, 0.5) is not what is asked for.
    (tmp_path / "P3.s2p").write_text(THRU, "utf-8")
    one = bench("kind: pad, loss: 20 dB", "kind: pad, loss: {file: P3.s2p}")
    assert part_gain_db(one, "P3", [2.0e9, 2.5e9]) == pytest.approx([-10.0, -20.0])
    assert one.files == {"P3.s2p": THRU}
    assert one.wiring()["parts"]["P3"]["loss_db"]["loss_db"] == pytest.approx([10.0, 20.0])


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("no numbers\n", "cannot be read as Touchstone"),
        ("# GHz S MA R 50\n2.0 0 0 1 0 1 0 0 0\n2.0 0 0 1 0 1 0 0 0\n", "must rise"),
        ("# GHz S MA R 50\n2.0 0 0 0 0 1 0 0 0\n3.0 0 0 1 0 1 0 0 0\n", "S21 above zero at each"),
        ("# GHz S MA R 50\n2.0 0 0 2 0 1 0 0 0\n3.0 0 0 2 0 1 0 0 0\n", "would be a gain"),
    ],
)
def test_touchstone_files_that_cannot_be_a_loss_are_told(
    told: Callable[..., list[str]], tmp_path: Path, text: str, message: str
) -> None:
    (tmp_path / "P3.s2p").write_text(text, "utf-8")
    (only,) = told("kind: pad, loss: 20 dB", "kind: pad, loss: {file: P3.s2p}")
    assert only.startswith("b.bench.yaml:24:25: ")
    assert message in only


def test_the_wiring_is_what_developers_are_told(recipes: Path) -> None:
    # The document that the simulated bench is tested with was written by hand from the same example.
    bench, _ = load_bench(recipes / "balloon-driver.bench.yaml")
    kit, _ = load_kit(recipes / "field-kit.kit.yaml")
    assert bench is not None
    wiring = bench.wiring(kit)
    assert json.loads(json.dumps(wiring, allow_nan=False)) == wiring
    assert wiring["instruments"]["analyser"] == {
        "role": "wave-receiver",
        "address": "TCPIP0::192.0.2.22::hislip0::INSTR",
        "ceiling_dbm": 10.0,
        "coherent": True,
        "source_port": 2,
        "power_up_dbm": -10.0,
        "port_damage_dbm": 26.0,
        "receiver": {"linear_dbm": -3.0, "damage_dbm": 15.0, "floor_dbm": -110.0},
    }
    assert wiring["parts"]["coupler"] == {
        "kind": "coupler", "coupling_db": 20.0, "directivity_db": 37.0, "loss_db": 0.3, "damage_dbm": 47.0,
    }  # fmt: skip
    assert wiring["signals"]["pump"] == {
        "instrument": "pump", "path": ["booster", "input-isolator"], "plane": "input",
    }  # fmt: skip
    assert wiring["bias"]["gate"] == {
        "instrument": "supply", "channel": 1, "voltage_v": [-6.0, 0.0], "current_limit_a": 0.05,
        "over_voltage_v": 7.0, "pinch_off_v": -5.0,
    }  # fmt: skip
    assert wiring["device"] == {"maximum_input_dbm": 33.0, "maximum_output_dbm": 45.0}
    assert wiring["standards"]["open"]["capacitance"] == [50e-15, 0.0]
    assert wiring["rehearsal"] == {"world": "R1"}


def test_a_rehearsal_is_told_what_is_switched_off(bench: Make) -> None:
    one = bench("title: Small bench", "title: Small bench\nrehearsal: {thermal-memory: false, noise: false}")
    assert one.wiring()["rehearsal"] == {"thermal_memory": False, "noise": False}
    assert bench().wiring()["rehearsal"] == {}


def test_a_served_bench_is_marked(bench: Make) -> None:
    one = bench("title: Small bench", "title: Small bench\nsimulated: true\nrehearsal-channel: 127.0.0.1:5000")
    assert (one.simulated, one.rehearsal_channel) == (True, "127.0.0.1:5000")
    assert not bench().simulated


@pytest.mark.parametrize(
    "change",
    [
        ("kind: pad, loss: 20 dB", "kind: pad, loss: 10 dB"),
        ("directivity: 37 dB", "directivity: 35 dB"),
        ("receiver: R4", "receiver: R2"),
        ("phase: -0.39 deg", "phase: -0.4 deg"),
        ("path: [P3]}", "path: []}"),
    ],
)
def test_a_calibration_depends_on_what_lies_before_the_receivers(bench: Make, change: tuple[str, str]) -> None:
    assert bench(*change).part_hash("output") != bench().part_hash("output")
    assert bench(*change).part_hash("input") == bench().part_hash("input")


@pytest.mark.parametrize(
    "change",
    [
        ("title: Small bench", "title: Another title"),
        ("P2: {kind: pad, loss: 10 dB}", "P2: {kind: pad, loss: 3 dB}"),
        ("192.0.2.2::INSTR", "192.0.2.9::INSTR"),
        ("loss: 20 dB", "loss: 20.0 dB"),
        ("gain: 14.5 dB", "gain: 10 dB"),
        ("loss: 0.3 dB, damage: 47 dBm", "loss: 0.3 dB, damage: 45 dBm"),
        ("receiver: {linear: -3 dBm, damage: 15 dBm", "receiver: {linear: -6 dBm, damage: 12 dBm, floor: -110 dBm"),
    ],
)
def test_a_calibration_does_not_depend_on_the_rest(bench: Make, change: tuple[str, str]) -> None:
    assert bench(*change).part_hash("output") == bench().part_hash("output")


def test_a_levelling_depends_on_the_way_of_its_signal(bench: Make) -> None:
    changed = bench("gain: 30 dB", "gain: 31 dB")
    assert changed.part_hash("input") != bench().part_hash("input")
    assert changed.part_hash("output") == bench().part_hash("output")
    assert changed.part_summaries("input") == {"booster": "31 dB amplifier"}


def test_parts_are_told_in_a_word(bench: Make) -> None:
    assert bench().part_summaries("output") == {
        "coupler": "20 dB coupler, directivity 37 dB, loss 0.3 dB",
        "P1": "10 dB pad",
        "P3": "20 dB pad",
        "receiver incident": "analyser R3 (coupler incident P1), compression 0.1 dB and -0.39 deg at -3 dBm",
        "receiver reflected": "analyser R4 (coupler reflected P3), compression 0.1 dB and -0.39 deg at -3 dBm",
    }


def test_a_touchstone_file_counts_by_what_it_says(bench: Make, tmp_path: Path) -> None:
    change = "kind: pad, loss: 20 dB"
    for name in ("A.s2p", "B.s2p"):
        (tmp_path / name).write_text(THRU, "utf-8")
    first = bench(change, "kind: pad, loss: {file: A.s2p}").part_hash("output")
    assert bench(change, "kind: pad, loss: {file: B.s2p}").part_hash("output") == first
    (tmp_path / "B.s2p").write_text(THRU.replace("0.1 90", "0.2 90"), "utf-8")
    assert bench(change, "kind: pad, loss: {file: B.s2p}").part_hash("output") != first


def test_the_canonical_bench_is_free_of_layout(bench: Make) -> None:
    same = bench("loss: 20 dB", "loss:   20.0   dB", "title: Small bench", "# a comment\ntitle: Small bench")
    assert same.canonical() == bench().canonical()
    assert json.loads(bench().canonical())["device"]["return-gain"] == -17.0
