"""The lines at the head of a Touchstone file: what stands in it, under which conditions, how far to trust it."""

from __future__ import annotations

import math
from collections.abc import Mapping

import numpy as np

from benchrun.derive.calibration import Calibration, show_time
from benchrun.derive.corrected import PUMP, Corrected
from benchrun.derive.hot_match import PHASE_REFERENCE
from benchrun.derive.points import Points
from benchrun.derive.results import Provenance


def reflection_comment(bound: float, *, one_sideband: bool = False) -> str:
    """Return the line that says what an output reflection is, with the largest bound over the file."""
    bias = ", bias of the one sideband that was read included" if one_sideband else ""
    return (
        "S11 column: output reflection of the device with this bench at its port 1; "
        f"it lies within {bound:.4f} of S22 (first-order bound from the bench file{bias})"
    )


def conversion_comment(bound: float, *, coherent: bool) -> str:
    """Return the line that says what a T22 is: complex with its phase reference, or its magnitude."""
    if coherent:
        what = f"S11 column: T22 with this bench at port 1, complex; phase reference: {PHASE_REFERENCE}"
    else:
        what = "S11 column: |T22| with this bench at port 1, magnitude only: the tones were not captured coherently"
    return f"{what}; within {bound:.4f} of the device's own (first-order bound from the bench file)"


def match_note(bound: float, *, one_sideband: bool, coherent: bool) -> str:
    """Return the sentence that stands beside a hot match's numbers, with the largest bound of all of them."""
    what = f"output reflection is the device's with this bench at port 1: within {bound:.4f} of S22, to first order"
    if one_sideband:
        return f"{what}, the bias of the one sideband that was read included"
    return what if coherent else f"{what}; T22 is a magnitude, as the tones were not captured coherently"


def cold_comment(plane: str) -> str:
    """Return the line that says what a reflection without a pump is."""
    return f"S11 column: reflection of the device at the {plane} plane, with this bench at its other port"


def head(provenance: Provenance) -> tuple[str, ...]:
    """Return the first lines: who wrote this, of which device, real or simulated."""
    lines = [f"benchrun {provenance.version}: {provenance.title}".strip(": ")]
    if provenance.simulated:
        lines.insert(0, f"SIMULATED{provenance.origin.removeprefix('simulated')}: nothing real was measured")
    if provenance.part or provenance.serial:
        lines.append(f"Device: {provenance.part}, serial {provenance.serial}".replace(": ,", ":"))
    return tuple(lines)


def tail(provenance: Provenance, calibration: Calibration) -> tuple[str, ...]:
    """Return the last lines: calibration, uncertainty as far as it is known, hashes."""
    there = calibration.circumstances
    residuals = ", ".join(f"{name} {rms:.4f}" for name, rms in calibration.residuals.items())
    return (
        f"Calibration: {calibration.name}, {calibration.plane} plane, made {show_time(there.made_utc)}, "
        f"valid until {show_time(there.valid_until_utc)}, kit '{there.kit or 'unnamed'}', "
        f"parts {there.part_hash[:16]}, readings {there.readings_hash or 'unhashed'}",
        f"Calibration residuals (rms of corrected less defined reflection): {residuals}",
        f"Uncertainty: not evaluated in full; {_spread(calibration)}",
        f"Readings: {provenance.readings_hash or 'unhashed'}; schedule: {provenance.schedule_hash or 'unhashed'}",
    )


def conditions_comment(conditions: Mapping[str, float | str], points: Points) -> str:
    """Return one line of what was swept, what else was set and did not change, and the time of the readings."""
    fixed = {
        k: v[0].item()
        for k, v in points.conditions.items()
        if k not in conditions and np.unique(v).size == 1 and not k.endswith("frequency_hz")
    }
    told = [f"{k} = {_value(v)}" for k, v in (dict(conditions) | fixed).items()]
    means = [f"mean {k} = {np.nanmean(v):.6g}" for k, v in points.scalars.items() if np.any(np.isfinite(v))]
    return f"Conditions: {'; '.join([*told, *means, f'read from {show_time(points.started_utc)}'])}"


def tones_comment(corrected: Corrected) -> str:
    """Return the line that says which frequency stands in the first column and where the pump was."""
    offsets_hz = np.unique(corrected.points.offsets_hz[corrected.points.tones.index(PUMP)])
    where = ", ".join(f"{offset / 1e6:+.6g} MHz" for offset in offsets_hz)
    return f"Frequency: the probe's; pump at {where} from it. Drive is power at the device-input plane"


def _value(value: float | str) -> str:
    return value if isinstance(value, str) else f"{value:.6g}"


def _spread(calibration: Calibration) -> str:
    """Return what the calibration's own residuals say of a standard's error, where there are residuals at all."""
    count = len(calibration.residuals)
    if count <= 3:
        return "three standards leave no residual that could tell"
    spread = math.sqrt(sum(rms**2 for rms in calibration.residuals.values()) / (count - 3))
    return f"the residuals say that one standard is off by {spread:.4f} (one standard deviation)"
