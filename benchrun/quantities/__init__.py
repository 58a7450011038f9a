"""Quantities as people write them, "2.9 GHz", "-10 dBm", to SI floats and back, read strictly; dB arithmetic.

A general reader of quantities is dangerous here: one that takes "3,5 GHz" for 35 GHz, or "10 min" for a length, sets a
level that destroys a device. So: a closed table of units, one form of number, exactly one unit.

>>> parse("2.9 GHz", "frequency")
2900000000.0
>>> show(2.9e9, "frequency")
'2.9 GHz'
"""

from benchrun.quantities.decibels import (
    db_to_ratio,
    db_to_voltage_ratio,
    dbm_to_volts,
    dbm_to_watts,
    ratio_to_db,
    volts_to_dbm,
    watts_to_dbm,
)
from benchrun.quantities.reading import kind_of, parse, parse_coefficient
from benchrun.quantities.showing import column, show
from benchrun.quantities.units import UNITS, example, pattern

__all__ = [
    "UNITS",
    "column",
    "db_to_ratio",
    "db_to_voltage_ratio",
    "dbm_to_volts",
    "dbm_to_watts",
    "example",
    "kind_of",
    "parse",
    "parse_coefficient",
    "pattern",
    "ratio_to_db",
    "show",
    "volts_to_dbm",
    "watts_to_dbm",
]
