"""The derive steps that make a plane known: calibrate and level."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from benchrun.contract.capture import ComplexArray
from benchrun.derive.calibrate import calibrate, level
from benchrun.derive.calibration import Calibration, show_time
from benchrun.derive.results import Column, Results, Table
from benchrun.derive.work import Work, counted, flag_notes

Values = Mapping[str, Any]


def calibrate_step(work: Work, values: Values) -> Results:
    """Calibrate `plane` from the readings `standards` and `power`: a table with residuals, and the calibration."""
    plane, standards = values["plane"], work.points(values["standards"])
    power = work.points(values["power"]) if values.get("power") else None
    circumstances = work.circumstances(power if power is not None else standards, plane, values["valid_for_s"])
    facts, flags = work.facts(plane), standards.flags + (power.flags if power is not None else ())
    calibration, residuals = calibrate(values["name"], standards, power, work.definitions, facts, circumstances)
    told = ", ".join(f"{name} {rms:.4f}" for name, rms in calibration.residuals.items())
    until = show_time(circumstances.valid_until_utc)
    notes = (f"calibration '{calibration.name}': residuals (rms) {told}; valid until {until}",)
    return Results(
        (Table("calibration", _calibration_columns(calibration, residuals)),),
        (),
        {("calibration", calibration.name): calibration.to_document()},
        notes + flag_notes(flags),
        counted(flags),
    )


def level_step(work: Work, values: Values) -> Results:
    """Level `signal` at `plane` from `readings`: a table of powers and chain gains, and the levelling itself."""
    points = work.points(values["readings"])
    circumstances = work.circumstances(points, values["plane"], values["valid_for_s"])
    levelling = level(values["name"], values["signal"], values["plane"], points, circumstances)
    power = levelling.power_dbm.ravel()
    set_dbm = np.repeat(levelling.level_dbm, levelling.frequency_hz.size)
    columns: dict[str, Column] = {
        f"{levelling.signal}_level_dbm": set_dbm,
        "frequency_hz": np.tile(levelling.frequency_hz, levelling.level_dbm.size),
        "power_dbm": power,
        "chain_gain_db": power - set_dbm,
    }
    note = (
        f"levelling '{levelling.name}': {power.min():.2f} to {power.max():.2f} dBm at the {levelling.plane} plane; "
        f"valid until {show_time(circumstances.valid_until_utc)}"
    )
    document = {("levelling", levelling.name): levelling.to_document()}
    notes = (note, *flag_notes(points.flags))
    return Results((Table("levelling", columns),), (), document, notes, counted(points.flags))


def _calibration_columns(calibration: Calibration, residuals: ComplexArray) -> dict[str, Column]:
    """Return the terms in dB and each standard's residual; directivity as a reflection it would be read as."""
    terms = calibration.terms
    columns: dict[str, Column] = {
        "frequency_hz": calibration.frequency_hz,
        "raw_directivity_db": _db(terms.e00 / terms.e10e01),
        "raw_source_match_db": _db(terms.e11),
        "reflection_tracking_db": _db(terms.e10e01),
    }
    if calibration.scale is not None:
        columns["scale_db"] = _db(calibration.scale.astype(np.complex128))
    names = (f"residual_{name.replace('-', '_')}_ratio" for name in calibration.residuals)
    return columns | dict(zip(names, np.abs(residuals), strict=True))


def _db(values: ComplexArray) -> Column:
    """Return 20 log10 of the magnitude, NaN for nothing at all."""
    magnitude = np.abs(values)
    return np.asarray(20.0 * np.log10(np.where(magnitude > 0.0, magnitude, np.nan)))
