"""What is wrong with a text that is not a quantity, and what was probably meant."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable, Mapping
from decimal import Decimal

from benchrun.contract.kinds import Kind
from benchrun.quantities.units import BARE, NUMBER, UNITS, example

_UNIT = r"(?P<unit> *[^\s0-9,.+-]\S*)?"
_COMMA = re.compile(rf"(?P<whole>[+-]?[0-9]+),(?P<decimals>[0-9]+){_UNIT}")
_GROUPED = re.compile(rf"(?P<number>[+-]?[0-9]{{1,3}}(?:[ ,'_\u00a0\u202f][0-9]{{3}})+)(?P<rest>\.[0-9]+)?{_UNIT}")
_BARE_POINT = re.compile(rf"(?P<sign>[+-]?)(?P<whole>[0-9]*)\.(?P<decimals>[0-9]*){_UNIT}")
_SEVERAL = re.compile(rf"{NUMBER} *[^\s0-9,.+-]\S* +\S.*")
_NOT_FINITE = re.compile(r"[+-]?(?:nan|inf|infinity)\b.*", re.IGNORECASE)
_MINUS = {"\u2212": "-", "\u2013": "-", "\u2010": "-", "\u2011": "-"}
#: Signs that people type for units which are written in plain letters here.
_SIGNS = {
    "\u00b5": "u",
    "\u03bc": "u",
    "\u03a9": "ohm",
    "\u2126": "ohm",
    "\u00b0C": "degC",
    "\u2103": "degC",
    "\u00b0": "deg",
}


def a(kind: Kind) -> str:
    """Return "a level", "an angle"."""
    return ("an " if kind[0] in "aio" else "a ") + kind.replace("-", " ")


def about_number(text: str, kind: Kind) -> str:
    """Return the message for a text whose number is not written as numbers are."""
    for explain in (_minus, _grouped, _comma, _bare_point, _not_finite, _several, _not_bare):
        if message := explain(text, kind):
            return message
    return f"'{text}' is not a quantity; {a(kind)} is written like {example(kind)}"


def _minus(text: str, _kind: Kind) -> str:
    plain = "".join(_MINUS.get(letter, letter) for letter in text)
    return "" if plain == text else f"'{text}' is not a quantity: the minus sign is a hyphen. Did you mean {plain}?"


def _grouped(text: str, _kind: Kind) -> str:
    found = _GROUPED.fullmatch(text)
    if not found:
        return ""
    digits, unit = re.sub(r"[^0-9+-]", "", found["number"]), _spaced(found["unit"])
    if found["number"].count(",") == 1 and not found["rest"]:
        either = f"{found['number'].replace(',', '.')}{unit} or {digits}{unit}"
        return f"'{text}' could be {either}: the decimal mark is a point, and there are no thousands marks. Write which"
    meant = f"{digits}{found['rest'] or ''}{unit}"
    return f"'{text}' is not a quantity: numbers are written without thousands marks. Did you mean {meant}?"


def _comma(text: str, _kind: Kind) -> str:
    found = _COMMA.fullmatch(text)
    if not found:
        return ""
    meant = f"{found['whole']}.{found['decimals']}{_spaced(found['unit'])}"
    return f"'{text}' is not a quantity: the decimal mark is a point. Did you mean {meant}?"


def _bare_point(text: str, _kind: Kind) -> str:
    found = _BARE_POINT.fullmatch(text)
    if not found or bool(found["whole"]) == bool(found["decimals"]):
        return ""
    decimals = f".{found['decimals']}" if found["decimals"] else ""
    meant = f"{found['sign']}{found['whole'] or '0'}{decimals}{_spaced(found['unit'])}"
    return f"'{text}' is not a quantity: digits stand on both sides of a decimal point. Did you mean {meant}?"


def _not_finite(text: str, _kind: Kind) -> str:
    return f"'{text}' is not a finite number" if _NOT_FINITE.fullmatch(text) else ""


def _several(text: str, kind: Kind) -> str:
    several = _SEVERAL.fullmatch(text)
    return f"'{text}' is not a quantity: one number and one unit are expected, like {example(kind)}" if several else ""


def _not_bare(text: str, kind: Kind) -> str:
    with_unit = kind in BARE and re.fullmatch(rf"{NUMBER} *\S+", text)
    return f"'{text}': {a(kind)} is written without a unit, like {example(kind)}" if with_unit else ""


def _spaced(unit: str | None) -> str:
    return f" {unit.strip()}" if unit else ""


def about_unit(text: str, number: str, unit: str, kind: Kind) -> str:
    """Return the message for a unit that this kind does not have."""
    units = UNITS[kind]
    plain = _in_letters(unit)
    if plain != unit and plain in units:
        return f"'{text}': the unit is written {plain}. Did you mean {number} {plain}?"
    if unit not in _every_unit():
        same = [known for known in units if known.lower() == plain.lower()]
        if len(same) == 1:
            return f"'{text}': the unit is written {same[0]}. Did you mean {number} {same[0]}?"
        if same:
            return f"'{text}': the unit {unit} could be {' or '.join(same)}. Write which"
    others = [other for other, table in UNITS.items() if unit in table]
    if others:
        return f"'{text}' is {a(others[0])}, where {a(kind)} is expected, like {example(kind)}"
    near = difflib.get_close_matches(plain, units, n=1)
    hint = f"Did you mean {number} {near[0]}?" if near else f"{a(kind).capitalize()} is written in {_listed(units)}"
    return f"'{text}': there is no unit {unit}. {hint}"


def about_unknown_unit(text: str, number: str, unit: str) -> str:
    """Return the message for a unit that no kind has."""
    every, plain = _every_unit(), _in_letters(unit)
    near = [name for name in every if name.lower() == plain.lower()] or difflib.get_close_matches(plain, every, n=1)
    if len(near) > 1:
        return f"'{text}': there is no unit {unit}. It could be {' or '.join(near)}. Write which"
    return f"'{text}': there is no unit {unit}." + (f" Did you mean {number} {near[0]}?" if near else "")


def _in_letters(unit: str) -> str:
    for sign, letters in _SIGNS.items():
        unit = unit.replace(sign, letters)
    return unit


def _every_unit() -> list[str]:
    return [name for units in UNITS.values() for name in units]


def _listed(units: Mapping[str, Decimal]) -> str:
    names = [name for name in units if "Hz^" not in name][:8]
    return _joined(names)


def _joined(names: Iterable[str]) -> str:
    *first, last = names
    return f"{', '.join(first)} or {last}" if first else last
