"""Show quantities as people write them, so that reading them again gives the same float."""

from __future__ import annotations

from decimal import Context, Decimal, localcontext

from benchrun.contract.kinds import UNIT_SUFFIX, Kind
from benchrun.quantities.reading import parse
from benchrun.quantities.units import BARE, UNITS

_PRECISE = Context(prec=60)
#: Times beyond this are not shown in whole days: a hundred years.
_LONGEST_S = 3.2e9
_TIME_UNITS = (("days", 86400), ("h", 3600), ("min", 60))


def show(value: float, kind: Kind, digits: int | None = None) -> str:
    """Return `value` as people write it; parse() reads it back to the same float where `digits` is None.

    With `digits` it is the short form: rounded to that many significant digits (levels and ratios: that many decimals).
    """
    if kind == "switch":
        return "on" if value else "off"
    if kind in BARE or kind == "text":
        return _plain(_decimal(value, digits))
    if kind in ("level", "ratio"):
        number = _plain(_decimal(value, None)) if digits is None else f"{value:.{digits}f}"
        return f"{number} {_first(kind)}"
    return _short(value, kind, digits) if digits is not None else _exact(value, kind)


def _exact(value: float, kind: Kind) -> str:
    if kind == "angle":
        return _exact_angle(value)
    unit = _fitting(value, kind)
    return f"{_in_unit(value, kind, unit)} {unit}"


def _exact_angle(value: float) -> str:
    """Return degrees where they are read again as the same float, else radian."""
    for figures in (12, 15, 17):
        shown = f"{_in_unit(value, 'angle', 'deg', figures)} deg"
        if parse(shown, "angle") == value:
            return shown
    return f"{_plain(_decimal(value, None))} rad"


def _short(value: float, kind: Kind, digits: int) -> str:
    rounded = float(f"{value:.{digits}g}")
    unit = _fitting(rounded, kind)
    return f"{_in_unit(value, kind, unit, digits)} {unit}"


def _in_unit(value: float, kind: Kind, unit: str, figures: int | None = None) -> str:
    with localcontext(_PRECISE):
        number = _decimal(value, None) / UNITS[kind][unit]
        if figures is not None:
            number = Decimal(f"{number:.{figures - 1}e}")
    return _plain(number)


def _first(kind: Kind) -> str:
    return next(iter(UNITS[kind]))


def _decimal(value: float, digits: int | None) -> Decimal:
    return Decimal(repr(float(value))) if digits is None else Decimal(f"{value:.{digits}g}")


def _plain(number: Decimal) -> str:
    """Return a number without an exponent where it is of a readable size."""
    if number == 0:
        return "-0" if number.is_signed() else "0"
    with localcontext(_PRECISE):
        number = number.normalize()
    return f"{number:f}" if -7 < number.adjusted() < 16 else f"{number:e}"


def _fitting(value: float, kind: Kind) -> str:
    """Return the unit that leaves one to three digits before the point; degrees, and whole minutes, hours or days."""
    if kind == "angle":
        return "deg"
    if kind == "time" and 0.0 < value < _LONGEST_S:
        for unit, seconds in _TIME_UNITS:
            if value % seconds == 0:
                return unit
    base = _first(kind)
    prefixed = {
        unit: factor for unit, factor in UNITS[kind].items() if unit.endswith(base) and len(unit) <= len(base) + 1
    }
    below = [unit for unit, factor in prefixed.items() if abs(value) >= factor]
    if value == 0.0:
        return base
    return max(below, key=prefixed.__getitem__) if below else min(prefixed, key=prefixed.__getitem__)


def column(name: str, kind: Kind) -> str:
    """Return the key that carries this quantity's unit: ("pump.level", "level") -> "pump.level_dbm"."""
    suffix = UNIT_SUFFIX.get(kind, "")
    return f"{name}_{suffix}" if suffix else name
