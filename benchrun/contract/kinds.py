"""Kinds of quantity: what a number means, and the SI unit (or dB unit) in which it is carried as a float."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Kind = Literal[
    "frequency",  # Hz
    "level",  # dBm
    "ratio",  # dB
    "voltage",  # V
    "current",  # A
    "power",  # W
    "time",  # s
    "temperature",  # degree Celsius
    "temperature-difference",  # K
    "angle",  # rad
    "resistance",  # ohm
    "capacitance",  # F, and F/Hz, F/Hz^2, F/Hz^3 for the higher polynomial coefficients
    "inductance",  # H, and H/Hz, H/Hz^2, H/Hz^3
    "offset-loss",  # ohm/s
    "length",  # m
    "count",  # 1, a whole number
    "number",  # 1, dimensionless
    "switch",  # on or off, carried as 1.0 or 0.0
    "text",  # only in dialects: one SCPI word, never free text
]

#: Suffix that names the unit in column names, condition keys and bare numbers.
UNIT_SUFFIX: dict[str, str] = {
    "frequency": "hz",
    "level": "dbm",
    "ratio": "db",
    "voltage": "v",
    "current": "a",
    "power": "w",
    "time": "s",
    "temperature": "degc",
    "temperature-difference": "k",
    "angle": "rad",
    "resistance": "ohm",
    "capacitance": "f",
    "inductance": "h",
    "offset-loss": "ohm_per_s",
    "length": "m",
    "count": "count",
    "number": "ratio",
    "switch": "on",
}


@dataclass(frozen=True, slots=True)
class Settable:
    """A quantity that an instrument can set: its name, kind and the range the instrument allows (inclusive)."""

    name: str
    kind: Kind
    help: str = ""
    low: float | None = None
    high: float | None = None


@dataclass(frozen=True, slots=True)
class Readable:
    """A scalar quantity that an instrument can read beside the waves."""

    name: str
    kind: Kind
    help: str = ""
