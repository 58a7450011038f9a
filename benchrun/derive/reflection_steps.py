"""The derive steps that correct readings: correct, hot-match, one-port."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from benchrun.derive import comments
from benchrun.derive.calibration import Calibration, show_time
from benchrun.derive.corrected import PUMP, Corrected, correct
from benchrun.derive.hot_match import HotMatch, flag_column, hot_flags, hot_match, hot_table, polar
from benchrun.derive.levelling import Levelling
from benchrun.derive.points import Points, condition_keys
from benchrun.derive.results import Column, OnePortData, Results, Table
from benchrun.derive.work import AMBIENT, Chosen, Work, counted, flag_notes, groups
from benchrun.errors import CalibrationError

Values = Mapping[str, Any]
WORTH_SAYING_K = 3.0


def correct_step(work: Work, values: Values) -> Results:
    """Correct `readings` with `calibration`, after checking that it fits them. Gives no result of its own."""
    name, wanted = values["readings"], values["calibration"]
    calibration = work.known.get(wanted)
    if not isinstance(calibration, Calibration):
        raise CalibrationError(
            f"there is no calibration '{wanted}' for readings '{name}'. Make it first, or pick one with --calibration."
        )
    points, facts = work.points(name), work.facts(calibration.plane)
    tones_hz = np.concatenate([points.tone_hz(tone) for tone in points.tones])
    calibration.check_fits(
        tones_hz, facts.part_hash, facts.plane, points.ended_utc, work.provenance.origin, facts.parts
    )
    work.corrected[name] = correct(points, calibration, facts)
    return Results()


def hot_match_step(work: Work, values: Values) -> Results:
    """Derive the hot output match of `readings`: one table, and S22 and T22 for each swept condition."""
    corrected = work.of(values["readings"])
    match = hot_match(corrected, work.facts(corrected.calibration.plane))
    flags = hot_flags(corrected, match)
    networks = [
        network
        for chosen, conditions in groups(corrected.points)
        for network in _hot_networks(work, corrected, match, chosen, conditions)
    ]
    bound = float(np.max(match.reflection_bound))
    about = comments.match_note(bound, one_sideband=match.conversion is None, coherent=match.coherent)
    notes = (
        _drive_note(work, values.get("drive"), corrected.points),
        about,
        *_drift_notes(corrected),
        *flag_notes(flags),
    )
    return Results((hot_table(corrected, match),), tuple(networks), {}, notes, counted(flags))


def one_port_step(work: Work, values: Values) -> Results:
    """Derive the reflection of `readings` at the plane: one table, and one file for each swept condition."""
    corrected = work.of(values["readings"])
    points = corrected.points
    reflection = corrected.reflection()
    columns: dict[str, Column] = {k: points.conditions[k] for k in condition_keys(points)}
    columns["frequency_hz"] = points.frequency_hz
    columns |= polar("output_reflection", reflection) | dict(points.scalars)
    columns["flags"] = flag_column(corrected.flags)
    networks = []
    for chosen, conditions in groups(points):
        what = comments.cold_comment(corrected.calibration.plane)
        lines = _lines(work, corrected, what, comments.conditions_comment(conditions, points.where(chosen)))
        networks.append(work.network("S22", corrected, chosen, conditions, reflection, lines))
    table = Table("one-port", columns)
    notes = _drift_notes(corrected) + flag_notes(corrected.flags)
    return Results((table,), tuple(networks), {}, notes, counted(corrected.flags))


def _hot_networks(
    work: Work, corrected: Corrected, match: HotMatch, chosen: Chosen, conditions: Mapping[str, float | str]
) -> list[OnePortData]:
    points = corrected.points
    about = comments.conditions_comment(conditions, points.where(chosen)), comments.tones_comment(corrected)
    bound = float(np.max(match.reflection_bound[chosen]))
    what = comments.reflection_comment(bound, one_sideband=match.conversion is None)
    lines = _lines(work, corrected, what, *about)
    networks = [work.network("S22", corrected, chosen, conditions, match.reflection, lines)]
    if match.conversion is not None and match.conversion_bound is not None:
        bound = float(np.max(match.conversion_bound[chosen]))
        lines = _lines(work, corrected, comments.conversion_comment(bound, coherent=match.coherent), *about)
        networks.append(work.network("T22", corrected, chosen, conditions, match.conversion, lines))
    return networks


def _lines(work: Work, corrected: Corrected, *middle: str) -> tuple[str, ...]:
    return (
        *comments.head(work.provenance),
        *middle,
        *comments.tail(work.provenance, corrected.calibration),
    )


def _drift_notes(corrected: Corrected) -> tuple[str, ...]:
    """Return what to say where the room was warmer or colder than at the calibration by more than WORTH_SAYING_K."""
    then, now = corrected.calibration.circumstances.temperature_degc, corrected.points.scalars.get(AMBIENT)
    if then is None or now is None or not np.any(np.isfinite(now)):
        return ()
    furthest = float(now[np.nanargmax(np.abs(now - then))])
    if abs(furthest - then) <= WORTH_SAYING_K:
        return ()
    return (f"ambient went to {furthest:.1f} degC; it was {then:.1f} degC at the calibration, and receivers drift",)


def _drive_note(work: Work, name: str | None, points: Points) -> str:
    if "drive_dbm" not in points.conditions:
        return "no drive was swept: gain is not stated"
    if name is None:
        return "drive is power at the device-input plane, computed from the bench's parts and not levelled"
    levelling = work.known.get(name)
    if not isinstance(levelling, Levelling):
        raise CalibrationError(
            f"there is no levelling '{name}' for the drive. Make it first, or pick one with --calibration."
        )
    facts = work.facts(levelling.plane)
    levelling.check_fits(facts.part_hash, points.ended_utc, work.provenance.origin, facts.parts)
    made = show_time(levelling.circumstances.made_utc)
    below_db = levelling.below_db(points.number("drive_dbm"), points.tone_hz(PUMP))
    reach = f" (up to {below_db:.2f} dB below what was levelled: the gain is carried on)" if below_db > 0.0 else ""
    return f"drive is power at the device-input plane, levelled by '{name}' of {made}{reach}; gain refers to it"
