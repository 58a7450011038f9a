"""Quantities as people write them: "2.9 GHz", "-10 dBm" to SI floats and back, read strictly; and dB arithmetic.

A general reader of quantities is dangerous here: one that takes "3,5 GHz" for 35 GHz, or "10 min" for a length, sets a level that
destroys a device. So: a closed table of units, one form of number, exactly one unit.

>>> parse("2.9 GHz", "frequency")
2900000000.0
>>> show(2.9e9, "frequency")
'2.9 GHz'
"""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Mapping
from decimal import Decimal
from types import MappingProxyType

from benchrun.contract.kinds import UNIT_SUFFIX, Kind
from benchrun.errors import QuantityError

_PREFIXES = {"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9, "T": 12}


def _prefixed(unit: str, prefixes: str) -> dict[str, Decimal]:
    return {(p if p != "-" else "") + unit: Decimal(10) ** _PREFIXES[p if p != "-" else ""] for p in prefixes}


def _per_frequency(unit: str, prefixes: str) -> dict[str, Decimal]:
    """Return the units of a polynomial's coefficients: F, F/Hz, fF/GHz^2 and so on."""
    units: dict[str, Decimal] = {}
    for name, factor in _prefixed(unit, prefixes).items():
        units[name] = factor
        for order in (1, 2, 3):
            power = "" if order == 1 else f"^{order}"
            units[f"{name}/Hz{power}"] = factor
            units[f"{name}/GHz{power}"] = factor * Decimal(10) ** (-9 * order)
    return units


_DEGREE = Decimal(repr(math.pi / 180.0))

#: The closed table: for each kind, each unit and what one of it is in the unit the kind is carried in; the SI unit comes first.
UNITS: Mapping[str, Mapping[str, Decimal]] = MappingProxyType(
    {
        "frequency": _prefixed("Hz", "-kMGT"),
        "level": {"dBm": Decimal(1)},
        "ratio": {"dB": Decimal(1)},
        "voltage": _prefixed("V", "-umk"),
        "current": _prefixed("A", "-num"),
        "power": _prefixed("W", "-numk"),
        "time": {**_prefixed("s", "-fpnum"), "min": Decimal(60), "h": Decimal(3600), "day": Decimal(86400), "days": Decimal(86400)},
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
_BARE = ("number", "count", "switch")
_NUMBER = r"[+-]?(?:\d+(?:\.\d+)?|\.\d+)(?:[eE][+-]?\d{1,4})?"
_QUANTITY = re.compile(rf"({_NUMBER})\s*([A-Za-z%\u00b5\u03bc\u03a9\u00b0][^\s,]*)?")
_COMMA = re.compile(r"^([+-]?\d+),(\d+)(.*)$")
_EXAMPLE = {
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


def parse(text: str | float, kind: Kind) -> float:
    """Return the quantity that `text` writes, as a float in the unit of its kind (see contract.kinds).

    A bare int or float is taken only for the kinds "number" and "count". Raises QuantityError with what is wrong, what was
    expected and, where it can be guessed, what was meant.
    """
    if kind == "switch":
        return _switch(text)
    if isinstance(text, bool) or not isinstance(text, str | int | float):
        raise QuantityError(f"{text!r} is not {_a(kind)}; write it like {_EXAMPLE[kind]}")
    if kind in _BARE:
        return _bare(text, kind)
    if not isinstance(text, str):
        raise QuantityError(f"{text!r} has no unit: {_a(kind)} is written with one, like {_EXAMPLE[kind]}")
    return _with_unit(text.strip(), kind)


def example(kind: Kind) -> str:
    """Return how a quantity of this kind is written, as an example."""
    return _EXAMPLE[kind]


def _a(kind: Kind) -> str:
    return ("an " if kind[0] in "aio" else "a ") + kind.replace("-", " ")


def _switch(text: object) -> float:
    if isinstance(text, bool):
        return float(text)
    if text in ("on", "off"):
        return float(text == "on")
    raise QuantityError(f"{text!r} is neither on nor off")


def _bare(text: str | float, kind: Kind) -> float:
    if isinstance(text, str):
        match = re.fullmatch(_NUMBER, text.strip())
        if not match:
            _explain_number(text.strip(), kind)
            raise QuantityError(f"{text!r} is not {_a(kind)}; write it like {_EXAMPLE[kind]}, without a unit")
        value = float(text)
    else:
        value = float(text)
    if not math.isfinite(value):
        raise QuantityError(f"{text!r} is not a finite number")
    if kind == "count" and (value != int(value) or value < 0):
        raise QuantityError(f"{text!r} is not a whole number")
    return value


def _with_unit(text: str, kind: Kind) -> float:
    match = _QUANTITY.fullmatch(text)
    if not match:
        _explain_number(text, kind)
        raise QuantityError(f"{text!r} is not a quantity; {_a(kind)} is written like {_EXAMPLE[kind]}")
    number, unit = match.groups()
    if not unit:
        raise QuantityError(f"{text!r} has no unit: {_a(kind)} is written with one, like {_EXAMPLE[kind]}")
    factor = UNITS[kind].get(unit)
    if factor is None:
        raise QuantityError(_wrong_unit(text, number, unit, kind))
    return _finite(text, number, factor)


def _finite(text: str, number: str, factor: Decimal) -> float:
    # Decimal arithmetic: 2.9 GHz is exactly the float nearest to 2.9e9, so that a quantity shown is the quantity read.
    value = float(Decimal(number) * factor)
    if not math.isfinite(value):
        raise QuantityError(f"{text!r} is beyond any number this program can carry; check the exponent")
    return value


def _explain_number(text: str, kind: Kind) -> None:
    comma = _COMMA.match(text)
    if not comma:
        return
    whole, decimals, rest = comma.groups()
    if "," in rest or len(decimals) == 3:
        raise QuantityError(f"'{text}' is not a quantity: numbers are written without thousands marks, and the decimal mark is a point")
    raise QuantityError(f"'{text}' is not a quantity: the decimal mark is a point. Did you mean {whole}.{decimals}{rest}?")


def _wrong_unit(text: str, number: str, unit: str, kind: Kind) -> str:
    units = UNITS[kind]
    same_letters = [known for known in units if known.lower() == unit.lower()]
    if len(same_letters) == 1:
        return f"'{text}': the unit is written {same_letters[0]}. Did you mean {number} {same_letters[0]}?"
    if same_letters:
        return f"'{text}': the unit {unit} could be {' or '.join(same_letters)}: write which"
    others = [name for name, table in UNITS.items() if unit in table]
    if others:
        return f"'{text}' is {_a(others[0])}, where {_a(kind)} was expected, like {_EXAMPLE[kind]}"  # type: ignore[arg-type]
    near = difflib.get_close_matches(unit, units, n=1)
    hint = f"Did you mean {number} {near[0]}?" if near else f"{_a(kind).capitalize()} is written in {_listed(units)}."
    return f"'{text}': there is no unit {unit}. {hint}"


def _listed(units: Mapping[str, Decimal]) -> str:
    names = list(units)[:8]
    return names[0] if len(names) == 1 else f"{', '.join(names[:-1])} or {names[-1]}"


def show(value: float, kind: Kind, digits: int | None = None) -> str:
    """Return `value` as people write it; parse() reads it back to the same float where `digits` is None.

    With `digits`, rounded to that many significant digits (levels and ratios: to that many decimals).
    """
    if kind == "switch":
        return "on" if value else "off"
    if kind in _BARE or kind == "text":
        return _plain(Decimal(repr(float(value))) if digits is None else Decimal(f"{value:.{digits}g}"))
    if kind in ("level", "ratio"):
        unit = next(iter(UNITS[kind]))
        return f"{_plain(Decimal(repr(float(value)))) if digits is None else f'{value:.{digits}f}'} {unit}"
    exact = Decimal(repr(float(value))) if digits is None else Decimal(f"{value:.{digits}g}")
    unit = _fitting_unit(exact, kind)
    shown = f"{_plain(exact / UNITS[kind][unit])} {unit}"
    return shown if digits is not None or parse(shown, kind) == value else f"{_plain(exact)} {next(iter(UNITS[kind]))}"


def _plain(number: Decimal) -> str:
    number = number.normalize()
    return f"{number:f}" if -7 < number.adjusted() < 16 or number == 0 else f"{number:e}".replace("E", "e")


def _fitting_unit(value: Decimal, kind: Kind) -> str:
    """Return the prefixed unit that leaves one to three digits before the point."""
    first = next(iter(UNITS[kind]))
    powers_of_ten = [
        (factor, unit) for unit, factor in UNITS[kind].items() if unit.endswith(first) and "/Hz" not in unit and "GHz/" not in unit
    ]
    fitting = [(factor, unit) for factor, unit in powers_of_ten if abs(value) >= factor]
    return max(fitting)[1] if fitting else (first if value == 0 else min(powers_of_ten)[1])


def column(name: str, kind: Kind) -> str:
    """Return the key that carries this quantity's unit: ("pump.level", "level") -> "pump.level_dbm"."""
    suffix = UNIT_SUFFIX.get(kind, "")
    return f"{name}_{suffix}" if suffix else name


def dbm_to_watts(level_dbm: float) -> float:
    """Return the power in watts of a level in dBm (0 dBm is 1 mW)."""
    return float(1e-3 * 10.0 ** (level_dbm / 10.0))


def watts_to_dbm(power_w: float) -> float:
    """Return the level in dBm of a power in watts; minus infinity for 0. Raises ValueError below 0."""
    if power_w < 0.0:
        raise ValueError(f"{power_w} W is no power")
    return 10.0 * math.log10(power_w / 1e-3) if power_w > 0.0 else -math.inf


def db_to_ratio(ratio_db: float) -> float:
    """Return the power ratio of a ratio in dB."""
    return float(10.0 ** (ratio_db / 10.0))


def ratio_to_db(ratio: float) -> float:
    """Return a power ratio in dB; minus infinity for 0. Raises ValueError below 0."""
    if ratio < 0.0:
        raise ValueError(f"{ratio} is no power ratio")
    return 10.0 * math.log10(ratio) if ratio > 0.0 else -math.inf


def db_to_voltage_ratio(ratio_db: float) -> float:
    """Return the wave (voltage) ratio of a ratio in dB."""
    return float(10.0 ** (ratio_db / 20.0))


def parse_coefficient(text: str, kind: Kind, order: int) -> float:
    """Return the coefficient of Hz^order in a polynomial (capacitance in F, inductance in H), in SI.

    Raises QuantityError as parse() does, and where the unit is that of another order.
    """
    value = parse(text, kind)
    found = _order(text.strip())
    if found != order:
        unit = next(name for name in UNITS[kind] if _order(name) == order and name.startswith(_MILLI[kind]))
        raise QuantityError(f"'{text}': coefficient {order} (counted from 0) is written in {unit}, or another unit per Hz^{order}")
    return value


_MILLI = {"capacitance": "fF", "inductance": "pH"}


def _order(unit: str) -> int:
    _, per, below = unit.partition("/")
    return (int(below.partition("^")[2] or 1)) if per else 0


def kind_of(text: str | float) -> Kind:
    """Return the kind whose unit `text` carries; "number" where it has none. Raises QuantityError where no kind has that unit."""
    if not isinstance(text, str):
        return "number"
    match = _QUANTITY.fullmatch(text.strip())
    if match is None:
        _explain_number(text.strip(), "number")
        raise QuantityError(f"{text!r} is not a quantity; one number and one unit are expected, like {_EXAMPLE['frequency']}")
    unit = match.group(2)
    for kind, units in UNITS.items():
        if unit in units:
            return kind  # type: ignore[return-value]
    if unit:
        raise QuantityError(_unknown_unit(text.strip(), match.group(1), unit))
    return "number"


def _unknown_unit(text: str, number: str, unit: str) -> str:
    every = [name for units in UNITS.values() for name in units]
    same = [name for name in every if name.lower() == unit.lower()] or difflib.get_close_matches(unit, every, n=1)
    hint = f" Did you mean {number} {same[0]}?" if len(same) == 1 else (f" It could be {' or '.join(same)}." if same else "")
    return f"'{text}': there is no unit {unit}.{hint}"
