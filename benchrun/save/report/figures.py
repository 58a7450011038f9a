"""How numbers are printed: digits and unit from the end of a key, as everywhere in benchrun; headings for people."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from benchrun.derive.calibration import show_time
from benchrun.derive.results import Column
from benchrun.errors import CalibrationError

UNKNOWN = "\N{EN DASH}"
MINUS = "\N{MINUS SIGN}"


@dataclass(frozen=True, slots=True)
class Unit:
    """A unit as it is printed: its name, how many of the key's own unit it holds, decimals, and whether signed."""

    name: str
    size: float = 1.0
    decimals: int = 3
    signed: bool = False


#: By the end of a key. Frequencies are printed in MHz, to as many decimals as a column needs.
UNITS = {
    "dbm": Unit("dBm", 1.0, 2, True),
    "db": Unit("dB", 1.0, 2),
    "hz": Unit("MHz", 1e6, 6),
    "ratio": Unit("", 1.0, 4),
    "deg": Unit("deg", 1.0, 1),
    "degc": Unit("degC", 1.0, 2),
    "v": Unit("V", 1.0, 3),
    "a": Unit("A", 1.0, 4),
    "w": Unit("W", 1.0, 3),
    "s": Unit("s", 1.0, 3),
    "k": Unit("K", 1.0, 2),
    "ohm": Unit("ohm", 1.0, 3),
}
#: Names for people where the key alone would not do.
NAMES = {
    "output_reflection_magnitude_ratio": "output reflection",
    "output_reflection_phase_deg": "phase of the reflection",
    "output_reflection_bound_ratio": "S22 within",
    "t22_magnitude_ratio": "|T22|",
    "t22_phase_from_twice_b2_pump_deg": "phase of T22 from twice b2",
    "t22_bound_ratio": "T22 within",
    "optimum_load_extrapolated_magnitude_ratio": "optimum load, extrapolated",
    "optimum_load_extrapolated_phase_deg": "phase of the load",
    "optimum_load_extrapolated_power_dbm": "power into it, extrapolated",
}


@dataclass(frozen=True, slots=True)
class Heading:
    """What stands above a column: name and unit."""

    name: str
    unit: str = ""
    number: bool = True


def unit_of(key: str) -> Unit | None:
    """Return the unit that the end of a key names; None for a text, or a number without a known unit."""
    name, _, suffix = key.rpartition("_")
    return UNITS.get(suffix) if name else None


def heading(key: str, *, number: bool = True) -> Heading:
    """Return the heading of a column or the name of a quantity: 'drive_dbm' is drive, in dBm."""
    unit = unit_of(key) if number else None
    plain = key if unit is None else key.rpartition("_")[0]
    return Heading(NAMES.get(key, plain.replace("_", " ").replace(".", " ")), unit.name if unit else "", number)


def cells(key: str, column: Column) -> list[str]:
    """Return a column (N,) as texts: fixed decimals for its unit, an unknown number as a dash."""
    if column.dtype.kind != "f":
        return [str(value) for value in column]
    unit, values = unit_of(key), np.asarray(column, dtype=np.float64)
    if unit is None:
        return [_plain(value) for value in values.tolist()]
    shown = values / unit.size
    decimals = needed(shown, unit.decimals) if unit.size != 1.0 else unit.decimals
    return [fixed(value, decimals, unit.signed) for value in shown.tolist()]


def figure(key: str, value: float | str) -> str:
    """Return one value with its unit: ('drive_dbm', 14.0) is '+14.00 dBm'."""
    if isinstance(value, str):
        return value or UNKNOWN
    unit = unit_of(key)
    text = cells(key, np.array([value]))[0]
    return f"{text} {unit.name}" if unit and unit.name and text != UNKNOWN else text


def named(key: str, value: float | str) -> str:
    """Return a condition for people: 'drive +14.00 dBm'."""
    return f"{heading(key, number=not isinstance(value, str)).name} {figure(key, value)}"


def fixed(value: float, decimals: int, signed: bool = False) -> str:
    """Return a number with so many decimals; a dash where it is unknown, words where it is over range."""
    if math.isnan(value):
        return UNKNOWN
    if math.isinf(value):
        return "over range" if value > 0 else "under range"
    text = f"{value:+.{decimals}f}" if signed else f"{value:.{decimals}f}"
    if float(text) == 0.0:
        text = text.lstrip("+-")
    return text.replace("-", MINUS)


def needed(values: Column, most: int) -> int:
    """Return the fewest decimals, at most `most`, in which every number of a column (N,) is the same to a millionth."""
    numbers = values.astype(np.float64)
    numbers = numbers[np.isfinite(numbers)]
    return next((d for d in range(most) if np.all(np.abs(numbers - np.round(numbers, d)) < 1e-7)), most)


def time_text(utc: str) -> str:
    """Return an ISO 8601 time as people read it; the text itself where it is none, a dash where there is none."""
    if not utc:
        return UNKNOWN
    try:
        return show_time(utc)
    except CalibrationError:
        return utc


def duration_text(duration_s: float) -> str:
    """Return a duration as '1:34' (minutes and seconds) or '3:20:00' (hours too)."""
    minutes, seconds = divmod(round(duration_s), 60)
    hours, minutes = divmod(minutes, 60)
    return f"{hours}:{minutes:02}:{seconds:02} h" if hours else f"{minutes}:{seconds:02} min"


def _plain(value: float) -> str:
    return fixed(value, 0) if not math.isfinite(value) else f"{value:.6g}".replace("-", MINUS)
