"""Levels and noise against the world outside: CHECKS rows 14 to 17 and facts of the trade, on the example bench."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.plan.decibels import loop_db
from benchrun.plan.levels import LevelTable, check_levels
from benchrun.plan.noise import main_line_loss_db, scatter, skirt_dbm, thermal_floor_dbm
from tests.schedule.made import changed_bench, example_bench, schedule_from

HOT = """
  - set: {probe.level: 8 dBm, probe.frequency: 2.3 GHz, pump.frequency: 2.293 GHz, drive: DRIVE dBm}
  - settle: 20 ms
  - read: {name: hot, tones: [probe, pump, image]}
"""


def checked(drive_dbm: float, *changes: tuple[str, str]) -> LevelTable:
    bench = changed_bench(*changes) if changes else example_bench()
    return check_levels(schedule_from(HOT.replace("DRIVE", f"{drive_dbm:g}"), bench), bench)


def level(table: LevelTable, plane: str, tone: str) -> float:
    return next(row.level_dbm for row in table.rows if (row.plane, row.tone) == (plane, tone))


@pytest.mark.parametrize(("coupling_db", "loss_db"), [(10.0, 0.4576), (20.0, 0.04365), (30.0, 0.004345)])
def test_row_14_main_line_loss_of_an_ideal_coupler(coupling_db: float, loss_db: float) -> None:
    """Lossless conservation (a closed form): what is coupled out is missing behind."""
    assert main_line_loss_db(coupling_db) == pytest.approx(loss_db, abs=1e-4)
    power = 10.0 ** (-coupling_db / 10.0) + 10.0 ** (-main_line_loss_db(coupling_db) / 10.0)
    assert power == pytest.approx(1.0, abs=1e-12)


def test_row_15_thermal_floor() -> None:
    """290 K, 1 kHz, noise figure 10 dB: -133.975 dBm. Boltzmann constant by scipy (CODATA)."""
    from scipy.constants import Boltzmann

    assert thermal_floor_dbm(1e3, 10.0) == pytest.approx(-133.975, abs=0.001)
    assert thermal_floor_dbm(1.0) == pytest.approx(10.0 * np.log10(Boltzmann * 290.0 / 1e-3), abs=1e-9)
    assert thermal_floor_dbm(1.0) == pytest.approx(-173.975, abs=0.001)


def test_row_16_skirt_power() -> None:
    """43 dBm with -120 dBc/Hz through 1 kHz: -47 dBm (definition of L(f), IEEE Std 1139)."""
    assert skirt_dbm(43.0, -120.0, 1e3) == pytest.approx(-47.0, abs=0.01)


def test_row_16_the_note_on_the_skirt_is_the_same_sum_backward() -> None:
    table = checked(30.0)
    note = next(note for note in table.notes if "dBc/Hz" in note)
    bound = float(note.partition("under ")[2].partition(" dBc")[0])
    pump, probe = level(table, "receiver reflected", "pump"), level(table, "receiver reflected", "probe")
    assert skirt_dbm(pump, bound, 300.0) == pytest.approx(probe - 40.0, abs=0.5)


def test_row_17_noise_scatters_a_reading() -> None:
    """40 dB of signal to noise: 0.061 dB and 0.405 degree (additive noise), and in numbers drawn at random."""
    found = scatter(40.0)
    assert found.magnitude_db == pytest.approx(0.061, rel=0.01)
    assert found.phase_deg == pytest.approx(0.405, rel=0.01)
    drawn = np.random.default_rng(1)
    noise = (drawn.normal(size=200_000) + 1j * drawn.normal(size=200_000)) * 0.01 / np.sqrt(2.0)
    assert np.std(np.degrees(np.angle(1.0 + noise))) == pytest.approx(found.phase_deg, rel=0.01)
    assert np.std(20.0 * np.log10(np.abs(1.0 + noise))) == pytest.approx(found.magnitude_db, rel=0.01)


def test_row_10_a_mismatch_raises_a_wave_by_what_textbooks_give() -> None:
    """VSWR 1.5 facing 1.2: +3.669 % of power, +.1565 dB (textbook formula, (1 + |Gg||Gl|)^2).

    Ours is the sum of all reflections back and forth, 1/(1 - |Gg||Gl|): above that by the product's square.
    """
    product = (0.5 / 2.5) * (0.2 / 2.2)
    assert 20.0 * np.log10(1.0 + product) == pytest.approx(0.1565, abs=1e-4)
    assert loop_db(0.5 / 2.5, 0.2 / 2.2) == pytest.approx(0.1565, abs=8.686 * product**2 * 1.1)
    assert float(loop_db(0.5 / 2.5, 0.2 / 2.2)) >= 20.0 * np.log10(1.0 + product)


def test_a_receiver_is_kept_at_or_below_minus_3_dbm() -> None:
    """Common practice, no source: above about -3 dBm at its input a receiver's compression makes the reading wrong."""
    assert not checked(30.0).refused
    assert level(checked(30.0), "receiver reflected", "pump") <= -3.0
    less_pad = ("P3: {kind: pad, loss: 10 dB", "P3: {kind: pad, loss: 8 dB")
    hot = checked(30.0, less_pad)
    assert level(hot, "receiver reflected", "pump") > -3.0
    assert hot.refused


def test_compression_ten_db_below_its_limit_is_a_hundredth_of_a_db() -> None:
    """CHECKS row 18 (a closed form): 0.1 dB at a level is 0.00995 dB 10 dB below it; told from 0.01 dB on."""
    row = next(r for r in checked(30.0).rows if (r.plane, r.tone) == ("receiver reflected", "pump"))
    assert row.note.startswith("0.08 dB compressed")
    quiet = next(r for r in checked(14.0).rows if (r.plane, r.tone) == ("receiver reflected", "pump"))
    assert quiet.note == ""


def test_reverse_reading_of_a_20_db_coupler() -> None:
    """Common practice, no source: a 20 dB coupler read in reverse at -57 dB has 37 dB directivity: coupling comes off.

    So with a bench that sends nothing back, the incident arm is 57 dB below the device's output.
    """
    table = checked(30.0, ("output-match: -22 dB", "output-match: -200 dB"))
    assert level(table, "coupler, incident arm", "pump") == pytest.approx(level(table, "device output", "pump") - 57.0)


def test_port_2_behind_a_pad_and_an_isolator() -> None:
    """Common practice, no source: an isolator gives 25 dB, a 10 dB pad behind it; a low-loss coupler loses .3 dB."""
    table = checked(30.0)
    assert level(table, "device output", "pump") - level(table, "analyser port 2", "pump") == pytest.approx(35.3)
    unprotected = changed_bench(
        ("P2: {kind: pad, loss: 10 dB", "P2: {kind: pad, loss: 0.1 dB"),
        ("port-isolator: {kind: isolator, loss: 0.4 dB, isolation: 25 dB", "port-isolator: {kind: cable, loss: 0.4 dB"),
    )
    exposed = check_levels(schedule_from(HOT.replace("DRIVE", "30"), unprotected), unprotected)
    assert ("analyser port 2", "damage") in [(row.plane, row.limit_kind) for row in exposed.rows if row.refused]
