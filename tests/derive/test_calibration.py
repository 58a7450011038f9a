"""The calibration document: equal after a round trip, smooth between its points, refused where it does not fit."""

from __future__ import annotations

import json
from dataclasses import replace

import numpy as np
import pytest

from benchrun.derive.calibration import Calibration, Circumstances, valid_until
from benchrun.derive.one_port import ErrorTerms
from benchrun.errors import CalibrationError
from tests.derive.virtual_bench import CALIBRATION_GRID_HZ, VirtualBench

BENCH = VirtualBench()
CIRCUMSTANCES = Circumstances(
    "2026-12-01T21:00:00+00:00",
    "2026-12-08T21:00:00+00:00",
    "simulated, seed 1",
    "abc",
    {"P3": "20 dB pad", "coupler": "20 dB coupler"},
    23.5,
    "field-kit",
    "ACME,M1,1,0",
    "hash",
    "0.1.0",
)


def on_paper() -> Calibration:
    e00, e11, tracking, scale = BENCH.terms(CALIBRATION_GRID_HZ)
    terms = ErrorTerms(e00, e11, tracking)
    return Calibration("output-plane", "output", CALIBRATION_GRID_HZ, terms, scale, {"open": 0.001}, CIRCUMSTANCES)


def fits(calibration: Calibration, **changes) -> None:
    asked = {
        "frequency_hz": [2.186e9, 2.4e9],
        "part_hash": "abc",
        "plane": "output",
        "date_utc": "2026-12-02T08:00:00Z",
        "origin": "simulated, seed 1",
    }
    calibration.check_fits(**(asked | changes))


def test_document_is_json_and_equal_to_the_last_bit():
    made = on_paper()
    back = Calibration.from_document(json.loads(json.dumps(made.to_document(), allow_nan=False)))
    for name in ("e00", "e11", "e10e01"):
        np.testing.assert_array_equal(getattr(back.terms, name), getattr(made.terms, name))
    np.testing.assert_array_equal(back.scale, made.scale)
    np.testing.assert_array_equal(back.frequency_hz, made.frequency_hz)
    assert (back.name, back.plane, back.residuals, back.circumstances) == (
        made.name,
        made.plane,
        made.residuals,
        made.circumstances,
    )


@pytest.mark.parametrize("key", ["name", "terms", "frequency_hz", "circumstances"])
def test_a_damaged_document_is_refused(key):
    document = on_paper().to_document()
    del document[key]
    with pytest.raises(CalibrationError, match="damaged"):
        Calibration.from_document(document)


def test_another_document_is_refused():
    with pytest.raises(CalibrationError, match="a calibration is expected here, and this document is a levelling"):
        Calibration.from_document({"kind": "levelling"})
    with pytest.raises(CalibrationError, match="written in form 99"):
        Calibration.from_document(on_paper().to_document() | {"document": 99})


def test_between_its_points_it_is_good_to_well_below_a_ten_thousandth():
    f = np.linspace(2.18e9, 2.4e9, 1777)
    e00, e11, tracking, scale = BENCH.terms(f)
    made = on_paper()
    device = 0.4 * np.exp(1j * f / 1e8)
    corrected = made.at(f).apply(ErrorTerms(e00, e11, tracking).raw(device))
    assert np.abs(corrected - device).max() < 5e-6
    assert np.abs(made.scale_at(f) / scale - 1).max() < 1e-6


def test_what_fits_is_silent():
    fits(on_paper())


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        (
            {"frequency_hz": [2.166e9, 2.4e9]},
            r"covers 2\.18 GHz to 2\.4 GHz.*image included, run from 2\.166 GHz to 2\.4 GHz",
        ),
        ({"frequency_hz": [2.3e9, 2.5e9]}, r"run from 2\.3 GHz to 2\.5 GHz"),
        ({"plane": "input"}, "is of the output plane; the input plane"),
        ({"part_hash": "xyz"}, "made with other parts between plane and receivers"),
        (
            {"part_hash": "xyz", "parts": {"P3": "10 dB pad", "coupler": "20 dB coupler"}},
            "P3 was 20 dB pad; the bench now has 10 dB pad there",
        ),
        (
            {"part_hash": "xyz", "parts": {"P3": "20 dB pad"}},
            "coupler was 20 dB coupler; the bench now has nothing there",
        ),
        (
            {"date_utc": "2026-12-08T21:00:01Z"},
            r"expired on 2026-12-08 21:00 UTC; the readings are of 2026-12-08 21:00",
        ),
        ({"date_utc": "2026-11-20T00:00:00Z"}, "was made on 2026-12-01 .*long after the readings of 2026-11-20"),
        ({"date_utc": "yesterday"}, "'yesterday' is no time"),
        ({"origin": "real"}, "simulated, seed 1, and nothing simulated ever corrects a real run"),
        ({"origin": "simulated, seed 2"}, "is simulated, seed 1, and this run is simulated, seed 2"),
    ],
)
def test_what_does_not_fit_is_named(changes, message):
    with pytest.raises(CalibrationError, match=message):
        fits(on_paper(), **changes)


def test_times_without_a_zone_are_utc():
    fits(on_paper(), date_utc="2026-12-08T20:59:00")


def test_without_a_power_meter_there_is_no_scale():
    with pytest.raises(CalibrationError, match="no absolute scale"):
        replace(on_paper(), scale=None).scale_at([2.3e9])
    assert Calibration.from_document(replace(on_paper(), scale=None).to_document()).scale is None


def test_valid_until_counts_from_the_making():
    assert valid_until("2026-12-01T21:00:00Z", 7 * 86400.0) == "2026-12-08T21:00:00+00:00"
