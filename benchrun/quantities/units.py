"""The closed table of units: for each kind, how units are written and what one of each is."""

from __future__ import annotations

import re
from collections.abc import Mapping
from decimal import Decimal
from types import MappingProxyType

from benchrun.contract.kinds import Kind

_PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "-": 0, "k": 3, "M": 6, "G": 9, "T": 12}
#: How a number is written: decimal point, optional exponent, no thousands marks.
NUMBER = r"[+-]?[0-9]+(?:\.[0-9]+)?(?:[eE][+-]?[0-9]+)?"
#: Kinds that are written without a unit.
BARE: tuple[Kind, ...] = ("number", "count", "switch")


#: pi / 180, to more places than a float has (OEIS A019685).
_DEGREE = Decimal("0.01745329251994329576923690768488612713")


def _prefixed(unit: str, prefixes: str) -> dict[str, Decimal]:
    """Return the unit with each SI prefix; "-" stands for none."""
    return {p.strip("-") + unit: Decimal(10) ** _PREFIXES[p] for p in prefixes}


def _per_frequency(unit: str, prefixes: str) -> dict[str, Decimal]:
    """Return the units of a polynomial's coefficients: F, F/Hz, fF/GHz^2 and so on up to the third power."""
    units: dict[str, Decimal] = {}
    for name, factor in _prefixed(unit, prefixes).items():
        units[name] = factor
        for order in (1, 2, 3):
            power = "" if order == 1 else f"^{order}"
            units[f"{name}/Hz{power}"] = factor
            units[f"{name}/GHz{power}"] = factor * Decimal(10) ** (-9 * order)
    return units


#: For each kind, each unit and what one of it is in the unit that the kind is carried in; that unit comes first.
UNITS: Mapping[Kind, Mapping[str, Decimal]] = MappingProxyType(
    {
        "frequency": _prefixed("Hz", "-kMGT"),
        "level": {"dBm": Decimal(1)},
        "ratio": {"dB": Decimal(1)},
        "voltage": _prefixed("V", "-umk"),
        "current": _prefixed("A", "-num"),
        "power": _prefixed("W", "-numk"),
        "time": {
            **_prefixed("s", "-fpnum"),
            "min": Decimal(60),
            "h": Decimal(3600),
            "day": Decimal(86400),
            "days": Decimal(86400),
        },
        "temperature": {"degC": Decimal(1)},
        "temperature-difference": _prefixed("K", "-m"),
        "angle": {"rad": Decimal(1), "deg": _DEGREE},
        "resistance": _prefixed("ohm", "-mkM"),
        "capacitance": _per_frequency("F", "-fpnu"),
        "inductance": _per_frequency("H", "-fpnum"),
        "offset-loss": _prefixed("ohm/s", "-MG"),
        "length": _prefixed("m", "-um"),
    }
)
_EXAMPLES: Mapping[Kind, str] = {
    "frequency": "2.9 GHz",
    "level": "-10 dBm",
    "ratio": "20 dB",
    "voltage": "28 V",
    "current": "350 mA",
    "power": "20 W",
    "time": "20 ms",
    "temperature": "25 degC",
    "temperature-difference": "1.5 K",
    "angle": "-30 deg",
    "resistance": "50 ohm",
    "capacitance": "50 fF",
    "inductance": "5 pH",
    "offset-loss": "2 Gohm/s",
    "length": "20 m",
    "number": "0.6",
    "count": "81",
    "switch": "on",
}


def example(kind: Kind) -> str:
    """Return how a quantity of this kind is written, as an example."""
    return _EXAMPLES[kind]


def pattern(kind: Kind) -> str:
    """Return a regular expression (as a JSON Schema has it) for the texts that parse() takes for a kind with a unit."""
    return f"^ *{NUMBER} *({'|'.join(map(re.escape, UNITS[kind]))}) *$"


def order(unit: str) -> int:
    """Return the power of frequency that a coefficient's unit is per: 0 for fF, 2 for fF/GHz^2."""
    _, per, below = unit.partition("/")
    return int(below.partition("^")[2] or 1) if per else 0
