"""Calibrations and levellings from readings: which points are which standard, solve, residuals, scale."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.calibration import Calibration, Circumstances
from benchrun.derive.corrected import restore
from benchrun.derive.facts import BenchFacts
from benchrun.derive.interpolation import interpolate, outside
from benchrun.derive.levelling import Levelling
from benchrun.derive.one_port import solve
from benchrun.derive.points import FREQUENCY, Points
from benchrun.derive.power import scale_from_incident
from benchrun.derive.standards import Definition
from benchrun.errors import DataSetError
from benchrun.quantities import show

PROBE = "probe"
#: A standard that misses its definition by this much (rms) was not that standard, or not properly connected.
WORST_RESIDUAL = 0.1


def calibrate(
    name: str,
    standards: Points,
    power: Points | None,
    definitions: Mapping[str, Definition],
    facts: BenchFacts,
    circumstances: Circumstances,
) -> tuple[Calibration, ComplexArray]:
    """Calibrate `facts.plane` and return the calibration with its residuals (N, F), standards in the order of reading.

    `standards` are points of at least three standards, told apart by the condition connected.<plane>, all on one
    grid; `power` (or None) are points with the power meter connected, carrying one meter's power. Raises DataSetError
    where a standard is unknown, where grids differ, where the standards do not span, or where one is plainly not what
    it is said to be.
    """
    ratios = _standard_ratios(standards, facts)
    grid = next(iter(ratios.values()))[0]
    unknown = [k for k in ratios if k not in definitions]
    if unknown:
        raise DataSetError(
            f"the kit defines no '{unknown[0]}': it has {', '.join(definitions)}. Name the standards as the kit does."
        )
    if any(f.shape != grid.shape or np.any(np.abs(f - grid) > 1.0) for f, _ in ratios.values()):
        raise DataSetError("the standards were not all read on one frequency grid: read the missing points again.")
    measured = np.array([ratio for _, ratio in ratios.values()])
    defined = np.array([definitions[k].reflection(grid, facts.reference_ohm) for k in ratios])
    terms = solve(measured, defined, names=list(ratios), frequency_hz=grid)
    residuals = terms.residuals(measured, defined)
    rms = dict(zip(ratios, np.sqrt(np.mean(np.abs(residuals) ** 2, axis=1)).tolist(), strict=True))
    _require_standards(rms)
    calibration = Calibration(name, facts.plane, grid, terms, None, rms, circumstances)
    if power is not None:
        calibration = replace(calibration, scale=_scale(power, calibration, facts))
    return calibration, residuals


def level(name: str, signal: str, plane: str, points: Points, circumstances: Circumstances) -> Levelling:
    """Return the levelling of `signal` at `plane` from points that carry <signal>.level_dbm and one meter's power.

    Raises DataSetError where the points do not fill a table of levels by frequencies, or power does not rise with
    level.
    """
    levels, row = np.unique(points.number(f"{signal}.level_dbm"), return_inverse=True)
    frequencies, column = np.unique(points.number(_frequency_key(points, signal)), return_inverse=True)
    table = np.full((levels.size, frequencies.size), np.nan)
    table[row, column] = points.power_dbm()
    if np.any(np.isnan(table)):
        at = np.argwhere(np.isnan(table))[0]
        raise DataSetError(
            f"levelling '{name}' lacks {signal} {levels[at[0]]:g} dBm at {show(frequencies[at[1]], 'frequency', 7)}: "
            "level again, with every level at every frequency."
        )
    return Levelling(name, signal, plane, levels, frequencies, table, circumstances)


def _frequency_key(points: Points, signal: str) -> str:
    key = f"{signal}.frequency_hz"
    return key if key in points.conditions else FREQUENCY


def _standard_ratios(points: Points, facts: BenchFacts) -> dict[str, tuple[FloatArray, ComplexArray]]:
    """Return grid (F,) and raw ratio (F,) of each standard, by rising frequency."""
    key = f"connected.{facts.plane}"
    if key not in points.conditions:
        raise DataSetError(
            f"readings '{points.name}' do not say what was connected: use connect: {{plane: {facts.plane}, what: ...}}."
        )
    ratio = _ratio(points, facts)
    connected = points.conditions[key]
    found = {}
    for name in dict.fromkeys(str(v) for v in connected):
        at = np.flatnonzero(connected == name)
        at = at[np.argsort(points.frequency_hz[at], kind="stable")]
        found[name] = points.frequency_hz[at], ratio[at]
    return found


def _ratio(points: Points, facts: BenchFacts) -> ComplexArray:
    """Return the raw ratio m / r (N,) at the probe, receivers made linear."""
    reference = restore(points, facts.incident, facts).tones[PROBE]
    if np.any(reference == 0.0):
        raise DataSetError(f"readings '{points.name}': the {facts.incident} receiver read nothing. Was the probe on?")
    return np.asarray(restore(points, facts.reflected, facts).tones[PROBE] / reference)


def _require_standards(rms: Mapping[str, float]) -> None:
    worst = max(rms, key=lambda k: rms[k])
    if rms[worst] > WORST_RESIDUAL:
        raise DataSetError(
            f"standard '{worst}' misses its definition by {rms[worst]:.3f} (rms): one of {', '.join(rms)} was not "
            "what was connected, or was not tight. Calibrate again; the readings are in the archive."
        )


def _scale(points: Points, calibration: Calibration, facts: BenchFacts) -> FloatArray:
    """Return |K| (F,) on the calibration's grid, from points on any grid that covers it.

    Raises DataSetError where it does not, or where a frequency was read twice.
    """
    order = np.argsort(points.frequency_hz, kind="stable")
    order = order[~outside(calibration.frequency_hz, points.frequency_hz[order])]
    f = points.frequency_hz[order]
    if f.size == 0 or np.any(np.diff(f) <= 0.0) or np.any(outside(f, calibration.frequency_hz)):
        raise DataSetError(
            f"readings '{points.name}' do not cover the standards' grid: the power meter must be read once at each "
            f"frequency from {show(calibration.frequency_hz[0], 'frequency')} to "
            f"{show(calibration.frequency_hz[-1], 'frequency')}."
        )
    measured = restore(points, facts.reflected, facts).tones[PROBE][order]
    reference = restore(points, facts.incident, facts).tones[PROBE][order]
    power_w = 1e-3 * 10.0 ** (points.power_dbm()[order] / 10.0)
    scale = scale_from_incident(calibration.at(f), measured, reference, power_w)
    return interpolate(f, scale, calibration.frequency_hz)
