"""The derive part of a recipe, step by step: readings in, results out. Pure: no file, no clock, no instrument."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.contract.reading import Reading
from benchrun.derive import comments
from benchrun.derive.calibrate import calibrate, level
from benchrun.derive.calibration import Calibration, Circumstances, valid_until
from benchrun.derive.corrected import PROBE, Corrected, correct
from benchrun.derive.facts import BenchFacts
from benchrun.derive.hot_match import HotMatch, flag_column, hot_flags, hot_match, hot_table
from benchrun.derive.levelling import Levelling
from benchrun.derive.points import Points, stack
from benchrun.derive.results import Column, OnePortData, Provenance, Results, Table
from benchrun.derive.standards import Definition
from benchrun.errors import CalibrationError, DataSetError

Known = Calibration | Levelling


@dataclass(frozen=True, slots=True)
class Step:
    """One entry of a recipe's derive part: its kind ("correct", "hot-match", ...) and its values by field name."""

    kind: str
    values: Mapping[str, Any]


@dataclass(slots=True)
class _Work:
    """What the steps share: inputs, and what earlier steps have made."""

    readings: Mapping[str, Sequence[Reading]]
    facts: Callable[[str], BenchFacts]
    known: Mapping[str, Known]
    definitions: Mapping[str, Definition]
    kit_name: str
    provenance: Provenance
    corrected: dict[str, Corrected] = field(default_factory=dict)

    def points(self, name: str) -> Points:
        return stack(self.readings.get(name, ()), name)

    def circumstances(self, points: Points, plane: str, valid_for_s: float) -> Circumstances:
        facts, temperature = self.facts(plane), points.scalars.get("ambient.temperature_degc")
        return Circumstances(
            made_utc=points.ended_utc,
            valid_until_utc=valid_until(points.ended_utc, valid_for_s),
            origin=self.provenance.origin,
            part_hash=facts.part_hash,
            parts=dict(facts.parts),
            temperature_degc=None if temperature is None else float(np.nanmean(temperature)),
            kit=self.kit_name,
            power_meter=self.provenance.identities.get("meter", ""),
            readings_hash=self.provenance.readings_hash,
            version=self.provenance.version,
        )


def derive(
    steps: Sequence[Step],
    readings: Mapping[str, Sequence[Reading]],
    facts: Callable[[str], BenchFacts],
    calibrations: Mapping[str, Known],
    definitions: Mapping[str, Definition],
    provenance: Provenance,
    kit_name: str = "",
) -> Results:
    """Return the results of the derive `steps`, in order.

    `readings` are by name, as committed; `facts` gives a plane's BenchFacts; `calibrations` are what the recipe's
    calibrations names stand for; `definitions` are the kit's standards. Raises CalibrationError where a calibration
    is missing or does not fit, DataSetError where readings do not allow what was asked.
    """
    work = _Work(readings, facts, calibrations, definitions, kit_name, provenance)
    results = Results()
    for step in steps:
        if step.kind not in _STEPS:
            raise DataSetError(f"derive knows no step '{step.kind}': it has {', '.join(_STEPS)}.")
        results = results + _STEPS[step.kind](work, step.values)
    return results


def _correct(work: _Work, values: Mapping[str, Any]) -> Results:
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


def _hot_match(work: _Work, values: Mapping[str, Any]) -> Results:
    corrected = _of(work, values["readings"])
    facts = work.facts(corrected.calibration.plane)
    match = hot_match(corrected, facts)
    flags = hot_flags(corrected, match)
    networks = [
        n
        for chosen, conditions in _groups(corrected.points)
        for n in _hot_files(work, corrected, match, chosen, conditions)
    ]
    notes = (_drive_note(work, values.get("drive"), corrected.points), *_flag_notes(flags))
    return Results((hot_table(corrected, match),), tuple(networks), {}, notes, _counted(flags))


def _one_port(work: _Work, values: Mapping[str, Any]) -> Results:
    corrected = _of(work, values["readings"])
    points, provenance = corrected.points, work.provenance
    reflection = corrected.b[PROBE] / corrected.a[PROBE]
    columns: dict[str, Column] = {k: points.conditions[k] for k in points.sweep_keys()}
    columns["frequency_hz"] = points.frequency_hz
    columns["output_reflection_magnitude_ratio"] = np.abs(reflection)
    columns["output_reflection_phase_deg"] = np.angle(reflection, deg=True)
    columns |= dict(points.scalars)
    columns["flags"] = flag_column(corrected.flags)
    networks = []
    for chosen, conditions in _groups(points):
        lines = (
            *comments.head(provenance),
            "S11 column: reflection of the device at the calibrated plane, with this bench at its other port",
            comments.conditions_comment(conditions, points.where(chosen)),
            *comments.tail(provenance, corrected.calibration),
        )
        networks.append(_file("S22", work, points, chosen, conditions, reflection, lines, corrected.calibration.plane))
    return Results(
        (Table("one-port", columns),), tuple(networks), {}, _flag_notes(corrected.flags), _counted(corrected.flags)
    )


def _calibrate(work: _Work, values: Mapping[str, Any]) -> Results:
    plane, standards = values["plane"], work.points(values["standards"])
    power = work.points(values["power"]) if values.get("power") else None
    circumstances = work.circumstances(power or standards, plane, values["valid_for_s"])
    calibration, residuals = calibrate(
        values["name"], standards, power, work.definitions, work.facts(plane), circumstances
    )
    columns: dict[str, Column] = {"frequency_hz": calibration.frequency_hz}
    columns |= {
        f"{name}_db": 20.0 * np.log10(np.abs(term))
        for name, term in (
            ("directivity", calibration.terms.e00 / calibration.terms.e10e01),
            ("source_match", calibration.terms.e11),
            ("reflection_tracking", calibration.terms.e10e01),
        )
    }
    if calibration.scale is not None:
        columns["scale_db"] = 20.0 * np.log10(calibration.scale)
    columns |= {f"residual_{name}_ratio": np.abs(r) for name, r in zip(calibration.residuals, residuals, strict=True)}
    told = ", ".join(f"{name} {rms:.4f}" for name, rms in calibration.residuals.items())
    notes = (f"calibration '{calibration.name}': residuals (rms) {told}; valid until {circumstances.valid_until_utc}",)
    document = {("calibration", calibration.name): calibration.to_document()}
    return Results(
        (Table("calibration", columns),), (), document, notes + _flag_notes(standards.flags), _counted(standards.flags)
    )


def _level(work: _Work, values: Mapping[str, Any]) -> Results:
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
        f"valid until {circumstances.valid_until_utc}"
    )
    document = {("levelling", levelling.name): levelling.to_document()}
    return Results((Table("levelling", columns),), (), document, (note,), _counted(points.flags))


_STEPS: Mapping[str, Callable[[_Work, Mapping[str, Any]], Results]] = {
    "correct": _correct,
    "hot-match": _hot_match,
    "one-port": _one_port,
    "calibrate": _calibrate,
    "level": _level,
}


def _of(work: _Work, name: str) -> Corrected:
    if name not in work.corrected:
        raise DataSetError(
            f"readings '{name}' are not corrected yet: put correct: {{readings: {name}, calibration: ...}} "
            "before this step."
        )
    return work.corrected[name]


def _groups(points: Points) -> list[tuple[npt.NDArray[np.bool_], dict[str, float | str]]]:
    """Return, for each combination of swept conditions but frequency, which points (N,) have it."""
    keys = list(points.sweep_keys())
    if "drive_dbm" in points.conditions and "drive_dbm" not in keys:
        keys.insert(0, "drive_dbm")
    rows = list(zip(*(points.conditions[k].tolist() for k in keys), strict=True)) if keys else [()] * len(points)
    groups = []
    for row in dict.fromkeys(rows):
        groups.append((np.array([r == row for r in rows]), dict(zip(keys, row, strict=True))))
    return groups


def _hot_files(
    work: _Work,
    corrected: Corrected,
    match: HotMatch,
    chosen: npt.NDArray[np.bool_],
    conditions: dict[str, float | str],
) -> list[OnePortData]:
    points, plane = corrected.points, corrected.calibration.plane
    about = (comments.conditions_comment(conditions, points.where(chosen)), comments.tones_comment(corrected))
    tail = comments.tail(work.provenance, corrected.calibration)
    bound = float(np.max(match.reflection_bound[chosen]))
    what = comments.reflection_comment(bound, one_sideband=match.conversion is None)
    lines = (*comments.head(work.provenance), what, *about, *tail)
    files = [_file("S22", work, points, chosen, conditions, match.reflection, lines, plane)]
    if match.conversion is not None and match.conversion_bound is not None:
        bound = float(np.max(match.conversion_bound[chosen]))
        what = comments.conversion_comment(bound, coherent=match.coherent)
        lines = (*comments.head(work.provenance), what, *about, *tail)
        files.append(_file("T22", work, points, chosen, conditions, match.conversion, lines, plane))
    return files


def _file(
    quantity: str,
    work: _Work,
    points: Points,
    chosen: npt.NDArray[np.bool_],
    conditions: Mapping[str, float | str],
    values: ComplexArray,
    lines: tuple[str, ...],
    plane: str,
) -> OnePortData:
    frequency: FloatArray = points.frequency_hz[chosen]
    order = np.argsort(frequency, kind="stable")
    ohm = work.facts(plane).reference_ohm
    return OnePortData(
        quantity, work.provenance.serial, conditions, frequency[order], values[chosen][order], lines, ohm
    )


def _drive_note(work: _Work, name: str | None, points: Points) -> str:
    if "drive_dbm" not in points.conditions:
        return "no drive was swept: gain is not stated"
    levelling = work.known.get(name) if name else None
    if name and not isinstance(levelling, Levelling):
        raise CalibrationError(
            f"there is no levelling '{name}' for the drive. Make it first, or pick one with --calibration."
        )
    if not isinstance(levelling, Levelling):
        return "drive is power at the device-input plane, computed from the bench's parts and not levelled"
    facts = work.facts(levelling.plane)
    levelling.check_fits(facts.part_hash, points.ended_utc, work.provenance.origin, facts.parts)
    made = levelling.circumstances.made_utc
    return f"drive is power at the device-input plane, levelled by '{levelling.name}' of {made}; gain refers to it"


def _counted(flags: tuple[tuple[str, ...], ...]) -> dict[str, int]:
    counts: dict[str, int] = {}
    for words in flags:
        for word in words:
            counts[word] = counts.get(word, 0) + 1
    return counts


def _flag_notes(flags: tuple[tuple[str, ...], ...]) -> tuple[str, ...]:
    return tuple(
        f"{count} of {len(flags)} points are flagged {word}" for word, count in sorted(_counted(flags).items())
    )
