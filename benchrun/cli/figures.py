"""How single figures look in a terminal: levels with their sign, times as a person says them."""

from __future__ import annotations

from collections.abc import Mapping
from typing import cast

from benchrun.contract.kinds import UNIT_SUFFIX, Kind
from benchrun.quantities import show

_KIND_OF = {suffix: cast(Kind, kind) for kind, suffix in UNIT_SUFFIX.items()}


def level_text(level_dbm: float | None) -> str:
    """Return a level as '+30.6 dBm'; '-' where there is none."""
    return "-" if level_dbm is None else f"{level_dbm:+.1f} dBm"


def ratio_text(ratio_db: float | None) -> str:
    """Return a ratio as '2.4 dB'; '-' where there is none."""
    return "-" if ratio_db is None else f"{ratio_db:.1f} dB"


def duration_text(duration_s: float) -> str:
    """Return a duration as a person says it: 'under 1 s', '40 s', '22 min', '3 h 20 min'."""
    if 0 < duration_s < 1:
        return "under 1 s"
    if duration_s < 90:
        return f"{duration_s:.0f} s"
    minutes = round(duration_s / 60)
    if minutes < 90:
        return f"{minutes} min"
    hours, rest = divmod(minutes, 60)
    return f"{hours} h {rest} min" if rest else f"{hours} h"


def clock_text(duration_s: float) -> str:
    """Return a duration as minutes and seconds, '0:08', or hours, '3:20:00'."""
    minutes, seconds = divmod(round(duration_s), 60)
    hours, minutes = divmod(minutes, 60)
    return f"{hours}:{minutes:02}:{seconds:02}" if hours else f"{minutes}:{seconds:02}"


def condition_text(key: str, value: float | str) -> str:
    """Return a condition of a reading for a person: ("pump.level_dbm", 3.0) gives 'pump.level +3.0 dBm'."""
    name, text = named_figure(key, value)
    return f"{name.replace('connected.', 'at ')} {text}"


def named_figure(key: str, value: object) -> tuple[str, str]:
    """Return a name and its value for a person: ("start_hz", 2.2e9) gives ('start', '2.2 GHz').

    The key's suffix says the unit, as in all of our documents; times in UTC are given to the second.
    """
    name, _, suffix = key.rpartition("_")
    kind = _KIND_OF.get(suffix) if name else None
    match value:
        case str() if suffix == "utc":
            return f"{name} (UTC)".replace("_", " "), plain_text(value[:19].replace("T", " "))
        case int() | float() if kind == "level":
            return name.replace("_", " "), level_text(value)
        case int() | float() if kind == "ratio":
            return name.replace("_", " "), show(round(value, 2), kind)
        case int() | float() if kind is not None and not isinstance(value, bool):
            return name.replace("_", " "), show(value, kind, 6)
        case _:
            return key.replace("_", " "), plain_text(value)


def plain_text(value: object) -> str:
    """Return any value of a document as a person reads it."""
    match value:
        case None | "":
            return "-"
        case bool():
            return "yes" if value else "no"
        case float():
            return f"{value:.6g}"
        case Mapping():
            return ", ".join(" ".join(named_figure(str(key), item)) for key, item in value.items()) or "none"
        case list() | tuple():
            return ", ".join(map(plain_text, value)) or "none"
        case _:
            return str(value)


def count_text(count: int, thing: str) -> str:
    """Return '1377 conditions', '1 condition', 'no condition'."""
    return f"{count or 'no'} {thing}{'s' if count > 1 else ''}"
