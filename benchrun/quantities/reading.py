"""Read quantities strictly, and say what is wrong with one that is not."""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from decimal import Context, Decimal, localcontext

from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.quantities.complaints import a, about_number, about_unit, about_unknown_unit
from benchrun.quantities.units import BARE, NUMBER, UNITS, example, order

_NUMBER = re.compile(NUMBER)
_QUANTITY = re.compile(rf"({NUMBER}) *([^\s0-9,.+-]\S*)?")
#: Wide enough for any number that a float can hold, times any unit; what is beyond comes out infinite.
_WIDE = Context(prec=60, Emax=999_999_999, Emin=-999_999_999, traps=[])
_MOST_EXPONENT_DIGITS = 5
_MOST_COUNT = 2**53


def parse(text: str | float, kind: Kind) -> float:
    """Return the quantity that `text` writes, as a float in the unit of its kind (see contract.kinds).

    A bare int or float is taken only for the kinds "number" and "count". Raises QuantityError with what is wrong, what
    was expected and, where it can be guessed, what was meant.
    """
    if kind == "switch":
        return _switch(text)
    _is_text_or_number(text, kind)
    if kind in BARE:
        return _bare(text, kind)
    if not isinstance(text, str):
        raise QuantityError(f"'{text}' has no unit: {a(kind)} is written with one, like {example(kind)}")
    return _with_unit(text.strip(" "), kind)


def _is_text_or_number(given: object, kind: Kind | None) -> None:
    what, like = (a(kind), example(kind)) if kind else ("a quantity", example("frequency"))
    if given is None:
        raise QuantityError(f"{what} is missing here; it is written like {like}")
    if isinstance(given, Mapping):
        reference = f'; a reference is written in quotes: "{{{next(iter(given))}}}"' if len(given) == 1 else ""
        raise QuantityError(f"{what} is expected here, not a mapping{reference}")
    if isinstance(given, bool) or not isinstance(given, str | int | float):
        shown = "a list" if isinstance(given, list | tuple) else f"'{given}'"
        raise QuantityError(f"{what} is expected here, like {like}, not {shown}")


def _switch(text: object) -> float:
    if isinstance(text, bool):
        return float(text)
    if text in ("on", "off"):
        return float(text == "on")
    raise QuantityError(f"'{text}' is neither on nor off")


def _bare(text: str | float, kind: Kind) -> float:
    written = text.strip(" ") if isinstance(text, str) else repr(text)
    if isinstance(text, str) and not _NUMBER.fullmatch(written):
        raise QuantityError(about_number(written, kind))
    value = _value(written, written, Decimal(1)) if isinstance(text, str) else float(text)
    if not math.isfinite(value):
        raise QuantityError(f"'{text}' is not a finite number")
    if kind == "count" and not (value == int(value) and 0 <= value <= _MOST_COUNT):
        raise QuantityError(f"'{text}' is not a count: a whole number, 0 or more, is expected")
    return value


def _with_unit(text: str, kind: Kind) -> float:
    number, unit = _taken_apart(text, kind)
    if not unit:
        raise QuantityError(f"'{text}' has no unit: {a(kind)} is written with one, like {example(kind)}")
    factor = UNITS[kind].get(unit)
    if factor is None:
        raise QuantityError(about_unit(text, number, unit, kind))
    return _value(text, number, factor)


def _taken_apart(text: str, kind: Kind) -> tuple[str, str]:
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise QuantityError(about_number(text, kind))
    return match[1], match[2] or ""


def _value(text: str, number: str, factor: Decimal) -> float:
    """Return number times factor by decimals: 2.9 GHz is the float 2.9e9, and what is shown is read again."""
    exponent = re.split("[eE]", number)[1:]
    if exponent and len(exponent[0].strip("+-").lstrip("0")) > _MOST_EXPONENT_DIGITS:
        raise QuantityError(f"'{text}' is beyond any number that can be carried; check the exponent")
    with localcontext(_WIDE):
        exact = Decimal(number) * factor
        value = float(exact)
    if not math.isfinite(value) or (value == 0.0 and exact != 0):
        raise QuantityError(f"'{text}' is beyond any number that can be carried; check the exponent")
    return value


def parse_coefficient(text: str, kind: Kind, power: int) -> float:
    """Return the coefficient of Hz^power in a polynomial (capacitance in F, inductance in H), in SI.

    Raises QuantityError as parse() does, and where the unit is that of another power.
    """
    value = parse(text, kind)
    if order(_taken_apart(text.strip(" "), kind)[1]) != power:
        smallest = {"capacitance": "fF", "inductance": "pH"}[kind]
        usual = (name for name in UNITS[kind] if name.startswith(smallest) and "/Hz" not in name)
        unit = next(name for name in usual if order(name) == power)
        counted = ("first", "second", "third", "fourth")[power]
        raise QuantityError(
            f"'{text}' is the {counted} coefficient here, written in {unit} or another unit per Hz^{power}"
        )
    return value


def kind_of(text: str | float) -> Kind:
    """Return the kind whose unit `text` carries, "number" where it has none.

    Raises QuantityError where it is no quantity, or no kind has that unit.
    """
    _is_text_or_number(text, None)
    if not isinstance(text, str):
        return "number"
    number, unit = _taken_apart(text.strip(" "), "number")
    for kind, units in UNITS.items():
        if unit in units:
            return kind
    if unit:
        raise QuantityError(about_unknown_unit(text.strip(" "), number, unit))
    return "number"
