"""Readings to results on paper: the truth comes back, the bounds hold, and what does not fit is refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest

from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.derive.linearity import Linearity
from benchrun.derive.pipeline import Step, derive
from benchrun.derive.results import Results
from benchrun.derive.standards import Standard
from benchrun.errors import CalibrationError, DataSetError
from tests.derive.virtual_bench import DRIVES_DBM, HOT_GRID_HZ, PROVENANCE, STANDARDS, VirtualBench

WEEK_S = 7 * 86400.0
CALIBRATE = Step(
    "calibrate",
    {"name": "output-plane", "plane": "output", "standards": "standard", "power": "power", "valid_for_s": WEEK_S},
)
LEVEL = Step(
    "level",
    {"name": "drive", "signal": "pump", "plane": "input", "readings": "levelling", "valid_for_s": WEEK_S},
)
CORRECT = Step("correct", {"readings": "hot", "calibration": "output-plane"})
HOT = [CORRECT, Step("hot-match", {"readings": "hot", "drive": "drive"})]
COLD = [Step("correct", {"readings": "cold", "calibration": "output-plane"}), Step("one-port", {"readings": "cold"})]


def calibrated(bench: VirtualBench, provenance=PROVENANCE, **changes) -> Calibration:
    readings = {"standard": bench.calibration_readings(), "power": bench.power_readings()} | changes
    results = derive([CALIBRATE], readings, bench.facts, {}, STANDARDS, provenance, "field-kit")
    return Calibration.from_document(results.documents["calibration", "output-plane"])


def levelled(bench: VirtualBench, provenance=PROVENANCE) -> Levelling:
    results = derive([LEVEL], {"levelling": bench.levelling_readings()}, bench.facts, {}, {}, provenance)
    return Levelling.from_document(results.documents["levelling", "drive"])


def hot(bench: VirtualBench, readings=None, steps=HOT, provenance=PROVENANCE, **known) -> Results:
    known = {"output-plane": calibrated(bench), "drive": levelled(bench)} | known
    return derive(steps, {"hot": readings or bench.hot_readings()}, bench.facts, known, {}, provenance)


@pytest.fixture(scope="module")
def bench() -> VirtualBench:
    return VirtualBench()


@pytest.fixture(scope="module")
def results(bench) -> Results:
    return hot(bench)


def test_terms_and_scale_come_back(bench):
    made = calibrated(bench)
    e00, e11, tracking, scale = bench.terms(made.frequency_hz)
    np.testing.assert_allclose(made.terms.e00, e00, rtol=0, atol=1e-6)
    np.testing.assert_allclose(made.terms.e11, e11, rtol=0, atol=2e-6)
    np.testing.assert_allclose(made.terms.e10e01, tracking, rtol=1e-5)
    np.testing.assert_allclose(made.scale, scale, rtol=1e-5)
    there = made.circumstances
    assert (there.temperature_degc, there.kit, there.power_meter) == (23.5, "field-kit", "ACME,M1,1,0")
    assert there.readings_hash == "readings-hash"
    assert there.part_hash == "hash-output"
    assert max(made.residuals.values()) < 1e-6


def test_residuals_show_a_standard_that_is_off(bench):
    actual = STANDARDS | {"match": Standard("match", resistance_ohm=51.0)}
    made = calibrated(bench, standard=bench.calibration_readings(actual=actual))
    assert max(made.residuals, key=lambda k: made.residuals[k]) == "match"
    assert 0.003 < made.residuals["match"] < 0.01


def test_a_wrong_standard_is_refused(bench):
    actual = STANDARDS | {"match": STANDARDS["open"]}
    with pytest.raises(DataSetError, match="misses its definition by"):
        calibrated(bench, standard=bench.calibration_readings(actual=actual))


def test_a_standard_that_the_kit_does_not_know(bench):
    readings = [replace(r, conditions={"connected.output": "sliding-load"}) for r in bench.calibration_readings()]
    with pytest.raises(DataSetError, match="the kit defines no 'sliding-load'"):
        calibrated(bench, standard=readings)


def test_standards_without_a_word_of_what_was_connected(bench):
    readings = [replace(r, conditions={}) for r in bench.calibration_readings()]
    with pytest.raises(DataSetError, match="do not say what was connected"):
        calibrated(bench, standard=readings)


def test_a_standard_read_on_half_of_the_grid(bench):
    readings = bench.calibration_readings()
    readings[2] = replace(readings[2], frequencies_hz=readings[2].frequencies_hz[:40], data=readings[2].data[..., :40])
    with pytest.raises(DataSetError, match="not all read on one frequency grid"):
        calibrated(bench, standard=readings)


def test_power_on_a_coarser_grid_is_enough_but_not_on_half(bench):
    coarse = bench.power_readings()[::4]
    scale = bench.terms(np.linspace(2.18e9, 2.4e9, 89))[3]
    np.testing.assert_allclose(calibrated(bench, power=coarse).scale, scale, rtol=1e-4)
    with pytest.raises(DataSetError, match=r"must be read once at each frequency from 2\.18 GHz to 2\.4 GHz"):
        calibrated(bench, power=bench.power_readings()[:60])
    with pytest.raises(DataSetError, match="must be read once"):
        calibrated(bench, power=[*coarse, replace(coarse[3], index=999)])


def test_levelling_lacks_a_level(bench):
    with pytest.raises(DataSetError, match=r"lacks pump -9 dBm at 2\.19 GHz"):
        derive(
            [LEVEL],
            {"levelling": bench.levelling_readings()[:44] + bench.levelling_readings()[45:]},
            bench.facts,
            {},
            {},
            PROVENANCE,
        )


@pytest.mark.parametrize("quantity", ["S22", "T22"])
def test_hot_match_gives_the_truth_back(bench, results, quantity):
    networks = [n for n in results.networks if n.quantity == quantity]
    assert [n.conditions["drive_dbm"] for n in networks] == DRIVES_DBM.tolist()
    for network in networks:
        waves, (s, t) = bench.hot_waves(network.conditions["drive_dbm"], network.frequency_hz)
        truth = s if quantity == "S22" else t * np.exp(-2j * np.angle(waves["pump"][0]))
        assert np.abs(network.values - truth).max() < 1e-5


def test_linearity_matters_and_is_taken_out(bench):
    """The same readings corrected as if the receivers were linear: off by the size of the pump's compression."""
    deaf = replace(bench, linearity=Linearity(0j))
    known = {"output-plane": calibrated(bench), "drive": levelled(bench)}
    wrong = derive(HOT, {"hot": bench.hot_readings()}, deaf.facts, known, {}, PROVENANCE)
    _, (_, t) = bench.hot_waves(30.0, HOT_GRID_HZ)
    top = next(n for n in wrong.networks if n.quantity == "T22" and n.conditions["drive_dbm"] == 30.0)
    assert np.abs(np.abs(top.values) - np.abs(t)).max() > 1e-3


def test_the_summary_says_power_gain_and_compression(bench, results):
    table = results.tables[0]
    assert len(table) == DRIVES_DBM.size * HOT_GRID_HZ.size
    columns = table.columns
    at = (columns["drive_dbm"] == 30.0) & (columns["frequency_hz"] == HOT_GRID_HZ[3])
    waves, _ = bench.hot_waves(30.0, HOT_GRID_HZ[[3]])
    b, a, _ = waves["pump"]
    assert columns["output_power_dbm"][at][0] == pytest.approx(10 * np.log10(abs(b[0]) ** 2 / 1e-3), abs=1e-3)
    net = abs(b[0]) ** 2 - abs(a[0]) ** 2
    assert columns["delivered_power_dbm"][at][0] == pytest.approx(10 * np.log10(net / 1e-3), abs=1e-3)
    assert columns["gain_db"][at][0] == pytest.approx(columns["output_power_dbm"][at][0] - 30.0, abs=1e-9)
    lowest = (columns["drive_dbm"] == 14.0) & (columns["frequency_hz"] == HOT_GRID_HZ[3])
    assert columns["compression_db"][at][0] == pytest.approx(columns["gain_db"][lowest][0] - columns["gain_db"][at][0])
    assert np.all(columns["compression_db"][columns["drive_dbm"] == 14.0] == 0.0)
    assert columns["drain.current_a"][at][0] == pytest.approx(0.51)
    assert columns["pump_frequency_hz"][at][0] == HOT_GRID_HZ[3] - 7e6


def test_the_optimum_load_is_that_of_the_device(bench, results):
    columns = results.tables[0].columns
    at = columns["drive_dbm"] == 30.0
    big, s, t = bench.device(30.0, HOT_GRID_HZ)
    from benchrun.derive.optimum_load import optimum_load

    load, power_w = optimum_load(big, s, t)
    np.testing.assert_allclose(columns["optimum_load_extrapolated_magnitude_ratio"][at], np.abs(load), atol=1e-4)
    np.testing.assert_allclose(
        columns["optimum_load_extrapolated_power_dbm"][at], 10 * np.log10(power_w / 1e-3), atol=1e-3
    )


def test_comments_say_what_stands_in_the_file(results):
    reflection, conversion = results.networks[0], results.networks[1]
    text = "\n".join(reflection.comments)
    for part in (
        "SIMULATED, seed 1: nothing real was measured",
        "Device: HD-31, serial 0042",
        "output reflection of the device with this bench at its port 1; it lies within 0.0122 of S22",
        "drive_dbm = 14",
        "pump at -7 MHz",
        "Calibration: output-plane, output plane, made 2026-12-01",
        "kit 'field-kit'",
        "Uncertainty:",
        "readings-hash",
    ):
        assert part in text
    assert "phase reference: twice the phase of b2 at the pump" in "\n".join(conversion.comments)


def test_a_real_run_is_not_called_simulated(bench):
    real = replace(PROVENANCE, origin="real")
    found = hot(bench, provenance=real, **{"output-plane": calibrated(bench, real), "drive": levelled(bench, real)})
    assert "SIMULATED" not in "\n".join(found.networks[0].comments)


def test_retuned_receivers_give_the_magnitude_of_t22_within_its_bound():
    bench = VirtualBench(coherent=False)
    found = hot(bench)
    for network in found.networks:
        _, (s, t) = bench.hot_waves(network.conditions["drive_dbm"], network.frequency_hz)
        rows = found.tables[0].columns["drive_dbm"] == network.conditions["drive_dbm"]
        bound = found.tables[0].columns[
            "t22_bound_ratio" if network.quantity == "T22" else "output_reflection_bound_ratio"
        ]
        share = bound[rows] - 10 ** (-39 / 20) / (1 - 10 ** (-22 / 20))
        error = np.abs(network.values - (s if network.quantity == "S22" else np.abs(t)))
        assert np.all(error <= share + 1e-5)
        if network.quantity == "T22":
            assert np.all(network.values.imag == 0.0)
            assert "magnitude only" in "\n".join(network.comments)
    assert "T22 is a magnitude, as the tones were not captured coherently" in found.notes[1]
    assert not any("phase" in name for name in found.tables[0].columns if name.startswith("t22"))
    assert not any(name.startswith("optimum_load") for name in found.tables[0].columns)


def test_one_sideband_is_marked_and_inside_its_bound(bench):
    found = hot(bench, bench.hot_readings(tones=("probe", "pump")))
    assert {n.quantity for n in found.networks} == {"S22"}
    bias = found.tables[0].columns["output_reflection_bound_ratio"] - 10 ** (-39 / 20) / (1 - 10 ** (-22 / 20))
    for network in found.networks:
        _, (s, _) = bench.hot_waves(network.conditions["drive_dbm"], network.frequency_hz)
        rows = found.tables[0].columns["drive_dbm"] == network.conditions["drive_dbm"]
        assert np.all(np.abs(network.values - s) <= bias[rows] + 1e-5)
    assert "bias of the one sideband that was read included" in "\n".join(found.networks[0].comments)
    assert "of S22, to first order, the bias of the one sideband that was read included" in found.notes[1]


def test_a_run_that_stopped_half_way_is_derived_as_far_as_it_came(bench):
    found = hot(bench, bench.hot_readings()[:30])
    assert [n.values.size for n in found.networks] == [21, 21, 9, 9]


def test_levels_above_the_receivers_limit_are_flagged_and_counted(bench):
    quiet = replace(bench, linearity=replace(bench.linearity, limit_dbm=-8.0))
    found = derive(
        HOT,
        {"hot": bench.hot_readings()},
        quiet.facts,
        {"output-plane": calibrated(bench), "drive": levelled(bench)},
        {},
        PROVENANCE,
    )
    word = "above-linear-limit:reflected"
    assert 0 < found.flags[word] < len(found.tables[0])
    assert np.sum([word in f for f in found.tables[0].columns["flags"]]) == found.flags[word]
    assert any(word in note for note in found.notes)


def test_flags_of_readings_are_kept(bench):
    readings = bench.hot_readings()
    readings[5] = replace(readings[5], flags=("reference-unlocked:pump",))
    assert hot(bench, readings).flags["reference-unlocked:pump"] == 1


def test_a_device_without_an_optimum_is_flagged_not_hidden(bench):
    class Wild(VirtualBench):
        def device(self, drive_dbm, f):
            big, s, _ = super().device(drive_dbm, f)
            return big, 0.75 * s / np.abs(s), 0.3 * np.exp(1j + 2j * np.angle(big))

    found = hot(Wild())
    columns = found.tables[0].columns
    assert found.flags["no-optimum-load"] == len(found.tables[0])
    assert np.all(np.isnan(columns["optimum_load_extrapolated_power_dbm"]))


def test_cold_one_port(bench):
    gamma = 0.4 * np.exp(-2j * np.pi * HOT_GRID_HZ * 3e-10)
    found = derive(
        COLD, {"cold": [bench.cold_reading(gamma)]}, bench.facts, {"output-plane": calibrated(bench)}, {}, PROVENANCE
    )
    np.testing.assert_allclose(found.networks[0].values, gamma, rtol=0, atol=5e-6)
    assert found.networks[0].conditions == {}
    np.testing.assert_allclose(found.tables[0].columns["output_reflection_magnitude_ratio"], 0.4, atol=5e-6)


def test_cold_one_port_needs_no_power_meter_and_hot_match_does(bench):
    step = Step("calibrate", {k: v for k, v in CALIBRATE.values.items() if k != "power"})
    made = derive([step], {"standard": bench.calibration_readings()}, bench.facts, {}, STANDARDS, PROVENANCE)
    known = {"output-plane": Calibration.from_document(made.documents["calibration", "output-plane"])}
    gamma = np.full(HOT_GRID_HZ.size, 0.3j)
    found = derive(COLD, {"cold": [bench.cold_reading(gamma)]}, bench.facts, known, {}, PROVENANCE)
    np.testing.assert_allclose(found.networks[0].values, gamma, rtol=0, atol=5e-6)
    with pytest.raises(CalibrationError, match="no absolute scale"):
        hot(bench, **known)


@pytest.mark.parametrize(
    ("known", "message"),
    [
        ({"output-plane": None}, "there is no calibration 'output-plane' for readings 'hot'"),
        ({"drive": None}, "there is no levelling 'drive'"),
    ],
)
def test_a_missing_calibration_is_named(bench, known, message):
    with pytest.raises(CalibrationError, match=message):
        hot(bench, **known)


def test_other_pads_are_named(bench):
    class Changed(VirtualBench):
        def facts(self, plane):
            return replace(
                super().facts(plane), part_hash="other", parts={"coupler": "20 dB coupler", "P3": "20 dB pad"}
            )

    with pytest.raises(CalibrationError, match="P3 was 10 dB pad; the bench now has 20 dB pad there"):
        hot(Changed(), **{"output-plane": calibrated(bench)})


def test_an_image_below_the_calibration_grid_is_refused(bench):
    with pytest.raises(CalibrationError, match=r"covers 2\.18 GHz to 2\.4 GHz.*from 2\.176 GHz"):
        hot(bench, bench.hot_readings(grid=np.array([2.19e9, 2.3e9]), drives=[14.0]))


def test_steps_out_of_order_and_unknown_ones(bench):
    with pytest.raises(DataSetError, match="'hot' are not corrected yet: put correct"):
        hot(bench, steps=HOT[1:])
    with pytest.raises(DataSetError, match="derive knows no step 'smooth'"):
        hot(bench, steps=[Step("smooth", {})])


def test_without_a_levelling_the_drive_is_said_to_be_computed(bench):
    found = hot(bench, steps=[CORRECT, Step("hot-match", {"readings": "hot", "drive": None})])
    assert "computed from the bench's parts and not levelled" in found.notes[0]


def test_a_point_without_a_probe_is_named(bench):
    readings = bench.hot_readings()
    dark = readings[25].data.copy()
    dark[[0, 2]] = 0.0
    readings[25] = replace(readings[25], data=dark)
    with pytest.raises(
        DataSetError, match=r"'hot' at 2\.24 GHz, drive_dbm = 18\.0: the image is as strong as the probe"
    ):
        hot(bench, readings)
    cold = bench.cold_reading(np.full(HOT_GRID_HZ.size, 0.3j))
    with pytest.raises(DataSetError, match=r"'cold' at 2\.2 GHz: no probe wave was read"):
        derive(
            COLD,
            {"cold": [replace(cold, data=0 * cold.data)]},
            bench.facts,
            {"output-plane": calibrated(bench)},
            {},
            PROVENANCE,
        )


def test_a_room_that_warmed_up_is_said(bench):
    warm = [replace(r, scalars=r.scalars | {"ambient.temperature_degc": 27.0}) for r in bench.hot_readings()]
    assert (
        "ambient went to 27.0 degC; it was 23.5 degC at the calibration, and receivers drift" in hot(bench, warm).notes
    )
    same = [replace(r, scalars=r.scalars | {"ambient.temperature_degc": 24.0}) for r in bench.hot_readings()]
    assert not any("ambient" in note for note in hot(bench, same).notes)


def test_a_drive_below_what_was_levelled_is_said(bench):
    found = hot(bench, bench.hot_readings(drives=[11.0, 14.0]))
    assert "dB below what was levelled: the gain is carried on" in found.notes[0]
    assert "below what was levelled" not in hot(bench).notes[0]


def test_flags_of_a_calibration_are_counted(bench):
    power = bench.power_readings()
    power[3] = replace(power[3], flags=("over-limit:incident",))
    readings = {"standard": bench.calibration_readings(), "power": power}
    found = derive([CALIBRATE], readings, bench.facts, {}, STANDARDS, PROVENANCE)
    assert found.flags == {"over-limit:incident": 1}
    assert any("flagged over-limit:incident" in note for note in found.notes)
