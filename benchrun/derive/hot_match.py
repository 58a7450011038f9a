"""Hot output match from corrected waves: reflection, conversion, power, gain, optimum load, each with its bound."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.corrected import IMAGE, PROBE, PUMP, Corrected
from benchrun.derive.facts import BenchFacts
from benchrun.derive.hot import distance_bound, one_sideband, referred_to_pump, told_apart, two_sidebands
from benchrun.derive.optimum_load import has_optimum, optimum_load
from benchrun.derive.points import condition_keys
from benchrun.derive.results import Column, Table
from benchrun.errors import DataSetError

PHASE_REFERENCE = "twice the phase of b2 at the pump (the pump's wave out of the device, at the output plane)"


@dataclass(frozen=True, slots=True)
class HotMatch:
    """What the offset probe says at N points, each (N,); None where the tones that were read cannot tell.

    `reflection` is the device's output reflection with this bench at port 1, and `reflection_bound` how far it may
    lie from S22; `conversion` is T22, complex and referred to the pump (PHASE_REFERENCE) where `coherent`, else its
    magnitude. `output_w` is |b2|^2 and `delivered_w` |b2|^2 - |a2|^2, both at the pump; `load` the optimum load, NaN
    where there is none.
    """

    reflection: ComplexArray
    reflection_bound: FloatArray
    conversion: ComplexArray | None
    conversion_bound: FloatArray | None
    coherent: bool
    output_w: FloatArray
    delivered_w: FloatArray
    load: ComplexArray | None
    load_w: FloatArray | None


def hot_match(corrected: Corrected, facts: BenchFacts) -> HotMatch:
    """Return the hot output match at every point (METHODS section 1).

    With the image read, both sidebands are solved, which takes the bench's own reflection of it out; without, the
    probe's tone alone is taken and the bound grows by that bias. Raises DataSetError where probe or pump were not
    read, CalibrationError where there is no absolute scale.
    """
    points, b, a = corrected.points, corrected.b, corrected.a
    corrected.calibration.require_scale()
    for wave in (facts.reflected, facts.incident):
        points.wave(PROBE, wave), points.wave(PUMP, wave)
    distance = distance_bound(facts.return_gain_db, facts.input_match_db)
    output_w, into_w = np.abs(b[PUMP]) ** 2, np.abs(a[PUMP]) ** 2
    if IMAGE not in points.tones:
        s, bias = one_sideband(a[PROBE], b[PROBE], facts.conversion, facts.output_match)
        return HotMatch(
            s, distance + bias + corrected.leak[PROBE], None, None, False, output_w, output_w - into_w, None, None
        )
    _require_told_apart(corrected)
    s, t = two_sidebands(a[PROBE], b[PROBE], a[IMAGE], b[IMAGE])
    bounds = tuple(distance + left for left in _left_by_leaks(corrected, t))
    if not points.coherent:
        t = np.abs(t).astype(np.complex128)
        return HotMatch(s, bounds[0], t, bounds[1], False, output_w, output_w - into_w, None, None)
    load, load_w = _loads(b[PUMP] - s * a[PUMP] - t * np.conj(a[PUMP]), s, t)
    t = referred_to_pump(t, b[PUMP])
    return HotMatch(s, bounds[0], t, bounds[1], True, output_w, output_w - into_w, load, load_w)


def hot_flags(corrected: Corrected, match: HotMatch) -> tuple[tuple[str, ...], ...]:
    """Return the words of each point (N), with "no-optimum-load" where delivered power has no maximum."""
    if match.load is None:
        return corrected.flags
    without = np.isnan(match.load)
    return tuple(
        (*words, "no-optimum-load") if none else words for words, none in zip(corrected.flags, without, strict=True)
    )


def hot_table(corrected: Corrected, match: HotMatch) -> Table:
    """Return one row for each point, with gain and compression where the drive is known.

    Gain is output power less drive, both in dBm; compression is the gain at the lowest drive of the same frequency and
    other conditions, less the gain.
    """
    points = corrected.points
    columns: dict[str, Column] = {k: points.conditions[k] for k in condition_keys(points)}
    columns["frequency_hz"] = points.frequency_hz
    columns["pump_frequency_hz"] = points.tone_hz(PUMP)
    columns["output_power_dbm"] = _dbm(match.output_w)
    columns["delivered_power_dbm"] = _dbm(match.delivered_w)
    if "drive_dbm" in points.conditions:
        gain_db = columns["output_power_dbm"].astype(np.float64) - points.number("drive_dbm")
        columns["gain_db"] = gain_db
        columns["compression_db"] = _compression_db(corrected, gain_db)
    columns |= polar("output_reflection", match.reflection)
    columns["output_reflection_bound_ratio"] = match.reflection_bound
    columns |= _conversion_columns(match)
    if match.load is not None and match.load_w is not None:
        columns |= polar("optimum_load_extrapolated", match.load)
        columns["optimum_load_extrapolated_power_dbm"] = _dbm(match.load_w)
    columns |= dict(points.scalars)
    columns["flags"] = flag_column(hot_flags(corrected, match))
    return Table("hot-match", columns)


def flag_column(flags: tuple[tuple[str, ...], ...]) -> Column:
    """Return one text for each point: its words with spaces between."""
    return np.array([" ".join(words) for words in flags], dtype=np.str_)


def _conversion_columns(match: HotMatch) -> dict[str, Column]:
    if match.conversion is None or match.conversion_bound is None:
        return {}
    columns: dict[str, Column] = {"t22_magnitude_ratio": np.abs(match.conversion)}
    if match.coherent:
        columns["t22_phase_from_twice_b2_pump_deg"] = np.angle(match.conversion, deg=True)
    columns["t22_bound_ratio"] = match.conversion_bound
    return columns


def _require_told_apart(corrected: Corrected) -> None:
    unclear = ~told_apart(corrected.a[PROBE], corrected.a[IMAGE])
    if np.any(unclear):
        raise DataSetError(
            f"{corrected.points.place(int(np.argmax(unclear)))}: the image is as strong as the probe, so the two "
            "sidebands cannot be told apart. Was the probe on, and is the device's output loaded by the bench?"
        )


def _left_by_leaks(corrected: Corrected, t: ComplexArray) -> tuple[FloatArray, FloatArray]:
    """Return the first-order bounds (N,) on S22 and T22 of what each sideband may have left in the other.

    With rho = |a(-)/a(+)|:  dS <= (e(+) + rho e(-)) / (1 - rho^2) and dT with e(+) and e(-) changed over, from the two
    equations of hot.two_sidebands; e are the errors of b and a together, |S22| <= 1.
    """
    rho = np.abs(corrected.a[IMAGE] / corrected.a[PROBE])
    upper, lower = corrected.leak[PROBE], corrected.leak[IMAGE]
    e_upper, e_lower = upper + np.abs(t) * lower, lower + np.abs(t) * upper
    room = np.abs(1.0 - rho**2)
    return np.asarray((e_upper + rho * e_lower) / room), np.asarray((e_lower + rho * e_upper) / room)


def _loads(b: ComplexArray, s: ComplexArray, t: ComplexArray) -> tuple[ComplexArray, FloatArray]:
    """Return optimum load and its power (N,), NaN where there is none."""
    load, power_w = np.full(b.shape, np.nan, dtype=np.complex128), np.full(b.shape, np.nan)
    there = has_optimum(s, t)
    if np.any(there):
        load[there], power_w[there] = optimum_load(b[there], s[there], t[there])
    return load, power_w


def _compression_db(corrected: Corrected, gain_db: FloatArray) -> FloatArray:
    points = corrected.points
    drive = points.number("drive_dbm")
    keys = [k for k in points.sweep_keys() if k != "drive_dbm"]
    places = list(zip(points.frequency_hz.tolist(), *(points.conditions[k].tolist() for k in keys), strict=True))
    lowest: dict[tuple[object, ...], int] = {}
    for i, place in enumerate(places):
        if place not in lowest or drive[i] < drive[lowest[place]]:
            lowest[place] = i
    return np.array([gain_db[lowest[place]] - gain_db[i] for i, place in enumerate(places)])


def polar(name: str, values: ComplexArray) -> dict[str, Column]:
    """Return the columns of magnitude and phase of complex `values` (N,)."""
    return {f"{name}_magnitude_ratio": np.abs(values), f"{name}_phase_deg": np.angle(values, deg=True)}


def _dbm(power_w: FloatArray) -> FloatArray:
    """Return power in dBm, NaN where it is not above zero."""
    positive = np.where(power_w > 0.0, power_w, np.nan)
    return np.asarray(10.0 * np.log10(positive / 1e-3))
