"""Calibrations and levellings: conditions, validity, residuals, terms over frequency."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.derive.results import Table
from benchrun.save.report.figures import UNKNOWN, fixed, time_text
from benchrun.save.report.subject import Subject

Known = Calibration | Levelling


@dataclass(frozen=True, slots=True)
class Curve:
    """A named curve over frequency (F,) in Hz; `values` (F,)."""

    name: str
    frequency_hz: FloatArray
    values: FloatArray


@dataclass(frozen=True, slots=True)
class Plane:
    """A calibration or levelling as a report shows it. `used` says whether this run used it or made it.

    `residuals` are rms texts by standard; `residual_curves` are over frequency where the readings of the standards are
    in this archive; `terms` are in dB.
    """

    name: str
    kind: str
    used: bool
    facts: list[tuple[str, str]]
    residuals: list[tuple[str, str]]
    residual_curves: list[Curve]
    terms: list[Curve]


def planes(subject: Subject) -> list[Plane]:
    """Return what the run made, then what it used."""
    return [
        *(_plane(one, False, subject.results.tables) for one in subject.made.values()),
        *(_plane(one, True, ()) for one in subject.known.values()),
    ]


def _plane(one: Known, used: bool, tables: Sequence[Table]) -> Plane:
    if isinstance(one, Levelling):
        return Plane(one.name, "levelling", used, _levelling_facts(one), [], [], list(_chain(one)))
    residuals = [(name, fixed(rms, 4)) for name, rms in one.residuals.items()]
    facts = [*_facts(one), ("Absolute power", _scale_text(one))]
    return Plane(one.name, "calibration", used, facts, residuals, list(_residuals(tables)), list(_terms(one)))


def _facts(one: Known) -> list[tuple[str, str]]:
    there, grid = one.circumstances, one.frequency_hz
    temperature = there.temperature_degc
    return [
        ("Plane", one.plane),
        ("Made", time_text(there.made_utc)),
        ("Valid until", time_text(there.valid_until_utc)),
        ("Origin", there.origin),
        ("Grid", f"{grid[0] / 1e6:.10g} to {grid[-1] / 1e6:.10g} MHz, {grid.size} frequencies"),
        ("Temperature then", UNKNOWN if temperature is None else f"{fixed(temperature, 2)} degC"),
        ("Kit", there.kit or UNKNOWN),
        ("Power meter", there.power_meter or UNKNOWN),
        ("Parts between plane and receivers", _parts(there.parts)),
        ("Parts, SHA-256", there.part_hash),
        ("Its readings, SHA-256", there.readings_hash or UNKNOWN),
        ("Made with", f"benchrun {there.version}" if there.version else UNKNOWN),
    ]


def _levelling_facts(one: Levelling) -> list[tuple[str, str]]:
    level, power = one.level_dbm, one.power_dbm
    return [
        ("Signal", one.signal),
        *_facts(one),
        ("Levels set", f"{fixed(level.min(), 2, True)} to {fixed(level.max(), 2, True)} dBm, {level.size} levels"),
        ("Power reached", f"{fixed(power.min(), 2, True)} to {fixed(power.max(), 2, True)} dBm"),
    ]


def _parts(parts: Mapping[str, str]) -> str:
    return "; ".join(f"{name}: {text}" for name, text in parts.items()) or UNKNOWN


def _scale_text(one: Calibration) -> str:
    if one.scale is None:
        return "none: no power meter was read, so only ratios are corrected"
    return "from the power meter at the plane"


def _terms(one: Calibration) -> Iterator[Curve]:
    terms, f = one.terms, one.frequency_hz
    yield Curve("raw directivity", f, _db(terms.e00 / terms.e10e01))
    yield Curve("raw source match", f, _db(terms.e11))
    yield Curve("reflection tracking", f, _db(terms.e10e01))
    if one.scale is not None:
        yield Curve("scale of the waves", f, _db(one.scale.astype(np.complex128)))


def _residuals(tables: Sequence[Table]) -> Iterator[Curve]:
    for table in tables:
        for key, values in table.columns.items():
            if table.name == "calibration" and key.startswith("residual_"):
                name = key.removeprefix("residual_").removesuffix("_ratio").replace("_", "-")
                yield Curve(name, table.columns["frequency_hz"].astype(np.float64), values.astype(np.float64))


def _chain(one: Levelling) -> Iterator[Curve]:
    """Yield the gain of the chain at each level."""
    for level, power in zip(one.level_dbm.tolist(), one.power_dbm, strict=True):
        yield Curve(f"at {fixed(level, 1, True)} dBm", one.frequency_hz, power - level)


def _db(values: ComplexArray) -> FloatArray:
    magnitude = np.abs(values)
    return np.asarray(20.0 * np.log10(np.where(magnitude > 0.0, magnitude, np.nan)))
